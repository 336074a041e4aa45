"""The report: one HTML page that needs nothing else; text from records and files is escaped, never markup."""

from __future__ import annotations

import json
import re
from collections.abc import Callable, Iterable, Mapping, Sequence
from html import escape
from pathlib import Path
from typing import Any

from rupture.pictures.overlays import Overlay, read_overlays
from rupture.pictures.page_data import page_data
from rupture.pictures.scene import Scene
from rupture.result import Result
from rupture.wording import CAUTIONS, answer_sentences

_DATA = Path(__file__).with_name("data")


def write_report(
    result: Result,
    path: str | Path,
    progress: Callable[[int, int], None] | None = None,
    overlays: Sequence[str | Path | Overlay] = (),
) -> Path:
    """Write the report page beside the target and move it into place.

    Parameters
    ----------
    result
        A result.
    path
        The HTML file.
    progress
        Called with (done, total).
    overlays
        GeoJSON files of fault traces or aftershocks to draw on the map.

    Returns
    -------
    pathlib.Path
        The path.
    """
    path = Path(path)
    if progress is not None:
        progress(0, 2)
    page = report_html(result, overlays)
    if progress is not None:
        progress(1, 2)
    part = path.with_name(f".{path.name}.part")
    try:
        part.write_text(page, encoding="utf-8")
        part.replace(path)
    finally:
        part.unlink(missing_ok=True)
    if progress is not None:
        progress(2, 2)
    return path


def report_html(result: Result, overlays: Sequence[str | Path | Overlay] = ()) -> str:
    """Return the report page as one string."""
    scene = Scene.of(result)
    parts = {
        "TITLE": escape(f"Rupture report: {scene.title}"),
        "HEADING": escape(scene.event.get("name") or "Rupture report"),
        "EVENT": escape(_event_line(scene)),
        "ANSWER": "".join(f"<p>{escape(sentence)}</p>" for sentence in answer_sentences(result.summary)),
        "CAUTIONS": "".join(f"<li>{escape(caution)}</li>" for caution in CAUTIONS),
        "KINDS": _kinds(result.summary),
        "SITES": _sites_table(result.summary.get("sites", [])),
        "QUALITY": _table(result.quality, "Channels: what was found, done and missing"),
        "SETTINGS": escape(json.dumps(result.settings, indent=2, ensure_ascii=False, default=str)),
        "PROVENANCE": _provenance(result.summary.get("provenance") or {}),
        "STYLE": _asset("uPlot.min.css") + _asset("page.css"),
        "LIBRARY": _asset("uPlot.iife.min.js"),
        "SCRIPT": _asset("page.js"),
        "DATA": script_safe(page_data(scene, read_overlays(overlays))),
    }
    # One pass over the template, so that nothing inside a value is ever taken for a place to fill.
    return re.sub(r"@@([A-Z]+)@@", lambda found: parts[found[1]], _asset("page.html"))


def script_safe(value: Any) -> str:
    r"""Return JSON that cannot end the script element it stands in, nor start another.

    Examples
    --------
    >>> script_safe({"name": "</script><b>"})
    '{"name":"\\u003c/script\\u003e\\u003cb\\u003e"}'
    """
    text = json.dumps(value, ensure_ascii=False, allow_nan=False, separators=(",", ":"))
    for sign in "<>&\u2028\u2029":
        text = text.replace(sign, f"\\u{ord(sign):04x}")
    return text


def _asset(name: str) -> str:
    return (_DATA / name).read_text(encoding="utf-8")


def _event_line(scene: Scene) -> str:
    event = scene.event
    lon, lat = event["longitude_deg"], event["latitude_deg"]
    place = f"{abs(lat):.3f}°{'N' if lat >= 0 else 'S'} {abs(lon):.3f}°{'E' if lon >= 0 else 'W'}"
    magnitude = event.get("magnitude")
    parts = [f"M {magnitude:.1f}"] if magnitude is not None else []
    parts += [f"{scene.origin:%Y-%m-%d %H:%M:%S} UTC", place, f"depth {event['depth_km']:.1f} km"]
    return " · ".join(parts)


def _kinds(summary: Mapping[str, Any]) -> str:
    rupture = summary.get("rupture")
    if not rupture:
        return "<p>No rupture was fitted: only directions were estimated.</p>"
    out = [_bars("Kind of rupture, posterior probability", rupture["kind_probability"])]
    reliability = summary.get("reliability") or {}
    tests = {
        key.removesuffix("_probability").replace("_", " "): value
        for key, value in reliability.items()
        if key.endswith("_probability") and isinstance(value, int | float)
    }
    if tests:
        out.append(_bars("Null tests of these sites, probability of each error", tests))
    sentence = (
        reliability.get("sentence")
        or "No null tests were run with these sites: how often such an answer is false is not known."
    )
    out.append(f'<p class="null-test">{escape(sentence)}</p>')
    return "".join(out)


def _bars(caption: str, values: Mapping[str, float]) -> str:
    rows = "".join(
        f'<tr><th scope="row">{escape(str(name))}</th><td><span class="bar" style="width:{100 * float(value):.1f}%"></span></td>'
        f'<td class="number">{float(value):.0%}</td></tr>'
        for name, value in values.items()
    )
    return f'<table class="bars"><caption>{escape(caption)}</caption><tbody>{rows}</tbody></table>'


_SITE_COLUMNS = {
    "code": "Site", "components": "Components", "distance_km": "Distance (km)", "azimuth_deg": "Azimuth (deg)", "used": "Used",
    "reason": "Why not", "azimuth_correction_deg": "Azimuth correction (deg)", "time_correction_s": "Time correction (s)",
}  # fmt: skip


def _sites_table(sites: Iterable[Mapping[str, Any]]) -> str:
    rows = [{label: site.get(key, "") for key, label in _SITE_COLUMNS.items()} for site in sites]
    return _table(rows, "Sites")


def _table(rows: Iterable[Mapping[str, Any]], caption: str) -> str:
    rows = list(rows)
    if not rows:
        return "<p>Nothing was recorded.</p>"
    keys = list(dict.fromkeys(key for row in rows for key in row))
    head = "".join(f'<th scope="col">{escape(str(key))}</th>' for key in keys)
    body = "".join("<tr>" + "".join(_cell(row.get(key, "")) for key in keys) + "</tr>" for row in rows)
    return f'<div class="scroll" tabindex="0"><table><caption>{escape(caption)}</caption><thead><tr>{head}</tr></thead><tbody>{body}</tbody></table></div>'


def _cell(value: Any) -> str:
    if isinstance(value, bool):
        return f"<td>{'yes' if value else 'no'}</td>"
    if isinstance(value, float):
        return f'<td class="number">{value:.4g}</td>'
    return f"<td>{escape('' if value is None else str(value))}</td>"


def _provenance(provenance: Mapping[str, Any]) -> str:
    rows: list[dict[str, Any]] = []
    for group in ("versions", "inputs", "seconds"):
        values = provenance.get(group)
        if isinstance(values, Mapping):
            rows += [{"What": group, "Name": name, "Value": value} for name, value in values.items()]
    if provenance.get("seed") is not None:
        rows.append({"What": "seed", "Name": "", "Value": str(provenance["seed"])})
    return _table(rows, "Versions, inputs with SHA-256, seconds of each stage")
