"""Orientation: from SEED azimuth and dip to East, North and Up."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from rupture.records.report import UnusableError

_ALIGNED = np.sin(np.radians(5.0))
"""FDSN source identifiers: E and N name axes within 5 degrees of true; what is farther off is not that component."""

_NEGLIGIBLE = 0.02
"""A channel whose weight in a component is below this (about 1 degree of turn) may have gaps without spoiling it."""


def axis_vector(azimuth_deg: ArrayLike, dip_deg: ArrayLike) -> NDArray[np.float64]:
    """Return the direction in which a sensor axis is positive.

    Parameters
    ----------
    azimuth_deg
        Clockwise from north, any shape.
    dip_deg
        From the horizontal, positive DOWN (SEED and StationXML): an upward vertical has -90.

    Returns
    -------
    ndarray
        Unit vectors East, North, Up, shape (..., 3).

    Examples
    --------
    >>> axis_vector(90.0, 0.0).round(6) + 0.0
    array([1., 0., 0.])
    >>> axis_vector(0.0, 90.0).round(6) + 0.0  # a vertical wired downward
    array([ 0.,  0., -1.])
    """
    azimuth, dip = np.broadcast_arrays(np.radians(azimuth_deg), np.radians(dip_deg))
    return np.stack([np.sin(azimuth) * np.cos(dip), np.cos(azimuth) * np.cos(dip), -np.sin(dip)], axis=-1)


def channel_axis(code: str, azimuth_deg: float | None, dip_deg: float | None) -> tuple[NDArray[np.float64], str]:
    """Return the axis of a channel and a note when its name had to stand in for missing angles.

    Parameters
    ----------
    code
        Channel code; its last letter is only a hint.
    azimuth_deg, dip_deg
        From the metadata, None when absent.

    Raises
    ------
    UnusableError
        When angles are absent and the name does not tell.
    """
    letter = code[-1:].upper()
    if dip_deg is not None and abs(abs(dip_deg) - 90.0) < 1e-6:
        return axis_vector(0.0, dip_deg), ""
    if azimuth_deg is not None and dip_deg is not None:
        return axis_vector(azimuth_deg, dip_deg), ""
    if azimuth_deg is not None and letter in "NE12" and letter:
        return axis_vector(azimuth_deg, 0.0), "no dip in the metadata, taken as horizontal"
    by_name = {"Z": (0.0, -90.0), "N": (0.0, 0.0), "E": (90.0, 0.0)}
    if letter in by_name and letter:
        return axis_vector(*by_name[letter]), f"no orientation in the metadata, taken from the name {letter}"
    raise UnusableError(f"the metadata give no azimuth and dip, and the name {code} does not tell the orientation")


def to_east_north_up(
    axes: NDArray[np.float64], data: NDArray[np.float64], valid: NDArray[np.bool_]
) -> tuple[NDArray[np.float64], NDArray[np.bool_], NDArray[np.float64]]:
    """Turn the channels of one sensor to East, North, Up.

    The sensor axes need not be orthogonal nor right-handed: the three components are solved for. With fewer
    than three channels only those components come back that the channels span (within 5 degrees).

    Parameters
    ----------
    axes
        Unit vectors, shape (channels, 3).
    data, valid
        Shape (channels, samples).

    Returns
    -------
    data, valid, weights
        Shapes (3, samples), (3, samples) and (3, channels); data are zero where not valid.

    Raises
    ------
    UnusableError
        When three channels are given whose axes lie nearly in one plane.
    """
    rank_guard = np.linalg.svd(axes, compute_uv=False)
    if len(axes) >= 3 and rank_guard[2] < 0.2 * rank_guard[0]:
        angles = ", ".join(f"({a[0]:.2f}, {a[1]:.2f}, {a[2]:.2f})" for a in axes)
        raise UnusableError(f"the sensor axes (E, N, Up) {angles} lie nearly in one plane; check azimuth and dip")
    weights = np.asarray(np.linalg.pinv(axes), float)
    lost = np.linalg.norm(np.eye(3) - weights @ axes, axis=1)
    weights[lost > _ALIGNED] = 0.0
    matters = np.abs(weights) > _NEGLIGIBLE
    turned_valid = np.zeros((3, valid.shape[1]), bool)
    for component, needed in enumerate(matters):
        if needed.any():
            turned_valid[component] = valid[needed].all(axis=0)
    turned = np.asarray(weights @ np.where(valid, data, 0.0))
    return np.where(turned_valid, turned, 0.0), turned_valid, weights
