"""Make docs/resolution.md: what a network resolves of random ruptures, against the truth, and what one more site is worth.

Run as `python docs/generate_resolution.py --folder FOLDER [--ruptures N]`; half an hour for 60 on one core. Every rupture
leaves a file in FOLDER, so that a longer run goes on from a shorter one.

Records are those of the ray engine in the crust of `rupture demo`, with scattered coda of 0.15 to 0.3 of the direct energy
and the noise of each site's sensors; the fit believes in ak135. Sites are the eight of the demo.
"""

from __future__ import annotations

import argparse
import json
import time
from collections.abc import Callable
from dataclasses import replace
from functools import partial
from pathlib import Path
from typing import Any

import numpy as np
from scipy.stats import spearmanr

from rupture.conventions import KM
from rupture.direction import DirectionSettings, SiteDirection, estimate_direction
from rupture.earth import build_earth
from rupture.front import FitSettings, RuptureFit, fit_rupture, prior_for
from rupture.geodesy import destination, distance_azimuth
from rupture.mapping.grid import subsurface_length_km
from rupture.resolution.ensemble import Network, Trial
from rupture.resolution.null_tests import KINDS, in_short, make_trials
from rupture.resolution.planned import planned_sites
from rupture.resolution.settings import PlannedSite
from rupture.resolution.siting import Candidate, rank, rupture_points
from rupture.resolution.study import TRIALS_NAME, Case, run_study
from rupture.synthetic import read_scenario
from rupture.synthetic.coda import CodaSettings
from rupture.synthetic.responses import ray_responses

SEED = 41
PAGE = Path(__file__).parent / "resolution.md"
FIRST_SITES = ("TYSSE", "ELGOT", "ISKA")
"""Sites of the small network to which candidates are added."""

SPREAD_KM = 50.0
"""How well the place of a front is known before any site is asked, as `rank` takes it."""


def demo_network(extra: tuple[PlannedSite, ...] = ()) -> Network:
    """Return the demo's sites, and others, as an experiment with the full settings of a run."""
    scenario = read_scenario("demo")
    # Strike follows each rupture's azimuth.
    event = replace(scenario.as_event(), mechanism_deg=None)
    planned = [
        PlannedSite(
            s.code, s.longitude_deg or 0.0, s.latitude_deg or 0.0, "Z+rotH" if s.array else s.components,
            "array-derived" if s.array else s.rotation, s.translation,
        )
        for s in scenario.site
    ]  # fmt: skip
    planned += extra
    places = [p.longitude_deg for p in planned], [p.latitude_deg for p in planned]
    longest_km = float(distance_azimuth(event.longitude_deg, event.latitude_deg, *places)[0].max()) / KM
    sites = planned_sites(planned, longest_km, SEED)
    responses = ray_responses(build_earth("ak135").layers, event.depth_km, longest_km + 600.0)
    return Network(
        event, sites, tuple((s.start_s, 0.0) for s in sites), scenario.model(), responses,
        DirectionSettings(), FitSettings(), prior_for(event), CodaSettings(waves=40),
    )  # fmt: skip


def with_coda(network: Network, k: int) -> Network:
    """Return the network with the scattering of rupture k."""
    ratio = float(np.random.default_rng((SEED, k)).uniform(0.15, 0.3))
    return replace(network, coda=replace(network.coda, energy_ratio=ratio))


def fit_row(trial: Trial, fit: RuptureFit) -> dict[str, Any]:
    """Return kind, errors and whether intervals hold the truth; of the longer arm, as of the true kind."""
    row: dict[str, Any] = {"kind": trial.kind, "found": fit.kind, "likeliest": fit.likeliest}
    if trial.kind == "stationary":
        return row
    names = ("azimuth_rad", "speed_m_s", "length_m")
    azimuth, speed, length = (fit.interval(name, trial.kind) for name in names)
    width = (azimuth[2] - azimuth[1]) % (2 * np.pi)
    off = (np.degrees(azimuth[0]) - trial.azimuth_deg + 180) % 360 - 180
    row |= {
        "direction_error_deg": round(abs(float(off)), 2),
        "direction_width_deg": round(float(np.degrees(width)), 2),
        "direction_held": bool((np.radians(trial.azimuth_deg) - azimuth[1]) % (2 * np.pi) <= width),
    }
    for name, (best, low, high), truth in (
        ("speed", speed, KM * trial.speed_km_s),
        ("length", length, KM * trial.length_km),
    ):
        row[f"{name}_error"] = round(best / truth - 1, 4)
        row[f"{name}_held"] = bool(low <= truth <= high)
    return row


