"""Apparent duration against azimuth: what the envelopes alone say of direction, length and speed."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from rupture.direction import SiteDirection
from rupture.earth.responses import Responses
from rupture.errors import DataError
from rupture.event import Event
from rupture.front.envelopes import SiteDuration, envelope_durations
from rupture.front.intervals import interval
from rupture.geodesy import LocalPlane, distance_azimuth

Array = NDArray[np.float64]

LEAST_SITES = 4
"""Direction, length and speed are three unknowns; one site more is the least that can contradict them."""

MODEL_ERROR = 0.15
"""Share of a duration by which a line of even strength may be wrong (common practice: slip is uneven, and so are its ends)."""

SHORTEST_ERROR_S = 1.5
"""No envelope tells a duration better than about half of the shortest window."""

AZIMUTHS, LENGTHS, SPEEDS = 72, 44, 40
"""Trial lines: azimuths all round, lengths and speeds equally spaced in the logarithm."""

POINTS = 9
"""Points of a trial line whose arrivals are looked at."""


@dataclass(frozen=True)
class DirectivityCheck:
    """What the durations of the envelopes say, and how well a line explains them.

    Attributes
    ----------
    durations
        Of each site whose envelope could be read.
    direction_rad, speed_m_s, length_m
        Best value, p05 and p95; the direction is in [0, 2 pi).
    predicted_s
        Durations of the best line at the sites of `durations`, shape (sites,).
    explained
        Share of the variance of the durations that the best line explains; a source without directivity explains nothing more than
        their mean.
    """

    durations: tuple[SiteDuration, ...]
    direction_rad: tuple[float, float, float]
    speed_m_s: tuple[float, float, float]
    length_m: tuple[float, float, float]
    predicted_s: Array
    explained: float


def apparent_duration(length_m: ArrayLike, speed_m_s: ArrayLike, wave_speed_m_s: float, angle_rad: ArrayLike) -> Array:
    """Return how long a line rupture is heard from afar, in s: L / v_r - (L / c) cos(angle).

    Ben-Menahem (1961); Haskell (1964). Toward a rupture faster than the wave the end is heard before the start, and the duration
    is the size of the difference.

    Parameters
    ----------
    length_m, speed_m_s
        Length and rupture speed.
    wave_speed_m_s
        Speed c of the wave.
    angle_rad
        Between the direction of rupture and that to the site.

    Examples
    --------
    >>> np.round(apparent_duration(121e3, 2800.0, 3500.0, np.radians([0.0, 90.0, 180.0])), 1).tolist()
    [8.6, 43.2, 77.8]
    """
    length = np.asarray(length_m, float)
    return np.abs(
        length / np.asarray(speed_m_s, float) - length / wave_speed_m_s * np.cos(np.asarray(angle_rad, float))
    )


def directivity_durations(
    directions: Sequence[SiteDirection],
    site_longitude_deg: Sequence[float],
    site_latitude_deg: Sequence[float],
    event: Event,
    responses: Responses,
    longest_s: float,
) -> DirectivityCheck:
    """Fit a unilateral line to the durations of the S envelopes; no direction is used.

    Durations are those of the arrivals from all of a line, at any distance and speed; far from a slow line they are those of
    `apparent_duration`.

    Parameters
    ----------
    directions
        Per site, for the power of their windows.
    site_longitude_deg, site_latitude_deg
        Per site.
    event, responses
        Hypocentre, and the waves that a point source sends to the surface.
    longest_s
        Longest duration that is tried.

    Raises
    ------
    DataError
        When fewer than four sites have an envelope.
    """
    durations = envelope_durations(directions, site_longitude_deg, site_latitude_deg, event, responses, longest_s)
    if len(durations) < LEAST_SITES:
        raise DataError(
            f"{len(durations)} sites have an envelope whose duration can be read; directivity needs {LEAST_SITES} at least"
        )
    number = [d.site for d in durations]
    plane = LocalPlane(event.longitude_deg, event.latitude_deg)
    east, north = plane.to_plane(np.asarray(site_longitude_deg)[number], np.asarray(site_latitude_deg)[number])
    return fit_line(durations, east, north, responses, longest_s)


def fit_line(
    durations: Sequence[SiteDuration], east_m: Array, north_m: Array, responses: Responses, longest_s: float
) -> DirectivityCheck:
    """Fit a line to durations at sites given by plane coordinates about the epicentre; see `directivity_durations`."""
    observed = np.array([d.duration_s for d in durations])
    error = np.sqrt(np.array([d.error_s for d in durations]) ** 2 + (MODEL_ERROR * observed) ** 2 + SHORTEST_ERROR_S**2)
    azimuth = 2 * np.pi * np.arange(AZIMUTHS) / AZIMUTHS
    speed = np.geomspace(700.0, 7000.0, SPEEDS)
    length = np.geomspace(4e3, longest_s * 3500.0, LENGTHS)
    travel, _ = responses.strongest("S")
    misfit = np.empty((AZIMUTHS, LENGTHS, SPEEDS))
    for a, angle in enumerate(azimuth):
        heard = _line_durations(angle, length, speed, east_m, north_m, travel, responses)
        # Soft above two standard deviations, so that one lying envelope does not decide (Huber 1964).
        score = np.abs(heard - observed) / error
        misfit[a] = np.where(score < 2.0, score**2, 4.0 * score - 4.0).sum(axis=-1)
    weight = np.exp(-0.5 * (misfit - misfit.min()))
    best = np.unravel_index(int(misfit.argmin()), misfit.shape)
    predicted = _line_durations(
        azimuth[best[0]], length[best[1] : best[1] + 1], speed[best[2] : best[2] + 1], east_m, north_m, travel, responses
    )[0, 0]  # fmt: skip
    return DirectivityCheck(
        tuple(durations),
        interval(azimuth, True, weight.sum(axis=(1, 2))),
        interval(speed, False, weight.sum(axis=(0, 1))),
        interval(length, False, weight.sum(axis=(0, 2))),
        predicted,
        float(1.0 - np.sum((observed - predicted) ** 2) / max(np.sum((observed - observed.mean()) ** 2), 1e-12)),
    )


def _line_durations(
    azimuth_rad: float, length_m: Array, speed_m_s: Array, east_m: Array, north_m: Array, travel_s: Array, responses: Responses
) -> Array:  # fmt: skip
    """Spread of the arrivals from all of a line at each site, shape (lengths, speeds, sites)."""
    part = np.linspace(0.0, 1.0, POINTS)
    reach = length_m[:, None] * part
    distance = np.hypot(
        east_m - (reach * np.sin(azimuth_rad))[..., None], north_m - (reach * np.cos(azimuth_rad))[..., None]
    )
    arrival = responses.at(travel_s, distance)[:, None] + (reach[:, None] / speed_m_s[:, None])[..., None]
    return np.ptp(arrival, axis=2)


def site_azimuths(
    check: DirectivityCheck, event: Event, site_longitude_deg: ArrayLike, site_latitude_deg: ArrayLike
) -> Array:
    """Return the azimuth from the epicentre to each site of a check, rad, for the plot of duration against azimuth."""
    number = [d.site for d in check.durations]
    lon, lat = (np.asarray(v, float)[number] for v in (site_longitude_deg, site_latitude_deg))
    return distance_azimuth(event.longitude_deg, event.latitude_deg, lon, lat)[1]
