"""Bessel functions of order 0, 1 and 2 over distance times wavenumber."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.special import j0, j1


def bessel_tables(
    distance_m: NDArray[np.float64], k: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]:
    """Return J0, J1 and J2 of distance times wavenumber, each of shape (distances, wavenumbers)."""
    x = distance_m[:, None] * k[None, :]
    zero, one = j0(x), j1(x)
    return zero, one, 2 * one / x - zero
