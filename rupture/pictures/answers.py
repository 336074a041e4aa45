"""Pictures of the answer: kinds and null tests, energy against time."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rupture.errors import InputError
from rupture.pictures import style
from rupture.pictures.scene import Scene
from rupture.result import Result

Array = NDArray[np.float64]
_LEFT_MM = 14.0
KINDS = ("unilateral", "bilateral", "stationary")


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
    sentence = _wrapped(
        reliability.get("sentence")
        or "No null tests were run with these sites: how often such an answer is false is not known.",
        width_mm,
    )
    wide = width_mm > 100
    bars = len(rupture["kind_probability"])
    # Below the lowest axes: their label, then the sentence, then the caution.
    foot = 14.0 + 2.9 * (sentence.count("\n") + 1)
    height = foot + (14.0 if wide else 18.0) + 6 * bars + (0 if wide or not tests else 17 + 6 * len(tests))
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
        left, test_bottom = (width_mm / 2 + 34, bottom) if wide else (36.0, foot)
        test_size = width_mm - left - 12
        test_height = plot_height if wide else 6.0 * len(tests)
        test_axes = picture.axes_mm(left, test_bottom, test_size, test_height)
        labels = [name.removesuffix("_probability").replace("_", " ") for name in tests]
        _bars(test_axes, labels, list(tests.values()), style.MUTED)
        test_axes.set_title("Null tests of these sites", pad=4)
        test_axes.set_xlabel("probability of the error", labelpad=1.5)
    picture.text(4 / width_mm, 5.0 / height, sentence, fontsize=6.2, va="bottom", parse_math=False)
    return picture


def _wrapped(text: str, width_mm: float) -> str:
    import textwrap

    return "\n".join(textwrap.wrap(text, int((width_mm - 8) / 1.17)))


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
