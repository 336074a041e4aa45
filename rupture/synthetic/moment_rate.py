"""What a point source radiates: moment tensor of a double couple, spectrum of its moment rate."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray


def moment_tensor(
    strike_rad: NDArray[np.float64], dip_rad: NDArray[np.float64], rake_rad: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Return double couples of unit moment, axes north, east, down, shape (sources, 3, 3).

    Aki & Richards (2002), box 4.4, written out element by element.

    Examples
    --------
    >>> moment_tensor(np.zeros(1), np.full(1, np.pi / 2), np.zeros(1)).round(9)[0] + 0.0
    array([[0., 1., 0.],
           [1., 0., 0.],
           [0., 0., 0.]])
    """
    strike, dip, rake = (np.atleast_1d(np.asarray(v, float)) for v in (strike_rad, dip_rad, rake_rad))
    sd, cd, s2d, c2d = np.sin(dip), np.cos(dip), np.sin(2 * dip), np.cos(2 * dip)
    sr, cr = np.sin(rake), np.cos(rake)
    ss, cs, s2s, c2s = np.sin(strike), np.cos(strike), np.sin(2 * strike), np.cos(2 * strike)
    nn = -(sd * cr * s2s + s2d * sr * ss**2)
    ne = sd * cr * c2s + 0.5 * s2d * sr * s2s
    nd = -(cd * cr * cs + c2d * sr * ss)
    ee = sd * cr * s2s - s2d * sr * cs**2
    ed = -(cd * cr * ss - c2d * sr * cs)
    dd = s2d * sr
    return np.ascontiguousarray(np.stack([nn, ne, nd, ne, ee, ed, nd, ed, dd], axis=-1).reshape(-1, 3, 3))


def moment_rate_spectrum(
    frequency_hz: NDArray[np.float64], moment_nm: NDArray[np.float64], rise_time_s: NDArray[np.float64]
) -> NDArray[np.complex128]:
    """Return spectra of raised-cosine moment rates from their onset, shape (sources, frequencies), in N m.

    M (1 - cos(2 pi t / tau)) / tau for 0 < t < tau has the spectrum M sinc(f tau) / (1 - (f tau)^2) exp(-i pi f tau).
    """
    x = frequency_hz[None, :] * rise_time_s[:, None]
    below = 1.0 - x**2
    # At f tau = 1 both numerator and denominator vanish; the limit is one half.
    near = np.abs(below) < 1e-9
    shape = np.where(near, 0.5, np.sinc(x) / np.where(near, 1.0, below))
    return moment_nm[:, None] * shape * np.exp(-1j * np.pi * x)
