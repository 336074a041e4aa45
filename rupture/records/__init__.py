"""Read, correct and check records; make six-component sites of them."""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from rupture.records.arrivals import Arrivals, arrivals_from_times
    from rupture.records.assemble import read_sites
    from rupture.records.calibration import calibrate
    from rupture.records.events import event_from_origin, read_event, read_events
    from rupture.records.fk import ArrayDirections, array_directions
    from rupture.records.report import Calibration, ChannelFound, ChannelReport, Correction, SiteSet, SiteVerdict
    from rupture.records.settings import CorrectionSettings, RecordSettings
    from rupture.records.sources import FdsnSource, Fetched, FetchSettings, sds_files

_PLACES = {
    "ArrayDirections": "fk",
    "array_directions": "fk",
    "Arrivals": "arrivals",
    "Calibration": "report",
    "ChannelFound": "report",
    "ChannelReport": "report",
    "Correction": "report",
    "CorrectionSettings": "settings",
    "FdsnSource": "sources",
    "FetchSettings": "sources",
    "Fetched": "sources",
    "RecordSettings": "settings",
    "SiteSet": "report",
    "SiteVerdict": "report",
    "arrivals_from_times": "arrivals",
    "calibrate": "calibration",
    "event_from_origin": "events",
    "read_event": "events",
    "read_events": "events",
    "read_sites": "assemble",
    "sds_files": "sources",
}

__all__ = [
    "ArrayDirections",
    "Arrivals",
    "Calibration",
    "ChannelFound",
    "ChannelReport",
    "Correction",
    "CorrectionSettings",
    "FdsnSource",
    "FetchSettings",
    "Fetched",
    "RecordSettings",
    "SiteSet",
    "SiteVerdict",
    "array_directions",
    "arrivals_from_times",
    "calibrate",
    "event_from_origin",
    "read_event",
    "read_events",
    "read_sites",
    "sds_files",
]


def __getattr__(name: str) -> Any:
    if name in _PLACES:
        return getattr(import_module(f"rupture.records.{_PLACES[name]}"), name)
    raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
