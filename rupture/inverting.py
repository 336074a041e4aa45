"""The energy stage of `rupture track`: from sites to the energy group, and whether both stages agree."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rupture import datasets
from rupture.conventions import KM
from rupture.errors import DataError
from rupture.geodesy import distance_azimuth
from rupture.mapping import Grid, map_grid
from rupture.progress import Progress
from rupture.run import Inputs, noise_window
from rupture.settings import Job

DIRECTION_DEG, RATIO = 30.0, 1.5
"""Answers differ when directions are farther apart than this, or speeds or lengths by more than this factor, and their
intervals do not overlap."""


@dataclass(frozen=True)
class EnergyStage:
    """What the energy inversion leaves.

    Attributes
    ----------
    dataset
        The energy group of the result, None when it could not be inverted.
    summary
        The answer of the line fit in the words of summary.json, None likewise.
    reason
        Why there is none.
    """

    dataset: Any
    summary: dict[str, Any] | None
    reason: str = ""


def energy_stage(
    job: Job, inputs: Inputs, position: NDArray[np.int64], grid: Grid, until_s: float, progress: Progress
) -> EnergyStage:
    """Invert for energy with the sites that gave a direction; what cannot be inverted is said, and stops nothing."""
    from rupture.energy import build_kernels, line_answer, line_summary
    from rupture.energy.invert import independent_pieces, pose, resampled_energies, solve_problem

    settings = job.energy
    cells = grid if grid.kind == "trace" else _coarse(inputs, grid, settings.cells)
    chosen = _near_enough(inputs, position, cells, settings.most_distant_km)
    if not chosen.size:
        return EnergyStage(
            None, None, f"every site is more than {settings.most_distant_km:g} km from a cell of the map"
        )
    sites = [inputs.sites[k] for k in chosen]
    longest = max(
        float(distance_azimuth(s.longitude_deg, s.latitude_deg, cells.longitude_deg, cells.latitude_deg)[0].max())
        for s in sites
    )
    with progress.stage("energy kernels") as report:
        kernels = build_kernels(
            inputs.earth.layers,
            inputs.event.depth_km,
            longest / KM,
            settings,
            inputs.event.mechanism_deg if settings.use_mechanism else None,
            report,
        )
    quiet = [noise_window(inputs.sites[k], inputs.p_arrival_s[k]) for k in chosen]
    try:
        with progress.stage("energy inversion") as report:
            problem = pose(sites, cells, kernels, settings, quiet, until_s)
            found = solve_problem(problem, None, report, job.seed)
        with progress.stage("energy intervals") as report:
            again = resampled_energies(problem, found, settings.resamples, job.seed, report)
            pieces = independent_pieces(problem, found)
            answer = line_answer(
                found.energy, cells.east_m, cells.north_m, found.source_time_s, pieces, again, job.seed
            )
    except DataError as error:
        return EnergyStage(None, None, str(error))
    dataset = datasets.map_dataset(
        cells,
        found.source_time_s,
        {"energy": (found.energy, "1", "radiated energy in the bands of the inversion, relative")},
        {},
    )
    put = datasets.labelled
    dataset = dataset.assign(
        objective=put("iteration", found.objective, "1", "minus log-likelihood after each update"),
        observed_power=put("site time", found.observed_power, "m2 s-4", "mean square ground acceleration"),
        predicted_power=put("site time", found.predicted_power, "m2 s-4", "the same as the inverted energy tells it"),
        gain=put(
            "site component_group",
            found.gains,
            "1",
            "amplitude factor of horizontal, vertical translation and rotation",
        ),
        model_error_share=put("site energy_band", found.model_error_share, "1", "model error as a share of amplitude"),
    ).assign_coords(site=[s.code for s in sites], time=datasets.coordinate("time", found.time_s))
    return EnergyStage(dataset, line_summary(answer))


def _coarse(inputs: Inputs, grid: Grid, cells: int) -> Grid:
    half = float(np.abs(grid.east_m).max()) / KM
    return map_grid(inputs.event, half, 2 * half / (cells - 1) * (1 - 1e-9))


def _near_enough(inputs: Inputs, position: NDArray[np.int64], grid: Grid, most_km: float) -> NDArray[np.int64]:
    keep = []
    for k in position:
        site = inputs.sites[k]
        distance, _, _ = distance_azimuth(site.longitude_deg, site.latitude_deg, grid.longitude_deg, grid.latitude_deg)
        if float(distance.max()) <= most_km * KM:
            keep.append(int(k))
    return np.array(keep, np.int64)


def agreement(ray: dict[str, Any], stage: EnergyStage | None) -> dict[str, Any] | None:
    """Return both answers and whether they differ; None where energy was not inverted at all."""
    if stage is None:
        return None
    if stage.summary is None:
        return {
            "ray_stack": ray,
            "energy_inversion": None,
            "differ": False,
            "reason": f"energy not inverted: {stage.reason}",
        }
    reasons = differences(ray, stage.summary)
    return {"ray_stack": ray, "energy_inversion": stage.summary, "differ": bool(reasons), "reason": "; ".join(reasons)}


def differences(ray: dict[str, Any], energy: dict[str, Any]) -> list[str]:
    """Return in words where two answers, as summary.json holds them, differ.

    Examples
    --------
    >>> ray = {"kind": "unilateral", "direction_deg": {"best": 350.0, "p05": 345.0, "p95": 355.0}}
    >>> differences(ray, {"kind": "unilateral", "direction_deg": {"best": 5.0, "p05": 0.0, "p95": 10.0}})
    []
    >>> differences(ray, {"kind": "bilateral", "direction_deg": {"best": 95.0, "p05": 90.0, "p95": 99.0}})
    ['kind: unilateral and bilateral', 'direction: 350 and 95 degrees']
    """
    out = []
    kinds = (ray["kind"], energy["kind"])
    if "undetermined" not in kinds and kinds[0] != kinds[1]:
        out.append(f"kind: {kinds[0]} and {kinds[1]}")
    for name, key, unit in (
        ("direction", "direction_deg", "degrees"),
        ("speed", "speed_km_s", "km/s"),
        ("length", "length_km", "km"),
    ):
        one, other = ray.get(key), energy.get(key)
        if one is None or other is None:
            continue
        a, b = one["best"], other["best"]
        if name == "direction":
            far = abs((a - b + 180) % 360 - 180) > DIRECTION_DEG
        else:
            far = max(a, b) > RATIO * min(a, b) and not _overlap((one["p05"], one["p95"]), (other["p05"], other["p95"]))
        if far:
            out.append(f"{name}: {a:.3g} and {b:.3g} {unit}")
    return out


def _overlap(one: Sequence[float | None], other: Sequence[float | None]) -> bool:
    (a, b), (c, d) = one, other
    if a is None or b is None or c is None or d is None:
        return False
    return a <= d and c <= b
