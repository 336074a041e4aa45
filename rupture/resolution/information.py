"""Fisher information about where a rupture front is, from back-azimuths and arrival times."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


def position_information(
    points_m: Array,
    sites_m: Array,
    back_azimuth_sigma_rad: Array,
    arrival_sigma_s: Array | None = None,
    slowness_s_m: Array | None = None,
    source_time_sigma_s: float = np.inf,
) -> Array:
    """Return what sites know about the place of points of a rupture front.

    A site at distance r sees a point under a bearing with standard deviation sigma: it adds t t^T / (sigma r)^2
    with t the unit vector across the ray. An arrival time with standard deviation sigma_t adds information along
    the ray, shared with the unknown source time of the point, which is marginalised (Schur complement).

    Parameters
    ----------
    points_m
        East and north of the points, shape (points, 2), in m.
    sites_m
        East and north of the sites, shape (sites, 2), in m.
    back_azimuth_sigma_rad
        Standard deviation of one back-azimuth, shape (sites,) or (points, sites), rad; infinity for none.
    arrival_sigma_s
        Standard deviation of an arrival time, shape (sites,) or (points, sites), s; None when arrival times are
        not used.
    slowness_s_m
        Horizontal slowness of the arrival, shape (sites,) or (points, sites), s/m.
    source_time_sigma_s
        Prior standard deviation of the source time of a point, s; infinity when nothing is known.

    Returns
    -------
    ndarray
        Information matrices, shape (points, sites, 2, 2) when arrival times are not used (they add up over
        sites); shape (points, 2, 2), summed over sites, when they are.

    Notes
    -----
    The bearing term is the classical one of bearings-only location (Stansfield 1947).
    """
    offset = np.asarray(points_m, float)[:, None, :] - np.asarray(sites_m, float)[None, :, :]
    distance = np.hypot(offset[..., 0], offset[..., 1])
    # On top of a site a bearing says nothing; a metre keeps the arithmetic finite and the weight negligible.
    safe = np.maximum(distance, 1.0)
    along = offset / safe[..., None]
    across = np.stack([along[..., 1], -along[..., 0]], axis=-1)
    sigma = np.broadcast_to(back_azimuth_sigma_rad, distance.shape)
    weight = np.where(distance >= 1.0, 1.0 / (sigma * safe) ** 2, 0.0)
    bearing: Array = weight[..., None, None] * across[..., :, None] * across[..., None, :]
    if arrival_sigma_s is None:
        return bearing
    if slowness_s_m is None:
        raise ValueError("arrival times need the slowness of the arrival")
    time_weight = 1.0 / np.broadcast_to(arrival_sigma_s, distance.shape) ** 2
    gradient = np.broadcast_to(slowness_s_m, distance.shape)[..., None] * along
    place = bearing.sum(axis=1) + np.einsum("ps,psi,psj->pij", time_weight, gradient, gradient)
    cross = np.einsum("ps,psi->pi", time_weight, gradient)
    clock = time_weight.sum(axis=1) + 1.0 / source_time_sigma_s**2
    return place - cross[:, :, None] * cross[:, None, :] / np.maximum(clock, np.finfo(float).tiny)[:, None, None]


def ellipse_axes_m(information: Array) -> Array:
    """Return the semi-axes (one standard deviation, m) of position, small then large, shape (..., 2)."""
    values = np.linalg.eigvalsh(information)
    with np.errstate(divide="ignore"):
        axes: Array = 1.0 / np.sqrt(np.maximum(values[..., ::-1], 0.0))
    return axes


def mean_log_area(information: Array, prior_sigma_m: float) -> float:
    """Return the mean over points of the natural log of the one-sigma error area in m^2.

    Parameters
    ----------
    information
        Shape (points, 2, 2).
    prior_sigma_m
        Standard deviation of where the front is before any site is asked, m: it keeps geometries that see only
        one direction comparable.
    """
    total = information + np.eye(2) / prior_sigma_m**2
    return float(np.mean(np.log(np.pi) - 0.5 * np.log(np.linalg.det(total))))
