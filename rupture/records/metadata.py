"""Look up a channel in the station metadata: place, orientation, instrument, at the time of the event."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

from rupture.records.report import UnusableError

QUANTITY_OF_CODE = {
    "J": "rotation",
    "H": "translation",
    "L": "translation",
    "N": "translation",
    "P": "translation",
}
"""FDSN source identifiers: instrument codes of rotation sensors, of seismometers of high and low gain, of
accelerometers, and of geophones."""

STRONG_MOTION = "N"


@dataclass(frozen=True)
class ChannelMetadata:
    """Metadata of one channel in the epoch of the event.

    Attributes
    ----------
    longitude_deg, latitude_deg, elevation_m, depth_m
        Place; depth is below the local surface.
    azimuth_deg, dip_deg
        SEED orientation, None when absent.
    sensor
        Description of the sensor.
    unit_name
        Input unit as spelt, for the table.
    response
        ObsPy response, or None.
    notes
        What was odd, in words.
    """

    longitude_deg: float
    latitude_deg: float
    elevation_m: float
    depth_m: float
    azimuth_deg: float | None
    dip_deg: float | None
    sensor: str
    unit_name: str
    response: Any
    notes: tuple[str, ...] = ()


def quantity_of(channel: str) -> str | None:
    """Return "rotation", "translation" or None for a full channel name, from its FDSN instrument code.

    Examples
    --------
    >>> quantity_of("XX.AAA..HJZ"), quantity_of("XX.AAA.00.BHN"), quantity_of("XX.AAA..LDO")
    ('rotation', 'translation', None)
    """
    code = channel.rpartition(".")[2]
    return QUANTITY_OF_CODE.get(code[1:2].upper()) if len(code) == 3 else None


class MetadataIndex:
    """All channel epochs of an inventory by NET.STA.LOC.CHA.

    Parameters
    ----------
    inventory
        ObsPy inventory.
    """

    def __init__(self, inventory: Any) -> None:
        self._epochs: dict[str, list[tuple[Any, Any]]] = {}
        for name, station, channel in _walk(inventory):
            self._epochs.setdefault(name, []).append((station, channel))

    def look_up(self, channel: str, time: Any) -> ChannelMetadata:
        """Return the metadata of a channel at a time (ObsPy UTCDateTime).

        Raises
        ------
        UnusableError
            No metadata, no epoch that covers the time, or no coordinates.
        """
        epochs = self._epochs.get(channel)
        if not epochs:
            raise UnusableError("no metadata for this channel; add its StationXML to --inventory")
        good = [e for e in epochs if _covers(e[1], time)]
        if not good:
            spans = ", ".join(f"{_day(c.start_date)} to {_day(c.end_date)}" for _, c in epochs)
            raise UnusableError(f"the metadata cover {spans}, but not {time.strftime('%Y-%m-%d')}")
        good.sort(key=lambda e: e[1].start_date.timestamp if e[1].start_date else -math.inf)
        station, found = good[-1]
        notes = (f"{len(good)} metadata epochs overlap; the latest is used",) if len(good) > 1 else ()
        place = [found.longitude, found.latitude]
        if None in place or (place == [0.0, 0.0] and (station.longitude or station.latitude)):
            place = [station.longitude, station.latitude]
        if None in place:
            raise UnusableError("the metadata give no coordinates")
        response = found.response
        unit = ""
        if response is not None:
            stages = response.response_stages
            overall = response.instrument_sensitivity
            unit = str((stages[0].input_units if stages else None) or (overall.input_units if overall else None) or "")
        return ChannelMetadata(
            float(place[0]), float(place[1]), float(found.elevation or station.elevation or 0.0),
            float(found.depth or 0.0), _number(found.azimuth), _number(found.dip),
            str((found.sensor and (found.sensor.description or found.sensor.type)) or ""), unit, response, notes,
        )  # fmt: skip


def _walk(inventory: Any) -> Iterator[tuple[str, Any, Any]]:
    for network in inventory:
        for station in network:
            for channel in station:
                location = (channel.location_code or "").strip()
                yield f"{network.code}.{station.code}.{location}.{channel.code}", station, channel


def _covers(channel: Any, time: Any) -> bool:
    return (channel.start_date is None or channel.start_date <= time) and (
        channel.end_date is None or channel.end_date >= time
    )


def _day(date: Any) -> str:
    return date.strftime("%Y-%m-%d") if date is not None else "now"


def _number(value: Any) -> float | None:
    return None if value is None or not math.isfinite(float(value)) else float(value)
