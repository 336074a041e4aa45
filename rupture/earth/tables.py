"""First-arrival times and slownesses against distance, for one phase and one source depth."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from rupture.conventions import KM
from rupture.errors import InputError

Array = NDArray[np.float64]


@dataclass(frozen=True)
class TravelTimeTable:
    """Travel time and horizontal slowness of the first arrival of a phase at the surface.

    Attributes
    ----------
    phase
        'P' or 'S'.
    depth_km
        Source depth.
    distance_m, time_s, slowness_s_m
        Increasing distances and the values there, shape (D,).
    """

    phase: str
    depth_km: float
    distance_m: Array
    time_s: Array
    slowness_s_m: Array

    def __post_init__(self) -> None:
        where = f"travel-time table of {self.phase} from {self.depth_km:g} km"
        if not (np.diff(self.distance_m) > 0).all():
            raise InputError(f"{where}: distances must increase")
        missing = ~(np.isfinite(self.time_s) & np.isfinite(self.slowness_s_m))
        if missing.any():
            raise InputError(
                f"{where}: no arrival at {self.distance_m[missing][0] / 1e3:.0f} km; the Earth model has a gap there"
            )
        if not (np.diff(self.time_s) >= -1e-6).all():
            place = self.distance_m[int(np.argmin(np.diff(self.time_s)))] / 1e3
            raise InputError(f"{where}: times fall with distance near {place:.0f} km; the Earth model cannot be used")
        # Time is the integral of slowness; where it rises by much more, a branch was lost or a line mistyped.
        rise = np.diff(self.time_s)
        most = np.maximum(self.slowness_s_m[:-1], self.slowness_s_m[1:]) * np.diff(self.distance_m)
        if (rise > 1.25 * most + 0.05).any():
            place = self.distance_m[int(np.argmax(rise - most))] / 1e3
            raise InputError(f"{where}: the time jumps near {place:.0f} km; a branch is missing or a time is wrong")

    def time(self, distance_m: ArrayLike) -> Array:
        """Return travel time in s at distances in m, any shape; InputError beyond the table."""
        return np.interp(self._inside(distance_m), self.distance_m, self.time_s)

    def slowness(self, distance_m: ArrayLike) -> Array:
        """Return horizontal slowness in s/m at distances in m, any shape; InputError beyond the table."""
        return np.interp(self._inside(distance_m), self.distance_m, self.slowness_s_m)

    def _inside(self, distance_m: ArrayLike) -> Array:
        distance = np.asarray(distance_m, float)
        if distance.size and float(distance.max()) > self.distance_m[-1] + 1.0:
            raise InputError(
                f"a distance of {distance.max() / 1e3:.0f} km lies beyond the travel-time table ({self.distance_m[-1] / 1e3:.0f} km)"
            )
        return distance


def uniform_table(phase: str, speed_km_s: float, depth_km: float, distance_m: Array) -> TravelTimeTable:
    """Return the table of straight rays in a uniform Earth."""
    speed = 1e3 * speed_km_s
    path = np.hypot(distance_m, 1e3 * depth_km)
    slowness = np.divide(distance_m, path, out=np.zeros_like(path), where=path > 0) / speed
    return TravelTimeTable(phase, depth_km, distance_m, path / speed, slowness)


def table_distances_m(longest_km: float) -> Array:
    """Return distances so fine that linear interpolation errs by some milliseconds at most, near the epicentre too."""
    ladder = (
        (0.0, 5.0, 0.1),
        (5.0, 50.0, 0.5),
        (50.0, 200.0, 1.0),
        (200.0, 400.0, 2.0),
        (400.0, 1000.0, 5.0),
        (1000.0, np.inf, 25.0),
    )
    parts = [np.arange(start, min(end, longest_km), step) for start, end, step in ladder if start < longest_km]
    return KM * np.append(np.concatenate(parts), longest_km)
