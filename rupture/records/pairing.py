"""Which sensors make a site: rotation beside translation, one sensor of each kind, arrays of several stations."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from rupture.conventions import KM
from rupture.errors import InputError
from rupture.event import Event
from rupture.geodesy import LocalPlane, distance_azimuth
from rupture.records.array import compact_group
from rupture.records.arrivals import Arrivals
from rupture.records.report import ChannelReport
from rupture.records.sensors import Sensor
from rupture.records.settings import RecordSettings

_LOCAL_VELOCITY_M_S = 3000.0
"""Slowest wave that an array near an earthquake must resolve: crustal S and the faster surface waves."""
_FAR_M = 1500.0 * KM
"""Beyond this body waves rise so steeply that the apparent velocity of P is the measure."""


@dataclass(frozen=True)
class SinglePlan:
    """A site of one translation sensor, one rotation sensor, or both."""

    code: str
    translation: Sensor | None
    rotation: Sensor | None
    note: str = ""


@dataclass(frozen=True)
class ArrayPlan:
    """A site of several translation sensors.

    Attributes
    ----------
    code
        Name of the site.
    sensors
        Members.
    velocity_m_s
        Slowest apparent velocity that it must resolve.
    """

    code: str
    sensors: tuple[Sensor, ...]
    velocity_m_s: float


@dataclass(frozen=True)
class Plan:
    """Sites to be made, and table rows of the sensors that are not needed."""

    singles: tuple[SinglePlan, ...]
    arrays: tuple[ArrayPlan, ...]
    left_out: list[ChannelReport] = field(default_factory=list)

    def all_sensors(self) -> list[Sensor]:
        """Return every sensor that takes part."""
        parts = [s for p in self.singles for s in (p.translation, p.rotation) if s is not None]
        return parts + [s for a in self.arrays for s in a.sensors]


def plan_sites(
    sensors: Sequence[Sensor], event: Event, arrivals: dict[str, Arrivals], settings: RecordSettings
) -> Plan:
    """Put sensors together to sites.

    Parameters
    ----------
    sensors
        All sensors that passed the checks.
    event
        For distances.
    arrivals
        First arrivals by sensor name.
    settings
        Distances and arrays.

    Raises
    ------
    InputError
        When a station named in an array has no usable sensor.
    """
    left_out: list[ChannelReport] = []
    translation = _best_per_station([s for s in sensors if s.quantity == "translation"], left_out)
    rotation = [s for s in sensors if s.quantity == "rotation"]
    singles: list[SinglePlan] = []
    taken: set[str] = set()
    for sensor in sorted(rotation, key=_rank):
        single = _pair(sensor, translation, settings)
        if single.translation is not None and single.translation.station in taken:
            other = single.translation.station
            left_out += _rows(sensor, f"site {other} already has a rotation sensor with more to offer")
            continue
        if single.translation is not None:
            taken.add(single.translation.station)
        singles.append(single)
    arrays = _named_arrays(translation, event, arrivals, settings)
    members = {s.station for a in arrays for s in a.sensors}
    free = {code: s for code, s in translation.items() if code not in taken and code not in members}
    free = _without_neighbours(free, singles, settings, left_out)
    if settings.automatic_arrays:
        arrays += _automatic_arrays(free, event, arrivals, settings)
        members |= {s.station for a in arrays for s in a.sensors}
    singles += [SinglePlan(code, s, None) for code, s in free.items() if code not in members]
    return Plan(tuple(singles), tuple(arrays), left_out)


def _rank(sensor: Sensor) -> tuple[float, ...]:
    """Small is good: most components, not clipped, most record, broadband before strong motion, then the faster."""
    return (-len(sensor.channels), sensor.clipped, -round(sensor.seconds, -1), sensor.strong_motion, -sensor.rate_hz)


def _best_per_station(sensors: Sequence[Sensor], left_out: list[ChannelReport]) -> dict[str, Sensor]:
    stations: dict[str, list[Sensor]] = {}
    for sensor in sensors:
        stations.setdefault(sensor.station, []).append(sensor)
    best = {}
    for code, group in stations.items():
        # A record that is much shorter or coarser than the best of its station is not worth its place.
        seconds = max(s.seconds / len(s.channels) for s in group)
        group.sort(key=lambda s: (s.rate_hz < 10.0, s.seconds / len(s.channels) < 0.9 * seconds, _rank_at_station(s)))
        best[code] = group[0]
        for other in group[1:]:
            why = " (it clips)" if other.clipped and not group[0].clipped else ""
            left_out += _rows(other, f"another sensor of the station is used: {group[0].name}{why}")
    return best


def _rank_at_station(sensor: Sensor) -> tuple[float, ...]:
    return (-len(sensor.channels), sensor.clipped, sensor.strong_motion, -sensor.rate_hz)


def _rows(sensor: Sensor, reason: str) -> list[ChannelReport]:
    return [replace(c.report, reason=reason) for c in sensor.channels]


def sensor_distance_m(a: Sensor, b: Sensor) -> float:
    """Return the distance between two sensors in m, difference in height included."""
    (lon1, lat1, up1, deep1), (lon2, lat2, up2, deep2) = a.place, b.place
    flat, _, _ = distance_azimuth(lon1, lat1, lon2, lat2)
    same_house = a.station == b.station
    # Elevations of different catalogues disagree by metres; depth in a borehole is what separates sensors.
    vertical = (deep1 - deep2) if same_house else (up1 - deep1) - (up2 - deep2)
    return math.hypot(float(flat), vertical)


def _pair(rotation: Sensor, translation: dict[str, Sensor], settings: RecordSettings) -> SinglePlan:
    near = sorted(translation.values(), key=lambda s: (s.station != rotation.station, sensor_distance_m(s, rotation)))
    within = [s for s in near if sensor_distance_m(s, rotation) <= settings.site_distance_m]
    if not within:
        closest = min(near, key=lambda s: sensor_distance_m(s, rotation), default=None)
        note = f"no translation sensor within {settings.site_distance_m:g} m"
        if closest is not None:
            note += f"; the nearest is {closest.station} at {sensor_distance_m(closest, rotation) / KM:.3g} km"
        return SinglePlan(rotation.station, None, rotation, note)
    chosen = min(within, key=lambda s: (s.clipped, s.station != rotation.station, sensor_distance_m(s, rotation)))
    apart = sensor_distance_m(chosen, rotation)
    note = f"rotation of {rotation.station}, {apart:.0f} m away" if chosen.station != rotation.station else ""
    return SinglePlan(chosen.station, chosen, rotation, note)


def _without_neighbours(
    free: dict[str, Sensor], singles: Sequence[SinglePlan], settings: RecordSettings, left_out: list[ChannelReport]
) -> dict[str, Sensor]:
    """Drop stations that stand at a site which already has a translation sensor: they would count twice."""
    kept = {}
    for code, sensor in free.items():
        twin = next(
            (
                p.code
                for p in singles
                if p.translation is not None and sensor_distance_m(p.translation, sensor) <= settings.site_distance_m
            ),
            None,
        )
        if twin is None:
            kept[code] = sensor
        else:
            left_out += _rows(sensor, f"the same place as site {twin}, which uses another sensor")
    return kept


def slowest_velocity_m_s(
    sensor: Sensor, event: Event, arrivals: dict[str, Arrivals], settings: RecordSettings
) -> float:
    """Return the slowest apparent velocity that an array at this place must resolve."""
    if settings.array_velocity_km_s is not None:
        return settings.array_velocity_km_s * KM
    lon, lat, _, _ = sensor.place
    distance, _, _ = distance_azimuth(event.longitude_deg, event.latitude_deg, lon, lat)
    slowness = arrivals[sensor.name].p_slowness_s_m
    return 1.0 / slowness if distance > _FAR_M and slowness > 0 else _LOCAL_VELOCITY_M_S


def _named_arrays(
    translation: dict[str, Sensor], event: Event, arrivals: dict[str, Arrivals], settings: RecordSettings
) -> list[ArrayPlan]:
    plans = []
    for group in settings.arrays:
        members = []
        for name in dict.fromkeys(group):
            found = [s for code, s in translation.items() if name in (code, code.split(".")[1])]
            if not found:
                raise InputError(
                    f"array {' '.join(group)}: station {name} has no usable translation record; leave it out or add its"
                    " records and metadata (`rupture check` without arrays says what is wrong with it)"
                )
            members += found
        plans.append(_array_plan(members, event, arrivals, settings))
    return plans


def _array_plan(
    members: Sequence[Sensor], event: Event, arrivals: dict[str, Arrivals], settings: RecordSettings
) -> ArrayPlan:
    """Name the array by the station nearest to its middle."""
    places = _plane_places(members)
    middle = int(np.argmin(np.linalg.norm(places - places.mean(axis=0), axis=1)))
    velocity = min(slowest_velocity_m_s(s, event, arrivals, settings) for s in members)
    return ArrayPlan(f"{members[middle].station}+{len(members) - 1}", tuple(members), velocity)


def _plane_places(sensors: Sequence[Sensor]) -> np.ndarray:
    lon, lat = np.array([s.place[:2] for s in sensors]).T
    plane = LocalPlane(float(lon[0]), float(lat[0]))
    return np.column_stack(plane.to_plane(lon, lat))


def _automatic_arrays(
    free: dict[str, Sensor], event: Event, arrivals: dict[str, Arrivals], settings: RecordSettings
) -> list[ArrayPlan]:
    """Group free stations, the best group first, until none of three stations is left."""
    plans = []
    left = [s for s in free.values() if not s.clipped]
    while len(left) >= 3:
        best: list[Sensor] = []
        best_score = 0.0
        for sensor in left:
            k = 2.0 * np.pi * settings.array_reach_hz / slowest_velocity_m_s(sensor, event, arrivals, settings)
            near = [s for s in left if float(distance_azimuth(*sensor.place[:2], *s.place[:2])[0]) * k <= 2.0 * np.pi]
            if len(near) < 3:
                continue
            places = _plane_places(near)
            found, score = compact_group(places, near.index(sensor), settings.array_error_share, k)
            if score > best_score:
                best, best_score = [near[i] for i in found], score
        if not best:
            break
        plans.append(_array_plan(best, event, arrivals, settings))
        left = [s for s in left if s not in best]
    return plans
