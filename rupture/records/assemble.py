"""From record files to six-component sites and the quality table."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import replace
from functools import partial
from pathlib import Path
from typing import Any

import numpy as np

from rupture.conventions import KM
from rupture.errors import DataError
from rupture.event import Event
from rupture.geodesy import distance_azimuth
from rupture.progress import Report
from rupture.records.arrivals import ArrivalModel, Arrivals, first_arrivals, reading_end_s
from rupture.records.building import Context, array_site, single_site
from rupture.records.crosscheck import Placed, amplitude_findings, travel_time_findings, verdict_words
from rupture.records.metadata import MetadataIndex, quantity_of
from rupture.records.pairing import Plan, plan_sites
from rupture.records.read import RawChannel, read_channels, read_inventories, record_files
from rupture.records.report import Calibration, ChannelFound, ChannelReport, SiteSet, SiteVerdict, UnusableError
from rupture.records.sensors import Grid, Prepared, Sensor, prepare
from rupture.records.settings import RecordSettings
from rupture.records.sources import resolve
from rupture.site import Site

_FASTEST_HZ = 20.0
"""Default limit of the common sampling rate: rotations are looked at below a few Hz."""


def read_sites(
    records: Sequence[str | Path],
    inventory: Sequence[str | Path],
    event: Event,
    settings: RecordSettings | None = None,
    report: Report | None = None,
    calibration: Mapping[str, Calibration] | None = None,
    arrival_model: ArrivalModel | None = None,
) -> SiteSet:
    """Read records and make six-component sites of them.

    Parameters
    ----------
    records
        Files, folders or globs of anything that ObsPy reads; `sds:FOLDER` for an SDS archive.
    inventory
        StationXML files at response level.
    event
        The earthquake; times are counted from its origin.
    settings
        Distances, filters and limits; None for the defaults.
    report
        Called with (done, total) as sites are made.
    calibration
        What other earthquakes have said about the sites, by code; from `calibrate`.
    arrival_model
        First arrivals in the Earth of the run (see `arrivals_from_times`); None for ak135.

    Returns
    -------
    SiteSet
        Sites, what was rejected, the quality table, and a verdict per site.

    Raises
    ------
    InputError
        Unreadable or missing files.
    DataError
        Nothing of the event in the records, no usable site, or no rotation anywhere.
    """
    settings = settings or RecordSettings()
    model = arrival_model or first_arrivals
    plan, context, rows = prepare_run(records, inventory, event, settings, calibration or {}, model)
    sites, rejected, verdicts = _build(plan, context, rows, report, model)
    rows.sort(key=lambda r: (r.site, r.channel))
    verdicts.sort(key=lambda v: v.code)
    result = SiteSet(
        tuple(sorted(sites, key=lambda s: s.code)),
        tuple(sorted(rejected, key=lambda s: s.code)),
        tuple(rows),
        tuple(verdicts),
    )
    if settings.need_rotation:
        _demand_rotation(result)
    return result


def prepare_run(
    records: Sequence[str | Path],
    inventory: Sequence[str | Path],
    event: Event,
    settings: RecordSettings,
    calibration: Mapping[str, Calibration],
    model: ArrivalModel,
) -> tuple[Plan, Context, list[ChannelReport]]:
    """Read and check all channels and plan the sites; nothing is filtered yet.

    Returns
    -------
    plan, context, rows
        What is to be made, what all sites share, and the table rows of what is left out.
    """
    metadata = read_inventories(inventory)
    after_s = settings.after_s or _farthest_end(metadata, event)
    files = resolve(records, metadata, event, settings.before_s, after_s)
    raw = read_channels(record_files(files), event, settings.before_s, after_s)
    sensors, rows, arrivals = _sensors(raw, MetadataIndex(metadata), event, settings, model)
    plan = plan_sites(sensors, event, arrivals, settings)
    rate = settings.rate_hz or min(_FASTEST_HZ, max((s.rate_hz for s in plan.all_sensors()), default=_FASTEST_HZ))
    first = math.ceil(-settings.before_s * rate)
    grid = Grid(first, math.floor(after_s * rate) - first + 1, 1.0 / rate)
    return plan, Context(grid, settings, arrivals, event, calibration), [*rows, *plan.left_out]


def _farthest_end(metadata: Any, event: Event) -> float:
    places = [(s.longitude, s.latitude) for network in metadata for s in network]
    if not places:
        return reading_end_s(0.0)
    lon, lat = np.array(places, float).T
    distance, _, _ = distance_azimuth(event.longitude_deg, event.latitude_deg, lon, lat)
    return reading_end_s(float(distance.max()))


def _sensors(
    raw: dict[str, RawChannel], index: MetadataIndex, event: Event, settings: RecordSettings, model: ArrivalModel
) -> tuple[list[Sensor], list[ChannelReport], dict[str, Arrivals]]:
    import obspy

    origin = obspy.UTCDateTime(event.origin_time)
    rows: list[ChannelReport] = []
    groups: dict[str, list[Prepared]] = {}
    arrivals: dict[str, Arrivals] = {}
    for name, channel in raw.items():
        station = ".".join(name.split(".")[:2])
        row = ChannelReport(station, name, _seen(channel))
        if quantity_of(name) is None:
            rows.append(replace(row, reason="its instrument code is neither translation (H, L, N, P) nor rotation (J)"))
            continue
        try:
            found = index.look_up(name, origin)
            distance, _, _ = distance_azimuth(
                event.longitude_deg, event.latitude_deg, found.longitude_deg, found.latitude_deg
            )
            times = model(float(distance), event.depth_km)
            _in_time(channel, times)
        except UnusableError as reason:
            rows.append(replace(row, reason=str(reason)))
            continue
        prepared = prepare(channel, found, settings)
        if isinstance(prepared, ChannelReport):
            rows.append(prepared)
            continue
        arrivals[name[:-1]] = times
        groups.setdefault(name[:-1], []).append(prepared)
    sensors = [Sensor(name, str(quantity_of(name + "Z")), tuple(channels)) for name, channels in sorted(groups.items())]
    return sensors, rows, arrivals


def _seen(channel: RawChannel) -> ChannelFound:
    if not channel.segments:
        return ChannelFound()
    first, last = channel.segments[0], channel.segments[-1]
    return ChannelFound(rate_hz=first.rate_hz, start_s=first.start_s, end_s=last.end_s)


def _in_time(channel: RawChannel, arrivals: Arrivals) -> None:
    if not channel.segments:
        return
    start, end = channel.segments[0].start_s, channel.segments[-1].end_s
    if start > arrivals.s_s:
        raise UnusableError(
            f"the record starts {start:.1f} s after the origin, after S (about {arrivals.s_s:.1f} s): no wave of known"
            " kind and no noise before it"
        )
    if end < arrivals.p_s:
        raise UnusableError(f"the record ends {end:.1f} s after the origin, before P (about {arrivals.p_s:.1f} s)")


def _build(
    plan: Plan, context: Context, rows: list[ChannelReport], report: Report | None, model: ArrivalModel
) -> tuple[list[Site], list[Site], list[SiteVerdict]]:
    sites: list[Site] = []
    rejected: list[Site] = []
    verdicts: list[SiteVerdict] = []
    jobs = [partial(single_site, single) for single in plan.singles] + [partial(array_site, a) for a in plan.arrays]
    for number, job in enumerate(jobs):
        site, verdict, made = job(context)
        rows += made
        verdicts.append(verdict)
        if site is not None:
            (sites if verdict.used else rejected).append(site)
        if report is not None:
            report(number + 1, len(jobs))
    sites, verdicts = _compared(sites, verdicts, context, model)
    return sites, rejected, verdicts


def _compared(
    sites: list[Site], verdicts: list[SiteVerdict], context: Context, model: ArrivalModel
) -> tuple[list[Site], list[SiteVerdict]]:
    """Hold the sites against each other and put all findings into the verdicts' words."""
    event = context.event
    placed = []
    for site in sites:
        distance, _, _ = distance_azimuth(
            event.longitude_deg, event.latitude_deg, site.longitude_deg, site.latitude_deg
        )
        placed.append(Placed(site, float(distance), event.depth_km * KM, model(float(distance), event.depth_km)))
    timed = travel_time_findings(placed, context.settings.corrections, context.calibration)
    sizes = amplitude_findings(placed)
    added = {
        site.code: tuple(c for c in (time, size) if c is not None)
        for (site, time), size in zip(timed, sizes, strict=True)
    }
    told = []
    for verdict in verdicts:
        corrections = (*verdict.corrections, *added.get(verdict.code, ()))
        words = [verdict.summary, verdict_words(corrections)] if verdict.used else [verdict.summary]
        told.append(replace(verdict, corrections=corrections, summary="; ".join(w for w in words if w)))
    return [site for site, _ in timed], told


def _demand_rotation(found: SiteSet) -> None:
    if any(site.present[3:].any() for site in found.sites):
        return
    reasons = [f"{v.code}: {v.reason}" for v in found.verdicts if v.reason]
    reasons += [f"{r.channel}: {r.reason}" for r in found.quality if not r.used and r.reason and r.channel]
    listed = "; ".join(dict.fromkeys(reasons[:4]))
    if not found.sites:
        raise DataError(f"no site can be used. {listed or 'The records hold no channel of ground motion.'}")
    raise DataError(
        f"no rotation channel anywhere: {len(found.sites)} sites have translation alone. Give records of rotation sensors"
        f" (FDSN instrument code J) or name stations that stand close together as an array. {listed}"
    )
