"""What small earthquakes of known place say about each site, before the large one is looked at."""

from __future__ import annotations

import warnings
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path

from rupture.errors import DataError, RecordWarning
from rupture.event import Event
from rupture.progress import Report
from rupture.records.arrivals import ArrivalModel
from rupture.records.assemble import read_sites
from rupture.records.relations import Mean, mean_or_none
from rupture.records.report import Calibration, SiteVerdict
from rupture.records.settings import CorrectionSettings, RecordSettings

_KINDS = {
    "relative turn": "turn_deg",
    "azimuth": "azimuth_deg",
    "time shift": "time_shift_s",
    "travel time": "travel_time_s",
}

# Wiring, relative turn and instrument clock are put right so that the direction can be read; the rest is measured.
_MEASURE = CorrectionSettings(azimuth=False, travel_time=False, gain=False)


def calibrate(
    events: Sequence[Event],
    records: Sequence[str | Path],
    inventory: Sequence[str | Path],
    settings: RecordSettings | None = None,
    report: Report | None = None,
    arrival_model: ArrivalModel | None = None,
) -> dict[str, Calibration]:
    """Estimate the corrections of all sites from a list of events.

    Parameters
    ----------
    events
        Earthquakes of known place, small enough to be points.
    records, inventory, settings, arrival_model
        As for `read_sites`; the records of all events together.
    report
        Called with (done, total) events.

    Returns
    -------
    dict
        By site code: weighted means over events, with the scatter between events in their errors.

    Raises
    ------
    DataError
        When no event has records.
    """
    settings = replace(settings or RecordSettings(), corrections=_MEASURE, need_rotation=False)
    found: dict[str, list[SiteVerdict]] = {}
    for number, event in enumerate(events):
        try:
            sites = read_sites(records, inventory, event, settings, arrival_model=arrival_model)
        except DataError as error:
            warnings.warn(f"event of {event.origin_time:%Y-%m-%d %H:%M:%S} left out: {error}", RecordWarning, 2)
            continue
        for verdict in sites.verdicts:
            if verdict.used:
                found.setdefault(verdict.code, []).append(verdict)
        if report is not None:
            report(number + 1, len(events))
    if not found:
        raise DataError(f"none of the {len(events)} events for calibration has usable records")
    return {code: combine(verdicts) for code, verdicts in sorted(found.items())}


def combine(verdicts: Sequence[SiteVerdict]) -> Calibration:
    """Return the calibration of one site from its verdicts in several events."""
    values: dict[str, tuple[float, float] | None] = {}
    for kind, name in _KINDS.items():
        means = [Mean(c.value, c.uncertainty, 1) for v in verdicts for c in v.corrections if c.kind == kind]
        mean = mean_or_none(means)
        values[name] = (mean.value, mean.error) if mean is not None else None
    return Calibration(**values, events=len(verdicts))
