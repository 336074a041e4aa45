"""How well the energy inversion tells the records: power at each site, observed and predicted, and its convergence."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
from matplotlib.lines import Line2D
from numpy.typing import NDArray

from rupture.errors import InputError
from rupture.pictures import style
from rupture.pictures.scene import Scene
from rupture.result import Result

Array = NDArray[np.float64]
_LEFT_MM = 14.0
_SHOWN = 1e-5
"""Share of a site's highest power down to which its panel reaches."""


@style.figure_function
def energy_fit_figure(result: Result, style_file: str | Path | None, width_mm: float) -> style.Picture:
    """Draw window power of each site that the inversion used, observed and predicted, and the course of its objective.

    Raises
    ------
    InputError
        When no inversion ran.
    """
    energy = result.energy
    if energy is None or "observed_power" not in energy:
        raise InputError("this result holds no energy inversion; run `rupture track` with it switched on")
    scene = Scene.of(result, "energy")
    sites = [str(code) for code in energy["site"].values]
    wide = width_mm > 100
    columns = 2 if wide else 1
    course = "objective" in energy and energy.sizes["iteration"] > 1
    panels = len(sites) + course
    rows = -(-panels // columns)
    each, foot, gap = 31.0, 10.5, 15.0
    height = rows * each + foot + (7 if wide else 10)
    picture = style.Picture(width_mm, height, style_file)
    picture.heading(scene.title, left_mm=_LEFT_MM)
    inner = (width_mm - _LEFT_MM - 4 - gap * (columns - 1)) / columns
    time = energy["time"].values.astype(float)
    for k in range(panels):
        row, column = divmod(k, columns)
        place = (_LEFT_MM + column * (inner + gap), foot + (rows - 1 - row) * each + 8.0, inner, each - 14.0)
        axes = picture.axes_mm(*place)
        if k == len(sites):
            _draw_course(axes, energy)
            continue
        _draw_power(axes, energy, k, time)
        axes.set_title(_site_title(scene, energy, k), fontsize=6.4, pad=2.0, parse_math=False)
        axes.set_xlabel("time after origin (s)", labelpad=1.0)
    picture.legend(
        handles=[
            Line2D([], [], color=style.INK, linewidth=1.0, label="observed"),
            Line2D([], [], color=style.ACCENT, linewidth=1.0, linestyle=style.ARM_DASHES[1], label="predicted"),
        ],
        loc="lower left",
        bbox_to_anchor=(_LEFT_MM / width_mm, 4.2 / height),
        ncols=2,
        borderpad=0,
    )
    return picture


def _draw_power(axes: Any, energy: Any, site: int, time: Array) -> None:
    observed, predicted = (
        np.asarray(energy[name].values[site], float) for name in ("observed_power", "predicted_power")
    )
    for values, colour, dash in ((observed, style.INK, "-"), (predicted, style.ACCENT, style.ARM_DASHES[1])):
        axes.plot(time, np.where(values > 0, values, np.nan), color=colour, linewidth=1.0, linestyle=dash)
    both = np.concatenate([observed, predicted])
    top = float(np.nanmax(both, initial=0.0))
    if top > 0:
        axes.set_yscale("log")
        axes.set_ylim(top * _SHOWN, top * 3)
        axes.minorticks_off()
        axes.yaxis.set_major_formatter(style.power_of_ten)
        # From a little before the first wave to where the last one has died away.
        loud = time[np.nan_to_num(observed) > 10 * _SHOWN * top]
        if loud.size:
            axes.set_xlim(float(loud[0]) - 10, float(loud[-1]) + 10)
    axes.set_ylabel("power (m²/s⁴)", labelpad=1.5)


def _draw_course(axes: Any, energy: Any) -> None:
    objective = np.asarray(energy["objective"].values, float)
    axes.plot(
        np.arange(1, objective.size + 1),
        objective - objective[-1],
        color=style.INK,
        linewidth=1.0,
        marker=".",
        markersize=3,
    )
    axes.set_title("Convergence: objective above its last value", fontsize=6.4, pad=2.0)
    axes.set_xlabel("update", labelpad=1.0)
    axes.set_ylabel("excess", labelpad=1.5)
    axes.xaxis.get_major_locator().set_params(integer=True)
    axes.set_xlim(0.5, objective.size + 0.5)
    axes.set_ylim(bottom=0)


def _site_title(scene: Scene, energy: Any, site: int) -> str:
    """Return code and distance of a site, and the gains of its components where the inversion found any."""
    code = str(energy["site"].values[site])
    text = code
    if code in scene.codes:
        text += f"  {float(scene.result.sites['distance'].values[scene.codes.index(code)]):.0f} km"
    if "gain" in energy:
        gains = np.asarray(energy["gain"].values[site], float)
        known = gains[np.isfinite(gains)]
        if (np.abs(known - 1) >= 0.005).any():
            text += ", gain " + " ".join(f"{gain:.2f}" for gain in known)
    return text