def kept(path: Path, make: Callable[[], dict[str, Any]]) -> dict[str, Any]:
    """Return what a file holds, or make it and leave it there whole."""
    if not path.is_file():
        part = path.with_suffix(".part")
        part.write_text(json.dumps(make()), encoding="utf-8")
        part.replace(path)
    found: dict[str, Any] = json.loads(path.read_text(encoding="utf-8"))
    return found


def run_rupture(network: Network, trial: Trial, k: int) -> dict[str, Any]:
    """Simulate and fit rupture k with the full settings, and again as null tests do."""
    network = with_coda(network, k)
    magnitude = float(network.event.magnitude or 7.3)
    records = network.records(trial, magnitude)
    start = time.process_time()
    fit = network.track(records, trial.seed)
    seconds = time.process_time() - start
    assert fit is not None
    direction, short = in_short(network.direction, network.fit)
    brief = replace(network, direction=direction, fit=short)
    start = time.process_time()
    quick = brief.track(brief.records(trial, magnitude), trial.seed)
    assert quick is not None
    return {
        "full": fit_row(trial, fit),
        "short": fit_row(trial, quick),
        "full_s": round(seconds, 2),
        "short_s": round(time.process_time() - start, 2),
    }


def candidate_sites() -> tuple[Candidate, ...]:
    """Return ten places about the epicentre."""
    event = read_scenario("demo").as_event()
    rng = np.random.default_rng((SEED, 10))
    distance = KM * np.exp(rng.uniform(np.log(40), np.log(250), 10))
    azimuth = 2 * np.pi * (np.arange(10) + rng.uniform(0, 1, 10)) / 10
    lon, lat = destination(event.longitude_deg, event.latitude_deg, azimuth, distance)
    return tuple(Candidate(f"K{k}", float(a), float(b)) for k, (a, b) in enumerate(zip(lon, lat, strict=True)))


def front_error(fit: RuptureFit, trial: Trial) -> float:
    """Return the mean log of the error area of the front's place about the truth, at four times of a one-way rupture."""
    east, north, start, azimuth, speed, length = (
        fit.column(name, "unilateral")
        for name in ("east_m", "north_m", "start_time_s", "azimuth_rad", "speed_m_s", "length_m")
    )
    truth = np.array([np.sin(np.radians(trial.azimuth_deg)), np.cos(np.radians(trial.azimuth_deg))])
    areas = []
    for share in (0.25, 0.5, 0.75, 1.0):
        reach = share * trial.length_km * KM
        run = np.clip(speed * (reach / (KM * trial.speed_km_s) - start), 0.0, length)
        off = np.stack([east + run * np.sin(azimuth), north + run * np.cos(azimuth)]) - (reach * truth)[:, None]
        spread = off @ off.T / off.shape[1]
        # As `rank` counts it: what is known beforehand bounds the area.
        information = np.linalg.inv(spread) + np.eye(2) / (SPREAD_KM * KM) ** 2
        areas.append(-0.5 * np.log(np.linalg.det(information)))
    return float(np.mean(areas))


def run_siting(network: Network, trial: Trial, k: int) -> dict[str, Any]:
    """Return the front's error area of the small network alone and with each candidate added, logs."""
    network = with_coda(network, k)
    direction, short = in_short(network.direction, network.fit)
    records = network.records(trial, float(network.event.magnitude or 7.3))
    found: dict[str, SiteDirection] = {
        s.code: estimate_direction(s, w, direction) for s, w in zip(records, network.noise_window_s, strict=True)
    }
    place = {s.code: (s.longitude_deg, s.latitude_deg) for s in records}

    def error(codes: tuple[str, ...]) -> float:
        lon, lat = zip(*(place[c] for c in codes), strict=True)
        use = [found[c] for c in codes]
        fit = fit_rupture(use, lon, lat, network.event, network.responses, short, trial.seed, prior=network.prior)
        return front_error(fit, trial)

    return {"alone": error(FIRST_SITES), "with": [error((*FIRST_SITES, c.code)) for c in candidate_sites()]}


