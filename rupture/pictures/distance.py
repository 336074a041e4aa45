"""Distance along the rupture against source time: where the ray stack and the energy inversion put the source."""

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
    along = track["along"].values.astype(float)
    step = along[1] - along[0] if along.size > 1 else 1.0
    density = np.asarray(track["along_probability"].values, float) / step
    return _draw(scene, style_file, width_mm, (scene.source_time, along, density), "probability per km")


@style.figure_function
def energy_along_figure(result: Result, style_file: str | Path | None, width_mm: float) -> style.Picture:
    """Draw inverted energy against distance along the best direction and source time, with the fitted fronts.

    Beside the line source of the ray stack stands the one that the inversion found, drawn from the hypocentre at the
    origin time with the speed and length that the summary states.

    Raises
    ------
    InputError
        When no inversion ran.
    """
    scene = Scene.of(result, "energy")
    time, along, density = energy_along(scene)
    return _draw(
        scene, style_file, width_mm, (time, along, 1e3 * density), "energy (‰ per km and s)", _inversion_lines(scene)
    )


def energy_along(scene: Scene) -> tuple[Array, Array, Array]:
    """Return source times, distances in km along the best direction and inverted energy per km and s.

    Energy of every cell counts at the distance to which it projects; between two bins it is split in proportion.

    Parameters
    ----------
    scene
        The scene of the energy.

    Returns
    -------
    tuple of ndarray
        Shapes (F,), (D,) and (F, D); the last sums to 1 over km and s.
    """
    azimuth = np.radians(strike_deg(scene))
    places = scene.cells.places_km.reshape(-1, 2) @ np.array([np.sin(azimuth), np.cos(azimuth)])
    values = scene.cells.values.reshape(scene.source_time.size, -1)
    spacing = scene.cells.spacing_km
    first = np.floor(places.min() / spacing)
    along = spacing * np.arange(first, np.ceil(places.max() / spacing) + 1)
    at = places / spacing - first
    index = np.minimum(at.astype(int), along.size - 2)
    part = at - index
    out = np.zeros((along.size, values.shape[0]))
    np.add.at(out, index, ((1 - part) * values).T)
    np.add.at(out, index + 1, (part * values).T)
    time = scene.source_time
    step = float(time[1] - time[0]) if time.size > 1 else 1.0
    return time, along, out.T / (spacing * step)


def strike_deg(scene: Scene) -> float:
    """Return the direction along which distance is counted: the fitted one, or the long axis of the inverted energy."""
    for answer in (scene.result.summary.get("rupture"), _inverted(scene.result)):
        best = ((answer or {}).get("direction_deg") or {}).get("best")
        if best is not None:
            return float(best)
    weight = scene.total.ravel()
    places = scene.cells.places_km.reshape(-1, 2)
    if not weight.sum() > 0:
        return 0.0
    off = places - np.average(places, axis=0, weights=weight)
    _, axes = np.linalg.eigh((off * weight[:, None]).T @ off)
    return float(np.degrees(np.arctan2(*axes[:, -1])) % 180.0)


def _inverted(result: Result) -> dict[str, Any]:
    return (result.summary.get("agreement") or {}).get("energy_inversion") or {}


def _inversion_lines(scene: Scene) -> list[Array]:
    """Return corners (source time, km along) of each arm that the inversion found."""
    found, lines = _inverted(scene.result), []
    east, north, start = (
        (found.get(name) or {}).get("best") or 0.0 for name in ("start_east_km", "start_north_km", "start_time_s")
    )
    strike = np.radians(strike_deg(scene))
    begin = east * np.sin(strike) + north * np.cos(strike)
    for arm in (found, found.get("second_arm") or {}):
        direction, speed, length = (
            (arm.get(name) or {}).get("best") for name in ("direction_deg", "speed_km_s", "length_km")
        )
        if direction is not None and speed and length:
            reach = length * np.cos(np.radians(direction - strike_deg(scene)))
            lines.append(np.array([[start, begin], [start + length / speed, begin + reach]]))
    return lines


