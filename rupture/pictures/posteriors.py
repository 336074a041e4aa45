"""The posterior of the rupture: direction as a rose, speed, length and duration as histograms."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rupture.errors import InputError
from rupture.pictures import style
from rupture.pictures.scene import Scene
from rupture.result import Result
from rupture.wording import interval_text

Array = NDArray[np.float64]


@style.figure_function
def posterior_figure(result: Result, style_file: str | Path | None, width_mm: float) -> style.Picture:
    """Draw the posterior of the rupture: direction as a rose with the sites around it; speed, length and duration beside it.

    The area of a petal, not its length, is proportional to its probability. One column wide, the rose stands alone.

    Raises
    ------
    InputError
        When no direction was fitted.
    """
    scene = Scene.of(result)
    azimuth = posterior_sample(result, "azimuth_deg")
    wide = width_mm > 100
    height = 102.0 if wide else 108.0
    picture = style.Picture(width_mm, height, style_file)
    picture.heading(scene.title, left_mm=4)
    size = 64.0
    axes = picture.axes_mm(13 if wide else (width_mm - size) / 2, 24, size, size, projection="polar")
    notes = _draw_rose(axes, scene, azimuth)
    centre = (13 + size / 2) / width_mm if wide else 0.5
    picture.text(centre, 4.6 / height, "\n".join(notes), ha="center", va="bottom", fontsize=6.0, linespacing=1.35)
    if wide:
        panels = [(name, label, unit) for name, label, unit in SIZES if has_sample(result, name)]
        tall = 72.0 / max(len(panels), 1)
        for k, (name, label, unit) in enumerate(panels):
            panel = picture.axes_mm(104, height - 12 - (k + 1) * tall + 9, 70, tall - 12)
            _draw_histogram(panel, posterior_sample(result, name), stated_interval(result, name), label, unit)
    return picture


SIZES = (("speed_km_s", "rupture speed", "km/s"), ("length_km", "length", "km"), ("duration_s", "duration", "s"))


def stated_interval(result: Result, name: str) -> tuple[float, float, float]:
    """Return low, best and high of a parameter as the summary states them; where it does not, from the draws.

    Angles are unwrapped: low <= best <= high.
    """
    stated = (result.summary.get("rupture") or {}).get({"azimuth_deg": "direction_deg"}.get(name, name))
    if not stated:
        low, best, high = np.percentile(posterior_sample(result, name), [5, 50, 95])
    else:
        low, best, high = (float(stated[key]) for key in ("p05", "best", "p95"))
        if name == "azimuth_deg":
            low, high = best - (best - low) % 360, best + (high - best) % 360
    return float(low), float(best), float(high)


def has_sample(result: Result, name: str) -> bool:
    """Return whether the fit of a result has draws of a parameter."""
    try:
        return posterior_sample(result, name).size > 0
    except InputError:
        return False


def _draw_rose(axes: Any, scene: Scene, azimuth: Array) -> list[str]:
    """Draw the rose of directions; return what it says in words."""
    axes.set_theta_zero_location("N")
    axes.set_theta_direction(-1)
    width = 5.0
    edges = np.arange(0, 360 + width, width)
    share, _ = np.histogram(azimuth % 360, edges)
    share = share / max(share.sum(), 1)
    radius = np.sqrt(share / share.max())
    axes.bar(
        np.radians(edges[:-1] + width / 2),
        radius,
        width=np.radians(width),
        color=style.probability_colours()(0.6),
        linewidth=0,
    )
    axes.set_ylim(0, 1.18)
    axes.set_yticks(np.sqrt([0.25, 0.5, 1.0]), [])
    axes.set_xticks(np.radians(np.arange(0, 360, 45)), ["N", "45°", "E", "135°", "S", "225°", "W", "315°"])
    axes.tick_params(pad=3)
    axes.grid(color=style.FAINT, linewidth=0.4)
    axes.spines["polar"].set_linewidth(0.6)
    rupture = scene.result.summary.get("rupture") or {}
    notes = []
    for arm, interval in enumerate(
        (rupture.get("direction_deg"), (rupture.get("second_arm") or {}).get("direction_deg"))
    ):
        if not interval:
            continue
        low = interval["p05"]
        sweep = np.radians(np.linspace(low, low + (interval["p95"] - low) % 360, 60))
        axes.plot(sweep, np.full(60, 1.06), color=style.ACCENT, linewidth=2.4, solid_capstyle="butt")
        axes.plot(
            np.radians([interval["best"]] * 2),
            [0, 1.06],
            color=style.ACCENT,
            linewidth=1.2,
            linestyle=style.ARM_DASHES[arm],
        )
        notes.append(f"{'direction' if arm == 0 else 'second arm'} {interval_text(interval, 'deg')}")
    for s, angle in enumerate(np.radians(scene.result.sites["azimuth"].values.astype(float))):
        marker = style.SITE_MARKERS[style.site_marker(scene.components[s])]
        face = style.INK if scene.used[s] else "white"
        axes.plot(angle, 1.18, marker=marker, markersize=5, mec=style.INK, mew=0.7, mfc=face, clip_on=False, zorder=5)
    notes.append(f"longest petal {float(share.max()):.0%} within {width:.0f} deg; area is probability")
    notes.append("arc: 90 % interval; rim: sites, hollow where not used")
    return notes


def _draw_histogram(axes: Any, draws: Array, interval: tuple[float, float, float], label: str, unit: str) -> None:
    low, best, high = interval
    axes.hist(
        draws, bins=min(40, max(8, int(np.sqrt(draws.size)))), density=True, color=style.probability_colours()(0.45)
    )
    axes.axvline(best, color=style.ACCENT, linewidth=1.2)
    axes.plot(
        [low, high],
        [0.03, 0.03],
        transform=axes.get_xaxis_transform(),
        color=style.ACCENT,
        linewidth=2.4,
        solid_capstyle="butt",
    )
    axes.set_xlabel(f"{label} ({unit})", labelpad=1)
    axes.set_ylabel(f"density (1/({unit}))" if "/" in unit else f"density (1/{unit})")
    axes.locator_params(axis="y", nbins=3)


def posterior_sample(result: Result, name: str) -> Array:
    """Return the posterior draws of one parameter of the line-source fit; draws of stationary sources are left out.

    Raises
    ------
    InputError
        When there are no draws of it.
    """
    track = result.track
    if track is None or "sample" not in track or name not in track["parameter"].values:
        raise InputError(f"this result holds no posterior of {name}: no rupture was fitted")
    draws = np.asarray(track["sample"].sel(parameter=name).values, float)
    moving = track["kind"].values.astype(str) != "stationary"
    draws = draws[moving & np.isfinite(draws)]
    if draws.size == 0:
        raise InputError(f"no draw of the posterior has a {name}: the source did not move")
    return draws
