"""`rupture resolve` and `rupture siting`: networks, real or planned, under synthetic ruptures."""

from __future__ import annotations

import argparse
import csv
import json
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np

from rupture.commands import job_from
from rupture.conventions import KM
from rupture.errors import InputError
from rupture.folder import output_folder
from rupture.front import prior_for
from rupture.geodesy import distance_azimuth
from rupture.mapping import read_trace
from rupture.mapping.grid import subsurface_length_km
from rupture.progress import Progress
from rupture.resolution.ensemble import Network
from rupture.resolution.null_tests import in_short, summarise
from rupture.resolution.siting import candidate_grid, rank, read_candidates, rupture_points
from rupture.resolution.study import make_cases, run_study
from rupture.run import load, load_event, noise_window, strong_waves
from rupture.settings import Job
from rupture.wording import SHORT_CAUTION


def network_from(job: Job, progress: Progress) -> Network:
    """Return the network of a job: its planned sites when there are any, otherwise the sites of its records."""
    from rupture.earth import build_earth
    from rupture.resolution.planned import planned_sites
    from rupture.synthetic.coda import CodaSettings

    direction, fit = in_short(job.direction, job.fit)
    coda = CodaSettings(energy_ratio=job.resolve.coda_energy_ratio, waves=40)
    if not job.planned:
        inputs = load(job, progress)
        sites = inputs.sites
        windows = tuple(noise_window(s, p) for s, p in zip(sites, inputs.p_arrival_s, strict=True))
        earth, event, responses = inputs.earth, inputs.event, inputs.responses
    else:
        event, earth = load_event(job), build_earth(job.earth.model)
        lon, lat = ([getattr(p, n) for p in job.planned] for n in ("longitude_deg", "latitude_deg"))
        longest = float(np.max(distance_azimuth(event.longitude_deg, event.latitude_deg, lon, lat)[0])) / KM
        sites = planned_sites(job.planned, longest, job.seed)
        windows = tuple((s.start_s, 0.0) for s in sites)
        responses = strong_waves(earth, event.depth_km, longest + 600.0)
    prior = prior_for(event)
    if job.input.trace is not None:
        longitude, latitude = read_trace(job.input.trace)
        _, azimuth, _ = distance_azimuth(longitude[0], latitude[0], longitude[-1], latitude[-1])
        prior = replace(prior, axis_rad=float(azimuth))
    return Network(event, tuple(sites), windows, earth.layers, responses, direction, fit, prior, coda)


def resolve(options: argparse.Namespace) -> int:
    """Run `rupture resolve`."""
    job = _job(options)
    changes: dict[str, Any] = {}
    if options.ruptures is not None:
        changes["ruptures"] = options.ruptures
    if options.at_magnitude:
        changes["magnitudes"] = tuple(options.at_magnitude)
    if options.noise_factor:
        changes["noise_factors"] = tuple(options.noise_factor)
    if options.leave_one_out:
        changes["without"] = True
    if options.workers is not None:
        changes["workers"] = options.workers
    settings = replace(job.resolve.study, **changes)
    progress = Progress(options.quiet)
    network = network_from(job, progress)
    out = Path(options.out)
    if out.exists() and not out.is_dir():
        raise InputError(f"{out}: exists and is not a folder; give another --out")
    cases = make_cases(network, settings, job.seed)
    with progress.stage("synthetic ruptures") as report:
        rows = run_study(network, cases, out, settings.workers, options.scheduler, report)
    groups = _grouped(rows)
    # The trials file stays where it is, so that a longer study goes on from it; the summaries are replaced when whole.
    with output_folder(out, overwrite=True, holds="resolution.json") as folder:
        (folder / "resolution.json").write_text(json.dumps(groups, indent=1, allow_nan=False), encoding="utf-8")
        _write_rows(folder / "resolution.csv", rows)
        with progress.stage("figures"):
            from rupture.pictures.resolution import resolution_figure

            figure = resolution_figure(
                groups, rows, f"{len(network.sites)} sites, {network.event.name or 'planned earthquake'}"
            )
            for suffix in ("png", "pdf"):
                figure.savefig(folder / f"resolution.{suffix}")
    if options.json:
        print(json.dumps(groups, indent=1, allow_nan=False))
    else:
        for group in groups:
            print(f"{group['label']}: {group['sentence']}")
        print(f"See {out / 'resolution.csv'}. {SHORT_CAUTION}")
    return 0


