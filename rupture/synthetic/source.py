"""Kinematic sources: lines and planes with one or two arms, as sub-events with random slip and rise time."""

from __future__ import annotations

import itertools
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from rupture.conventions import KM
from rupture.errors import InputError
from rupture.geodesy import LocalPlane
from rupture.synthetic.engine import SubEvents
from rupture.synthetic.scaling import Scaling, brune_corner_hz, moment_from_magnitude, rupture_size_km

FRACTAL_DIMENSION = 2.0
"""Number of sub-events larger than r goes as r^-2 (Frankel 1991; Zeng, Anderson & Yu 1994): with rise time as r and moment as
r^3 every size radiates the same high-frequency energy and the whole has a flat acceleration spectrum."""

SHEAR_SPEED_M_S = 3500.0
"""S speed in m/s for corner frequency and stress drop (ak135 has 3.46 km/s down to 20 km)."""

LEVEL_BAND_HZ = (0.5, 1.5)
"""Band in which the high-frequency level is set."""

LONGEST_DEFAULT_S = 10.0
"""A sub-event that lasts longer would smear the front over more than it is to show."""

COUNT_LIMITS = (60, 1500)
"""Fewer sub-events leave holes along the rupture, more only cost time."""

ZONE_RADIUS_KM = 2.0
"""Radius of the place in which a stationary source radiates."""


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
    stress_drop_mpa: float = 5.0
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


def make_sub_events(source: KinematicSource, seed: int) -> SubEvents:
    """Return the sub-events of a rupture, in order of their onset.

    Sub-events are spread evenly along each arm (one at a random place in each of equal pieces), so that the front radiates all the way at
    high frequency; sizes are drawn from a fractal set, moments go as size cubed, rise times as size, and a common factor makes the
    moment exact.

    Parameters
    ----------
    source
        The rupture.
    seed
        Seed of all random numbers; the same seed gives the same sub-events.
    """
    rng = np.random.default_rng(seed)
    count = source.sub_events or _default_count(source)
    quantile = (rng.permutation(count) + rng.random(count)) / count
    slip = np.exp(source.slip_spread * rng.standard_normal(count))
    size = _fractal_sizes(quantile, _size_ratio(source, quantile, slip))
    strike, dip, rake = source.mechanism_deg
    if source.arms:
        arm_of = np.repeat(np.arange(len(source.arms)), _split(count, source.shares))
        along, across, time = _on_arms(source, arm_of, rng)
        azimuth = np.radians([arm.azimuth_deg for arm in source.arms])[arm_of]
    else:
        arm_of = np.zeros(count, int)
        along = ZONE_RADIUS_KM * np.sqrt(rng.random(count))
        azimuth = 2 * np.pi * rng.random(count)
        across = np.zeros(count)
        time = source.duration_s * (rng.permutation(count) + rng.random(count)) / count
        time[np.argmin(time)] = 0.0
    moment = size**3 * slip
    for arm, share in enumerate(source.shares or (1.0,)):
        member = arm_of == arm
        moment[member] *= share / moment[member].sum()
    moment *= source.moment_nm / moment.sum()
    down = np.radians(dip)
    side = np.radians(strike) + np.pi / 2
    flat = across * np.cos(down)
    east = KM * (along * np.sin(azimuth) + flat * np.sin(side))
    north = KM * (along * np.cos(azimuth) + flat * np.cos(side))
    longitude, latitude = LocalPlane(source.longitude_deg, source.latitude_deg).to_geographic(east, north)
    order = np.argsort(time, kind="stable")
    angles = [np.full(count, np.radians(a)) for a in (strike, dip, rake)]
    return SubEvents(
        longitude[order], latitude[order], (source.depth_km + across * np.sin(down))[order], time[order],
        moment[order], (source.shortest_rise_s * size)[order], *angles,
    )  # fmt: skip


def moment_rate_corner_hz(events: SubEvents) -> float:
    """Return the corner frequency in Hz of the summed moment rate, as integrals measure it.

    fc = sqrt(S_V / S_D) / (2 pi) with integrals of squared slip-rate and squared moment-rate spectra (Andrews 1986),
    the moment rate being the far-field displacement pulse normal to the rupture.
    """
    from rupture.synthetic.ray import moment_rate_spectrum

    span = float(np.max(events.time_s + events.rise_time_s))
    frequency = np.linspace(0.05 / span, 2.0 / float(np.min(events.rise_time_s)), 6000)
    shift = np.exp(-2j * np.pi * frequency[None, :] * events.time_s[:, None])
    spectrum = (moment_rate_spectrum(frequency, events.moment_nm, events.rise_time_s) * shift).sum(axis=0)
    power = np.abs(spectrum) ** 2
    speed = np.trapezoid((2 * np.pi * frequency) ** 2 * power, frequency)
    # The plateau below the lowest frequency belongs to the displacement integral too.
    place = np.trapezoid(power, frequency) + frequency[0] * events.moment_nm.sum() ** 2
    return float(np.sqrt(speed / place) / (2 * np.pi))


