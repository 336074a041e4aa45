"""Likelihood of a trial slowness from a window's covariance: quadratic forms as one matrix product."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from rupture.conventions import ACC_E, ACC_N, ACC_Z, ROT_E, ROT_N, ROT_Z
from rupture.direction.covariance import PAIRS, entry

Array = NDArray[np.float64]


def horizontal_forms(back_azimuth_rad: Array, slowness_s_m: Array) -> tuple[Array, Array]:
    """Return the coefficients of the residual powers of the horizontal rotation, about two axes.

    Residuals rot_E + p_N acc_Z and rot_N - p_E acc_Z (Aki & Richards 2002 ch. 5; Cochard et al. 2006), turned to the
    axis across the ray, about which the wave rocks, and the axis along it, about which it does not: the vertical
    sensor's noise is in the first alone.

    Parameters
    ----------
    back_azimuth_rad, slowness_s_m
        Trials, shape (trials,).

    Returns
    -------
    across, along
        Shape (trials, 21): times the 21 entries of a covariance gives the power.
    """
    sine, cosine = np.sin(back_azimuth_rad), np.cos(back_azimuth_rad)
    across, along = np.zeros((2, sine.size, len(PAIRS)))
    across[:, entry(ROT_E, ROT_E)] = along[:, entry(ROT_N, ROT_N)] = cosine**2
    across[:, entry(ROT_N, ROT_N)] = along[:, entry(ROT_E, ROT_E)] = sine**2
    along[:, entry(ROT_E, ROT_N)] = 2 * sine * cosine
    across[:, entry(ROT_E, ROT_N)] = -2 * sine * cosine
    across[:, entry(ROT_E, ACC_Z)] = -2 * slowness_s_m * cosine
    across[:, entry(ROT_N, ACC_Z)] = 2 * slowness_s_m * sine
    across[:, entry(ACC_Z, ACC_Z)] = slowness_s_m**2
    return across, along


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
