"""Back-azimuth against time: what each site saw, with the curve of the fitted model over it."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
from matplotlib.colors import Normalize
from matplotlib.lines import Line2D
from matplotlib.patches import Patch
from matplotlib.patheffects import withStroke
from numpy.typing import NDArray

from rupture.errors import InputError
from rupture.pictures import style
from rupture.pictures.scene import RAY_PROBABILITY, Scene, circular_interval
from rupture.result import Result

Array = NDArray[np.float64]
_LEFT_MM = 14.0
_HALO = [withStroke(linewidth=2.2, foreground="white")]
PHASE_NAMES = {"p_arrival": "P", "s_arrival": "S"}


@style.figure_function
def direction_figure(result: Result, style_file: str | Path | None, width_mm: float, site: str) -> style.Picture:
    """Draw one site: posterior of back-azimuth, 68 % width, predicted curve; below it coherence and power.

    Parameters
    ----------
    result
        A result.
    style_file, width_mm
        Given by the keywords `style` and `columns` (1 or 2) of the call.
    site
        Code of the site.

    Raises
    ------
    InputError
        When there is no such site.
    """
    scene = Scene.of(result)
    if site not in scene.codes:
        raise InputError(f"no site '{site}' in this result; it has {', '.join(scene.codes)}")
    index = scene.codes.index(site)
    wide = width_mm > 100
    height = 90.0 if wide else 92.0
    foot = 19.0 if wide else 24.0
    picture = style.Picture(width_mm, height, style_file)
    picture.heading(scene.title, left_mm=_LEFT_MM)
    inner = width_mm - _LEFT_MM - 18
    bottom = foot + 19
    top = height - (11 if wide else 14)
    image_axes = picture.axes_mm(_LEFT_MM, bottom, inner, top - bottom)
    image = draw_posterior(image_axes, scene, index, window_of_interest(scene))
    image_axes.tick_params(labelbottom=False)
    image_axes.set_ylabel("back-azimuth (deg)")
    image_axes.set_title(site_title(scene, index), parse_math=False)
    bar = picture.axes_mm(_LEFT_MM + inner + 2, bottom, 2.2, top - bottom)
    picture.colorbar(image, cax=bar, extend="max").set_label("probability per degree")
    lower = picture.axes_mm(_LEFT_MM, foot, inner, 17, sharex=image_axes)
    _draw_coherence(lower, scene, index)
    lower.set_xlabel("time after origin (s)", labelpad=1.5)
    picture.legend(
        handles=curve_handles(scene), loc="lower left", bbox_to_anchor=(_LEFT_MM / width_mm, 4.2 / height), ncols=3 if wide else 2, borderpad=0,
        columnspacing=1.2,
    )  # fmt: skip
    return picture


@style.figure_function
def directions_figure(result: Result, style_file: str | Path | None, width_mm: float) -> style.Picture:
    """Draw all sites that have directions, in the order of their azimuth seen from the epicentre."""
    scene = Scene.of(result)
    share = scene.direction["probability"].values
    order = np.argsort(result.sites["azimuth"].values)
    shown = [int(s) for s in order if np.isfinite(share[s]).any()]
    if not shown:
        raise InputError("this result holds no direction of any site")
    columns = 2 if width_mm > 100 else 1
    rows = -(-len(shown) // columns)
    each = 30.0
    foot = 17.0 if columns == 2 else 32.0
    height = rows * each + foot + 8
    picture = style.Picture(width_mm, height, style_file)
    picture.heading(scene.title, left_mm=_LEFT_MM)
    inner = (width_mm - _LEFT_MM - 4 - 11 * (columns - 1)) / columns
    span = window_of_interest(scene)
    image: Any = None
    for k, index in enumerate(shown):
        row, column = divmod(k, columns)
        left = _LEFT_MM + column * (inner + 11)
        axes = picture.axes_mm(left, height - 12 - (row + 1) * each + 8.5, inner, each - 8.5)
        image = draw_posterior(axes, scene, index, span)
        axes.set_title(site_title(scene, index, reason=False), fontsize=6.4, pad=2.0, parse_math=False)
        if column == 0:
            axes.set_ylabel("back-azimuth (deg)", fontsize=6.2)
        last = k + columns >= len(shown)
        axes.tick_params(labelbottom=last)
        if last:
            axes.set_xlabel("time after origin (s)", labelpad=1.5)
    bar_width = 40.0
    bar = picture.axes_mm(*((width_mm - bar_width - 6, 9.8) if columns == 2 else (_LEFT_MM, 22.0)), bar_width, 2.0)
    picture.colorbar(image, cax=bar, orientation="horizontal", extend="max").set_label(
        "probability per degree", labelpad=1
    )
    picture.legend(
        handles=curve_handles(scene),
        loc="lower left",
        bbox_to_anchor=(_LEFT_MM / width_mm, 4.2 / height),
        ncols=3 if columns == 2 else 2,
        borderpad=0,
        columnspacing=1.2,
    )
    return picture


def window_of_interest(scene: Scene) -> tuple[float, float]:
    """Return the span of time, s after origin, from before the first P to after the last predicted S."""
    sites = scene.result.sites
    time = scene.direction["time"].values.astype(float)
    used = scene.used if scene.used.any() else np.ones_like(scene.used)
    first = float(np.nanmin(sites["p_arrival"].values[used], initial=np.inf))
    last = float(np.nanmax(sites["s_arrival"].values[used], initial=-np.inf))
    curves = predicted_curves(scene)
    if np.isfinite(curves).any():
        last = max(last, float(time[np.isfinite(curves).any(axis=(0, 1))][-1]))
    else:
        # Nothing was fitted: as long as a site goes on seeing a wave, up to a minute after the last S.
        bands = np.nan_to_num(scene.direction["probability_coherent"].values[used]).max(axis=(0, 1)) >= RAY_PROBABILITY
        seen = time[bands & (time < last + 60.0)]
        last = max(last, float(seen[-1])) if seen.size else last
    if not np.isfinite([first, last]).all():
        return float(time[0]), float(time[-1])
    margin = 0.12 * (last - first) + 5.0
    return max(float(time[0]), first - margin), min(float(time[-1]), last + margin)


def predicted_curves(scene: Scene) -> Array:
    """Shape (arms, sites, time): back-azimuth in degrees of the fitted model; no arm when none was fitted."""
    track = scene.result.track
    if track is None or "predicted_back_azimuth" not in track:
        return np.empty((0, len(scene.codes), scene.direction["time"].size))
    curves = track["predicted_back_azimuth"]
    if "site" in curves.coords:
        curves = curves.reindex(site=scene.result.sites["site"].values)
    if "time" in curves.coords:
        curves = curves.reindex(time=scene.direction["time"].values, method="nearest", tolerance=1e-6)
    return np.asarray(curves.values, float)


def site_title(scene: Scene, index: int, reason: bool = True) -> str:
    """Return code, components and distance of a site, and that (and why) it was not used."""
    distance = float(scene.result.sites["distance"].values[index])
    text = f"{scene.codes[index]}  {scene.components[index]}, {distance:.0f} km"
    if not scene.used[index]:
        text += ", not used" + (f": {scene.result.sites['reason'].values[index]}" if reason else "")
    return text


def centred(angle_deg: Any, centre_deg: float) -> Array:
    """Return angles moved by whole turns to within 180 degrees of a centre."""
    return (np.asarray(angle_deg, float) - centre_deg + 180.0) % 360.0 - 180.0 + centre_deg


def draw_posterior(axes: Any, scene: Scene, index: int, span: tuple[float, float]) -> Any:
    """Draw one site's posterior through time as an image around the back-azimuth of the epicentre; return it."""
    direction = scene.direction
    time = direction["time"].values.astype(float)
    axis = direction["back_azimuth"].values.astype(float)
    bin_deg = 360.0 / axis.size
    middle = float(scene.home_back_azimuth[index])
    shift = round((middle - axis[0]) / bin_deg) - axis.size // 2
    # Rolled, so that the epicentre's back-azimuth is in the middle and curves do not break at north.
    density = np.roll(np.asarray(direction["probability"].values[index], float), -shift, axis=1).T / bin_deg
    low = axis[0] + (shift - 0.5) * bin_deg
    half = (time[1] - time[0]) / 2 if time.size > 1 else 0.5
    finite = density[np.isfinite(density)]
    top = float(np.quantile(finite, 0.995)) if finite.size else 1.0
    image = axes.imshow(
        density, extent=(time[0] - half, time[-1] + half, low, low + 360.0), origin="lower", aspect="auto", interpolation="nearest",
        cmap=style.probability_colours().with_extremes(bad="#d9d9d9"), norm=Normalize(0, max(top, 1 / 360)),
    )  # fmt: skip
    axes.set_xlim(span)
    axes.set_ylim(low, low + 360.0)
    ticks = np.arange(np.ceil(low / 90), np.floor((low + 360) / 90) + 1) * 90
    axes.set_yticks(ticks, [f"{tick % 360:.0f}" for tick in ticks])
    for name, letter in PHASE_NAMES.items():
        at = float(scene.result.sites[name].values[index])
        if span[0] < at < span[1]:
            axes.axvline(at, color=style.INK, linewidth=0.6, linestyle=(0, (1, 1.2)))
            axes.annotate(
                letter,
                (at, low + 360.0),
                xytext=(2, -1.5),
                textcoords="offset points",
                va="top",
                fontsize=6.2,
                path_effects=_HALO,
            )
    axes.axhline(middle, color=style.MUTED, linewidth=0.5)
    for arm, curve in enumerate(predicted_curves(scene)[:, index]):
        curve = centred(curve, middle)
        curve[:-1][np.abs(np.diff(curve)) > 180] = np.nan
        axes.plot(
            time, curve, color=style.ACCENT, linewidth=1.2, linestyle=style.ARM_DASHES[arm % 2], path_effects=_HALO
        )
    for start, stop in used_spans(scene, index):
        axes.plot(
            [start - half, stop + half], [0.012, 0.012], transform=axes.get_xaxis_transform(), color=style.INK, linewidth=2.2,
            solid_capstyle="butt",
        )  # fmt: skip
    return image


