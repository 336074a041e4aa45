"""What stands beside the fit: the same answer from resampled sites and windows, and from the envelopes alone."""

from __future__ import annotations

from collections.abc import Callable
from typing import TYPE_CHECKING, Any

import numpy as np

from rupture.conventions import KM
from rupture.errors import DataError
from rupture.front import Resampling, directivity_durations, resample_fit
from rupture.front.directivity import site_azimuths
from rupture.front.fit import longest_duration_s

if TYPE_CHECKING:
    from rupture.front.lines import LinePrior
    from rupture.run import Inputs
    from rupture.settings import Job
    from rupture.tracking import Tracked

_SHOWN = (
    ("direction_deg", "azimuth_rad", 180 / np.pi), ("speed_km_s", "speed_m_s", 1 / KM), ("length_km", "length_m", 1 / KM),
)  # fmt: skip


def resampling_summary(
    job: Job, inputs: Inputs, tracked: Tracked, prior: LinePrior, progress: Callable[[int, int], None] | None = None
) -> dict[str, Any] | None:
    """Return how far the answer depends on the sites and windows there happened to be.

    Returns
    -------
    dict or None
        `resamples`; for direction, speed and length the bootstrap's p05 and p95, the jackknife's standard error over
        sites, and the site without which the answer moves most and by how much; None for a source that did not move.
    """
    if job.fit.resamples == 0 or tracked.fit.likeliest == "stationary":
        return None
    sites = [inputs.sites[k] for k in tracked.position]
    found = resample_fit(
        tracked.directions, [s.longitude_deg for s in sites], [s.latitude_deg for s in sites], inputs.event,
        inputs.responses, job.fit, tracked.fit, job.seed, job.fit.resamples, progress, prior,
    )  # fmt: skip
    summary: dict[str, Any] = {"resamples": job.fit.resamples}
    for key, name, scale in _SHOWN:
        summary[key] = _spread(found, name, scale)
    return summary


def _spread(found: Resampling, name: str, scale: float) -> dict[str, Any]:
    _, low, high = found.interval(name)
    site, moves = found.most_decisive(name)
    error = found.jackknife_error(name)
    return {
        "p05": round(low * scale, 3),
        "p95": round(high * scale, 3),
        "site_error": round(error * scale, 3) if np.isfinite(error) else None,
        "most_decisive_site": site or None,
        "change_without_it": round(moves * scale, 3) if site else None,
    }


def directivity_summary(inputs: Inputs, tracked: Tracked, prior: LinePrior) -> dict[str, Any]:
    """Return what the durations of the S envelopes alone say of a one-way rupture.

    Returns
    -------
    dict
        `direction_deg`, `speed_km_s`, `length_km` with best, p05, p95; `explained`, the share of the durations' variance
        that the line explains; `sites` with azimuth, duration, its error and the line's; or `reason` why there is none.
    """
    sites = [inputs.sites[k] for k in tracked.position]
    lon, lat = [s.longitude_deg for s in sites], [s.latitude_deg for s in sites]
    longest = longest_duration_s(prior)
    try:
        check = directivity_durations(tracked.directions, lon, lat, inputs.event, inputs.responses, longest)
    except DataError as error:
        return {"reason": str(error)}
    values = (check.direction_rad, check.speed_m_s, check.length_m)
    summary: dict[str, Any] = {
        key: {q: round(v * scale, 3) for q, v in zip(("best", "p05", "p95"), value, strict=True)}
        for (key, _, scale), value in zip(_SHOWN, values, strict=True)
    }
    summary["explained"] = round(check.explained, 3)
    azimuth = np.degrees(site_azimuths(check, inputs.event, lon, lat))
    summary["sites"] = [
        {
            "code": d.code,
            "azimuth_deg": round(float(a % 360), 2),
            "duration_s": round(d.duration_s, 2),
            "error_s": round(d.error_s, 2),
            "line_s": round(float(p), 2),
        }
        for d, a, p in zip(check.durations, azimuth, check.predicted_s, strict=True)
    ]
    return summary
