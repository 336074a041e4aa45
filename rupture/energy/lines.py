"""Line sources in an energy movie: direction, speed, length and kind, with intervals from resampled inversions."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import minimize
from scipy.stats import qmc

from rupture.energy.kernels import fill_density

Array = NDArray[np.float64]

KINDS = ("stationary", "unilateral", "bilateral")

SPEED_M_S = (700.0, 7000.0)
"""Published rupture speeds run from under 1 to about 6 km/s."""

LEAST_ARM = 0.2
"""Least ratio of the shorter to the longer arm of a bilateral rupture."""

SURE = 0.7
"""A kind that is less probable than this leaves the answer undetermined (common practice has no figure)."""

DRAWS, KEPT = 1024, 3
"""Size of the global search, and how many of its points are followed down."""

_FAINT = 1e-2
_TAPER_S = 1.5


@dataclass(frozen=True)
class LineFit:
    """The best line source of one kind.

    Attributes
    ----------
    kind
        Stationary, unilateral or bilateral.
    parameters
        East, north (m), start (s), log spread (m), stray share, then duration (s) for a stationary source, or azimuth (rad),
        log speed, log length, and for a second arm bend (rad), log speed, ratio of lengths.
    score
        Log-likelihood less what its parameters cost (Schwarz 1978).
    """

    kind: str
    parameters: Array
    score: float


@dataclass(frozen=True)
class LineAnswer:
    """What the energy movie says of the rupture.

    Attributes
    ----------
    kind, kind_probability, reason
        As in summary.json; `undetermined` with a reason where no kind is sure.
    best
        The best fit of the likeliest kind.
    values
        Name to (best, p05, p95): east_m, north_m and start_time_s of the start, azimuth_rad, speed_m_s, length_m, duration_s and, of a second arm, second_azimuth_rad,
        second_speed_m_s, second_length_m. Without resampled inversions the ends are NaN.
    """

    kind: str
    kind_probability: dict[str, float]
    reason: str
    best: LineFit
    values: dict[str, tuple[float, float, float]]


def line_density(kind: str, parameters: Array, east_m: Array, north_m: Array, time_s: Array, volume: float) -> Array:
    """Return the density of energy per m^2 and s at points, all of shape (n,); its integral is one.

    A front at its place has a normal spread; `volume` (m^2 s) carries the stray share evenly.
    """
    out = np.empty(time_s.size)
    fill_density(
        np.array(arms(kind, parameters)), np.asarray(parameters[:5]), east_m, north_m, time_s, volume, _TAPER_S, out
    )
    return out


def arms(kind: str, parameters: Array) -> list[tuple[float, float, float, float]]:
    """Return azimuth, speed, duration and share of energy of each arm; one of speed 0 for a stationary source."""
    if kind == "stationary":
        return [(0.0, 0.0, float(parameters[5]), 1.0)]
    azimuth, speed, length = float(parameters[5]), float(np.exp(parameters[6])), float(np.exp(parameters[7]))
    if kind == "unilateral":
        return [(azimuth, speed, length / speed, 1.0)]
    bend, speed_2, ratio = float(parameters[8]), float(np.exp(parameters[9])), float(parameters[10])
    return [
        (azimuth, speed, length / speed, 1 / (1 + ratio)),
        (azimuth + np.pi + bend, speed_2, ratio * length / speed_2, ratio / (1 + ratio)),
    ]


def fit_lines(
    energy: Array,
    east_m: Array,
    north_m: Array,
    time_s: Array,
    independent: float,
    seed: int = 1,
    near: LineFit | None = None,
) -> list[LineFit]:
    """Return the best line source of each kind, best first.

    Parameters
    ----------
    energy
        Shape (C, F).
    east_m, north_m, time_s
        Cells (C,) from the epicentre, and source times (F,).
    independent
        How many independent pieces of evidence the whole energy stands for.
    seed
        Of the global search.
    near
        Search near this fit and for its kind only.
    """
    cells, frames = np.nonzero(energy > _FAINT * energy.max())
    weight = energy[cells, frames] / energy[cells, frames].sum()
    east, north, time = east_m[cells], north_m[cells], time_s[frames]
    width = max(float(np.ptp(east_m)), 1e4)
    volume = width * max(float(np.ptp(north_m)), 1e4) * max(float(np.ptp(time_s)), 1.0)

    def cost(parameters: Array, kind: str) -> float:
        return -float(weight @ np.log(line_density(kind, parameters, east, north, time, volume)))

    found: list[LineFit] = []
    for kind in KINDS if near is None else (near.kind,):
        bounds = np.array(_bounds(kind, width, float(np.ptp(time_s))))
        starts = [near.parameters] if near is not None else _starts(cost, kind, bounds, found, seed)
        times = 2 if near is None else 1
        best = min((_descend(cost, kind, bounds, first, times) for first in starts), key=lambda end: float(end.fun))
        score = -independent * float(best.fun) - 0.5 * len(bounds) * np.log(independent)
        found.append(LineFit(kind, np.asarray(best.x), score))
    return sorted(found, key=lambda fit: -fit.score)


def _starts(
    cost: Callable[[Array, str], float], kind: str, bounds: Array, simpler: Sequence[LineFit], seed: int
) -> list[Array]:
    """Return the best of many draws, and, for two arms, the best single arm grown backwards, as either of the arms."""
    draws = bounds[:, 0] + qmc.Sobol(len(bounds), rng=seed).random(DRAWS) * (bounds[:, 1] - bounds[:, 0])
    costs = np.array([cost(draw, kind) for draw in draws])
    starts = list(draws[np.argsort(costs)[:KEPT]])
    for fit in simpler if kind == "bilateral" else ():
        if fit.kind == "unilateral":
            for turn in (0.0, np.pi):
                one = fit.parameters.copy()
                one[5] = (one[5] + turn) % (2 * np.pi)
                starts.append(np.array([*one, 0.0, one[6], 0.5]))
    return starts


def _descend(cost: Callable[[Array, str], float], kind: str, bounds: Array, first: Array, times: int) -> Any:
    """Descend from a start, more than once where it is far, since a simplex in many dimensions may collapse early."""
    options = {"maxiter": 500, "xatol": 1e-3, "fatol": 1e-5, "adaptive": True}
    at = np.clip(first, *bounds.T)
    for _ in range(times):
        end = minimize(cost, at, (kind,), "Nelder-Mead", bounds=bounds, options=options)
        at = end.x
    return end


def _bounds(kind: str, width_m: float, span_s: float) -> list[tuple[float, float]]:
    place = 0.1 * width_m
    common = [(-place, place), (-place, place), (-2.0, 5.0), (np.log(3e3), np.log(0.15 * width_m)), (0.01, 0.9)]
    if kind == "stationary":
        return [*common, (1.0, span_s)]
    speed = (float(np.log(SPEED_M_S[0])), float(np.log(SPEED_M_S[1])))
    one = [*common, (-np.pi, 3 * np.pi), speed, (float(np.log(5e3)), float(np.log(0.7 * width_m)))]
    return one if kind == "unilateral" else [*one, (-0.5, 0.5), speed, (LEAST_ARM, 1.0)]


def line_answer(
    energy: Array,
    east_m: Array,
    north_m: Array,
    time_s: Array,
    independent: float,
    resampled: Sequence[Array] = (),
    seed: int = 1,
    progress: Callable[[int, int], None] | None = None,
) -> LineAnswer:
    """Return kind, direction, speed and length of the rupture in an energy movie.

    Parameters
    ----------
    energy, east_m, north_m, time_s, independent, seed
        As `fit_lines`.
    resampled
        Energies (C, F) inverted from resampled windows and sites.
    progress
        Called with (done, total).
    """
    fits = fit_lines(energy, east_m, north_m, time_s, independent, seed)
    scores = np.array([fit.score for fit in fits])
    odds = np.exp(scores - scores.max())
    odds /= odds.sum()
    best = fits[0]
    probability = {fit.kind: float(p) for fit, p in zip(fits, odds, strict=True)}
    rows = [_values(best)]
    for number, movie in enumerate(resampled):
        rows.append(_values(fit_lines(movie, east_m, north_m, time_s, independent, seed, best)[0]))
        if progress is not None:
            progress(number + 1, len(resampled))
    values = {name: _interval([row[name] for row in rows], name) for name in rows[0]}
    reason = ""
    if max(probability.values()) < SURE:
        reason = "the energy movie does not tell the kinds of rupture apart"
    elif best.parameters[4] > 0.6:
        reason = f"{100 * best.parameters[4]:.0f} % of the inverted energy lies away from any line source"
    return LineAnswer("undetermined" if reason else best.kind, probability, reason, best, values)


def _values(fit: LineFit) -> dict[str, float]:
    parts = arms(fit.kind, fit.parameters)
    parts.sort(key=lambda arm: -arm[1] * arm[2])
    east, north, start = (float(v) for v in fit.parameters[:3])
    out = {"duration_s": max(arm[2] for arm in parts), "start_time_s": start, "east_m": east, "north_m": north}
    for prefix, (azimuth, speed, duration, _) in zip(("", "second_"), parts, strict=False):
        if fit.kind != "stationary":
            out |= {
                f"{prefix}azimuth_rad": azimuth % (2 * np.pi),
                f"{prefix}speed_m_s": speed,
                f"{prefix}length_m": speed * duration,
            }
    return out


def _interval(values: Sequence[float], name: str) -> tuple[float, float, float]:
    circular, signed = name.endswith("azimuth_rad"), name in ("east_m", "north_m", "start_time_s")
    best, others = values[0], np.array(values[1:])
    if not others.size:
        return best, np.nan, np.nan
    off = np.angle(np.exp(1j * (others - best))) if circular else others - best
    # Few resamples: a normal spread about the best rather than their order statistics.
    half = 1.645 * float(np.sqrt(np.mean(off**2)))
    low, high = best - half, best + half
    return (best, low % (2 * np.pi), high % (2 * np.pi)) if circular else (best, low if signed else max(low, 0.0), high)


def line_summary(answer: LineAnswer) -> dict[str, Any]:
    """Return the answer in the words of summary.json."""

    def part(name: str, scale: float) -> dict[str, float | None] | None:
        if name not in answer.values:
            return None
        numbers = zip(("best", "p05", "p95"), answer.values[name], strict=True)
        return {key: round(float(v) * scale, 3) if np.isfinite(v) else None for key, v in numbers}

    return {
        "kind": answer.kind,
        "kind_probability": {name: round(p, 4) for name, p in answer.kind_probability.items()},
        "reason": answer.reason,
        "direction_deg": part("azimuth_rad", 180 / np.pi),
        "speed_km_s": part("speed_m_s", 1e-3),
        "length_km": part("length_m", 1e-3),
        "duration_s": part("duration_s", 1.0),
        "start_time_s": part("start_time_s", 1.0),
        "start_east_km": part("east_m", 1e-3),
        "start_north_km": part("north_m", 1e-3),
        "second_arm": {
            "direction_deg": part("second_azimuth_rad", 180 / np.pi),
            "speed_km_s": part("second_speed_m_s", 1e-3),
            "length_km": part("second_length_m", 1e-3),
        }
        if "second_azimuth_rad" in answer.values
        else None,
    }
