"""Pictures of the answer: distance against time, kinds and null tests, energy against time."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
from matplotlib.colors import Normalize
from matplotlib.lines import Line2D
from matplotlib.patheffects import withStroke
from numpy.typing import NDArray

from rupture.errors import InputError
from rupture.pictures import style
from rupture.pictures.scene import Scene
from rupture.result import Result
from rupture.wording import compass

Array = NDArray[np.float64]
_HALO = [withStroke(linewidth=2.0, foreground="white")]
_LEFT_MM = 14.0
GUIDES_KM_S = (1.0, 2.0, 3.0, 4.0, 5.0)
KINDS = ("unilateral", "bilateral", "stationary")


@style.figure_function
def along_figure(result: Result, style_file: str | Path | None, width_mm: float) -> style.Picture:
    """Draw location probability against distance along the best direction and source time, with speed guide lines.

    Raises
    ------
    InputError
        When no direction was fitted.
    """
    scene = Scene.of(result)
    track = result.track
    if track is None or "along_probability" not in track:
        raise InputError("this result holds no distance along strike: no rupture was fitted")
    height = 76.0
    picture = style.Picture(width_mm, height, style_file)
    picture.heading(scene.title, left_mm=_LEFT_MM)
    foot = 17.0 if width_mm > 100 else 21.0
    inner, tall = width_mm - _LEFT_MM - 18, height - foot - (8 if width_mm > 100 else 11)
    axes = picture.axes_mm(_LEFT_MM, foot, inner, tall)
    tau, along = scene.source_time, track["along"].values.astype(float)
    step = along[1] - along[0] if along.size > 1 else 1.0
    density = np.asarray(track["along_probability"].values, float).T / step
    half = (tau[1] - tau[0]) / 2 if tau.size > 1 else 0.5
    image = axes.imshow(
        density, extent=(tau[0] - half, tau[-1] + half, along[0] - step / 2, along[-1] + step / 2), origin="lower", aspect="auto",
        cmap=style.probability_colours(), norm=Normalize(0, float(np.nanquantile(density, 0.998)) or 1.0), interpolation="nearest",
    )  # fmt: skip
    window, reach = _view(scene, along)
    axes.set_xlim(window)
    axes.set_ylim(reach)
    _draw_guides(axes, scene, window, reach)
    for arm, place in enumerate(_signed_front(scene)):
        axes.plot(
            tau, place, color=style.ACCENT, linewidth=1.3, linestyle=style.ARM_DASHES[arm % 2], path_effects=_HALO
        )
    axes.plot(0, 0, marker="*", markersize=8, color=style.ACCENT, mec="white", mew=0.6, zorder=5)
    best = ((result.summary.get("rupture") or {}).get("direction_deg") or {}).get("best")
    toward = "along the rupture" if best is None else f"toward {best:.0f}° {compass(best)}"
    axes.set_xlabel("source time after origin (s)", labelpad=1.5)
    axes.set_ylabel(f"distance {toward} (km)")
    bar = picture.axes_mm(_LEFT_MM + inner + 2, foot, 2.2, tall)
    picture.colorbar(image, cax=bar, extend="max").set_label("probability per km")
    handles = [
        Line2D(
            [],
            [],
            color=style.ACCENT,
            linewidth=1.3,
            linestyle=style.ARM_DASHES[a % 2],
            label="fitted front" if a == 0 else "second arm",
        )
        for a in range(len(scene.front_km))
    ]
    handles += [
        Line2D(
            [], [], color=style.MUTED, linewidth=0.6, linestyle=(0, (4, 2)), label="constant speed from the hypocentre"
        )
    ]
    s_speed = s_speed_km_s(result)
    if s_speed:
        handles += [
            Line2D([], [], color=style.INK, linewidth=1.0, linestyle=(0, (1, 1)), label=f"S speed {s_speed:.1f} km/s")
        ]
    picture.legend(
        handles=handles,
        loc="lower left",
        bbox_to_anchor=(_LEFT_MM / width_mm, 4.2 / height),
        ncols=4 if width_mm > 100 else 2,
        borderpad=0,
    )
    return picture


def _view(scene: Scene, along: Array) -> tuple[tuple[float, float], tuple[float, float]]:
    """Return the part of source time and distance that holds the activity and the fitted front, with a margin."""
    when = scene.source_time[scene.active]
    tau = scene.source_time
    start, stop = (float(when[0]), float(when[-1])) if when.size else (float(tau[0]), float(tau[-1]))
    margin = 0.15 * (stop - start) + 1
    front = _signed_front(scene)
    reach = np.concatenate([front[np.isfinite(front)], [0.0]])
    extra = 0.45 * float(np.ptp(reach)) + 5
    window = (max(float(tau[0]), min(0.0, start) - margin), min(float(tau[-1]), stop + margin))
    return window, (max(float(along[0]), float(reach.min()) - extra), min(float(along[-1]), float(reach.max()) + extra))


def _signed_front(scene: Scene) -> Array:
    """Shape (arms, frames): km along the first arm's direction, the second arm counted backwards."""
    track = scene.result.track
    if track is None or "front_distance" not in track:
        return np.empty((0, scene.source_time.size))
    sign = np.where(np.arange(track.sizes["arm"]) == 0, 1.0, -1.0)
    return np.asarray(track["front_distance"].values, float) * sign[:, None]


