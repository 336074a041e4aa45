"""Likelihood of a trial slowness from a window's covariance: quadratic forms as one matrix product."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from rupture.conventions import ACC_E, ACC_N, ACC_Z, ROT_E, ROT_N, ROT_Z
from rupture.direction.covariance import PAIRS, entry

Array = NDArray[np.float64]


def horizontal_form(slowness: Array) -> Array:
    """Return the coefficients of the residual power of both horizontal rotation equations.

    Residuals rot_E + p_N acc_Z and rot_N - p_E acc_Z (Aki & Richards 2002 ch. 5; Cochard et al. 2006).

    Parameters
    ----------
    slowness
        East and north slowness in s/m, shape (2, trials).

    Returns
    -------
    ndarray
        Shape (trials, 21): times the 21 entries of a covariance gives the power.
    """
    east, north = slowness
    form = np.zeros((east.size, len(PAIRS)))
    form[:, entry(ROT_E, ROT_E)] = form[:, entry(ROT_N, ROT_N)] = 1.0
    form[:, entry(ROT_E, ACC_Z)] = 2 * north
    form[:, entry(ROT_N, ACC_Z)] = -2 * east
    form[:, entry(ACC_Z, ACC_Z)] = east**2 + north**2
    return form


def vertical_form(slowness: Array) -> Array:
    """Return the coefficients of the residual power of the vertical equation, shape (trials, 21).

    Residual rot_Z + (p_E acc_N - p_N acc_E) / 2.
    """
    east, north = slowness
    form = np.zeros((east.size, len(PAIRS)))
    form[:, entry(ROT_Z, ROT_Z)] = 1.0
    form[:, entry(ROT_Z, ACC_N)] = east
    form[:, entry(ROT_Z, ACC_E)] = -north
    form[:, entry(ACC_N, ACC_N)] = east**2 / 4
    form[:, entry(ACC_E, ACC_E)] = north**2 / 4
    form[:, entry(ACC_N, ACC_E)] = -east * north / 2
    return form


def radial_form(back_azimuth_rad: Array) -> Array:
    """Return the coefficients of the horizontal power along a trial direction, shape (trials, 21)."""
    sine, cosine = np.sin(back_azimuth_rad), np.cos(back_azimuth_rad)
    form = np.zeros((sine.size, len(PAIRS)))
    form[:, entry(ACC_E, ACC_E)] = sine**2
    form[:, entry(ACC_N, ACC_N)] = cosine**2
    form[:, entry(ACC_E, ACC_N)] = 2 * sine * cosine
    return form
