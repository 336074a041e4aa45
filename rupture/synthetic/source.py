"""Kinematic sources: lines and planes with one or two arms, at any speed, or a place where the rupture stays."""

from __future__ import annotations

import itertools
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from rupture.errors import InputError
from rupture.synthetic.scaling import Scaling, moment_from_magnitude, rupture_size_km


@dataclass(frozen=True)
class Arm:
    """One direction in which the rupture runs.

    Attributes
    ----------
    azimuth_deg
        Direction clockwise from north; along strike for a plane.
    length_km
        Length.
    speed_km_s
        Rupture speed; a number, or pairs (from_km, speed) with the first at 0: the speed holds from that distance on.
    share
        Share of the moment; by length when None.
    """

    azimuth_deg: float
    length_km: float
    speed_km_s: float | tuple[tuple[float, float], ...] = 2.8
    share: float | None = None

    def __post_init__(self) -> None:
        if not self.length_km > 0:
            raise InputError(f"an arm of {self.length_km:g} km has no length; give more than 0 km or leave the arm out")
        steps = self.steps
        starts = [s for s, _ in steps]
        if starts[0] != 0 or any(b <= a for a, b in itertools.pairwise(starts)):
            raise InputError(f"speed steps of an arm must start at 0 km and increase; got {starts}")
        if not all(0 < v <= 12 for _, v in steps):
            raise InputError("rupture speeds must be above 0 and at most 12 km/s (give km/s, not m/s)")
        if self.share is not None and not 0 < self.share <= 1:
            raise InputError(f"the share of an arm, {self.share:g}, must be above 0 and at most 1")

    @property
    def steps(self) -> tuple[tuple[float, float], ...]:
        """Speed steps as pairs (from_km, km/s)."""
        if isinstance(self.speed_km_s, int | float):
            return ((0.0, float(self.speed_km_s)),)
        return tuple((float(a), float(b)) for a, b in self.speed_km_s)

    def front_time_s(self, distance_km: NDArray[np.float64] | float) -> NDArray[np.float64]:
        """Return when the front has run a distance (km), in s after nucleation.

        Examples
        --------
        >>> arm = Arm(90.0, 60.0, ((0.0, 3.0), (30.0, 5.0)))
        >>> [float(t) for t in arm.front_time_s(np.array([15.0, 30.0, 60.0]))]
        [5.0, 10.0, 16.0]
        """
        starts = np.array([s for s, _ in self.steps])
        speeds = np.array([v for _, v in self.steps])
        reached = np.concatenate([[0.0], np.cumsum(np.diff(starts) / speeds[:-1])])
        d = np.asarray(distance_km, float)
        k = np.clip(np.searchsorted(starts, d, side="right") - 1, 0, None)
        return reached[k] + (d - starts[k]) / speeds[k]

    @property
    def duration_s(self) -> float:
        """How long the front runs along the arm, in s."""
        return float(self.front_time_s(self.length_km))


