"""The stages in their order: records, directions, stack, front, null tests, and what they leave."""

from __future__ import annotations

import hashlib
import platform
from collections.abc import Sequence
from dataclasses import dataclass, replace
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rupture import __version__
from rupture.conventions import KM
from rupture.direction import SiteDirection, estimate_direction
from rupture.earth import Earth, build_earth
from rupture.earth.responses import Responses, first_arrival_responses
from rupture.errors import DataError, InputError
from rupture.event import Event
from rupture.geodesy import distance_azimuth
from rupture.progress import Progress
from rupture.records import SiteSet, event_from_origin, read_event, read_sites
from rupture.settings import Job
from rupture.site import Site

Array = NDArray[np.float64]

NOISE_GUARD_S = 3.0
"""The noise stretch ends this long before the predicted P: onsets may come early."""


@dataclass(frozen=True)
class Inputs:
    """What was read: the event, the Earth, the sites with their arrivals from the hypocentre.

    Attributes
    ----------
    event, earth, site_set
        As read.
    responses
        The strong waves of the Earth at the hypocentre's depth.
    distance_m, azimuth_rad
        From the epicentre to each usable site, shape (sites,).
    p_arrival_s, s_arrival_s
        First P and strongest S from the hypocentre at each usable site, s after the origin time, shape (sites,).
    """

    event: Event
    earth: Earth
    responses: Responses
    site_set: SiteSet
    distance_m: Array
    azimuth_rad: Array
    p_arrival_s: Array
    s_arrival_s: Array

    @property
    def sites(self) -> tuple[Site, ...]:
        """The usable sites."""
        return self.site_set.sites


def load_event(job: Job) -> Event:
    """Return the event of a job; magnitude and mechanism of the job fill what the event lacks.

    Raises
    ------
    InputError
        When no event is given, or it cannot be read.
    """
    given = job.input
    if (given.event is None) == (given.origin is None):
        raise InputError("give the earthquake once: --event FILE (QuakeML) or --origin TIME LON LAT DEPTH")
    if given.event is not None:
        event = read_event(given.event)
    else:
        time, longitude, latitude, depth = map(str, given.origin or ())
        event = event_from_origin(time, longitude, latitude, depth)
    if given.magnitude is not None:
        event = replace(event, magnitude=given.magnitude)
    if given.mechanism_deg is not None:
        strike, dip, rake = given.mechanism_deg
        if not (-360 <= strike <= 360 and 0 < dip <= 90 and -180 <= rake <= 180):
            raise InputError(
                f"mechanism {strike:g} {dip:g} {rake:g}: strike -360 to 360, dip 0 to 90, rake -180 to 180 degrees"
            )
        event = replace(event, mechanism_deg=given.mechanism_deg)
    return event


def strong_waves(earth: Earth, depth_km: float, longest_km: float) -> Responses:
    """Return the strong waves of an Earth model: rays through its layers, or first arrivals in a uniform one."""
    if earth.layers.top_km.size == 1:
        return first_arrival_responses(earth, depth_km, longest_km)
    from rupture.synthetic.responses import ray_responses

    return ray_responses(earth.layers, depth_km, longest_km)


def load(job: Job, progress: Progress) -> Inputs:
    """Read event, Earth and records.

    Raises
    ------
    InputError, DataError
        With a sentence for people.
    """
    if not job.input.records:
        raise InputError("no records are given; use --records FILE... or the key 'records' of [input] in the job file")
    if not job.input.inventory:
        raise InputError("no station metadata are given; use --inventory FILE (StationXML)")
    event = load_event(job)
    earth = build_earth(job.earth.model)
    with progress.stage("records") as report:
        site_set = read_sites(job.input.records, job.input.inventory, event, job.records, report)
    lon, lat = ([getattr(s, name) for s in site_set.sites] for name in ("longitude_deg", "latitude_deg"))
    distance, azimuth, _ = distance_azimuth(event.longitude_deg, event.latitude_deg, lon, lat)
    with progress.stage("Earth tables"):
        longest = float(distance.max()) / KM
        first_p = earth.table("P", event.depth_km, longest + 1).time(distance)
        regional = longest < 1500.0
        responses = (
            strong_waves(earth, event.depth_km, longest + 600.0)
            if regional
            else first_arrival_responses(earth, event.depth_km, longest + 600.0)
        )
        time_s, _ = responses.strongest("S")
    return Inputs(event, earth, responses, site_set, distance, azimuth, first_p, responses.at(time_s, distance))


def directions(
    job: Job, inputs: Inputs, progress: Progress
) -> tuple[tuple[SiteDirection, ...], NDArray[np.int64], dict[str, str]]:
    """Return directions of the sites that have one, their positions among the sites, and why the others have none.

    Raises
    ------
    DataError
        When no site has one.
    """
    found, position, refused = [], [], {}
    with progress.stage("directions") as report:
        for k, site in enumerate(inputs.sites):
            try:
                found.append(estimate_direction(site, noise_window(site, inputs.p_arrival_s[k]), job.direction))
                position.append(k)
            except DataError as error:
                refused[site.code] = str(error)
            report(k + 1, len(inputs.sites))
    if not found:
        raise DataError("no site gives a direction:\n  " + "\n  ".join(refused.values()))
    return tuple(found), np.array(position), refused


def noise_window(site: Site, p_arrival_s: float) -> tuple[float, float]:
    """Return the stretch of a record that holds noise alone, s after the origin time."""
    return site.start_s, p_arrival_s - NOISE_GUARD_S


