"""Read, correct and check records; make six-component sites of them."""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from rupture.records.assemble import read_sites
    from rupture.records.events import event_from_origin, read_event
    from rupture.records.report import ChannelFound, ChannelReport, Correction, SiteSet, SiteVerdict
    from rupture.records.settings import RecordSettings

_PLACES = {
    "read_sites": "assemble",
    "read_event": "events",
    "event_from_origin": "events",
    "ChannelFound": "report",
    "ChannelReport": "report",
    "Correction": "report",
    "SiteSet": "report",
    "SiteVerdict": "report",
    "RecordSettings": "settings",
}

__all__ = [
    "ChannelFound", "ChannelReport", "Correction", "RecordSettings", "SiteSet", "SiteVerdict", "event_from_origin",
    "read_event", "read_sites",
]  # fmt: skip


def __getattr__(name: str) -> Any:
    if name in _PLACES:
        return getattr(import_module(f"rupture.records.{_PLACES[name]}"), name)
    raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