@dataclass(frozen=True)
class KinematicSource:
    """A rupture as its front runs.

    Attributes
    ----------
    longitude_deg, latitude_deg, depth_km
        Hypocentre.
    magnitude
        Moment magnitude; the moments of all sub-events add up to exactly its moment (Hanks & Kanamori 1979).
    mechanism_deg
        Strike, dip, rake (Aki & Richards 2002).
    arms
        None: the rupture stays in one place. One: unilateral. Two: bilateral.
    width_km
        Extent down dip; 0 makes a line.
    duration_s
        How long a stationary source radiates; not used when there are arms.
    sub_events
        How many point sources; by default as many as the stress drop asks for, 60 to 1,500.
    shortest_rise_s, longest_rise_s
        Range of rise times, distributed as sizes of a fractal set. The shortest decides up to which frequency energy is radiated (about
        its inverse). When the longest is None it is the one with which the high-frequency level is that of `stress_drop_mpa`.
    stress_drop_mpa
        Stress drop in MPa of the omega-square spectrum (Brune 1970) whose high-frequency level the sub-events have together.
    slip_spread
        Standard deviation of the natural logarithm of slip, on top of the sizes.
    front_spread_s
        Standard deviation of the onset about the passage of the front, in s.
    """

    longitude_deg: float
    latitude_deg: float
    depth_km: float
    magnitude: float
    mechanism_deg: tuple[float, float, float]
    arms: tuple[Arm, ...] = field(default=())
    width_km: float = 0.0
    duration_s: float = 20.0
    sub_events: int | None = None
    shortest_rise_s: float = 0.4
    longest_rise_s: float | None = None
    stress_drop_mpa: float = 8.0
    slip_spread: float = 0.4
    front_spread_s: float = 0.2

    def __post_init__(self) -> None:
        if len(self.arms) > 2:
            raise InputError(f"a rupture has at most two arms, not {len(self.arms)}")
        if self.sub_events is not None and self.sub_events < 20:
            raise InputError(f"{self.sub_events} sub-events cannot make a rupture; give at least 20")
        if not self.shortest_rise_s > 0 or (self.longest_rise_s or np.inf) <= self.shortest_rise_s:
            raise InputError("rise times must be positive and shortest_rise_s below longest_rise_s")
        if not self.stress_drop_mpa > 0:
            raise InputError(f"stress_drop_mpa = {self.stress_drop_mpa:g} must be positive")
        if not self.depth_km > 0:
            raise InputError(f"hypocentre depth {self.depth_km:g} km is not below the surface; give a depth above 0 km")
        if not self.arms and not self.duration_s > 0:
            raise InputError("a stationary source needs a positive duration_s")
        if self.width_km < 0 or self.slip_spread < 0 or self.front_spread_s < 0:
            raise InputError("width_km, slip_spread and front_spread_s cannot be negative")
        _, dip, _ = self.mechanism_deg
        if self.width_km > 0 and self._top_km <= 0:
            raise InputError(
                f"a plane {self.width_km:g} km wide with dip {dip:g} deg about {self.depth_km:g} km depth reaches above the surface; "
                f"make it less than {2 * self.depth_km / np.sin(np.radians(dip)):.1f} km wide or the hypocentre deeper"
            )
        given = [arm.share for arm in self.arms]
        if any(s is not None for s in given) and (None in given or abs(sum(s or 0 for s in given) - 1) > 1e-9):
            raise InputError("shares of the moment must be given for both arms and add up to 1")

    @property
    def _top_km(self) -> float:
        return float(self.depth_km - 0.5 * self.width_km * np.sin(np.radians(self.mechanism_deg[1])))

    @property
    def moment_nm(self) -> float:
        """Scalar moment in N m."""
        return moment_from_magnitude(self.magnitude)

    @property
    def radiated_s(self) -> float:
        """Time from the first to the last passage of the front, in s."""
        return max((arm.duration_s for arm in self.arms), default=self.duration_s)

    @property
    def shares(self) -> tuple[float, ...]:
        """Share of the moment of each arm."""
        total = sum(arm.length_km for arm in self.arms)
        return tuple(arm.share if arm.share is not None else arm.length_km / total for arm in self.arms)


def scaled_arms(
    magnitude: float,
    mechanism_deg: tuple[float, float, float],
    speeds_km_s: tuple[float, ...],
    scaling: Scaling = Scaling.WELLS_COPPERSMITH_1994,
) -> tuple[Arm, ...]:
    """Return one arm along strike or two equal ones both ways, with lengths by a published scaling."""
    length, _ = rupture_size_km(magnitude, mechanism_deg[2], scaling)
    azimuths = (mechanism_deg[0] % 360, (mechanism_deg[0] + 180) % 360)
    return tuple(
        Arm(azimuth, length / len(speeds_km_s), speed) for azimuth, speed in zip(azimuths, speeds_km_s, strict=False)
    )