def s_speed_km_s(result: Result) -> float | None:
    """Return the S speed at the source that the summary states, or None."""
    value = (result.summary.get("rupture") or {}).get("s_speed_km_s")
    return float(value) if value else None


def _draw_guides(axes: Any, scene: Scene, window: tuple[float, float], reach: tuple[float, float]) -> None:
    """Draw lines of constant speed through the hypocentre, with their speed written where they leave the frame."""
    lines: list[tuple[float, dict[str, Any], str]] = [
        (speed, {"color": style.MUTED, "linewidth": 0.6, "linestyle": (0, (4, 2))}, f"{speed:.0f}")
        for speed in GUIDES_KM_S
    ]
    s_speed = s_speed_km_s(scene.result)
    if s_speed:
        lines.append((s_speed, {"color": style.INK, "linewidth": 1.0, "linestyle": (0, (1, 1))}, ""))
    for sign, edge in ((1, reach[1]), (-1, reach[0])):
        if abs(edge) < 0.15 * (reach[1] - reach[0]):
            continue
        for speed, look, text in lines:
            end = min(window[1], abs(edge) / speed)
            axes.plot([0, end], [0, sign * speed * end], **look, zorder=3)
            if text:
                # Written on the line, a little inside the frame, where neither colour bar nor title is in the way.
                at = 0.93 * end
                axes.annotate(
                    f"{text} km/s" if speed == GUIDES_KM_S[0] else text, (at, sign * speed * at), ha="center", va="center", fontsize=5.8,
                    color=style.MUTED, path_effects=_HALO, zorder=3.1,
                )  # fmt: skip


@style.figure_function
def kinds_figure(result: Result, style_file: str | Path | None, width_mm: float) -> style.Picture:
    """Draw the probability of each kind of rupture, and what the null tests of these very sites say.

    Raises
    ------
    InputError
        When no rupture was fitted.
    """
    rupture = result.summary.get("rupture")
    if not rupture:
        raise InputError("this result holds no kinds of rupture: only directions were estimated")
    scene = Scene.of(result)
    reliability = result.summary.get("reliability") or {}
    tests = {
        name: value
        for name, value in reliability.items()
        if name.endswith("_probability") and isinstance(value, int | float)
    }
    wide = width_mm > 100
    bars = len(rupture["kind_probability"])
    height = (34.0 if wide else 38.0) + 6 * bars + (0 if wide or not tests else 14 + 6 * len(tests))
    picture = style.Picture(width_mm, height, style_file)
    picture.heading(scene.title, left_mm=4)
    name_room = 22.0
    size = (width_mm / 2 - name_room - 8) if wide else width_mm - name_room - 12
    plot_height = 6.0 * bars
    bottom = height - (12 if wide else 15) - plot_height
    axes = picture.axes_mm(name_room, bottom, size, plot_height)
    names = sorted(rupture["kind_probability"], key=lambda k: KINDS.index(k) if k in KINDS else len(KINDS))
    _bars(axes, names, [rupture["kind_probability"][name] for name in names], style.probability_colours()(0.65))
    axes.set_title(f"Kind of rupture: {rupture['kind']}", pad=4)
    axes.set_xlabel("posterior probability", labelpad=1.5)
    if tests:
        left, test_bottom = (width_mm / 2 + 34, bottom) if wide else (36.0, 20.0)
        test_size = width_mm - left - 12
        test_height = plot_height if wide else 6.0 * len(tests)
        test_axes = picture.axes_mm(left, test_bottom, test_size, test_height)
        labels = [name.removesuffix("_probability").replace("_", " ") for name in tests]
        _bars(test_axes, labels, list(tests.values()), style.MUTED)
        test_axes.set_title("Null tests of these sites", pad=4)
        test_axes.set_xlabel("probability of the error", labelpad=1.5)
    sentence = (
        reliability.get("sentence")
        or "No null tests were run with these sites: how often such an answer is false is not known."
    )
    picture.text(4 / width_mm, 5.0 / height, _wrapped(sentence, width_mm), fontsize=6.2, va="bottom", parse_math=False)
    return picture