def site_rows(inputs: Inputs, refused: dict[str, str]) -> list[dict[str, Any]]:
    """Return one mapping per site, usable or not, for the sites group and the summary."""
    rows = []
    order = {site.code: k for k, site in enumerate(inputs.sites)}
    for verdict in inputs.site_set.verdicts:
        k = order.get(verdict.code)
        distance, azimuth, _ = distance_azimuth(
            inputs.event.longitude_deg, inputs.event.latitude_deg, verdict.longitude_deg, verdict.latitude_deg
        )
        used = verdict.used and k is not None and verdict.code not in refused
        rows.append(
            {
                "code": verdict.code, "longitude": verdict.longitude_deg, "latitude": verdict.latitude_deg,
                "elevation": verdict.elevation_m, "used": used,
                "reason": refused.get(verdict.code, verdict.reason), "components": verdict.components,
                "distance": float(distance) / KM, "azimuth": float(np.degrees(azimuth)),
                "p_arrival": float(inputs.p_arrival_s[k]) if k is not None else np.nan,
                "s_arrival": float(inputs.s_arrival_s[k]) if k is not None else np.nan,
                "azimuth_correction": _applied(verdict, "deg"), "time_correction": _applied(verdict, "s"),
                "corrections": [_in_numbers(c) for c in verdict.corrections],
            }
        )  # fmt: skip
    return rows


def _applied(verdict: Any, unit: str) -> float:
    return float(sum(c.value for c in verdict.corrections if c.applied and c.unit == unit and np.isfinite(c.value)))


def _in_numbers(correction: Any) -> dict[str, Any]:
    """Return a correction as summary.json holds it; null where the data do not say."""
    value, uncertainty = (
        round(float(v), 4) if np.isfinite(v) else None for v in (correction.value, correction.uncertainty)
    )
    return {
        "kind": correction.kind, "value": value, "uncertainty": uncertainty, "unit": correction.unit,
        "noticed": bool(correction.noticed), "applied": bool(correction.applied),
    }  # fmt: skip


def event_summary(event: Event) -> dict[str, Any]:
    """Return the event as summary.json holds it."""
    return {
        "origin_time": event.origin_time.replace(tzinfo=None).isoformat(timespec="milliseconds") + "Z",
        "longitude_deg": event.longitude_deg, "latitude_deg": event.latitude_deg, "depth_km": event.depth_km,
        "magnitude": event.magnitude, "mechanism_deg": list(event.mechanism_deg) if event.mechanism_deg else None,
        "name": event.name,
    }  # fmt: skip


def site_summaries(rows: Sequence[dict[str, Any]]) -> list[dict[str, Any]]:
    """Return the sites as summary.json holds them."""
    return [
        {
            "code": r["code"], "used": r["used"], "reason": r["reason"], "components": r["components"],
            "distance_km": round(r["distance"], 3), "azimuth_deg": round(r["azimuth"], 3),
            "azimuth_correction_deg": round(r["azimuth_correction"], 3),
            "time_correction_s": round(r["time_correction"], 4), "corrections": r["corrections"],
        }
        for r in rows
    ]  # fmt: skip


def quality_rows(site_set: SiteSet) -> list[dict[str, Any]]:
    """Return the quality table in words, one mapping per channel."""
    rows = []
    for row in site_set.quality:
        f = row.found
        parts = [f.unit, f"{f.rate_hz:g} Hz" if f.rate_hz else "", f.sensor]
        if f.start_s is not None and f.end_s is not None:
            parts.append(f"{f.start_s:.0f} to {f.end_s:.0f} s")
        if f.azimuth_deg is not None or f.dip_deg is not None:
            parts.append(
                "azimuth {}, dip {}".format(*("?" if v is None else f"{v:g}" for v in (f.azimuth_deg, f.dip_deg)))
            )
        rows.append(
            {
                "site": row.site, "channel": row.channel, "found": ", ".join(p for p in parts if p), "done": "; ".join(row.done),
                "missing": "; ".join(row.missing), "snr": None if row.snr is None or not np.isfinite(row.snr) else round(row.snr, 1),
                "used": row.used, "reason": row.reason,
            }
        )  # fmt: skip
    return rows


def provenance(job: Job, progress: Progress) -> dict[str, Any]:
    """Return versions, hashes of the input files, settings, seed and seconds per stage."""
    versions = {"rupture-backtrack": __version__, "python": platform.python_version()}
    for package in ("numpy", "scipy", "obspy", "numba", "pyproj"):
        try:
            versions[package] = version(package)
        except PackageNotFoundError:
            versions[package] = "unknown"
    named = [*job.input.records, *job.input.inventory, *(p for p in (job.input.event, job.input.trace) if p)]
    return {
        "versions": versions,
        "inputs": {str(path): _sha256(path) for path in _files(named)},
        "settings": job.as_table(),
        "seed": job.seed,
        "seconds": progress.seconds,
    }


def _files(named: Sequence[str]) -> list[Path]:
    found: set[Path] = set()
    for text in named:
        path = Path(text)
        if path.is_file():
            found.add(path)
        elif path.is_dir():
            found.update(p for p in path.rglob("*") if p.is_file())
        elif any(sign in text for sign in "*?["):
            parent = Path(path.anchor) if path.is_absolute() else Path()
            found.update(p for p in parent.glob(str(path.relative_to(path.anchor))) if p.is_file())
    return sorted(found)


def _sha256(path: Path) -> str:
    digest = hashlib.sha256()
    with path.open("rb") as file:
        while block := file.read(1 << 20):
            digest.update(block)
    return digest.hexdigest()
