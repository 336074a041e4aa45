"""Sliding 6x6 covariances of a six-component record in a frequency band."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy import fft, signal

Array = NDArray[np.float64]

PAIRS = np.array([(i, j) for i in range(6) for j in range(i, 6)])
"""Row and column of the 21 entries in which a symmetric 6x6 covariance is kept."""

_WIDTH = 2.0 / 3.0
"""Width of a band's edges as a share of its corners: wide and smooth, so that no onset rings far ahead of itself."""

REACH = _WIDTH * 2.0 / np.pi * np.arcsin(0.5**0.25)
"""The part of an edge that lies outside its half-power corner, as a share of the corner."""


def band_signal(data: Array, step_s: float, band_hz: tuple[float, float]) -> NDArray[np.complex128]:
    """Return the analytic signal in a band with cosine edges, zero phase, shape of `data`.

    Parameters
    ----------
    data
        Shape (..., samples).
    step_s
        Sampling interval in s.
    band_hz
        Half-power corners; the edges reach `REACH` of them beyond on either side.
    """
    samples = data.shape[-1]
    low, high = band_hz
    # Padding keeps the filter's own length from carrying the end of the record to its start.
    length = fft.next_fast_len(samples + int(np.ceil(6.0 / (low * step_s))))
    frequency = fft.fftfreq(length, step_s)
    rise = np.clip((frequency - low * (1 - REACH)) / (_WIDTH * low), 0, 1)
    fall = np.clip((high * (1 + REACH) - frequency) / (_WIDTH * high), 0, 1)
    gain = 2.0 * (np.sin(0.5 * np.pi * rise) * np.sin(0.5 * np.pi * fall)) ** 2
    return fft.ifft(fft.fft(data, length, axis=-1) * gain, axis=-1)[..., :samples]


def independent_samples(band_hz: tuple[float, float], window_s: float) -> float:
    """Return how many independent real samples a Hann-weighted window of a band holds.

    2 x bandwidth x window x (sum w)^2 / (n sum w^2), the last factor 2/3 for a Hann window (common practice).
    """
    return max(1.0, 2.0 * (band_hz[1] - band_hz[0]) * window_s * 2.0 / 3.0)


def sliding_covariances(analytic: NDArray[np.complex128], window: int, centres: NDArray[np.int64]) -> Array:
    """Return Hann-weighted covariances around centre samples, shape (21, windows).

    Parameters
    ----------
    analytic
        Analytic signals, shape (6, samples).
    window
        Window length in samples.
    centres
        Index of the centre sample of each window, shape (windows,); windows must lie inside the record.
    """
    weight = signal.windows.hann(window + 1, sym=True)[:-1] + 1e-12
    root = np.sqrt(0.5 * weight / weight.sum())
    first = centres - window // 2
    out = np.empty((len(PAIRS), centres.size))
    # Blocks keep the copies of overlapping windows small.
    block = max(1, 2**17 // window)
    for start in range(0, centres.size, block):
        rows = first[start : start + block, None] + np.arange(window)
        part = (analytic[:, rows] * root).transpose(1, 0, 2)
        both = np.ascontiguousarray(part).view(float)
        out[:, start : start + block] = (both @ both.transpose(0, 2, 1))[:, PAIRS[:, 0], PAIRS[:, 1]].T
    return out


def mean_covariance(analytic: NDArray[np.complex128], first: int, last: int) -> Array:
    """Return the unweighted covariance of samples first to last, shape (21,)."""
    part = analytic[:, first:last]
    full = 0.5 * (part.real @ part.real.T + part.imag @ part.imag.T) / max(1, last - first)
    return full[PAIRS[:, 0], PAIRS[:, 1]]


def entry(row: int, column: int) -> int:
    """Return the position of an entry among the 21.

    Examples
    --------
    >>> entry(0, 0), entry(5, 5), entry(4, 1)
    (0, 20, 9)
    """
    i, j = min(row, column), max(row, column)
    return int(i * 6 - i * (i - 1) // 2 + (j - i))
