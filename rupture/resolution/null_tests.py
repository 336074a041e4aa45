"""Null tests: whether these very sites would have told a direction anyway."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace
from typing import TYPE_CHECKING, Any

import numpy as np

from rupture.direction import DirectionSettings
from rupture.front import FitSettings
from rupture.mapping.grid import subsurface_length_km
from rupture.resolution.ensemble import Network, Trial, outcome
from rupture.synthetic.coda import CodaSettings

if TYPE_CHECKING:
    from rupture.front.lines import LinePrior
    from rupture.run import Inputs
    from rupture.settings import Job
    from rupture.tracking import Tracked

KINDS = ("stationary", "unilateral", "bilateral")
PARTICLES = 120
"""A null test needs the answer, not its fine print: population of each fit."""

MOVES = 1
"""Moves of each draw at each temperature; `docs/resolution.md` holds this quicker fit beside that of a run, with its time."""

HOP_S = 2.0
"""Windows of a null test lie this far apart, which is still half a window."""


def in_short(direction: DirectionSettings, fit: FitSettings) -> tuple[DirectionSettings, FitSettings]:
    """Return settings that give the same answer with less fine print: fewer draws, and windows that overlap less."""
    hop_s = max(HOP_S, fit.hop_s, direction.hop_s)
    return replace(direction, hop_s=hop_s), replace(
        fit, particles=min(PARTICLES, fit.particles), moves=min(MOVES, fit.moves), hop_s=hop_s
    )


def make_trials(count: int, length_km: float, seed: int, azimuth_deg: float | None = None) -> list[Trial]:
    """Return stationary, unilateral and bilateral ruptures in turn, with random azimuths, speeds and lengths.

    Parameters
    ----------
    count
        How many.
    length_km
        Rupture length expected for the magnitude; lengths scatter about it by 20 %.
    seed
        Random numbers; trial k is the same whatever the count.
    azimuth_deg
        When given (a known fault), ruptures run along it, either way.
    """
    trials = []
    for k in range(count):
        rng = np.random.default_rng((seed, k))
        kind = KINDS[k % 3]
        azimuth = rng.uniform(0, 360) if azimuth_deg is None else azimuth_deg + 180 * rng.integers(2)
        speed = float(np.exp(rng.uniform(np.log(1.8), np.log(4.5))))
        total = length_km * float(np.exp(rng.normal(0, 0.2)))
        first = total if kind == "unilateral" else total / (1 + rng.uniform(1 / 3, 1)) if kind == "bilateral" else 0.0
        second = total - first if kind == "bilateral" else 0.0
        duration = max(2.0, 0.6 * length_km / 2.8)
        trials.append(
            Trial(kind, float(azimuth % 360), speed, float(first), float(second), duration, int(rng.integers(2**31)))
        )
    return trials


def run_null_tests(
    job: Job, inputs: Inputs, tracked: Tracked, prior: LinePrior, progress: Callable[[int, int], None] | None = None
) -> dict[str, Any]:
    """Track synthetic ruptures as the data were, and say how often the answer would have been wrong.

    Returns
    -------
    dict
        false_direction_probability, direction_error_deg_p50 and _p90, speed_error_share_p50 and _p90,
        length_error_share_p50 and _p90, wrong_kind_probability, confusion, ruptures, sentence.
    """
    network = network_of(job, inputs, tracked, prior)
    magnitude = inputs.event.magnitude or 7.0
    length_km = prior.length_m / 1e3 if inputs.event.magnitude is None else subsurface_length_km(magnitude)
    axis = None if prior.axis_rad is None else float(np.degrees(prior.axis_rad))
    trials = make_trials(job.null_tests.ruptures, length_km, job.seed, axis)
    rows = []
    for k, trial in enumerate(trials):
        rows.append(outcome(trial, network.track(network.records(trial, magnitude), trial.seed)))
        if progress is not None:
            progress(k + 1, len(trials))
    return summarise(rows)


def network_of(job: Job, inputs: Inputs, tracked: Tracked, prior: LinePrior) -> Network:
    """Return the sites of a run as an experiment."""
    from rupture.run import noise_window

    sites = tuple(inputs.sites[k] for k in tracked.position)
    windows = tuple(noise_window(s, inputs.p_arrival_s[k]) for s, k in zip(sites, tracked.position, strict=True))
    kind = tracked.fit.likeliest
    # The scattering that the fit saw in the data goes into the synthetics.
    ratio, decay = (float(np.median(tracked.fit.column(name, kind))) for name in ("coda_ratio", "coda_time_s"))
    coda = CodaSettings(energy_ratio=min(ratio, 1.5), decay_s=float(np.clip(decay, 2.0, 40.0)), waves=40)
    direction, fit = in_short(job.direction, job.fit)
    return Network(
        inputs.event, sites, windows, inputs.earth.layers, inputs.responses, direction, fit, prior, coda
    )  # fmt: skip


def summarise(rows: Sequence[dict[str, Any]]) -> dict[str, Any]:
    """Return rates and errors of an ensemble, with a sentence for people."""
    stationary = [r for r in rows if r["true_kind"] == "stationary"]
    moving = [r for r in rows if r["true_kind"] == "unilateral"]
    false = sum(r["kind"] in ("unilateral", "bilateral") for r in stationary)
    named = [r for r in rows if r["kind"] != "undetermined"]
    wrong = sum(r["kind"] != r["true_kind"] for r in named)
    known = [r for r in moving if r["azimuth_deg"] is not None]
    direction = [abs((r["azimuth_deg"] - r["true_azimuth_deg"] + 180) % 360 - 180) for r in known]
    speed = [abs(r["speed_km_s"] / r["true_speed_km_s"] - 1) for r in known]
    length = [abs(r["length_km"] / r["true_length_km"] - 1) for r in known]
    confusion = {
        true: {
            found: sum(r["true_kind"] == true and r["kind"] == found for r in rows)
            for found in (*KINDS, "undetermined")
        }
        for true in KINDS
    }
    result: dict[str, Any] = {
        "ruptures": len(rows),
        "false_direction_probability": false / len(stationary) if stationary else None,
        "wrong_kind_probability": wrong / len(named) if named else None,
        "confusion": confusion,
    }
    for name, errors in (
        ("direction_error_deg", direction),
        ("speed_error_share", speed),
        ("length_error_share", length),
    ):
        for q in (50, 90):
            result[f"{name}_p{q}"] = round(float(np.percentile(errors, q)), 4) if errors else None
    result["sentence"] = _sentence(result, len(stationary), false, len(moving))
    return result


def _sentence(result: dict[str, Any], stationary: int, false: int, moving: int) -> str:
    if not stationary or not moving:
        return f"{result['ruptures']} null tests are too few to say what these sites could have told."
    error = result["direction_error_deg_p90"]
    start = (
        f"Of {stationary} synthetic ruptures that never moved, these sites called {false} a moving one; "
        f"of {moving} that ran one way, nine in ten directions came out within {error:.0f} degrees"
    )
    caught = result["confusion"]["unilateral"]["unilateral"]
    # Directions that are never said to be one are no directions, however near to the truth their middles lie.
    if error > 60 or caught < moving / 3:
        return start + f" and {caught} were named one-way: this geometry cannot tell a direction."
    if error > 20 or false > 0.1 * stationary or caught < 2 * moving / 3:
        return start + f" and {caught} were named one-way: take the direction with caution."
    return start + f" and {caught} were named one-way."
