"""Line-source models and what is believed of them before the records are looked at."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rupture.front.kernels import (
    AZIMUTH,
    AZIMUTH_2,
    CODA,
    CODA_TIME,
    DURATION,
    EAST,
    KNOTS,
    LENGTH,
    LENGTH_2,
    NORTH,
    P_SHARE,
    PIECES,
    RISE,
    SHARE_2,
    SPEED,
    SPEED_2,
    START,
    STRAY,
    STRENGTH,
    SURFACE,
    strengths,
)

Array = NDArray[np.float64]

PARAMETERS = (
    "east_m", "north_m", "start_time_s", "azimuth_rad", "speed_m_s", "length_m", "second_azimuth_rad", "second_speed_m_s",
    "second_length_m", "duration_s", "coda_ratio", "coda_time_s", "stray_share", "p_factor", "surface_ratio",
    "rise_time_s", "second_share", *(f"log_strength_{k + 1}" for k in range(KNOTS)),
    *(f"second_log_strength_{k + 1}" for k in range(KNOTS)),
)  # fmt: skip

KINDS = ("stationary", "unilateral", "bilateral")

_LOG = (SPEED, LENGTH, SPEED_2, DURATION, CODA, CODA_TIME, STRAY, P_SHARE, SURFACE, RISE)
_COMMON = (EAST, NORTH, START, CODA, CODA_TIME, STRAY, P_SHARE, SURFACE, RISE)
_FIRST = tuple(range(STRENGTH, STRENGTH + KNOTS))
_SECOND = tuple(range(STRENGTH + KNOTS, STRENGTH + 2 * KNOTS))
FREE = {
    "stationary": (*_COMMON, DURATION, *_FIRST),
    "unilateral": (*_COMMON, AZIMUTH, SPEED, LENGTH, *_FIRST),
    "bilateral": (*_COMMON, AZIMUTH, SPEED, LENGTH, AZIMUTH_2, SPEED_2, LENGTH_2, *_FIRST, *_SECOND),
}
"""Parameters of each kind. In the sampler's coordinates positive ones are logarithms, the first length is that of both arms, the
second azimuth is the bend from straight on, and the second length is its part of the whole. The second share follows from the
strengths."""

ANGLES = (AZIMUTH,)
"""Sampler's coordinates that go round a circle."""


AXIS_WIDTH_RAD = np.radians(8.0)
"""A trace is not straight, and no map of it is exact."""


@dataclass(frozen=True)
class LinePrior:
    """Priors; all widths are one standard deviation.

    Attributes
    ----------
    place_m
        Of the hypocentre, in m, east and north each.
    start_s
        Of the start of radiation about the origin time, in s.
    rise_s
        Median rise time: how long a place radiates after the front has reached it; its log-width is 0.6.
    speed_m_s
        Range of rupture speeds, uniform in the logarithm: published ones run from under 1 to about 6 km/s.
    length_m, length_log_width
        Median and log-width of the total length. Both follow Wells & Coppersmith (1994): a scatter of 0.16 of the common
        logarithm, and a magnitude that is uncertain by 0.15.
    shortest_ratio
        Least ratio of the shorter to the longer arm of a bilateral rupture; below it the rupture counts as unilateral.
    strength_width
        Of the log of radiated energy per length (per time, for a stationary source) at each knot: the scatter of slip along a rupture.
    bend_rad
        Of the angle by which the second arm departs from straight on.
    surface_ratio
        Median energy of surface waves over that of S at 100 km; its log-width is 1.
    duration_s, duration_log_width
        Median and log-width of the duration of a stationary source: as long as a rupture of median length takes.
    axis_rad
        Azimuth of a known fault trace: ruptures run along it, either way, within `AXIS_WIDTH_RAD`. None: any way.
    """

    place_m: float = 3e3
    start_s: float = 0.7
    rise_s: float = 2.0
    speed_m_s: tuple[float, float] = (700.0, 7000.0)
    length_m: float = 50e3
    length_log_width: float = 0.45
    shortest_ratio: float = 0.2
    strength_width: float = 0.7
    bend_rad: float = 0.2
    surface_ratio: float = 0.5
    duration_s: float = 20.0
    duration_log_width: float = 0.8
    axis_rad: float | None = None

    def draw(self, kind: str, rng: np.random.Generator, count: int) -> Array:
        """Return draws in the sampler's coordinates, shape (count, free parameters)."""
        return np.stack([self._draw_one(p, rng, count) for p in FREE[kind]], axis=1)

    def _draw_one(self, parameter: int, rng: np.random.Generator, count: int) -> Array:
        if parameter == AZIMUTH:
            if self.axis_rad is None:
                return rng.uniform(0, 2 * np.pi, count)
            return self.axis_rad + np.pi * rng.integers(2, size=count) + rng.normal(0, AXIS_WIDTH_RAD, count)
        if parameter in (SPEED, SPEED_2):
            low, high = np.log(self.speed_m_s)
            return rng.uniform(low, high, count)
        if parameter == LENGTH_2:
            low, high = self._parts
            return rng.uniform(low, high, count)
        centre, width = self._normal(parameter)
        return rng.normal(centre, width, count)

    @property
    def _parts(self) -> tuple[float, float]:
        """Least and largest part of the length that an arm of a bilateral rupture has."""
        least = self.shortest_ratio / (1.0 + self.shortest_ratio)
        return least, 1.0 - least

    def _normal(self, parameter: int) -> tuple[float, float]:
        if parameter >= STRENGTH:
            return 0.0, self.strength_width
        return {
            EAST: (0.0, self.place_m),
            NORTH: (0.0, self.place_m),
            START: (0.0, self.start_s),
            LENGTH: (float(np.log(self.length_m)), self.length_log_width),
            AZIMUTH_2: (0.0, self.bend_rad),
            DURATION: (float(np.log(self.duration_s)), self.duration_log_width),
            CODA: (np.log(0.5), 0.8),
            CODA_TIME: (np.log(10.0), 0.5),
            STRAY: (np.log(0.1), 0.6),
            P_SHARE: (0.0, 0.7),
            SURFACE: (float(np.log(self.surface_ratio)), 1.0),
            RISE: (float(np.log(self.rise_s)), 0.6),
        }[parameter]

    def log_density(self, kind: str, draws: Array) -> Array:
        """Return the log prior density of draws up to each kind's normalisation, shape (count,); -inf outside."""
        total = np.zeros(draws.shape[0])
        low, high = np.log(self.speed_m_s)
        for column, parameter in enumerate(FREE[kind]):
            value = draws[:, column]
            if parameter == AZIMUTH:
                if self.axis_rad is not None:
                    # Doubling the angle makes both ways along the trace one.
                    off = np.angle(np.exp(2j * (value - self.axis_rad))) / 2
                    total -= 0.5 * (off / AXIS_WIDTH_RAD) ** 2
                continue
            if parameter in (SPEED, SPEED_2):
                total[(value < low) | (value > high)] = -np.inf
            elif parameter == LENGTH_2:
                least, most = self._parts
                total[(value < least) | (value > most)] = -np.inf
            else:
                centre, width = self._normal(parameter)
                total -= 0.5 * ((value - centre) / width) ** 2
                if parameter == STRAY:
                    total[value > np.log(0.9)] = -np.inf
        return total