def run_workers(network: Network, trials: list[Trial], folder: Path) -> dict[str, Any]:
    """Return seconds of the same study with one worker and with two, and whether the numbers are the same."""
    direction, short = in_short(network.direction, network.fit)
    network = replace(network, direction=direction, fit=short)
    cases = [Case(f"{k}", t, float(network.event.magnitude or 7.3), 1.0, "") for k, t in enumerate(trials)]
    seconds, rows = [], []
    network.track(network.records(trials[0], cases[0].magnitude), 0)
    for workers in (1, 2):
        where = folder / f"workers_{workers}"
        (where / TRIALS_NAME).unlink(missing_ok=True)
        start = time.perf_counter()
        rows.append(run_study(network, cases, where, workers))
        seconds.append(round(time.perf_counter() - start, 1))
    return {"ruptures": len(cases), "seconds": seconds, "same": rows[0] == rows[1]}


def coverage_table(rows: list[dict[str, Any]], which: str) -> list[str]:
    """Return the table of kinds, errors and coverage in Markdown."""
    lines = [
        "| rupture | number | kind right, undetermined, wrong | direction (deg), held | speed, held | length, held |",
        "| --- | --- | --- | --- | --- | --- |",
    ]
    for kind in KINDS:
        fits = [r[which] for r in rows if r[which]["kind"] == kind]
        right, unsure = (sum(f["found"] == name for f in fits) for name in (kind, "undetermined"))
        cells = [kind, f"{len(fits)}", f"{right}, {unsure}, {len(fits) - right - unsure}"]
        for name, key, scale, unit in (
            ("direction", "direction_error_deg", 1.0, ""),
            ("speed", "speed_error", 100.0, " %"),
            ("length", "length_error", 100.0, " %"),
        ):
            if kind == "stationary" or not fits:
                cells.append("none")
                continue
            error = scale * np.abs([f[key] for f in fits])
            held = [f[f"{name}_held"] for f in fits]
            cells.append(
                f"{np.median(error):.1f} / {np.percentile(error, 90):.1f}{unit}, {sum(held)} of {len(held)} ({np.mean(held):.2f})"
            )
        lines.append("| " + " | ".join(cells) + " |")
    return lines


