"""`rupture resolve`: many synthetic ruptures at one network, kept one by one, so that a killed study goes on where it stopped."""

from __future__ import annotations

import hashlib
import json
import multiprocessing
import os
from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import ProcessPoolExecutor, as_completed
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

from rupture.errors import InputError
from rupture.mapping.grid import subsurface_length_km
from rupture.resolution.ensemble import Network, Trial, outcome
from rupture.resolution.null_tests import make_trials
from rupture.resolution.settings import StudySettings
from rupture.site import Site

TRIALS_NAME = "trials.jsonl"


@dataclass(frozen=True)
class Case:
    """One trial of a study."""

    key: str
    trial: Trial
    magnitude: float
    noise_factor: float
    without: str


def make_cases(network: Network, settings: StudySettings, seed: int) -> list[Case]:
    """Return all trials of a study; a case is the same whatever else the study covers."""
    magnitudes = settings.magnitudes or ((network.event.magnitude,) if network.event.magnitude is not None else ())
    if not magnitudes:
        raise InputError("the event has no magnitude; give one with --magnitude")
    axis = None if network.prior.axis_rad is None else float(network.prior.axis_rad) * 57.29577951308232
    left_out = ["", *(s.code for s in network.sites)] if settings.without and len(network.sites) > 1 else [""]
    return [
        Case(
            f"M{magnitude:g} noise{factor:g} {'without ' + code if code else 'all'} {k}", trial, magnitude, factor, code
        )
        for magnitude in magnitudes
        for factor in settings.noise_factors
        for code in left_out
        for k, trial in enumerate(make_trials(settings.ruptures, subsurface_length_km(magnitude), seed, axis))
    ]


def run_case(network: Network, case: Case) -> dict[str, Any]:
    """Simulate and track one case; numbers depend on the case alone."""
    keep = [k for k, s in enumerate(network.sites) if s.code != case.without]
    part = replace(
        network,
        sites=tuple(_noisier(network.sites[k], case.noise_factor) for k in keep),
        noise_window_s=tuple(network.noise_window_s[k] for k in keep),
    )
    length = subsurface_length_km(case.magnitude) * 1e3
    part = replace(part, prior=replace(part.prior, length_m=length, duration_s=max(2.0, 0.75 * length / 2800.0)))
    row = outcome(case.trial, part.track(part.records(case.trial, case.magnitude), case.trial.seed))
    return {
        "key": case.key,
        "magnitude": case.magnitude,
        "noise_factor": case.noise_factor,
        "without": case.without,
    } | row


def _noisier(site: Site, factor: float) -> Site:
    if factor == 1.0:
        return site
    data = site.data.copy()
    data[3:] *= factor
    return replace(site, data=data)


def run_study(
    network: Network,
    cases: Sequence[Case],
    folder: Path,
    workers: int = 2,
    scheduler: str | None = None,
    progress: Callable[[int, int], None] | None = None,
) -> list[dict[str, Any]]:
    """Run what is not yet in the folder's trials file and return all rows in the order of the cases.

    Parameters
    ----------
    network, cases
        The experiment.
    folder
        Where trials.jsonl lies; a row is appended as each case ends.
    workers
        Processes on this machine; 1 runs in this one.
    scheduler
        Address of a Dask scheduler to use instead.
    progress
        Called with (cases done, cases).

    Raises
    ------
    InputError
        When the folder holds trials of another study, or the scheduler cannot be reached.
    """
    folder.mkdir(parents=True, exist_ok=True)
    path = folder / TRIALS_NAME
    mark = _mark(network, cases)
    done = _read(path, mark)
    missing = [case for case in cases if case.key not in done]
    with path.open("a", encoding="utf-8") as file:
        if not done and path.stat().st_size == 0:
            file.write(json.dumps({"study": mark}) + "\n")
        for row in _results(network, missing, workers, scheduler):
            # One write per row: a killed study leaves at most one torn line, which is read as missing.
            file.write(json.dumps(row) + "\n")
            file.flush()
            done[row["key"]] = row
            if progress is not None:
                progress(len(done), len(cases))
    return [done[case.key] for case in cases]


def _results(network: Network, cases: list[Case], workers: int, scheduler: str | None) -> Iterator[dict[str, Any]]:
    if scheduler is not None:
        yield from _on_cluster(network, cases, scheduler)
    elif workers == 1 or len(cases) < 2:
        for case in cases:
            yield run_case(network, case)
    else:
        context = multiprocessing.get_context("spawn")
        with ProcessPoolExecutor(workers, context, _start_worker, (network,)) as pool:
            # Workers take a core each: the compiled loops must not start threads of their own on top.
            for future in as_completed([pool.submit(_work, case) for case in cases]):
                yield future.result()


_network: Network | None = None


def _start_worker(network: Network) -> None:
    global _network
    _network = network
    import numba

    numba.set_num_threads(1)
    os.environ["OMP_NUM_THREADS"] = "1"


def _work(case: Case) -> dict[str, Any]:
    assert _network is not None
    return run_case(_network, case)


def _on_cluster(network: Network, cases: list[Case], scheduler: str) -> Iterator[dict[str, Any]]:
    try:
        from distributed import Client
        from distributed import as_completed as completed
    except ImportError:
        raise InputError("--scheduler needs Dask; install it with: pip install 'rupture-backtrack[cluster]'") from None
    try:
        client = Client(scheduler, timeout=20)
    except (OSError, ValueError, TimeoutError) as error:
        raise InputError(f"no Dask scheduler answers at {scheduler} ({error})") from error
    with client:
        shared = client.scatter(network, broadcast=True)
        # A lost worker costs its task alone: Dask runs it again elsewhere.
        futures = [client.submit(run_case, shared, case, retries=3, pure=False) for case in cases]
        for future in completed(futures):
            yield future.result()


def _mark(network: Network, cases: Sequence[Case]) -> str:
    """Hash of what decides the numbers: sites, noise, settings, seeds; not which cases are asked for."""
    digest = hashlib.sha256()
    for site in network.sites:
        digest.update(f"{site.code} {site.longitude_deg} {site.latitude_deg} {site.kind}".encode())
        digest.update(site.data.tobytes())
    digest.update(repr((network.event, network.direction, network.fit, network.prior, network.coda)).encode())
    digest.update(str(cases[0].trial.seed if cases else 0).encode())
    return digest.hexdigest()[:16]


def _read(path: Path, mark: str) -> dict[str, dict[str, Any]]:
    done: dict[str, dict[str, Any]] = {}
    if not path.is_file() or path.stat().st_size == 0:
        return done
    text = path.read_text(encoding="utf-8")
    lines = text.splitlines()
    try:
        found = json.loads(lines[0]).get("study")
    except ValueError:
        found = None
    if found != mark:
        raise InputError(f"{path}: holds trials of another study; give another --out or remove the file")
    whole = [lines[0]]
    for line in lines[1:]:
        try:
            row = json.loads(line)
        except ValueError:
            continue  # torn by a kill; the case runs again
        done[row["key"]] = row
        whole.append(line)
    # The torn end must not run into the next row.
    part = path.with_suffix(".part")
    part.write_text("\n".join(whole) + "\n", encoding="utf-8")
    part.replace(path)
    return done
