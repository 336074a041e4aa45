"""Clocks: time shift between the two instruments of a site, and the onset of P."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.fft import irfft, next_fast_len, rfft
from scipy.signal import butter, sosfilt, sosfiltfilt

from rupture.conventions import ACC_E, ACC_N, ACC_Z, ROT_E, ROT_N, ROT_Z
from rupture.records.arrivals import Arrivals
from rupture.records.relations import Mean
from rupture.site import Site

Array = NDArray[np.float64]

_FINER = 8
"""Correlations are read on a grid so much finer than the samples."""
_LEAST_ERROR_S = 0.005
_PICK_ERROR_S = 0.1
"""A pick on records through a zero-phase filter is no better than this (own choice)."""
_NOISE_S, _AFTER_S = 4.0, 0.3
"""Noise before the search, and record kept after the first loud sample."""
_LOUD = 8.0
"""A sample so many times the noise's standard deviation is no noise."""
_PICK_RATIO = 4.0
"""Amplitude after the onset over that before it, for a pick to count."""


def time_shift(site: Site, arrivals: Arrivals, longest_s: float = 3.0) -> Mean | None:
    """Return how much later the rotation sensor's clock writes than the translation sensor's.

    Both relations of a plane wave at the free surface hold at zero lag. Their misfits at other lags, over the
    P window, the S window and what follows, form a likelihood of the lag; signs, gains and turns of the
    sensors do not enter.

    Parameters
    ----------
    site
        Records.
    arrivals
        First P and S.
    longest_s
        Largest shift looked for.

    Returns
    -------
    Mean or None
        Shift and standard deviation in s, number of windows; None where rotation or translation is missing.
    """
    low, high = max(site.band_hz[0], 0.1), min(site.band_hz[1], 4.0, 0.4 / site.step_s)
    if not site.valid[3:].any() or high < 2.0 * low:
        return None
    data = sosfiltfilt(butter(3, (low, high), "bandpass", fs=1.0 / site.step_s, output="sos"), site.data, axis=1)
    gap = arrivals.s_s - arrivals.p_s
    later = arrivals.s_s + max(gap, 10.0)
    spans = [(arrivals.p_s - 1.0, arrivals.s_s), (arrivals.s_s - 1.0, later), (later, later + max(2.0 * gap, 20.0))]
    lags = np.arange(-round(longest_s / site.step_s) * _FINER, round(longest_s / site.step_s) * _FINER + 1)
    misfit = np.zeros(lags.size)
    used = 0
    for start, end in spans:
        part = (site.times_s >= start - longest_s) & (site.times_s <= end + longest_s)
        if part.sum() * site.step_s < 2.0 * longest_s + 2.0:
            continue
        window = _window(site.times_s[part], start, end)
        count = 2.0 * (high - low) * (end - start)
        for relation in (_tilt_misfit, _torsion_misfit):
            added = relation(data[:, part], site.valid[:, part], window, lags)
            if added is not None:
                misfit += count * added
                used += 1
    if not used:
        return None
    best = int(misfit.argmin())
    step = site.step_s / _FINER
    if best in (0, lags.size - 1):
        return None
    curve = (misfit[best - 1] - 2.0 * misfit[best] + misfit[best + 1]) / step**2
    if not curve > 0:
        return None
    offset = 0.5 * (misfit[best - 1] - misfit[best + 1]) / (curve * step)
    return Mean(float(lags[best] * step + offset), float(max(curve**-0.5, _LEAST_ERROR_S)), used)


def _window(times: Array, start: float, end: float) -> Array:
    edge = min(1.0, 0.2 * (end - start))
    rise = np.clip((times - start) / edge, 0.0, 1.0)
    fall = np.clip((end - times) / edge, 0.0, 1.0)
    return np.asarray(np.sin(0.5 * np.pi * rise) * np.sin(0.5 * np.pi * fall))


