"""Read an earthquake from QuakeML, or build it from an origin typed by hand."""

from __future__ import annotations

import math
import warnings
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from rupture.conventions import KM
from rupture.errors import InputError, RecordWarning
from rupture.event import Event


def read_event(path: str | Path, event_id: str | None = None) -> Event:
    """Read an event with origin, magnitude and focal mechanism.

    Parameters
    ----------
    path
        QuakeML, or any other event format that ObsPy reads.
    event_id
        Last part of the public identifier, for files that hold several events.

    Returns
    -------
    Event
        From the preferred origin, magnitude (a moment magnitude where there is one) and focal mechanism
        (its preferred nodal plane), or the first of each.

    Raises
    ------
    InputError
        When the file cannot be read, holds no or several events, or the origin lacks time, place or depth.
    """
    path = Path(path)
    events = [
        e for e in _catalogue(path) if event_id is None or str(e.resource_id).rpartition("/")[2].endswith(event_id)
    ]
    if not events:
        wanted = f" with identifier {event_id}" if event_id else ""
        raise InputError(f"{path}: the file holds no event{wanted}")
    if len(events) > 1:
        raise InputError(f"{path}: the file holds {len(events)} events; name one by its identifier, or keep one only")
    return _convert(events[0], path)


def read_events(path: str | Path) -> tuple[Event, ...]:
    """Read all events of a file, for example small ones that calibrate the sites; errors as for `read_event`."""
    path = Path(path)
    found = _catalogue(path)
    if not len(found):
        raise InputError(f"{path}: the file holds no event")
    return tuple(_convert(event, path) for event in found)


def _catalogue(path: Path) -> Any:
    import obspy

    if not path.is_file():
        raise InputError(f"{path}: no such event file")
    try:
        return obspy.read_events(str(path))
    except Exception as error:
        raise InputError(f"{path}: ObsPy cannot read this as an event file (QuakeML): {error}") from error


def _convert(found: Any, path: Path) -> Event:
    origin = found.preferred_origin() or (found.origins[0] if found.origins else None)
    if origin is None:
        raise InputError(f"{path}: the event has no origin; give --origin TIME LON LAT DEPTH instead")
    for name in ("time", "longitude", "latitude", "depth"):
        value = getattr(origin, name)
        if value is None or (name != "time" and not math.isfinite(value)):
            raise InputError(
                f"{path}: the origin has no {name}; add it to the file, or give --origin TIME LON LAT DEPTH instead"
            )
    depth_km = origin.depth / KM
    if -10.0 <= depth_km < 0.0:
        warnings.warn(f"{path}: the event lies {-depth_km:.2f} km above sea level; taken at 0 km", RecordWarning, 2)
        depth_km = 0.0
    names = [d.text for d in found.event_descriptions if d.text]
    return Event(
        origin_time=origin.time.datetime.replace(tzinfo=UTC),
        longitude_deg=float(origin.longitude),
        latitude_deg=float(origin.latitude),
        depth_km=float(depth_km),
        magnitude=_magnitude(found),
        mechanism_deg=_mechanism(found),
        name=names[0] if names else "",
    )


def _magnitude(found: Any) -> float | None:
    preferred = found.preferred_magnitude()
    moment = [m for m in found.magnitudes if (m.magnitude_type or "").lower().startswith("mw")]
    chosen = [m for m in ([preferred] if preferred else []) + moment + list(found.magnitudes) if m.mag is not None]
    return float(chosen[0].mag) if chosen else None


def _mechanism(found: Any) -> tuple[float, float, float] | None:
    chosen = found.preferred_focal_mechanism() or next(iter(found.focal_mechanisms), None)
    planes = chosen.nodal_planes if chosen is not None else None
    if planes is None:
        return None
    second = planes.preferred_plane == 2 and planes.nodal_plane_2 is not None
    plane = planes.nodal_plane_2 if second else (planes.nodal_plane_1 or planes.nodal_plane_2)
    if plane is None or None in (plane.strike, plane.dip, plane.rake):
        return None
    return (float(plane.strike), float(plane.dip), float(plane.rake))


def event_from_origin(
    time: str | datetime,
    longitude_deg: float | str,
    latitude_deg: float | str,
    depth_km: float | str,
    magnitude: float | None = None,
    mechanism_deg: tuple[float, float, float] | None = None,
) -> Event:
    """Build an event from an origin given by hand.

    Parameters
    ----------
    time
        ISO 8601 time; UTC unless it carries an offset of its own.
    longitude_deg, latitude_deg, depth_km
        Hypocentre; text is converted.
    magnitude, mechanism_deg
        Where known.

    Raises
    ------
    InputError
        When a value cannot be understood; the message names it.

    Examples
    --------
    >>> event_from_origin("2031-04-05T06:07:08", "12.5", "42", "10").origin_time.isoformat()
    '2031-04-05T06:07:08+00:00'
    """
    if isinstance(time, str):
        try:
            time = datetime.fromisoformat(time.strip())
        except ValueError:
            raise InputError(
                f"origin time '{time}' is not an ISO time; write it like 2031-04-05T06:07:08.9 (UTC)"
            ) from None
    if time.tzinfo is None:
        time = time.replace(tzinfo=UTC)
    values = []
    for name, value in (("longitude", longitude_deg), ("latitude", latitude_deg), ("depth", depth_km)):
        try:
            number = float(value)
        except (TypeError, ValueError):
            raise InputError(f"origin {name} '{value}' is not a number") from None
        if not math.isfinite(number):
            raise InputError(f"origin {name} '{value}' is not a finite number")
        values.append(number)
    longitude, latitude, depth = values
    return Event(time.astimezone(UTC), longitude, latitude, depth, magnitude, mechanism_deg)