def used_spans(scene: Scene, index: int) -> list[tuple[float, float]]:
    """Return first and last time of each run of windows that speak: a wave in them is twice as likely as none."""
    if not scene.used[index]:
        return []
    time = scene.direction["time"].values.astype(float)
    coherent = coherence(scene, index)
    speaks = np.nan_to_num(coherent) >= RAY_PROBABILITY
    edge = np.diff(np.concatenate([[False], speaks, [False]]).astype(int))
    return [
        (float(time[a]), float(time[b - 1]))
        for a, b in zip(np.flatnonzero(edge == 1), np.flatnonzero(edge == -1), strict=True)
    ]


def coherence(scene: Scene, index: int) -> Array:
    """Shape (time,): probability of a coherent wave in the best band, NaN where there is no window."""
    bands = np.asarray(scene.direction["probability_coherent"].values[index], float)
    missing = np.isnan(bands).all(axis=0)
    return np.where(missing, np.nan, np.nan_to_num(bands, nan=0.0).max(axis=0))


def _draw_coherence(axes: Any, scene: Scene, index: int) -> None:
    direction = scene.direction
    time = direction["time"].values.astype(float)
    axes.fill_between(time, coherence(scene, index), step="mid", color=style.FAINT, linewidth=0)
    axes.set_ylim(0, 1.05)
    axes.set_yticks([0, 0.5, 1])
    axes.set_ylabel("P(wave)")
    power = np.asarray(direction["power"].values[index], float)
    positive = power[power > 0]
    if positive.size:
        twin = axes.twinx()
        twin.spines["right"].set_visible(True)
        twin.plot(time, np.where(power > 0, power, np.nan), color=style.INK, linewidth=0.8)
        twin.set_yscale("log")
        twin.set_ylim(max(positive.min(), positive.max() * 1e-6) / 2, positive.max() * 3)
        twin.set_ylabel("power (m²/s⁴)", labelpad=1.5)
        twin.minorticks_off()
        twin.yaxis.set_major_formatter(style.power_of_ten)


