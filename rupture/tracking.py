"""`rupture track`: from directions to the map, the front, the fit and the result."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rupture import datasets
from rupture.conventions import KM
from rupture.cross_checks import directivity_summary, resampling_summary
from rupture.direction import SiteDirection
from rupture.errors import DataError
from rupture.front import (
    FrontTrack,
    RuptureFit,
    fit_rupture,
    front_positions,
    predicted_back_azimuths,
    prior_for,
    smooth_front,
)
from rupture.front.lines import PARAMETERS, LinePrior
from rupture.geodesy import LocalPlane, distance_azimuth
from rupture.inverting import EnergyStage, agreement, energy_stage
from rupture.mapping import Geometry, Grid, Stack, map_grid, read_trace, site_geometry, stack_rays, trace_grid
from rupture.progress import Progress
from rupture.result import Result
from rupture.run import Inputs, directions, event_summary, load, provenance, quality_rows, site_rows, site_summaries
from rupture.settings import Job

Array = NDArray[np.float64]

DRAWS = 600
"""Draws of the posterior that a result keeps."""


@dataclass(frozen=True)
class Tracked:
    """The numeric outcome of the stages, before it is labelled."""

    directions: tuple[SiteDirection, ...]
    position: NDArray[np.int64]
    grid: Grid
    stack: Stack
    front: FrontTrack
    fit: RuptureFit


def run_track(job: Job, progress: Progress) -> Result:
    """Run all stages of a job and return the result.

    Raises
    ------
    InputError, DataError
        With a sentence for people; DataError when one site is left and there is no fault trace.
    """
    inputs = load(job, progress)
    found, position, refused = directions(job, inputs, progress)
    grid, prior = _where(job, inputs)
    if len(found) < 2 and grid.kind == "map":
        reasons = [f"{code}: {why}" for code, why in refused.items()]
        reasons += [f"{v.code}: {v.reason}" for v in inputs.site_set.verdicts if not v.used]
        raise DataError(
            f"only one site ({found[0].code}) gives a direction; a map needs two, or give the fault trace with --trace"
            + ("\n  " + "\n  ".join(reasons) if reasons else "")
        )
    tracked = stack_and_fit(job, inputs, found, position, grid, prior, progress)
    energy = None
    if job.energy.on:
        energy = energy_stage(job, inputs, position, grid, float(tracked.stack.source_time_s[-1]), progress)
    reliability = None
    if job.null_tests.ruptures:
        from rupture.resolution.null_tests import run_null_tests

        with progress.stage("null tests") as report:
            reliability = run_null_tests(job, inputs, tracked, prior, report)
    with progress.stage("resampling") as report:
        resampling = resampling_summary(job, inputs, tracked, prior, report)
    with progress.stage("durations"):
        durations = directivity_summary(inputs, tracked, prior)
    checks = {"resampling": resampling, "directivity": durations}
    return label(job, inputs, tracked, refused, reliability, checks, progress, energy)


def _where(job: Job, inputs: Inputs) -> tuple[Grid, LinePrior]:
    prior = prior_for(inputs.event)
    if job.input.trace is None:
        return map_grid(inputs.event, job.map.half_width_km, job.map.spacing_km), prior
    longitude, latitude = read_trace(job.input.trace)
    grid = trace_grid(inputs.event, longitude, latitude, job.map.spacing_km)
    _, azimuth, _ = distance_azimuth(longitude[0], latitude[0], longitude[-1], latitude[-1])
    return grid, replace(prior, axis_rad=float(azimuth))


def cell_geometry(inputs: Inputs, position: NDArray[np.int64], grid: Grid) -> Geometry:
    """Return the geometry of cells and sites, times and slownesses being those of the strongest P and S.

    The first arrival beyond the crossover distance is a weak refracted wave; windows show the strongest.
    """
    sites = [inputs.sites[k] for k in position]
    geometry = site_geometry(grid, [s.longitude_deg for s in sites], [s.latitude_deg for s in sites], inputs.earth)
    waves = {phase: inputs.responses.strongest(phase) for phase in ("P", "S")}
    at = inputs.responses.at
    return replace(
        geometry,
        travel_time_s={phase: at(time, geometry.distance_m) for phase, (time, _) in waves.items()},
        slowness_s_m={phase: at(slowness, geometry.distance_m) for phase, (_, slowness) in waves.items()},
    )


def stack_and_fit(
    job: Job,
    inputs: Inputs,
    found: Sequence[SiteDirection],
    position: NDArray[np.int64],
    grid: Grid,
    prior: LinePrior,
    progress: Progress,
) -> Tracked:
    """Stack the rays, smooth the frames and fit line sources."""
    until = job.map.frames_until_s or float(np.clip(1.6 * prior.length_m / 2500.0, 20.0, 600.0))
    frames = np.arange(-5.0 * job.map.frame_s, until + 0.5 * job.map.frame_s, job.map.frame_s)
    with progress.stage("ray stack") as report:
        geometry = cell_geometry(inputs, position, grid)
        clocks = [inputs.sites[k].time_error_s for k in position]
        onsets = inputs.s_arrival_s[position].tolist()
        stack = stack_rays(found, grid, geometry, onsets, frames, job.stack, report, clocks)
    with progress.stage("front"):
        overlap = float(np.mean([d.weight.mean() for d in found])) * job.map.frame_s / job.direction.hop_s
        front = smooth_front(stack.log_ratio, frames, grid, min(1.0, overlap), job.smooth)
    with progress.stage("line-source fit") as report:
        sites = [inputs.sites[k] for k in position]
        fit = fit_rupture(
            found, [s.longitude_deg for s in sites], [s.latitude_deg for s in sites], inputs.event, inputs.responses,
            job.fit, job.seed, report, prior,
        )  # fmt: skip
    # Coda keeps frames coherent after the rupture has ended; when it ends, the fit of powers and directions knows better.
    active = radiating_probability(fit, frames)
    share = front.probability / np.maximum(front.probability.sum(axis=0), 1e-300)
    front = replace(front, probability=share * active, active=active)
    return Tracked(tuple(found), position, grid, stack, front, fit)


def radiating_probability(fit: RuptureFit, source_time_s: Array) -> Array:
    """Return the probability that the rupture radiates at source times, over the draws of all kinds, shape (F,)."""
    total = np.zeros(source_time_s.size)
    for kind, share in fit.kind_probability.items():
        start, length, rise = (
            fit.column(name, kind)[:, None] for name in ("start_time_s", "duration_s", "rise_time_s")
        )
        total += share * ((source_time_s >= start) & (source_time_s <= start + length + rise)).mean(axis=0)
    return total


def rupture_summary(fit: RuptureFit) -> dict[str, Any]:
    """Return the answer of a fit as summary.json holds it."""
    kind = fit.likeliest
    moving = kind != "stationary"
    return {
        "kind": fit.kind,
        "kind_probability": {name: round(p, 4) for name, p in fit.kind_probability.items()},
        "reason": fit.reason,
        "direction_deg": _interval(fit, "azimuth_rad", 180 / np.pi) if moving else None,
        "speed_km_s": _interval(fit, "speed_m_s", 1 / KM) if moving else None,
        "length_km": _interval(fit, "length_m", 1 / KM) if moving else None,
        "duration_s": _interval(fit, "duration_s", 1.0),
        "second_arm": {
            "direction_deg": _interval(fit, "second_azimuth_rad", 180 / np.pi),
            "speed_km_s": _interval(fit, "second_speed_m_s", 1 / KM),
            "length_km": _interval(fit, "second_length_m", 1 / KM),
        }
        if kind == "bilateral"
        else None,
    }


def _interval(fit: RuptureFit, name: str, scale: float) -> dict[str, float]:
    return {key: round(float(v) * scale, 3) for key, v in zip(("best", "p05", "p95"), fit.interval(name), strict=True)}


def label(
    job: Job,
    inputs: Inputs,
    tracked: Tracked,
    refused: dict[str, str],
    reliability: dict[str, Any] | None,
    checks: dict[str, Any],
    progress: Progress,
    energy: EnergyStage | None = None,
) -> Result:
    """Put names, units and the summary on what the stages found."""
    rows = site_rows(inputs, refused)
    grid, stack, front = tracked.grid, tracked.stack, tracked.front
    direction = datasets.direction_dataset(tracked.directions)
    cells = {
        "location_probability": (
            stack.location_probability,
            "1",
            "probability that the energy of the frame came from the cell",
        ),
        "smoothed_probability": (front.probability, "1", "the same given all frames and the bound on front speed"),
        "energy_proxy": (stack.energy, "1", "location probability times spreading- and site-corrected power, relative"),
    }
    rupture = rupture_summary(tracked.fit)
    summary = {
        "event": event_summary(inputs.event),
        "sites": site_summaries(rows),
        # Pictures draw it beside the front: a rupture faster than this outruns its own S waves.
        "rupture": {**rupture, "s_speed_km_s": round(inputs.earth.s_speed_km_s(inputs.event.depth_km), 3)},
        "reliability": reliability,
        "agreement": agreement(rupture, energy),
        **checks,
        "provenance": provenance(job, progress),
    }
    return Result(
        summary,
        datasets.site_dataset(rows),
        direction,
        datasets.map_dataset(grid, stack.source_time_s, cells, {"no_source_probability": stack.no_source}),
        None if energy is None else energy.dataset,
        track_dataset(inputs, tracked, np.asarray(direction["time"].values)),
        quality_rows(inputs.site_set),
        job.as_table(),
        tuple(inputs.sites),
    )


def track_dataset(inputs: Inputs, tracked: Tracked, time_s: Array) -> Any:
    """Return the track group of a result."""
    import xarray as xr

    front, fit, grid = tracked.front, tracked.fit, tracked.grid
    plane = LocalPlane(inputs.event.longitude_deg, inputs.event.latitude_deg)
    longitude, latitude = plane.to_geographic(front.east_m, front.north_m)
    best = fit.best()
    east, north, run = front_positions(best, front.source_time_s)
    sites = [inputs.sites[k] for k in tracked.position]
    curves = predicted_back_azimuths(
        best, inputs.event, [s.longitude_deg for s in sites], [s.latitude_deg for s in sites], inputs.responses, time_s
    )
    alive = np.isfinite(run)
    lon, lat = np.full((2, *run.shape), np.nan)
    lon[alive], lat[alive] = plane.to_geographic(east[alive], north[alive])
    along, share = datasets.along_axis_probability(
        grid, tracked.stack.location_probability, float(best[PARAMETERS.index("azimuth_rad")])
    )
    covariance = front.covariance_m2 / KM**2
    put = datasets.labelled
    sample, kind = _draws(fit)
    known = front.active > 1e-6
    variables = {
        "longitude": put("source_time", np.where(known, longitude, np.nan), "degrees_east"),
        "latitude": put("source_time", np.where(known, latitude, np.nan), "degrees_north"),
        "east": put("source_time", np.where(known, front.east_m / KM, np.nan), "km"),
        "north": put("source_time", np.where(known, front.north_m / KM, np.nan), "km"),
        "covariance_ee": put("source_time", covariance[:, 0, 0], "km2"),
        "covariance_nn": put("source_time", covariance[:, 1, 1], "km2"),
        "covariance_en": put("source_time", covariance[:, 0, 1], "km2"),
        "active_probability": put("source_time", front.active, "1", "probability that the rupture still radiates"),
        "front_longitude": put("arm source_time", lon, "degrees_east"),
        "front_latitude": put("arm source_time", lat, "degrees_north"),
        "front_distance": put("arm source_time", run / KM, "km"),
        "predicted_back_azimuth": put("arm site time", np.degrees(curves), "degrees"),
        "along_probability": put("source_time along", share),
        "sample": put("draw parameter", sample),
        "kind": ("draw", kind),
    }
    return xr.Dataset(
        variables,
        coords={
            "source_time": datasets.coordinate("source_time", front.source_time_s),
            "time": datasets.coordinate("time", time_s),
            "along": datasets.coordinate("along", along),
            "site": [d.code for d in tracked.directions],
            "arm": np.arange(run.shape[0]),
            "parameter": [name for name, _ in _SAMPLED],
        },
    )


_SAMPLED = (
    ("azimuth_deg", "azimuth_rad"), ("speed_km_s", "speed_m_s"), ("length_km", "length_m"), ("duration_s", "duration_s"),
    ("start_time_s", "start_time_s"), ("second_azimuth_deg", "second_azimuth_rad"),
    ("second_speed_km_s", "second_speed_m_s"), ("second_length_km", "second_length_m"),
)  # fmt: skip


def _draws(fit: RuptureFit) -> tuple[Array, NDArray[np.str_]]:
    """Draws of all kinds in proportion to their probabilities, in the units of their names."""
    rows, kinds = [], []
    for name, share in fit.kind_probability.items():
        draws = fit.samples[name]
        chosen = np.linspace(0, draws.shape[0] - 1, round(share * DRAWS)).astype(int)
        scale = [180 / np.pi if label.endswith("_deg") else 1 / KM if "_km" in label else 1.0 for label, _ in _SAMPLED]
        columns = [fit.parameters.index(parameter) for _, parameter in _SAMPLED]
        rows.append(draws[chosen][:, columns] * scale)
        kinds += [name] * chosen.size
    return np.concatenate(rows), np.array(kinds)
