"""Stations of a scenario: where each sensor stands, which channels it has and how they are named."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from rupture.conventions import COMPONENTS, KM, ROT_E
from rupture.errors import InputError
from rupture.geodesy import destination, distance_azimuth
from rupture.synthetic.faults import Fault, of_element
from rupture.synthetic.scenario import Scenario
from rupture.synthetic.scenario_tables import SiteTable, parse_components
from rupture.synthetic.sensors import RESPONSES, Response, band_letter

NAMED_WITHIN_DEG = 5.0
"""Horizontals within this angle of true north and east are called N and E, others 1 and 2 (FDSN source identifiers)."""


@dataclass(frozen=True)
class ChannelPlan:
    """One channel: what it measures and what the metadata say about it.

    Attributes
    ----------
    component
        Index into `rupture.conventions.COMPONENTS` of what it measures when the sensor stands true.
    code
        Three-letter channel code.
    azimuth_deg, dip_deg
        Orientation as StationXML has it: clockwise from north, positive down.
    response
        Response and full scale.
    """

    component: int
    code: str
    azimuth_deg: float
    dip_deg: float
    response: Response


@dataclass(frozen=True)
class Station:
    """One sensor vault: all channels at one place.

    Attributes
    ----------
    network, code, name
        FDSN codes and a name.
    site
        The scenario's site that it belongs to.
    element
        Number within an array, or None.
    longitude_deg, latitude_deg, elevation_m
        True place.
    channels
        What it records.
    faults
        What is wrong with it.
    """

    network: str
    code: str
    name: str
    site: SiteTable
    element: int | None
    longitude_deg: float
    latitude_deg: float
    elevation_m: float
    channels: tuple[ChannelPlan, ...]
    faults: tuple[Fault, ...]

    @property
    def sensor_azimuth_deg(self) -> float:
        """Azimuth of the north axis in the metadata."""
        return self.site.sensor_azimuth_deg


def make_stations(scenario: Scenario) -> tuple[Station, ...]:
    """Return the stations of a scenario, arrays taken apart into their sensors.

    Raises
    ------
    InputError
        When a site stands on the epicentre or a code does not fit into miniSEED 2.
    """
    stations = []
    for site in scenario.site:
        longitude, latitude = _place(scenario, site)
        distance, _, _ = distance_azimuth(
            scenario.event.longitude_deg, scenario.event.latitude_deg, longitude, latitude
        )
        if distance < 1.0:
            raise InputError(f"site {site.code}: stands on the epicentre, at zero distance; move it")
        if site.array is None:
            stations.append(_station(scenario, site, site.code, None, longitude, latitude))
            continue
        if len(site.code) > 3:
            raise InputError(
                f"site {site.code}: the code of an array has at most three letters, two digits number its sensors"
            )
        count = site.array.sensors
        # One sensor in the middle, the others on a ring around it.
        ring = np.concatenate([[0.0], np.full(count - 1, 0.5 * site.array.aperture_m)])
        turn = np.concatenate([[0.0], 2 * np.pi * np.arange(count - 1) / (count - 1)])
        lons, lats = destination(longitude, latitude, turn, ring)
        stations += [
            _station(scenario, site, f"{site.code}{k + 1:02d}", k + 1, float(lons[k]), float(lats[k]))
            for k in range(count)
        ]
    return tuple(stations)


def _place(scenario: Scenario, site: SiteTable) -> tuple[float, float]:
    if site.longitude_deg is not None and site.latitude_deg is not None:
        return site.longitude_deg, site.latitude_deg
    azimuth, distance = site.azimuth_deg or 0.0, site.distance_km or 0.0  # one of the two ways is always given
    longitude, latitude = destination(
        scenario.event.longitude_deg, scenario.event.latitude_deg, np.radians(azimuth), distance * KM
    )
    return float(longitude), float(latitude)


def _station(
    scenario: Scenario, site: SiteTable, code: str, element: int | None, longitude: float, latitude: float
) -> Station:
    band = band_letter(scenario.record.rate_hz)
    wanted = parse_components(site.components)
    turned = abs((site.sensor_azimuth_deg + 180) % 360 - 180) > NAMED_WITHIN_DEG
    channels = []
    for index, name in enumerate(COMPONENTS):
        if name not in wanted:
            continue
        response = RESPONSES[site.translation_sensor if index < ROT_E else site.rotation_sensor]
        axis = name[-1]
        letter = {"N": "1", "E": "2"}.get(axis, axis) if turned else axis
        azimuth = {"N": 0.0, "E": 90.0, "Z": -site.sensor_azimuth_deg}[axis] + site.sensor_azimuth_deg
        dip = -90.0 if axis == "Z" else 0.0
        channels.append(ChannelPlan(index, band + response.instrument + letter, azimuth % 360, dip, response))
    return Station(
        scenario.network, code, site.name or site.code, site, element, longitude, latitude, site.elevation_m,
        tuple(channels), of_element(site.fault, element),
    )  # fmt: skip