def page(rows: list[dict[str, Any]], siting: list[dict[str, Any]], workers: dict[str, Any]) -> str:
    """Return the page in Markdown."""
    still = [r["full"] for r in rows if r["full"]["kind"] == "stationary"]
    false = sum(f["found"] in ("unilateral", "bilateral") for f in still)

    def named(which: str) -> int:
        return sum(r[which]["found"] == r[which]["kind"] for r in rows)

    swapped = sum(r["full"]["kind"] == "bilateral" and r["full"]["direction_error_deg"] > 150 for r in rows)
    network = demo_network()
    candidates = candidate_sites()
    existing = [(s.longitude_deg, s.latitude_deg, s.kind) for s in network.sites if s.code in FIRST_SITES]
    points = rupture_points(subsurface_length_km(float(network.event.magnitude or 7.3)), None)
    predicted = rank(network.event, existing, candidates, points, 1, prior_sigma_km=SPREAD_KM).single
    measured = np.exp(np.mean([np.array(s["alone"]) - np.array(s["with"]) for s in siting], axis=0))
    correlation = spearmanr(predicted, measured)
    distance, azimuth, _ = distance_azimuth(
        network.event.longitude_deg, network.event.latitude_deg,
        [c.longitude_deg for c in candidates], [c.latitude_deg for c in candidates],
    )  # fmt: skip
    head = f"""# What a network resolves

{len(rows)} random ruptures of magnitude 7.3 at the eight sites of `rupture demo`: a third never move, a third run one way, a third both
ways, with any azimuth, 1.8 to 4.5 km/s, and lengths that scatter by 20 %. Records come from the ray engine in the demo's crust, with
coda of 0.15 to 0.3 of the direct energy and the noise of each site's sensors; the fit believes in ak135. Errors are medians / nine in
ten; "held" counts truths inside p05 to p95, which claims 0.90 and scatters by {np.sqrt(0.09 * 3 / len(rows)):.2f} from one such set of
ruptures to another. Numbers of two-way ruptures are those of the longer arm, and all are
read off the fit of the true kind. Made by `python docs/generate_resolution.py --folder FOLDER --ruptures {len(rows)}`.

## With the settings of a run
"""
    middle = f"""
Of {len(still)} ruptures that never moved, {false} were called a moving one. In {swapped} of the two-way ruptures the fit took the other arm for the
longer one (more than 150 degrees off); each counts as a direction missed, and as not held.

## As null tests and `rupture resolve` fit them

A fifth of the draws, one move of each at a temperature, windows 2 s apart; each rupture took {np.mean([r["short_s"] for r in rows]):.1f} s of one core with its records,
against {np.mean([r["full_s"] for r in rows]):.1f} s for a fit with the settings of a run. It named {named("short")} of
{len(rows)} kinds rightly against {named("full")}: rates of null tests are those of this quicker fit.
"""
    ends = f"""
A study of {workers["ruptures"]} such ruptures took {workers["seconds"][0]:.0f} s with one worker and {workers["seconds"][1]:.0f} s with two
on two cores, start of the processes included; numbers {"are the same" if workers["same"] else "differ"}.

## What one more site is worth

`rupture siting` predicts how much one more site shrinks the error area of a front's place. Here {", ".join(FIRST_SITES)} are there
already and each of ten places is added in turn. Measured is the same factor of the draws of the fit about the truth, the geometric mean
over {len(siting)} one-way ruptures in all directions. Spearman's rank correlation is {correlation.statistic:.2f}
(p = {correlation.pvalue:.2g}); the predicted factor is {np.median(predicted / measured):.2f} times the measured one in the median and
{np.max(predicted / measured):.2f} times at most, so read ranks rather than factors. Likely the reason: the prediction takes windows one by one; the fit, which puts all
of them on one line, has less left to learn.

| place | distance (km) | azimuth (deg) | predicted | measured |
| --- | --- | --- | --- | --- |
"""
    places = [
        f"| {c.code} | {d / KM:.0f} | {np.degrees(a) % 360:.0f} | {p:.2f} | {m:.2f} |"
        for c, d, a, p, m in zip(candidates, distance, azimuth, predicted, measured, strict=True)
    ]
    return (
        head + "\n" + "\n".join(coverage_table(rows, "full")) + "\n"
        + middle + "\n" + "\n".join(coverage_table(rows, "short")) + "\n" + ends + "\n".join(places) + "\n"
    )  # fmt: skip


def main() -> None:
    """Run what is not there yet and write the page."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--folder", type=Path, required=True, help="where the results of single ruptures are kept")
    parser.add_argument("--ruptures", type=int, default=60)
    parser.add_argument("--siting-ruptures", type=int, default=12)
    parser.add_argument("--seconds", type=float, default=np.inf, help="start no further rupture after this long")
    given = parser.parse_args()
    folder: Path = given.folder
    folder.mkdir(parents=True, exist_ok=True)
    until = time.monotonic() + given.seconds
    length_km = subsurface_length_km(float(read_scenario("demo").event.magnitude))
    network = demo_network()
    trials = make_trials(given.ruptures, length_km, SEED)
    one_way = [t for t in make_trials(3 * given.siting_ruptures, length_km, SEED + 1) if t.kind == "unilateral"]
    workers = kept(folder / "workers.json", lambda: run_workers(network, trials[:6], folder))
    wider = demo_network(tuple(PlannedSite(c.code, c.longitude_deg, c.latitude_deg) for c in candidate_sites()))
    siting: list[dict[str, Any]] = []
    rows: list[dict[str, Any]] = []
    # One of each sort in turn, so that a run cut short still holds both.
    for k in range(max(len(trials), len(one_way))):
        for some, name, run, some_network, out in (
            (trials, "rupture", run_rupture, network, rows),
            (one_way, "siting", run_siting, wider, siting),
        ):
            path = folder / f"{name}_{k:04d}.json"
            if k >= len(some) or (time.monotonic() > until and not path.is_file()):
                continue
            out.append(kept(path, partial(run, some_network, some[k], k)))
    PAGE.write_text(page(rows, siting, workers), encoding="utf-8")
    print(PAGE.read_text(encoding="utf-8"))


if __name__ == "__main__":
    main()
