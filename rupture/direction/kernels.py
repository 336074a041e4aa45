"""The inner loop of a direction: quadratic forms, logarithms and the posterior of a block of windows at a time.

Logarithm and exponential are written out, since the compiler turns only plain arithmetic into vector instructions:
that halves the time. Both are right to 1e-10, far below what a float32 can hold.
"""

from __future__ import annotations

import numba
import numpy as np

BLOCK = 16
"""Windows that a thread takes at a time: one cache line of float32, so that no two threads write to the same."""

_LOG2_E = 1.4426950408889634
_LN_2 = 0.6931471805599453
_SHIFT = 1.5 * 2.0**52  # added to a small number, it leaves the nearest whole number in the lowest bits
_SHIFT_BITS = np.int64(np.float64(_SHIFT).view(np.int64))
_MANTISSA = np.int64(2**52 - 1)
_ONE_BITS = np.int64(1023 << 52)
_HALF_OFF = np.int64(0x0009_5F61_9980_C433)  # one minus the root of a half, in bits: mantissas end up around one


@numba.njit(inline="always", cache=True, error_model="numpy")
def _log_in_place(x):  # pragma: no cover - compiled
    """Replace positive numbers by their logarithms."""
    for k in range(x.size):
        raised = np.float64(x[k]).view(np.int64) + _HALF_OFF
        exponent = (raised >> 52) - 1023
        m = np.int64((raised & _MANTISSA) + _ONE_BITS - _HALF_OFF).view(np.float64)
        s = (m - 1.0) / (m + 1.0)
        q = s * s
        series = q * (1 / 3 + q * (1 / 5 + q * (1 / 7 + q * (1 / 9 + q * (1 / 11 + q * (1 / 13))))))
        x[k] = (np.int64(_SHIFT_BITS + exponent).view(np.float64) - _SHIFT) * _LN_2 + 2.0 * s * (1.0 + series)


@numba.njit(inline="always", cache=True, error_model="numpy")
def _exp_in_place(x):  # pragma: no cover - compiled
    """Replace numbers of -700 to 700 by their exponentials."""
    for k in range(x.size):
        shifted = np.float64(x[k] * _LOG2_E + _SHIFT)
        power = (np.float64(shifted).view(np.int64) - _SHIFT_BITS + 1023) << 52
        r = x[k] - (shifted - _SHIFT) * _LN_2
        series = 1 / 120 + r * (1 / 720 + r * (1 / 5040 + r * (1 / 40320 + r * (1 / 362880))))
        series = 1.0 + r * (1.0 + r * (1 / 2 + r * (1 / 6 + r * (1 / 24 + r * series))))
        x[k] = np.int64(power).view(np.float64) * series


@numba.njit(parallel=True, cache=True, error_model="numpy")
def posterior_log_ratio(
    out, coherent, form, covariance, noise, floor, unit, degrees, offset, stray_share, blur
):  # pragma: no cover - compiled
    """Fill log of posterior over prior and the probability of a coherent wave.

    The gain of trial j in window t is -degrees/2 times the sum over equations of log(max(r, x) / unit) +
    min(r / x, 1) - 1, r = form . covariance and x = noise + floor, less the window's offset. Each thread owns its
    windows, so that nothing depends on how many there are.

    Parameters
    ----------
    out
        Shape (A, P, T), float32, filled.
    coherent
        Shape (T,), filled.
    form, covariance
        Shapes (equations, A, P, entries) and (equations, entries, T').
    noise, floor, unit
        Expected residual power: shapes (equations, A, P), (equations, T'); `unit` (equations, T') keeps the
        products of residuals from underflowing.
    degrees
        Independent samples in a window.
    offset
        Gain of the null hypothesis, shape (T',).
    stray_share
        Share of coherent windows whose wave comes from elsewhere.
    blur
        Weights of a blur over back-azimuth, shape (2 reach + 1,), sum one.

    T' is T rounded up to whole blocks.
    """
    angles, speeds, windows = out.shape
    equations, entries = covariance.shape[:2]
    reach = blur.size // 2
    half = 0.5 * degrees
    for block in numba.prange((windows + BLOCK - 1) // BLOCK):
        start = block * BLOCK
        count = min(BLOCK, windows - start)
        # Copies of this block: indices that start at zero keep the inner loops vectorised.
        here = covariance[:, :, start : start + BLOCK].copy()
        base = floor[:, start : start + BLOCK].copy()
        scale = 1.0 / unit[:, start : start + BLOCK]
        null = offset[start : start + BLOCK].copy()
        gain = np.empty((angles, speeds, BLOCK))
        linear = np.empty((speeds, BLOCK))
        residual = np.empty(BLOCK)
        largest = np.zeros(BLOCK)
        evidence = np.zeros(BLOCK)
        for a in range(angles):
            product = gain[a]
            product[:] = 1.0
            linear[:] = 0.0
            for e in range(equations):
                for p in range(speeds):
                    residual[:] = 0.0
                    for k in range(entries):
                        share = form[e, a, p, k]
                        for w in range(BLOCK):
                            residual[w] += share * here[e, k, w]
                    quiet = noise[e, a, p]
                    for w in range(BLOCK):
                        expected = quiet + base[e, w]
                        misfit = residual[w] / expected
                        # Written out: max and min look after NaN, which keeps the loop from being vectorised.
                        above = misfit if misfit > 1.0 else 1.0
                        product[p, w] *= above * expected * scale[e, w]
                        linear[p, w] += misfit - above
            _log_in_place(product.reshape(-1))
            for p in range(speeds):
                for w in range(BLOCK):
                    value = -half * (product[p, w] + linear[p, w]) - null[w]
                    product[p, w] = value
                    largest[w] = value if value > largest[w] else largest[w]
        for a in range(angles):
            row = gain[a]
            for p in range(speeds):
                for w in range(BLOCK):
                    below = row[p, w] - largest[w]
                    row[p, w] = below if below > -600.0 else -600.0
            _exp_in_place(row.reshape(-1))
            for p in range(speeds):
                for w in range(BLOCK):
                    evidence[w] += row[p, w]
        gained = np.empty(BLOCK)
        stray = np.empty(BLOCK)
        for w in range(BLOCK):
            mean = evidence[w] / (angles * speeds)
            share = mean / (mean + np.exp(-largest[w]))
            if w < count:
                coherent[start + w] = share
            believed = share * (1.0 - stray_share)
            gained[w] = believed / max(mean, 1e-300)
            stray[w] = 1.0 - believed
        for a in range(angles):
            linear[:] = 0.0
            for k in range(-reach, reach + 1):
                source = gain[(a + k) % angles]
                share = blur[k + reach]
                for p in range(speeds):
                    for w in range(BLOCK):
                        linear[p, w] += share * source[p, w]
            for p in range(speeds):
                for w in range(BLOCK):
                    linear[p, w] = linear[p, w] * gained[w] + stray[w]
            _log_in_place(linear.reshape(-1))
            for p in range(speeds):
                for w in range(count):
                    out[a, p, start + w] = linear[p, w]