def level_corner_hz(events: SubEvents) -> float:
    """Return the corner frequency in Hz of the omega-square spectrum with the sub-events' high-frequency level (Brune 1970).

    The level is that of the incoherent sum over 0.5-1.5 Hz: far above the corner of an earthquake worth tracking.
    """
    return _level_corner_hz(events.moment_nm, events.rise_time_s)


def _on_arms(
    source: KinematicSource, arm_of: NDArray[np.int64], rng: np.random.Generator
) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]:
    along, across, time = np.empty(arm_of.size), np.empty(arm_of.size), np.empty(arm_of.size)
    for index, arm in enumerate(source.arms):
        member = np.flatnonzero(arm_of == index)
        place = (rng.permutation(member.size) + rng.random(member.size)) / member.size
        along[member] = place * arm.length_km
        across[member] = source.width_km * (rng.random(member.size) - 0.5)
        passage = arm.front_time_s(np.hypot(along[member], across[member]))
        late = source.front_spread_s * rng.standard_normal(member.size)
        time[member] = np.maximum(passage + late, 0.0)
    time[np.argmin(np.hypot(along, across))] = 0.0
    return along, across, time


def _split(count: int, shares: tuple[float, ...]) -> list[int]:
    first = min(max(round(count * shares[0]), 1), count - (len(shares) - 1))
    return [first] if len(shares) == 1 else [first, count - first]


def _fractal_sizes(quantile: NDArray[np.float64], ratio: float) -> NDArray[np.float64]:
    """Return sizes from 1 to `ratio` with N(> r) as r^-D, by inversion."""
    top = 1 - ratio**-FRACTAL_DIMENSION
    return (1 - quantile * top) ** (-1 / FRACTAL_DIMENSION)


def _size_ratio(source: KinematicSource, quantile: NDArray[np.float64], slip: NDArray[np.float64]) -> float:
    """Return longest over shortest rise time, when not given by bisection on the high-frequency level.

    Few large sub-events radiate less at high frequency than many small ones of the same total moment: the level falls as the ratio
    grows. The search ends at half the duration of the rupture, beyond which a sub-event would outlast it.
    """
    if source.longest_rise_s is not None:
        return source.longest_rise_s / source.shortest_rise_s
    corner = brune_corner_hz(source.moment_nm, source.stress_drop_mpa * 1e6, SHEAR_SPEED_M_S)
    low, high = 1.01, max(0.5 * source.radiated_s / source.shortest_rise_s, 1.02)
    for _ in range(40):
        middle = np.sqrt(low * high)
        size = _fractal_sizes(quantile, middle)
        moment = size**3 * slip
        moment *= source.moment_nm / moment.sum()
        if _level_corner_hz(moment, source.shortest_rise_s * size) > corner:
            low = middle
        else:
            high = middle
    return float(np.sqrt(low * high))


def _default_count(source: KinematicSource) -> int:
    """Return the number of sub-events with which the high-frequency level fits when the longest lasts 0.3 of the whole.

    The level of an incoherent sum of equal parts goes as the square root of their number, inverted, and a corner as the root of its level.
    """
    trial = 400
    longest = source.longest_rise_s or min(max(0.3 * source.radiated_s, 2 * source.shortest_rise_s), LONGEST_DEFAULT_S)
    quantile = (np.arange(trial) + 0.5) / trial
    size = _fractal_sizes(quantile, longest / source.shortest_rise_s)
    corner = _level_corner_hz(size**3 * source.moment_nm / (size**3).sum(), source.shortest_rise_s * size)
    wanted = brune_corner_hz(source.moment_nm, source.stress_drop_mpa * 1e6, SHEAR_SPEED_M_S)
    return int(np.clip(trial * (corner / wanted) ** 4, *COUNT_LIMITS))


def _level_corner_hz(moment_nm: NDArray[np.float64], rise_time_s: NDArray[np.float64]) -> float:
    from rupture.synthetic.ray import moment_rate_spectrum

    frequency = np.linspace(*LEVEL_BAND_HZ, 40)
    # Sub-events add incoherently: powers add.
    power = (np.abs(moment_rate_spectrum(frequency, moment_nm, rise_time_s)) ** 2).sum(axis=0)
    level = np.sqrt(np.mean(power * (2 * np.pi * frequency) ** 4))
    return float(np.sqrt(level / moment_nm.sum()) / (2 * np.pi))
