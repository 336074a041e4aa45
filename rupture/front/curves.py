"""What a line source would show: where its fronts are, and the back-azimuth at which each site hears them."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from rupture.earth.responses import Responses
from rupture.event import Event
from rupture.front.kernels import (
    AZIMUTH,
    AZIMUTH_2,
    DURATION,
    EAST,
    LENGTH,
    LENGTH_2,
    NORTH,
    RISE,
    SPEED,
    SPEED_2,
    START,
)
from rupture.geodesy import LocalPlane, distance_azimuth

Array = NDArray[np.float64]

POINTS = 100
"""Points of an arm whose arrivals make a curve."""


def front_positions(parameters: Array, source_time_s: Array) -> tuple[Array, Array, Array]:
    """Return where the front of each arm is.

    Parameters
    ----------
    parameters
        One line source in SI units, in the order of `rupture.front.PARAMETERS`.
    source_time_s
        Shape (F,).

    Returns
    -------
    east_m, north_m, distance_m
        Place and distance run, NaN while an arm does not run, shape (arms, F).
    """
    theta = parameters
    arms = [(theta[AZIMUTH], theta[SPEED], theta[LENGTH])] if theta[LENGTH] > 0 else []
    arms += [(theta[AZIMUTH_2], theta[SPEED_2], theta[LENGTH_2])] if theta[LENGTH_2] > 0 else []
    east, north, run = np.full((3, max(1, len(arms)), source_time_s.size), np.nan)
    after = source_time_s - theta[START]
    if not arms:
        alive = (after >= 0) & (after <= theta[DURATION])
        east[0, alive], north[0, alive], run[0, alive] = theta[EAST], theta[NORTH], 0.0
    for k, (angle, pace, reach) in enumerate(arms):
        distance = pace * after
        alive = (distance >= 0) & (distance <= reach)
        run[k, alive] = distance[alive]
        east[k, alive] = theta[EAST] + distance[alive] * np.sin(angle)
        north[k, alive] = theta[NORTH] + distance[alive] * np.cos(angle)
    return east, north, run


def predicted_back_azimuths(
    parameters: Array,
    event: Event,
    site_longitude_deg: Sequence[float],
    site_latitude_deg: Sequence[float],
    responses: Responses,
    time_s: Array,
) -> Array:
    """Return the back-azimuth at which each site hears the strongest S of each arm.

    Parameters
    ----------
    parameters
        One line source, as `front_positions`.
    event, responses
        Hypocentre, and the waves that a point source sends to the surface.
    site_longitude_deg, site_latitude_deg
        Per site.
    time_s
        Site times, shape (T,).

    Returns
    -------
    ndarray
        In rad within [0, 2 pi), NaN where nothing arrives, shape (arms, sites, T). Toward a supershear front late emission arrives
        first; where two places of an arm arrive together, the later emission is shown.
    """
    theta = parameters
    longest = theta[DURATION]
    instants = theta[START] + np.linspace(0.0, max(float(longest), 1e-6), POINTS)
    east, north, run = front_positions(parameters, instants)
    plane = LocalPlane(event.longitude_deg, event.latitude_deg)
    travel, _ = responses.strongest("S")
    out = np.full((run.shape[0], len(site_longitude_deg), time_s.size), np.nan)
    for arm in range(run.shape[0]):
        alive = np.flatnonzero(np.isfinite(run[arm]))
        longitude, latitude = plane.to_geographic(east[arm, alive], north[arm, alive])
        for row, (lon, lat) in enumerate(zip(site_longitude_deg, site_latitude_deg, strict=True)):
            distance, _, back = distance_azimuth(longitude, latitude, lon, lat)
            # A place radiates while it slips: the middle of its energy comes half a rise time after the front.
            arrival = instants[alive] + 0.5 * theta[RISE] + responses.at(travel, distance)
            back = np.unwrap(back)
            for k in range(alive.size - 1):
                low, high = sorted((arrival[k], arrival[k + 1]))
                inside = (time_s >= low) & (time_s <= high)
                part = (time_s[inside] - arrival[k]) / (arrival[k + 1] - arrival[k]) if high > low else 0.0
                out[arm, row, inside] = back[k] + part * (back[k + 1] - back[k])
    return np.asarray(out % (2 * np.pi))
