"""What each command of the command line does."""

from __future__ import annotations

import argparse
import json
import sys
from dataclasses import replace
from pathlib import Path
from typing import Any

from rupture.energy.settings import EnergySettings
from rupture.errors import DataError, InputError
from rupture.folder import output_folder
from rupture.progress import Progress
from rupture.result import Result
from rupture.settings import InputSettings, Job, NullTestSettings, read_job, with_whole_paths
from rupture.wording import SHORT_CAUTION, answer_sentences

DEMO_NULL_TESTS = 12
"""The demo shows what null tests say; an answer that counts wants the default of a run."""


def job_from(options: argparse.Namespace, base: Job | None = None) -> Job:
    """Return the job of a command line; options given there win over the job file, or over `base`."""
    job = base or (read_job(options.job) if options.job else Job())
    given: dict[str, Any] = {}
    if options.records:
        given["records"] = tuple(options.records)
    if options.inventory:
        given["inventory"] = tuple(options.inventory)
    if options.event:
        given |= {"event": options.event, "origin": None}
    if options.origin:
        given |= {"origin": tuple(options.origin)} | ({} if options.event else {"event": None})
    if options.magnitude is not None:
        given["magnitude"] = options.magnitude
    if options.mechanism:
        given["mechanism_deg"] = tuple(options.mechanism)
    if getattr(options, "trace", None):
        given["trace"] = options.trace
    if given:
        job = replace(job, input=_changed(job.input, given))
    if options.earth:
        job = replace(job, earth=replace(job.earth, model=options.earth))
    if options.band:
        job = replace(job, direction=replace(job.direction, bands_hz=tuple(tuple(b) for b in options.band)))
    if options.array:
        job = replace(job, records=replace(job.records, arrays=tuple(tuple(a) for a in options.array)))
    if options.seed is not None:
        if options.seed < 0:
            raise InputError("--seed must be a whole number from 0 up")
        job = replace(job, seed=options.seed)
    return with_whole_paths(_map_options(job, options))


def _changed(given: InputSettings, changes: dict[str, Any]) -> InputSettings:
    return replace(given, **changes)


def _map_options(job: Job, options: argparse.Namespace) -> Job:
    changes: dict[str, Any] = {
        name: value
        for name, value in (
            ("half_width_km", getattr(options, "half_width", None)),
            ("spacing_km", getattr(options, "spacing", None)),
        )
        if value is not None
    }
    if changes:
        job = replace(job, map=replace(job.map, **changes))
    return replace(job, null_tests=_null_tests(job.null_tests, options), energy=_energy(job.energy, options))


def _energy(settings: EnergySettings, options: argparse.Namespace) -> EnergySettings:
    return replace(settings, on=False) if getattr(options, "no_energy", False) else settings


def _null_tests(settings: NullTestSettings, options: argparse.Namespace) -> NullTestSettings:
    if getattr(options, "no_null_tests", False):
        return NullTestSettings(0)
    if getattr(options, "null_tests", None) is not None:
        return NullTestSettings(options.null_tests)
    return settings


def track(options: argparse.Namespace) -> int:
    """Run `rupture track`."""
    from rupture.tracking import run_track

    job = job_from(options)
    progress = Progress(options.quiet)
    with output_folder(options.out, options.overwrite) as folder:
        result = run_track(job, progress)
        leave_track(result, folder, progress)
    _answer(result, options)
    return 0


def direction(options: argparse.Namespace) -> int:
    """Run `rupture direction`."""
    from rupture import datasets
    from rupture.exports import write_direction_csv
    from rupture.run import directions, event_summary, load, provenance, quality_rows, site_rows, site_summaries

    job = job_from(options)
    progress = Progress(options.quiet)
    with output_folder(options.out, options.overwrite) as folder:
        inputs = load(job, progress)
        found, _, refused = directions(job, inputs, progress)
        rows = site_rows(inputs, refused)
        summary = {
            "event": event_summary(inputs.event), "sites": site_summaries(rows), "rupture": None, "reliability": None,
            "agreement": None, "provenance": provenance(job, progress),
        }  # fmt: skip
        result = Result(
            summary, datasets.site_dataset(rows), datasets.direction_dataset(found),
            quality=quality_rows(inputs.site_set), settings=job.as_table(), records=tuple(inputs.sites),
        )  # fmt: skip
        with progress.stage("tables"):
            result.save(folder / "result.nc")
            write_direction_csv(result, folder / "direction.csv")
            _texts(result, folder)
        _draw(result, folder, progress)
    _answer(result, options)
    return 0


def check(options: argparse.Namespace) -> int:
    """Run `rupture check`."""
    from rupture.records import read_sites
    from rupture.run import load_event, quality_rows

    job = job_from(options)
    if not job.input.records or not job.input.inventory:
        raise InputError("give record files with --records and station metadata with --inventory")
    settings = replace(job.records, need_rotation=False)
    with Progress(options.quiet).stage("records") as report:
        site_set = read_sites(job.input.records, job.input.inventory, load_event(job), settings, report)
    verdicts = [
        {"site": v.code, "components": v.components, "used": v.used, "reason": v.reason, "summary": v.summary,
         "corrections": [c.note for c in v.corrections if c.noticed or c.applied]}
        for v in site_set.verdicts
    ]  # fmt: skip
    if options.json:
        print(json.dumps({"sites": verdicts, "channels": quality_rows(site_set)}, indent=1, allow_nan=False))
    else:
        print_quality(quality_rows(site_set), verdicts)
    return 0 if any(v["used"] for v in verdicts) else DataError.exit_code


