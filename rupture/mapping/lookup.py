"""What the stack looks up: for each direction a row of log ratios against time, finer than the estimate's own nodes."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

from rupture.direction import SiteDirection

Array = NDArray[np.float64]
Table = NDArray[np.float32]

FINEST_RAD = np.radians(1.0)
"""Rows lie this close in back-azimuth at least: half a degree off is little against the narrowest ray."""

SLOWNESS_PARTS = 3
"""Rows to a step of the estimate's log slownesses."""

_LEAST = np.float32(1e-30)


def look_up_rows(
    direction: SiteDirection,
    back_azimuth_rad: Array,
    slowness_s_m: Array,
    spread: float,
    time_error_s: float = 0.0,
    until_s: float = np.inf,
) -> tuple[Table, NDArray[np.int64]]:
    """Return the rows of log posterior ratios that cells need, and which row each cell takes.

    Slowness and time are known only to a spread: the ratio at (back-azimuth, predicted slowness, time) is the mean of
    the posterior ratio, not of its logarithm, under a lognormal about the predicted slowness and a normal about the
    time. Between the estimate's back-azimuths the logarithm is interpolated by cubic convolution (Keys 1981), which
    keeps the parabola of a narrow ray.

    Parameters
    ----------
    direction
        Posterior of one site.
    back_azimuth_rad, slowness_s_m
        Of each cell, shape (C,); NaN where there is no back-azimuth.
    spread
        Standard deviation of the natural log of true over predicted slowness.
    time_error_s
        Standard deviation of travel times and the site's clock, in s.
    until_s
        Windows after this time say nothing (0).

    Returns
    -------
    table, row
        Shapes (rows, T), float32, and (C,), int64; -1 where there is no back-azimuth.
    """
    angles, nodes = direction.back_azimuth_rad.size, np.log(direction.slowness_s_m)
    parts = int(np.ceil(2 * np.pi / angles / FINEST_RAD - 1e-9))
    step = (nodes[1] - nodes[0]) / SLOWNESS_PARTS
    known = np.isfinite(back_azimuth_rad)
    fine = np.rint(np.where(known, back_azimuth_rad, 0.0) * angles * parts / (2 * np.pi)).astype(np.int64)
    with np.errstate(divide="ignore"):
        level = np.rint((np.log(slowness_s_m) - nodes[0]) / step)
    levels = SLOWNESS_PARTS * (nodes.size - 1) + 1
    place = (fine % (angles * parts)) * levels + np.clip(level, 0, levels - 1).astype(np.int64)
    needed, row = np.unique(place[known], return_inverse=True)
    used, column = np.unique(needed % levels, return_inverse=True)
    smooth = _known_to_a_spread(direction, nodes[0] + step * used, spread, time_error_s)
    smooth[..., direction.time_s > until_s] = 0.0
    table = _between(smooth, needed // levels, column, parts)
    where = np.full(back_azimuth_rad.size, -1, np.int64)
    where[known] = row
    return table, where


def _known_to_a_spread(direction: SiteDirection, log_slowness: Array, spread: float, time_error_s: float) -> Table:
    """Log of the mean ratio about given slownesses, shape (A, slownesses, T)."""
    node = np.log(direction.slowness_s_m)
    kernel = np.exp(-0.5 * ((log_slowness[:, None] - node) / spread) ** 2)
    kernel /= kernel.sum(axis=1, keepdims=True)
    mean = np.matmul(kernel.astype(np.float32), np.exp(direction.log_ratio))
    samples = time_error_s / float(direction.time_s[1] - direction.time_s[0])
    if samples > 0:
        mean = ndimage.gaussian_filter1d(mean, samples, axis=-1, mode="constant", cval=1.0)
    return np.asarray(np.log(np.maximum(mean, _LEAST)), np.float32)


def _between(values: Table, fine: NDArray[np.int64], column: NDArray[np.int64], parts: int) -> Table:
    """Cubic convolution along the first, periodic axis at fine / parts, for pairs (fine, column), shape (pairs, T)."""
    whole, t = fine // parts, (fine % parts) / parts
    weights = (
        0.5 * (-t + 2 * t**2 - t**3),
        0.5 * (2 - 5 * t**2 + 3 * t**3),
        0.5 * (t + 4 * t**2 - 3 * t**3),
        0.5 * (-(t**2) + t**3),
    )
    out = np.zeros((fine.size, values.shape[-1]), np.float32)
    for offset, weight in zip((-1, 0, 1, 2), weights, strict=True):
        out += weight[:, None].astype(np.float32) * values[(whole + offset) % values.shape[0], column]
    return out
