"""A rupture as point sources: random slip and rise time, exact moment, high-frequency level of a given stress drop."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from rupture.conventions import KM
from rupture.geodesy import LocalPlane
from rupture.synthetic.engine import SubEvents
from rupture.synthetic.moment_rate import moment_rate_spectrum
from rupture.synthetic.scaling import brune_corner_hz
from rupture.synthetic.source import KinematicSource

FRACTAL_DIMENSION = 2.0
"""Number of sub-events larger than r goes as r^-2 (Frankel 1991; Zeng, Anderson & Yu 1994): with rise time as r and moment as
r^3 every size radiates the same high-frequency energy and the whole has a flat acceleration spectrum."""

SHEAR_SPEED_M_S = 3500.0
"""S speed in m/s for corner frequency and stress drop (ak135 has 3.46 km/s down to 20 km)."""

LEVEL_BAND_HZ = (0.5, 1.5)
"""Band in which the high-frequency level is set."""

LONGEST_DEFAULT_S = 5.0
"""A sub-event that lasts longer would smear the front over more than it is to show."""

COUNT_LIMITS = (60, 1500)
"""Fewer sub-events leave holes along the rupture, more only cost time."""

ZONE_RADIUS_KM = 2.0
"""Radius of the place in which a stationary source radiates."""


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
    """Return the number of sub-events with which the high-frequency level fits when the longest lasts a fifth of the whole.

    The level of an incoherent sum of equal parts goes as the square root of their number, inverted, and a corner as the root of its level.
    """
    trial = 400
    longest = source.longest_rise_s or min(max(0.2 * source.radiated_s, 2 * source.shortest_rise_s), LONGEST_DEFAULT_S)
    quantile = (np.arange(trial) + 0.5) / trial
    size = _fractal_sizes(quantile, longest / source.shortest_rise_s)
    corner = _level_corner_hz(size**3 * source.moment_nm / (size**3).sum(), source.shortest_rise_s * size)
    wanted = brune_corner_hz(source.moment_nm, source.stress_drop_mpa * 1e6, SHEAR_SPEED_M_S)
    return int(np.clip(trial * (corner / wanted) ** 4, *COUNT_LIMITS))


def _level_corner_hz(moment_nm: NDArray[np.float64], rise_time_s: NDArray[np.float64]) -> float:
    frequency = np.linspace(*LEVEL_BAND_HZ, 40)
    # Sub-events add incoherently: powers add.
    power = (np.abs(moment_rate_spectrum(frequency, moment_nm, rise_time_s)) ** 2).sum(axis=0)
    level = np.sqrt(np.mean(power * (2 * np.pi * frequency) ** 4))
    return float(np.sqrt(level / moment_nm.sum()) / (2 * np.pi))