def _job(options: argparse.Namespace) -> Job:
    """Return the job of a job file, or of the settings that a result carries."""
    if str(options.job or "").endswith(".nc"):
        from rupture.result import Result
        from rupture.settings import job_from_table

        options = argparse.Namespace(**vars(options))
        result = Result.load(options.job)
        where, options.job = options.job, None
        return job_from(options, job_from_table(result.settings, f"{where} (settings)"))
    return job_from(options)


def _grouped(rows: Sequence[dict[str, Any]]) -> list[dict[str, Any]]:
    groups: dict[tuple[float, float, str], list[dict[str, Any]]] = {}
    for row in rows:
        groups.setdefault((row["magnitude"], row["noise_factor"], row["without"]), []).append(row)
    return [
        {
            "label": f"M {m:g}, rotation noise x {f:g}" + (f", without {code}" if code else ""),
            "magnitude": m,
            "noise_factor": f,
            "without": code,
        }
        | summarise(part)
        for (m, f, code), part in groups.items()
    ]


def _write_rows(path: Path, rows: Sequence[dict[str, Any]]) -> None:
    names = list(dict.fromkeys(name for row in rows for name in row))
    with path.open("w", newline="", encoding="utf-8") as file:
        writer = csv.DictWriter(file, names, restval="")
        writer.writeheader()
        writer.writerows(rows)


def siting(options: argparse.Namespace) -> int:
    """Run `rupture siting`."""
    job = job_from(options)
    progress = Progress(options.quiet)
    event = load_event(job)
    if job.planned or not job.input.records:
        existing = [(p.longitude_deg, p.latitude_deg, p.components) for p in job.planned]
    else:
        inputs = load(job, progress)
        existing = [(s.longitude_deg, s.latitude_deg, s.kind) for s in inputs.sites]
    if options.candidates:
        candidates = read_candidates(options.candidates)
    else:
        half, spacing = options.candidate_grid
        if not 0 < spacing <= half:
            raise InputError(
                f"--candidate-grid {half:g} {spacing:g}: spacing must be positive and not above the half width"
            )
        candidates = candidate_grid(event, half, spacing)
    if event.magnitude is None:
        raise InputError("the event has no magnitude; give one with --magnitude")
    azimuths = None
    if job.input.trace is not None:
        longitude, latitude = read_trace(job.input.trace)
        _, azimuth, _ = distance_azimuth(longitude[0], latitude[0], longitude[-1], latitude[-1])
        azimuths = [float(np.degrees(azimuth))]
    points = rupture_points(subsurface_length_km(event.magnitude), azimuths)
    found = rank(event, existing, candidates, points, options.next, options.components)
    answer = [
        {"rank": k + 1, "code": c.code, "longitude_deg": round(c.longitude_deg, 5), "latitude_deg": round(c.latitude_deg, 5),
         "cost": c.cost, "error_area_shrinks_by": round(s, 3)}
        for k, (c, s) in enumerate(zip(found.chosen, found.shrink, strict=True))
    ]  # fmt: skip
    with output_folder(options.out, options.overwrite, holds="siting.json") as folder:
        (folder / "siting.json").write_text(json.dumps(answer, indent=1), encoding="utf-8")
        table = [
            {
                "code": c.code,
                "longitude_deg": c.longitude_deg,
                "latitude_deg": c.latitude_deg,
                "cost": c.cost,
                "error_area_shrinks_by": float(g),
            }
            for c, g in zip(candidates, found.single, strict=True)
        ]
        _write_rows(folder / "candidates.csv", table)
        with progress.stage("figures"):
            from rupture.pictures.resolution import siting_figure

            figure = siting_figure(event, existing, candidates, found)
            for suffix in ("png", "pdf"):
                figure.savefig(folder / f"siting.{suffix}")
    if options.json:
        print(json.dumps(answer, indent=1))
    else:
        for row in answer:
            print(
                f"{row['rank']}. {row['code']} at {row['longitude_deg']:.3f}, {row['latitude_deg']:.3f}: "
                f"the error area of the front's place shrinks by a factor {row['error_area_shrinks_by']:.2f}"
            )
        print(f"See {Path(options.out) / 'siting.png'}. {SHORT_CAUTION}")
    return 0