def print_quality(channels: list[dict[str, Any]], verdicts: list[dict[str, Any]]) -> None:
    """Print the quality table and the verdicts on stdout."""
    from rich.console import Console
    from rich.table import Table

    console = Console(width=None if sys.stdout.isatty() else 160, highlight=False, markup=False)
    table = Table(title="Channels")
    for name in ("channel", "found", "done", "missing", "SNR", "used"):
        table.add_column(name, overflow="fold")
    for row in channels:
        used = "yes" if row["used"] else f"no: {row['reason']}"
        snr = "" if row["snr"] is None else f"{row['snr']:g}"
        table.add_row(row["channel"] or row["site"], row["found"], row["done"], row["missing"], snr, used)
    console.print(table)
    sites = Table(title="Sites")
    for name in ("site", "components", "used", "verdict"):
        sites.add_column(name, overflow="fold")
    for v in verdicts:
        words = [v["summary"], *v["corrections"]]
        sites.add_row(
            v["site"], v["components"], "yes" if v["used"] else f"no: {v['reason']}", "; ".join(w for w in words if w)
        )
    console.print(sites)


def demo(options: argparse.Namespace) -> int:
    """Run `rupture demo`: write the invented earthquake's files, then track them as any user's."""
    from rupture.synthetic import demo_scenario
    from rupture.synthetic.simulate import simulate as write_files
    from rupture.tracking import run_track

    progress = Progress(options.quiet)
    with output_folder(options.out, options.overwrite) as folder:
        files = write_files(demo_scenario(), folder / "input", progress)
        job = Job(input=InputSettings((str(files.records[0].parent),), (str(files.inventory),), str(files.event)))
        job = replace(
            job, null_tests=_null_tests(NullTestSettings(DEMO_NULL_TESTS), options), energy=_energy(job.energy, options)
        )
        result = run_track(job, progress)
        result = moved(result, str(folder), str(Path(options.out).absolute()))
        leave_track(result, folder, progress)
    _answer(result, options)
    truth = json.loads((Path(options.out) / "input" / "truth.json").read_text(encoding="utf-8"))["rupture"]
    print(f"The invented truth: {truth['kind']}, direction {truth['direction_deg']:.0f} deg, "
          f"speed {truth['speed_km_s']:.1f} km/s, length {truth['length_km']:.0f} km.")  # fmt: skip
    return 0


def moved(result: Result, scratch: str, final: str) -> Result:
    """Return the result with the scratch folder's paths replaced by where the files end up."""
    text = json.dumps([result.summary, result.settings]).replace(scratch, final)
    summary, settings = json.loads(text)
    return replace(result, summary=summary, settings=settings)


def simulate(options: argparse.Namespace) -> int:
    """Run `rupture simulate`."""
    from rupture.synthetic import read_scenario
    from rupture.synthetic.simulate import simulate as write_files

    scenario = read_scenario(options.scenario, seed=options.seed)
    files = write_files(scenario, options.out, Progress(options.quiet), options.overwrite)
    for path in (*files.records, files.inventory, files.event, files.truth):
        print(path)
    return 0


def template(options: argparse.Namespace) -> int:
    """Run `rupture template`."""
    from importlib import resources

    print((resources.files("rupture") / "templates" / f"{options.kind}.toml").read_text(encoding="utf-8"), end="")
    return 0


def redraw(options: argparse.Namespace) -> int:
    """Run `rupture redraw`."""
    progress = Progress(options.quiet)
    result = Result.load(options.result)
    with output_folder(options.out, options.overwrite, holds="report.html") as folder:
        _draw(
            result, folder, progress, style=options.style, overlays=options.overlay, formats=tuple(options.formats),
            columns=options.columns, movie_shape=options.movie_shape, movie_format=options.movie_format,
        )  # fmt: skip
    print(Path(options.out) / "report.html")
    return 0


def leave_track(result: Result, folder: Path, progress: Progress) -> None:
    """Write everything that a track leaves into a folder."""
    from rupture.exports import write_direction_csv, write_track_csv, write_track_geojson

    with progress.stage("tables"):
        write_direction_csv(result, folder / "direction.csv")
        write_track_csv(result, folder / "track.csv")
        write_track_geojson(result, folder / "track.geojson")
    _draw(result, folder, progress)
    result.summary["provenance"]["seconds"] = dict(progress.seconds)
    result.save(folder / "result.nc")
    _texts(result, folder)


def _texts(result: Result, folder: Path) -> None:
    import tomli_w

    (folder / "summary.json").write_text(json.dumps(result.summary, indent=1, allow_nan=False), encoding="utf-8")
    (folder / "job.toml").write_text(tomli_w.dumps(result.settings), encoding="utf-8")


def _draw(result: Result, folder: Path, progress: Progress, **look: Any) -> None:
    from rupture.pictures import draw_everything

    with progress.stage("pictures") as report:
        draw_everything(result, folder, progress=report, workers=2, **look)


def _answer(result: Result, options: argparse.Namespace) -> None:
    if getattr(options, "json", False):
        print(json.dumps(result.summary, indent=1, allow_nan=False))
        return
    for sentence in answer_sentences(result.summary):
        print(sentence)
    print(f"See {Path(options.out) / 'report.html'}. {SHORT_CAUTION}")