def _draw(
    scene: Scene,
    style_file: str | Path | None,
    width_mm: float,
    field: tuple[Array, Array, Array],
    label: str,
    lines: list[Array] | None = None,
) -> style.Picture:
    """Draw a field (times, distances, values) with guide lines, fitted fronts and further lines."""
    height = 79.0 if width_mm > 100 else 83.0
    picture = style.Picture(width_mm, height, style_file)
    picture.heading(scene.title, left_mm=_LEFT_MM)
    front_time, front = _signed_front(scene)
    handles = _handles(scene, len(front), bool(lines))
    columns = 4 if width_mm > 100 else 2
    foot = 13.8 + 3.2 * -(-len(handles) // columns)
    inner, tall = width_mm - _LEFT_MM - 18, height - foot - (8 if width_mm > 100 else 11)
    axes = picture.axes_mm(_LEFT_MM, foot, inner, tall)
    tau, along, density = field
    step = along[1] - along[0] if along.size > 1 else 1.0
    half = (tau[1] - tau[0]) / 2 if tau.size > 1 else 0.5
    image = axes.imshow(
        density.T, extent=(tau[0] - half, tau[-1] + half, along[0] - step / 2, along[-1] + step / 2), origin="lower", aspect="auto",
        cmap=style.probability_colours(), norm=Normalize(0, float(np.nanquantile(density, 0.998)) or 1.0), interpolation="nearest",
    )  # fmt: skip
    window, reach = _view(scene, along)
    axes.set_xlim(window)
    axes.set_ylim(reach)
    _draw_guides(axes, scene, window, reach)
    for arm, place in enumerate(front):
        axes.plot(
            front_time,
            place,
            color=style.ACCENT,
            linewidth=1.3,
            linestyle=style.ARM_DASHES[arm % 2],
            path_effects=_HALO,
        )
    for line in lines or []:
        axes.plot(*line.T, color=style.INK, linewidth=1.3, linestyle=_INVERTED, path_effects=_HALO, zorder=4)
    axes.plot(0, 0, marker="*", markersize=8, color=style.ACCENT, mec="white", mew=0.6, zorder=5)
    toward = strike_deg(scene)
    axes.set_xlabel("source time after origin (s)", labelpad=1.5)
    axes.set_ylabel(f"distance toward {toward:.0f}° {compass(toward)} (km)")
    bar = picture.axes_mm(_LEFT_MM + inner + 2, foot, 2.2, tall)
    picture.colorbar(image, cax=bar, extend="max").set_label(label)
    picture.legend(
        handles=handles,
        loc="lower left",
        bbox_to_anchor=(_LEFT_MM / width_mm, 4.2 / height),
        ncols=columns,
        borderpad=0,
    )
    return picture


_INVERTED = (0, (5, 1.2, 1, 1.2))


def _handles(scene: Scene, arms: int, inverted: bool) -> list[Line2D]:
    both = inverted and arms
    out = [
        Line2D(
            [],
            [],
            color=style.ACCENT,
            linewidth=1.3,
            linestyle=style.ARM_DASHES[arm % 2],
            label=("front of the ray stack" if both else "fitted front") if arm == 0 else "second arm",
        )
        for arm in range(arms)
    ]
    if inverted:
        out.append(Line2D([], [], color=style.INK, linewidth=1.3, linestyle=_INVERTED, label="line of the inversion"))
    out.append(
        Line2D([], [], color=style.MUTED, linewidth=0.6, linestyle=(0, (4, 2)), label="constant speed, labels in km/s")
    )
    s_speed = s_speed_km_s(scene.result)
    if s_speed:
        out.append(
            Line2D([], [], color=style.INK, linewidth=1.0, linestyle=(0, (1, 1)), label=f"S speed {s_speed:.1f} km/s")
        )
    return out


def _view(scene: Scene, along: Array) -> tuple[tuple[float, float], tuple[float, float]]:
    """Return the part of source time and distance that holds the activity and the fitted front, with a margin."""
    when = scene.source_time[scene.active]
    tau = scene.source_time
    start, stop = (float(when[0]), float(when[-1])) if when.size else (float(tau[0]), float(tau[-1]))
    margin = 0.15 * (stop - start) + 1
    _, front = _signed_front(scene)
    reach = np.concatenate([front[np.isfinite(front)], [0.0]])
    extra = 0.45 * float(np.ptp(reach)) + 5
    window = (max(float(tau[0]), min(0.0, start) - margin), min(float(tau[-1]), stop + margin))
    return window, (max(float(along[0]), float(reach.min()) - extra), min(float(along[-1]), float(reach.max()) + extra))


def _signed_front(scene: Scene) -> tuple[Array, Array]:
    """Return times and, shape (arms, times), km along the first arm's direction, the second arm counted backwards."""
    track = scene.result.track
    if track is None or "front_distance" not in track:
        return scene.source_time, np.empty((0, scene.source_time.size))
    sign = np.where(np.arange(track.sizes["arm"]) == 0, 1.0, -1.0)
    return track["source_time"].values.astype(float), np.asarray(track["front_distance"].values, float) * sign[:, None]


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
                    text, (at, sign * speed * at), ha="center", va="center", fontsize=5.8,
                    color=style.MUTED, path_effects=_HALO, zorder=3.1,
                )  # fmt: skip
