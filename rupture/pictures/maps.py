"""The map: sites with their rays at chosen times, the track by source time, and where the radiation came from."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import Any

import numpy as np
from matplotlib.cm import ScalarMappable
from matplotlib.patches import Patch

from rupture.pictures import layers, style
from rupture.pictures.basemap import Extent, draw_graticule, draw_land, draw_locator, draw_scale_bar, projected_axes
from rupture.pictures.overlays import Overlay, read_overlays
from rupture.pictures.scene import RAY_WIDTH, Scene
from rupture.result import Result


@style.figure_function
def map_figure(
    result: Result,
    style_file: str | Path | None,
    width_mm: float,
    field: str = "location",
    overlays: Sequence[str | Path | Overlay] = (),
) -> style.Picture:
    """Draw the map of sites, rays and track beside a close view of the source region.

    Parameters
    ----------
    result
        A result.
    style_file, width_mm
        Given by the keywords `style` and `columns` (1 or 2) of the call.
    field
        'location': the share of radiation per cell from the ray stack; 'energy': the energy inversion.
    overlays
        GeoJSON files of fault traces or aftershocks.
    """
    scene = Scene.of(result, field)
    drawn = read_overlays(overlays)
    wide = width_mm > 100
    colours, scale = style.time_colours(), layers.time_scale(scene)
    main = 92.0 if wide else width_mm - 16
    side = 58.0
    foot = 20.0 if wide else 38.0
    picture = style.Picture(width_mm, foot + main + (8 if wide else 11), style_file)
    picture.heading(scene.title)

    extent = layers.map_extent(scene)
    frames = scene.ray_frames()
    axes = projected_axes(picture, scene.plane, extent, (10, foot, main, main))
    draw_land(axes, scene.plane, extent)
    draw_graticule(axes, scene.plane, extent)
    draw_scale_bar(axes, extent, corner=layers.scale_bar_corner(scene, extent))
    extra = layers.draw_overlays(axes, scene, drawn, size=1.8)
    layers.draw_rays(axes, scene, frames, colours, scale)
    handles = layers.draw_sites(axes, scene)
    handles.append(layers.draw_epicentre(axes))
    if result.track is not None:
        layers.draw_track(axes, scene, colours, scale, size=7.0)
    corner = _emptiest_corner(scene, extent)
    inset = main * 0.22
    draw_locator(
        picture, scene.plane, extent,
        (10 + corner[0] * (main - inset), foot + corner[1] * (main - inset), inset, inset),
    )  # fmt: skip
    handles += extra
    if wide:
        left = 10 + main + 12
        bottom = foot + main - side
        if scene.field is not None:
            handles += _source_panel(picture, scene, frames, drawn, (left, bottom, side, side))
        else:
            bottom = foot + main
        _legend(picture, handles, frames, (left - 6, 5, side + 10, bottom - 11))
    else:
        _legend(picture, handles, frames, (6, 17, width_mm - 12, foot - 22))
    if frames:
        bar_left, bar_width = (10 + main * 0.15, main * 0.7) if wide else (14.0, width_mm - 28)
        _time_bar(picture, scene, scale, frames, (bar_left, 10.5, bar_width, 2.2))
    return picture


def _source_panel(
    picture: style.Picture,
    scene: Scene,
    frames: list[int],
    overlays: list[Overlay],
    place: tuple[float, float, float, float],
) -> list[Any]:
    """Draw the close view: probability or energy per cell, credible areas, ellipses, track."""
    colours, scale = style.time_colours(), layers.time_scale(scene)
    extent = layers.map_extent(scene, sites=False)
    axes = projected_axes(picture, scene.plane, extent, place)
    draw_land(axes, scene.plane, extent)
    draw_graticule(axes, scene.plane, extent)
    values = scene.total
    layers.draw_cells(axes, scene, values, layers.see_through(style.probability_colours()))
    layers.draw_overlays(axes, scene, overlays)
    handles: list[Any] = layers.draw_areas(axes, scene, values)
    if scene.cells.name == "location":
        layers.draw_ellipses(axes, scene, frames, colours, scale)
    handles += layers.draw_track(axes, scene, colours, scale)
    layers.draw_epicentre(axes)
    inside = [
        s for s, (e, n) in enumerate(scene.site_km) if extent.west < e < extent.east and extent.south < n < extent.north
    ]
    if inside:
        layers.draw_sites(axes, scene, names=False)
    draw_scale_bar(axes, extent)
    left, bottom, width, _ = place
    layers.draw_mechanism(picture, scene, (left + width - 10.5, bottom + 1, 9.5, 9.5))
    return [Patch(facecolor=style.probability_colours()(0.55), label=scene.cells.total_label), *handles]


def _emptiest_corner(scene: Scene, extent: Extent) -> tuple[int, int]:
    """Return the corner (0 or 1 to the east, 0 or 1 to the north) with the fewest sites; the scale bar has its own."""
    corners = [(1, 1), (0, 1)]
    if layers.scale_bar_corner(scene, extent) == "left":
        corners.append((1, 0))
    size = 0.3

    def crowd(corner: tuple[int, int]) -> int:
        east = (scene.site_km[:, 0] - extent.west) / extent.width_km
        north = (scene.site_km[:, 1] - extent.south) / extent.height_km
        near_east = east > 1 - size if corner[0] else east < size
        near_north = north > 1 - size if corner[1] else north < size
        return int((near_east & near_north).sum())

    return min(corners, key=crowd)


def _legend(
    picture: style.Picture,
    handles: list[Any],
    frames: list[int],
    place: tuple[float, float, float, float],
    columns: int = 2,
) -> None:
    axes = picture.axes_mm(*place)
    axes.set_axis_off()
    unique = {handle.get_label(): handle for handle in handles}
    if frames:
        middle = style.time_colours()(0.5)
        unique["ray"] = Patch(
            facecolor=(*middle[:3], 0.3), edgecolor=middle, linewidth=0.6, label=f"ray, {RAY_WIDTH:.0%} width"
        )
    axes.legend(
        handles=list(unique.values()),
        loc="upper left",
        ncols=columns,
        handletextpad=0.5,
        labelspacing=0.35,
        columnspacing=1.0,
    )


def _time_bar(
    picture: style.Picture, scene: Scene, scale: Any, frames: list[int], place: tuple[float, float, float, float]
) -> None:
    """Draw the colour bar of source time, with marks at the times of the rays."""
    axes = picture.axes_mm(*place)
    picture.colorbar(ScalarMappable(scale, style.time_colours()), cax=axes, orientation="horizontal")
    quantity = "time after S from the hypocentre" if scene.lagged else "source time after origin"
    axes.set_xlabel(f"{quantity} (s), triangles: rays shown", labelpad=1.5)
    axes.plot(
        scene.source_time[frames], np.full(len(frames), 1.35), transform=axes.get_xaxis_transform(), marker="v", markersize=3.6,
        color=style.INK, linestyle="none", clip_on=False,
    )  # fmt: skip
    axes.tick_params(length=2, pad=1.5)