def curve_handles(scene: Scene) -> list[Any]:
    """Return legend handles of what a posterior panel shows."""
    handles: list[Any] = []
    for arm in range(len(predicted_curves(scene))):
        label = "fitted model" if arm == 0 else "second arm"
        handles.append(
            Line2D([], [], color=style.ACCENT, linewidth=1.2, linestyle=style.ARM_DASHES[arm % 2], label=label)
        )
    handles.append(Line2D([], [], color=style.MUTED, linewidth=0.5, label="toward the epicentre"))
    handles.append(Line2D([], [], color=style.INK, linewidth=2.2, label="windows with a wave"))
    handles.append(
        Line2D([], [], color=style.INK, linewidth=0.6, linestyle=(0, (1, 1.2)), label="P, S from the hypocentre")
    )
    handles.append(Patch(facecolor="#d9d9d9", label="no window"))
    return handles


def posterior_interval(scene: Scene, index: int) -> Array:
    """Shape (time, 3): best, p05, p95 back-azimuth in degrees of all bands together; NaN without a window."""
    direction = scene.direction
    axis = direction["back_azimuth"].values.astype(float)
    rows = [circular_interval(axis, row) for row in np.asarray(direction["probability"].values[index], float)]
    return np.array([(np.nan, np.nan, np.nan) if row is None else row for row in rows])
