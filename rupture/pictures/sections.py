"""Record section: six components of one site, or one component of all sites, with predicted arrivals."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import Any

import numpy as np

from rupture.conventions import COMPONENTS, ROTATION
from rupture.errors import InputError
from rupture.pictures import style
from rupture.pictures.panels import PHASE_NAMES
from rupture.pictures.scene import Scene
from rupture.result import Result
from rupture.site import Site

_NAMES = ("acc. E", "acc. N", "acc. Up", "rot. E", "rot. N", "rot. Up")


@style.figure_function
def section_figure(
    result: Result,
    style_file: str | Path | None,
    width_mm: float,
    sites: Sequence[Site],
    window_s: tuple[float, float] | None = None,
) -> style.Picture:
    """Draw acceleration and rotation rate of the sites, ordered by distance, with P and S from the hypocentre.

    Parameters
    ----------
    result
        A result: its sites give distances and arrivals.
    style_file, width_mm
        Given by the keywords `style` and `columns` (1 or 2) of the call.
    sites
        Corrected records.
    window_s
        First and last time in s after origin; by default from before the first P to twice the last S.

    Raises
    ------
    InputError
        When none of the records belongs to a site of the result.
    """
    scene = Scene.of(result)
    known = {site.code: site for site in sites}
    order = [int(s) for s in np.argsort(result.sites["distance"].values) if scene.codes[int(s)] in known]
    if not order:
        raise InputError("none of the records belongs to a site of this result")
    arrivals = {name: result.sites[name].values for name in PHASE_NAMES}
    if window_s is None:
        first, last = float(np.nanmin(arrivals["p_arrival"][order])), float(np.nanmax(arrivals["s_arrival"][order]))
        window_s = (first - 0.15 * last, 2.0 * last)
    row = max(5.0, min(11.0, 120.0 / len(order)))
    left, foot, head = 17.0, 14.0, 13.0
    tall = row * len(order)
    picture = style.Picture(width_mm, tall + foot + head, style_file)
    picture.heading(scene.title, left_mm=4)
    gap = 1.5
    wide = (width_mm - left - 3 - 5 * gap) / 6
    for c in range(len(COMPONENTS)):
        axes = picture.axes_mm(left + c * (wide + gap), foot, wide, tall)
        for k, s in enumerate(order):
            _draw_trace(axes, known[scene.codes[s]], c, len(order) - 1 - k, window_s)
            for name, dash in zip(PHASE_NAMES, ((0, (1, 1)), "-"), strict=True):
                at = float(arrivals[name][s])
                if window_s[0] <= at <= window_s[1]:
                    y = len(order) - 1 - k
                    axes.plot([at, at], [y - 0.45, y + 0.45], color=style.ACCENT, linewidth=0.7, linestyle=dash)
        axes.set_xlim(window_s)
        axes.set_ylim(-0.6, len(order) - 0.4)
        axes.set_title(_NAMES[c], fontsize=6.6)
        labels = [f"{scene.codes[s].split('.')[-1]}\n{float(result.sites['distance'].values[s]):.0f} km" for s in order]
        axes.set_yticks(np.arange(len(order))[::-1], labels if c == 0 else [], fontsize=5.6, parse_math=False)
        axes.tick_params(axis="y", length=0)
        axes.locator_params(axis="x", nbins=3)
    picture.text(
        0.5,
        4.4 / (tall + foot + head),
        "time after origin (s); red: P (dotted), S (line) from the hypocentre; number: largest value, m/s² or rad/s",
        ha="center",
        va="bottom",
        fontsize=6.0,
    )
    return picture


def _draw_trace(axes: Any, site: Site, component: int, y: float, window_s: tuple[float, float]) -> None:
    """Draw one component as an envelope of extremes, so that a long record stays a small file."""
    inside = (site.times_s >= window_s[0]) & (site.times_s <= window_s[1])
    valid = site.valid[component] & inside
    if not valid.any():
        return
    values = np.where(valid, site.data[component], np.nan)[inside]
    top = float(np.nanmax(np.abs(values))) or 1.0
    colour = style.probability_colours()(0.85 if component in range(6)[ROTATION] else 0.6)
    time = site.times_s[inside]
    block = max(1, values.size // 1200)
    if block > 1:
        count = values.size // block
        cut = values[: count * block].reshape(count, block)
        empty = np.isnan(cut).all(axis=1)
        low = np.where(empty, np.nan, np.nan_to_num(cut, nan=np.inf).min(axis=1))
        high = np.where(empty, np.nan, np.nan_to_num(cut, nan=-np.inf).max(axis=1))
        values = np.stack([low, high], axis=1).ravel()
        time = np.repeat(time[: count * block : block], 2)
    axes.plot(time, y + 0.45 * values / top, color=colour, linewidth=0.35)
    axes.annotate(
        f"{top:.1e}",
        (window_s[1], y + 0.18),
        ha="right",
        va="bottom",
        fontsize=4.2,
        color=style.MUTED,
    )
