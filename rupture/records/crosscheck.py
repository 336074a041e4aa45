"""What only shows when sites are held against each other: clocks and sensitivities of translation."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from rupture.conventions import ACC_Z, KM
from rupture.records.arrivals import Arrivals
from rupture.records.clocks import pick_onset
from rupture.records.relations import Mean, mean_or_none
from rupture.records.report import Calibration, Correction
from rupture.records.settings import CorrectionSettings
from rupture.site import Site

Array = NDArray[np.float64]

_FEWEST = 4
"""Sites needed to tell which one is off."""
_LEAST_TIME_S = 0.4
_STATION_TERM = 0.02
"""Share of the travel time by which the reference Earth may be off from site to site (common practice: 1-3 %)."""
_SEEN, _SURE = 2.5, 3.0
"""Standard deviations beyond which a deviation is noticed, and beyond which it is applied."""
_DECAY = 1.3
"""Body-wave amplitudes fall off about like distance to this power in the first hundreds of km (common practice)."""
_LEAST_SIZE = 0.75
"""Decimal logarithm of an amplitude that is off: factor 5.6; radiation pattern and ground explain the rest."""


@dataclass(frozen=True)
class Placed:
    """A site with what is needed to compare it."""

    site: Site
    distance_m: float
    depth_m: float
    arrivals: Arrivals


def travel_time_findings(
    sites: Sequence[Placed], apply: CorrectionSettings, calibration: Mapping[str, Calibration]
) -> list[tuple[Site, Correction | None]]:
    """Compare the onsets of P of all sites; return each site, moved where its clock is off, and the finding.

    A common part of the residuals is the origin's or the Earth's and is taken out: the median, and with six
    sites or more a trend with travel time.
    """
    picks = [
        pick_onset(p.site, p.arrivals.p_s, min(3.0 + 0.05 * p.arrivals.p_s, 0.6 * (p.arrivals.s_s - p.arrivals.p_s)))
        for p in sites
    ]
    residual = np.array([m.value - p.arrivals.p_s if m else np.nan for m, p in zip(picks, sites, strict=True)])
    travel = np.array([p.arrivals.p_s for p in sites])
    picked = np.isfinite(residual)
    common = common_part(travel[picked], residual[picked])
    results: list[tuple[Site, Correction | None]] = []
    for placed, pick, value in zip(sites, picks, residual, strict=True):
        known = calibration.get(placed.site.code, Calibration()).travel_time_s
        means = [Mean(*known, 1)] if known is not None else []
        if pick is not None and common is not None:
            level, scatter = common
            error = float(np.hypot(pick.error, max(scatter, _STATION_TERM * placed.arrivals.p_s)))
            means.append(Mean(float(value - level(placed.arrivals.p_s)), error, 1))
        off = mean_or_none(means)
        results.append((placed.site, None) if off is None else _judged(placed.site, off.value, off.error, apply))
    return results


def _judged(site: Site, off: float, error: float, apply: CorrectionSettings) -> tuple[Site, Correction]:
    seen = abs(off) > max(_LEAST_TIME_S, _SEEN * error)
    note = f"P comes {abs(off):.2f} s {'late' if off > 0 else 'early'} against the other sites"
    applied = seen and apply.travel_time and abs(off) > _SURE * error
    if applied:
        # Whole samples, so that all sites stay on one grid; the rest is far below the error.
        site = replace(site, start_s=site.start_s - round(off / site.step_s) * site.step_s)
    finding = Correction("travel time", off, error, "s", seen, applied, note)
    left = error if applied or not seen else float(np.hypot(error, 0.5 * off))
    return replace(site, time_error_s=float(np.hypot(site.time_error_s, left))), finding


def common_part(travel_s: Array, residual_s: Array) -> tuple[np.poly1d, float] | None:
    """Return what residuals have in common, as a line over travel time, and the scatter about it.

    Parameters
    ----------
    travel_s, residual_s
        Shape (n,).

    Returns
    -------
    line, scatter
        Scatter is a robust standard deviation in s; None with fewer than four sites.
    """
    if residual_s.size < _FEWEST:
        return None
    slopes = np.zeros(1)
    if residual_s.size >= 6 and np.ptp(travel_s) > 2.0:
        i, j = np.triu_indices(residual_s.size, 1)
        apart = np.abs(travel_s[j] - travel_s[i]) > 0.5
        slopes = (residual_s[j] - residual_s[i])[apart] / (travel_s[j] - travel_s[i])[apart]
    # Median of pairwise slopes (Theil 1950, Sen 1968): a site that lies does not bend the line.
    slope = float(np.median(slopes)) if slopes.size else 0.0
    level = float(np.median(residual_s - slope * travel_s))
    left = residual_s - slope * travel_s - level
    return np.poly1d([slope, level]), float(1.4826 * np.median(np.abs(left)))


def amplitude_findings(sites: Sequence[Placed]) -> list[Correction | None]:
    """Compare the size of the vertical acceleration of all sites; a sensitivity that is off by a lot shows.

    Returns
    -------
    list of Correction or None
        Value: decimal logarithm of the amplitude over what the other sites lead to expect. Never applied:
        only the metadata can say what is right.
    """
    logs = np.array([_size(p) for p in sites])
    known = np.isfinite(logs)
    if known.sum() < _FEWEST:
        return [None] * len(sites)
    left = logs - np.median(logs[known])
    scatter = max(1.4826 * float(np.median(np.abs(left[known]))), 0.15)
    found: list[Correction | None] = []
    for value in left:
        if not np.isfinite(value):
            found.append(None)
            continue
        seen = bool(abs(value) > max(_LEAST_SIZE, _SURE * scatter))
        size = f"{10.0**value:.3g} times" if value >= 0 else f"1/{10.0**-value:.3g} of"
        note = f"vertical acceleration is {size} what the other sites lead to expect"
        note += "; check the sensitivity of the translation sensor" if seen else ""
        found.append(Correction("amplitude", float(value), scatter, "log10", seen, False, note))
    return found


def _size(placed: Placed) -> float:
    site, arrivals = placed.site, placed.arrivals
    end = arrivals.s_s + max(arrivals.s_s - arrivals.p_s, 20.0)
    part = site.valid[ACC_Z] & (site.times_s >= arrivals.p_s) & (site.times_s <= end)
    if part.sum() * site.step_s < 5.0:
        return float("nan")
    rms = float(np.sqrt(np.mean(site.data[ACC_Z, part] ** 2)))
    distance = np.hypot(placed.distance_m, placed.depth_m) / KM
    return float(np.log10(rms) + _DECAY * np.log10(max(distance, 1.0))) if rms > 0 else float("nan")


def verdict_words(corrections: Sequence[Correction]) -> str:
    """Return the state of a site in words, from what was noticed."""
    bad = [c for c in corrections if c.noticed]
    if not bad:
        return "no fault of the installation noticed" if corrections else "installation not checked (no clear P or S)"
    return "; ".join(f"{c.kind}: {c.note} ({'corrected' if c.applied else 'not corrected'})" for c in bad)
