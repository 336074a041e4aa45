"""Between every cell and every site: distance, azimuths, travel time, apparent slowness."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from rupture.conventions import KM
from rupture.earth import Earth
from rupture.geodesy import distance_azimuth
from rupture.mapping.grid import Grid

Array = NDArray[np.float64]

NEAREST_M = 100.0
"""Closer to a cell than this a site has no back-azimuth to it."""


@dataclass(frozen=True)
class Geometry:
    """Arrays over (site, cell).

    Attributes
    ----------
    distance_m
        Geodesic distance, shape (S, C).
    back_azimuth_rad
        At the site toward the cell, shape (S, C); NaN closer than 100 m, where there is none.
    azimuth_rad
        At the cell toward the site, shape (S, C).
    travel_time_s, slowness_s_m
        Per phase, shape (S, C).
    """

    distance_m: Array
    back_azimuth_rad: Array
    azimuth_rad: Array
    travel_time_s: dict[str, Array]
    slowness_s_m: dict[str, Array]


def site_geometry(
    grid: Grid,
    site_longitude_deg: ArrayLike,
    site_latitude_deg: ArrayLike,
    earth: Earth,
    phases: Sequence[str] = ("P", "S"),
) -> Geometry:
    """Return the geometry of a grid and sites, shape (S,) in degrees."""
    lon, lat = (np.asarray(v, float)[:, None] for v in (site_longitude_deg, site_latitude_deg))
    distance, azimuth, back = distance_azimuth(grid.longitude_deg, grid.latitude_deg, lon, lat)
    longest = float(distance.max()) / KM + 1.0
    tables = {phase: earth.table(phase, grid.depth_km, longest) for phase in phases}
    return Geometry(
        distance,
        np.where(distance < NEAREST_M, np.nan, back),
        azimuth,
        {phase: table.time(distance) for phase, table in tables.items()},
        {phase: table.slowness(distance) for phase, table in tables.items()},
    )