def to_parameters(kind: str, draws: Array) -> Array:
    """Turn the sampler's coordinates into SI parameters, shape (count, columns), in the order of `PARAMETERS`."""
    out = np.zeros((draws.shape[0], len(PARAMETERS)))
    for column, parameter in enumerate(FREE[kind]):
        out[:, parameter] = np.exp(draws[:, column]) if parameter in _LOG else draws[:, column]
    if kind == "bilateral":
        part, whole = out[:, LENGTH_2].copy(), out[:, LENGTH].copy()
        out[:, LENGTH], out[:, LENGTH_2] = whole * (1 - part), whole * part
        first, second = (_mean_strength(out, arm) for arm in (0, 1))
        out[:, SHARE_2] = part * second / (part * second + (1 - part) * first)
        out[:, AZIMUTH_2] = (out[:, AZIMUTH] + np.pi + out[:, AZIMUTH_2]) % (2 * np.pi)
        out[:, DURATION] = np.maximum(out[:, LENGTH] / out[:, SPEED], out[:, LENGTH_2] / out[:, SPEED_2])
    elif kind == "unilateral":
        out[:, DURATION] = out[:, LENGTH] / out[:, SPEED]
    out[:, AZIMUTH] %= 2 * np.pi
    return out


def _mean_strength(parameters: Array, arm: int) -> Array:
    row = np.empty(PIECES)
    out = np.empty(parameters.shape[0])
    for k, theta in enumerate(parameters):
        strengths(theta, arm, row)
        out[k] = row.mean()
    return out


def same_first_arm(kind: str, draws: Array, longer_first: bool = False) -> Array:
    """Name the arms of bilateral draws alike.

    Which arm is the first is a matter of naming: both ways are equally likely. All draws are named so that their first arms
    run the same way, within 90 degrees. Other kinds come back as they are.

    Parameters
    ----------
    kind, draws
        In the sampler's coordinates.
    longer_first
        Whether the first arm is the one that is longer in most draws.
    """
    if kind != "bilateral":
        return draws
    at = {parameter: column for column, parameter in enumerate(FREE[kind])}
    azimuth = draws[:, at[AZIMUTH]]
    axis = 0.5 * np.angle(np.mean(np.exp(2j * azimuth)))
    swap = np.cos(azimuth - axis) < 0
    if longer_first:
        part = np.where(swap, 1 - draws[:, at[LENGTH_2]], draws[:, at[LENGTH_2]])
        if np.median(part) > 0.5:
            swap = ~swap
    out = draws.copy()
    out[swap, at[AZIMUTH]] = azimuth[swap] + np.pi + draws[swap, at[AZIMUTH_2]]
    out[swap, at[AZIMUTH_2]] *= -1
    out[swap, at[LENGTH_2]] = 1 - draws[swap, at[LENGTH_2]]
    for one, two in zip(_FIRST, _SECOND, strict=True):
        out[swap, at[one]], out[swap, at[two]] = draws[swap, at[two]], draws[swap, at[one]]
    out[swap, at[SPEED]], out[swap, at[SPEED_2]] = draws[swap, at[SPEED_2]], draws[swap, at[SPEED]]
    return out
