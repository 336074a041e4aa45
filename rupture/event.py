"""The earthquake that is followed: origin time, hypocentre, magnitude."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime

from rupture.errors import InputError


@dataclass(frozen=True)
class Event:
    """An earthquake.

    Attributes
    ----------
    origin_time
        Time-zone-aware UTC origin time; all other times are seconds after it.
    longitude_deg, latitude_deg
        Epicentre in degrees (WGS84).
    depth_km
        Hypocentre depth below the surface in km.
    magnitude
        Moment magnitude, or None when unknown.
    mechanism_deg
        Strike, dip and rake in degrees (Aki & Richards 2002 convention), or None when unknown.
    name
        A name for titles.
    """

    origin_time: datetime
    longitude_deg: float
    latitude_deg: float
    depth_km: float
    magnitude: float | None = None
    mechanism_deg: tuple[float, float, float] | None = None
    name: str = ""

    def __post_init__(self) -> None:
        if self.origin_time.tzinfo is None:
            raise InputError("origin time has no time zone; give it in UTC")
        if not -90 <= self.latitude_deg <= 90:
            raise InputError(f"event latitude {self.latitude_deg} is outside -90 to 90 degrees")
        if not -360 <= self.longitude_deg <= 360:
            raise InputError(f"event longitude {self.longitude_deg} is outside -360 to 360 degrees")
        if not 0 <= self.depth_km <= 800:
            raise InputError(f"event depth {self.depth_km} km is outside 0 to 800 km")