def _correlations(rotation: Array, translation: Array, lags: NDArray[np.int_]) -> Array:
    """Return sums of rotation(t + lag) * translation(t) on the finer lag grid, shape (lags,)."""
    size = next_fast_len(2 * rotation.size, real=True)
    product = rfft(rotation, size) * np.conj(rfft(translation, size))
    fine = irfft(np.pad(product, (0, (size * _FINER) // 2 + 1 - product.size)), size * _FINER) * _FINER
    return np.asarray(fine[lags])


def _half_log(left: Array) -> Array:
    return np.asarray(0.5 * np.log(np.maximum(left, 1e-6)))


def _tilt_misfit(d: Array, valid: NDArray[np.bool_], window: Array, lags: NDArray[np.int_]) -> Array | None:
    if not valid[[ACC_Z, ROT_E, ROT_N]].all():
        return None
    z = d[ACC_Z] * window
    power, total = float(z @ z), float((d[[ROT_E, ROT_N]] ** 2 * window**2).sum())
    if not power > 0 or not total > 0:
        return None
    explained = sum(_correlations(d[i], z, lags) ** 2 for i in (ROT_E, ROT_N)) / power
    return _half_log(1.0 - explained / _moving_power(d[[ROT_E, ROT_N]], window, lags))


def _torsion_misfit(d: Array, valid: NDArray[np.bool_], window: Array, lags: NDArray[np.int_]) -> Array | None:
    if not valid[[ACC_E, ACC_N, ROT_Z]].all():
        return None
    a = d[[ACC_E, ACC_N]] * window
    normal = a @ a.T
    if not (d[ROT_Z] ** 2).sum() > 0 or not np.linalg.cond(normal) < 1e8:
        return None
    cross = np.stack([_correlations(d[ROT_Z], row, lags) for row in a])
    explained = (cross * np.linalg.solve(normal, cross)).sum(axis=0)
    return _half_log(1.0 - explained / _moving_power(d[[ROT_Z]], window, lags))


def _moving_power(rows: Array, window: Array, lags: NDArray[np.int_]) -> Array:
    """Return the power of the rotation under the window as it moves, so that loud neighbours do not win."""
    power = _correlations((rows**2).sum(axis=0), window**2, lags)
    return np.maximum(power, 1e-12 * power.max())


def pick_onset(site: Site, expected_s: float, reach_s: float) -> Mean | None:
    """Return the onset of P on the vertical near an expected time.

    The first sample far above the noise brackets the onset. It is put where the record before and the record
    after it, each taken as white noise of its own power, explain the bracket best (Akaike information;
    Maeda 1985).

    Parameters
    ----------
    site
        Records.
    expected_s
        Time to look around, s after the origin.
    reach_s
        How far to look on both sides.

    Returns
    -------
    Mean or None
        Time and standard deviation; None where nothing stands out.
    """
    times = site.times_s
    part = (times >= expected_s - reach_s - _NOISE_S) & (times <= expected_s + reach_s + _AFTER_S)
    low = max(site.band_hz[0], min(0.5, 0.25 * site.band_hz[1]))
    # A causal filter: what comes before the onset stays before it.
    x = sosfilt(butter(2, low, "highpass", fs=1.0 / site.step_s, output="sos"), site.data[ACC_Z])[part]
    quiet = round(_NOISE_S / site.step_s)
    if x.size < 2 * quiet or not site.valid[ACC_Z, part].all():
        return None
    noise = float(np.sqrt(np.mean(x[:quiet] ** 2)))
    loud = np.flatnonzero(np.abs(x[quiet:]) > _LOUD * noise)
    if not loud.size:
        return None
    first = quiet + int(loud[0])
    bracket = slice(max(first - quiet, 0), first + max(round(_AFTER_S / site.step_s), 4))
    onset = bracket.start + _split(x[bracket])
    after = float(np.sqrt(np.mean(x[onset + 1 : onset + 1 + max(round(1.0 / site.step_s), 4)] ** 2)))
    if not after > _PICK_RATIO * noise:
        return None
    return Mean(float(times[part][onset]), _PICK_ERROR_S * (1.0 + 10.0 * noise / after), 1)


def _split(x: Array) -> int:
    """Return where a record falls best into two stretches of white noise."""
    power = np.cumsum(x**2)
    k = np.arange(1, x.size)
    tiny = 1e-12 * power[-1] / x.size + 1e-300
    first = k * np.log(power[:-1] / k + tiny)
    second = (x.size - k) * np.log((power[-1] - power[:-1]) / (x.size - k) + tiny)
    inside = slice(3, x.size - 3)
    return int((first + second)[inside].argmin()) + 4