def _wrapped(text: str, width_mm: float) -> str:
    import textwrap

    return "\n".join(textwrap.wrap(text, int(width_mm / 1.12)))


def _bars(axes: Any, names: list[str], values: list[float], colour: Any) -> None:
    place = np.arange(len(names))[::-1]
    axes.barh(place, values, height=0.62, color=colour)
    axes.set_yticks(place, names)
    axes.tick_params(axis="y", length=0)
    axes.set_xlim(0, 1)
    for y, value in zip(place, values, strict=True):
        inside = value > 0.85
        axes.annotate(
            f"{value:.0%}", (value, y), xytext=(-2 if inside else 2, 0), textcoords="offset points", va="center_baseline",
            ha="right" if inside else "left", fontsize=6.2, color="white" if inside else style.INK,
        )  # fmt: skip


@style.figure_function
def energy_figure(result: Result, style_file: str | Path | None, width_mm: float) -> style.Picture:
    """Draw radiated energy against source time, of the ray stack and, where it ran, of the inversion; each sums to 1.

    Raises
    ------
    InputError
        When nothing was mapped.
    """
    scene = Scene.of(result)
    series = energy_series(result)
    height = 62.0
    picture = style.Picture(width_mm, height, style_file)
    picture.heading(scene.title, left_mm=_LEFT_MM)
    top, foot = height - (8 if width_mm > 100 else 11), 17.0 if width_mm > 100 else 20.0
    axes = picture.axes_mm(_LEFT_MM, foot, width_mm - _LEFT_MM - 4, top - foot)
    looks = {"ray stack": ("-", style.probability_colours()(0.65)), "energy inversion": ((0, (3.5, 1.4)), style.ACCENT)}
    highest = 0.0
    for name, (time, values) in series.items():
        dash, colour = looks[name]
        axes.plot(time, values, linestyle=dash, color=colour, label=name, drawstyle="steps-mid")
        highest = max(highest, float(values.max()))
    axes.fill_between(
        scene.source_time, 0, 1, where=scene.active, transform=axes.get_xaxis_transform(), color=style.FAINT, alpha=0.3, linewidth=0,
        step="mid", label="source more likely than none", zorder=0,
    )  # fmt: skip
    axes.axvline(0, color=style.MUTED, linewidth=0.6)
    axes.set_xlim(float(scene.source_time[0]), float(scene.source_time[-1]))
    axes.set_ylim(0, highest * 1.12 or 1)
    axes.set_xlabel("source time after origin (s)", labelpad=1.5)
    axes.set_ylabel("share of radiated energy (1/s)")
    picture.legend(
        loc="lower left",
        bbox_to_anchor=(_LEFT_MM / width_mm, 4.2 / height),
        ncols=3 if width_mm > 100 else 2,
        borderpad=0,
    )
    return picture


def energy_series(result: Result) -> dict[str, tuple[Array, Array]]:
    """Return source times and energy per second, each scaled to an integral of 1, by how it was found.

    Raises
    ------
    InputError
        When nothing was mapped.
    """
    if result.map is None:
        raise InputError("this result holds no map: only directions were estimated")
    found = {"ray stack": result.map["energy_proxy"]}
    if result.energy is not None:
        found["energy inversion"] = result.energy["energy"]
    out = {}
    for name, variable in found.items():
        time = variable["source_time"].values.astype(float)
        step = float(time[1] - time[0]) if time.size > 1 else 1.0
        values = np.nan_to_num(np.asarray(variable.values, float)).reshape(time.size, -1).sum(axis=1)
        whole = values.sum() * step
        out[name] = (time, values / whole if whole > 0 else values)
    return out
