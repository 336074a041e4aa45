"""The sentences that state an answer and its limits: the same in terminal, report and figures."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

CAUTIONS = (
    "Not for earthquake warning, tsunami warning or any life-safety decision: the authorised agencies and licensed "
    "practice decide.",
    "The intervals hold only as far as the records, the metadata and the Earth model do; read the null tests of these "
    "very sites before the answer.",
    "A direction found from few sites, or from sites on one side, can be an artefact of the geometry: compare it with "
    "aftershocks, surface rupture and finite-fault studies.",
)
"""Cautions that go with every answer."""

SHORT_CAUTION = "Research result. Not for warning or life-safety decisions."

_COMPASS = (
    "N",
    "NNE",
    "NE",
    "ENE",
    "E",
    "ESE",
    "SE",
    "SSE",
    "S",
    "SSW",
    "SW",
    "WSW",
    "W",
    "WNW",
    "NW",
    "NNW",
)


def compass(azimuth_deg: float) -> str:
    """Return the nearest of sixteen compass points.

    Examples
    --------
    >>> compass(93), compass(-10)
    ('E', 'N')
    """
    return _COMPASS[round(azimuth_deg / 22.5) % 16]


def interval_text(value: Mapping[str, float], unit: str, digits: int = 0) -> str:
    """Return `best unit (p05 to p95)` of a best/p05/p95 mapping.

    Examples
    --------
    >>> interval_text({"best": 2.81, "p05": 2.6, "p95": 3.04}, "km/s", 1)
    '2.8 km/s (2.6 to 3.0)'
    """
    best, low, high = (f"{value[key]:.{digits}f}" for key in ("best", "p05", "p95"))
    return f"{best} {unit} ({low} to {high})"


def answer_sentences(summary: Mapping[str, Any]) -> list[str]:
    """Say what a summary (design of summary.json) found, in plain sentences with 90 % intervals.

    Parameters
    ----------
    summary
        Content of summary.json.
    """
    rupture = summary.get("rupture")
    used = [site["code"] for site in summary.get("sites", []) if site.get("used")]
    count = f"{len(used)} site" + ("" if len(used) == 1 else "s")
    if not rupture:
        return [f"Directions of {count}; no rupture was fitted."]
    kind = rupture["kind"]
    share = rupture["kind_probability"]
    if kind == "undetermined":
        odds = ", ".join(f"{name} {p:.0%}" for name, p in share.items())
        sentences = [f"Undetermined from {count}: {rupture.get('reason') or 'no kind of rupture stands out'} ({odds})."]
    elif kind == "stationary":
        sentences = [
            f"The energy stayed in one place ({share[kind]:.0%}, {count}); no rupture direction.",
            f"Duration {interval_text(rupture['duration_s'], 's')}.",
        ]
    else:
        direction = rupture["direction_deg"]
        sentences = [
            f"{kind.capitalize()} rupture ({share[kind]:.0%}, {count}) toward {compass(direction['best'])}: "
            f"direction {interval_text(direction, 'deg')}, speed {interval_text(rupture['speed_km_s'], 'km/s', 1)}, "
            f"length {interval_text(rupture['length_km'], 'km')}, duration {interval_text(rupture['duration_s'], 's')}."
        ]
        second = rupture.get("second_arm")
        if second:
            sentences.append(
                f"Second arm toward {compass(second['direction_deg']['best'])}: "
                f"speed {interval_text(second['speed_km_s'], 'km/s', 1)}, length {interval_text(second['length_km'], 'km')}."
            )
    sentences += _hanging_on_one_site(rupture, summary.get("resampling"))
    reliability = summary.get("reliability")
    if reliability and reliability.get("sentence"):
        sentences.append(reliability["sentence"])
    agreement = summary.get("agreement")
    if agreement and agreement.get("differ"):
        sentences.append(f"Ray stack and energy inversion differ: {agreement['reason']}.")
    return sentences


def _hanging_on_one_site(rupture: Mapping[str, Any], resampling: Mapping[str, Any] | None) -> list[str]:
    """Say which site the direction hangs on, if leaving it out moves the direction further than its interval."""
    direction, change = rupture.get("direction_deg"), (resampling or {}).get("direction_deg")
    if not direction or not change or change["change_without_it"] is None:
        return []
    half_width = 0.5 * ((direction["p95"] - direction["p05"]) % 360)
    if abs(change["change_without_it"]) <= half_width:
        return []
    return [
        f"The direction hangs on site {change['most_decisive_site']}: without it, it turns by "
        f"{abs(change['change_without_it']):.0f} degrees."
    ]
