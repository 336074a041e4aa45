"""Frames of the movie side by side, for the page of a journal."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import numpy as np
from matplotlib.cm import ScalarMappable
from matplotlib.colors import Normalize

from rupture.pictures import layers, style
from rupture.pictures.basemap import KM, draw_graticule, draw_land, draw_scale_bar, projected_axes
from rupture.pictures.overlays import Overlay, read_overlays
from rupture.pictures.scene import Scene
from rupture.result import Result


@style.figure_function
def frames_figure(
    result: Result,
    style_file: str | Path | None,
    width_mm: float,
    field: str = "location",
    count: int | None = None,
    overlays: Sequence[str | Path | Overlay] = (),
) -> style.Picture:
    """Draw small maps of the source region at times spread over the rupture.

    Parameters
    ----------
    result
        A result.
    style_file, width_mm
        Given by the keywords `style` and `columns` (1 or 2) of the call.
    field
        'location': location probability per cell; 'energy': the energy inversion.
    count
        How many frames; by default three rows of the page's width.
    overlays
        GeoJSON files of fault traces or aftershocks.

    Raises
    ------
    InputError
        When nothing was mapped, or there is no energy inversion to draw.
    """
    scene = Scene.of(result, field)
    values, label = scene.cells.values, scene.cells.label
    drawn = read_overlays(overlays)
    across = 4 if width_mm > 100 else 2
    shown = scene.ray_frames(count or 3 * across)
    if not shown:
        shown = [int(i) for i in np.linspace(0, scene.source_time.size - 1, min(across, scene.source_time.size))]
    gap, left = 2.0, 9.0
    size = (width_mm - left - 3 - gap * (across - 1)) / across
    rows = -(-len(shown) // across)
    foot = 20.0
    head = 7.0 if width_mm > 100 else 10.0
    picture = style.Picture(width_mm, rows * (size + gap) + foot + head, style_file)
    picture.heading(scene.title, left_mm=left)
    extent = layers.map_extent(scene, sites=False)
    top = float(np.quantile(values[shown], 0.9995)) or 1.0
    for k, frame in enumerate(shown):
        row, column = divmod(k, across)
        bottom = foot + (rows - 1 - row) * (size + gap)
        axes = projected_axes(picture, scene.plane, extent, (left + column * (size + gap), bottom, size, size))
        draw_land(axes, scene.plane, extent)
        draw_graticule(axes, scene.plane, extent, labels=column == 0 and row == rows - 1)
        layers.draw_cells(axes, scene, values[frame], layers.see_through(style.probability_colours()), top=top)
        layers.draw_overlays(axes, scene, drawn, size=1.8)
        axes.plot(0, 0, marker="*", markersize=6, mfc="white", mec=style.ACCENT, mew=0.8, zorder=6)
        for place in scene.front_km[:, frame]:
            axes.plot(*(place * KM), marker="o", markersize=4.5, mfc="none", mec=style.ACCENT, mew=1.0, zorder=6.5)
        axes.annotate(
            f"{scene.source_time[frame]:.1f} s", (0.04, 0.955), xycoords="axes fraction", va="top", fontsize=6.6, weight="bold",
            path_effects=layers.HALO, zorder=10,
        )  # fmt: skip
        if k == 0:
            draw_scale_bar(axes, extent)
    bar = picture.axes_mm(left + 10, 11.5, min(70.0, width_mm - 40), 2.0)
    picture.colorbar(
        ScalarMappable(Normalize(0, top), style.probability_colours()), cax=bar, orientation="horizontal", extend="max"
    )
    bar.locator_params(axis="x", nbins=5)
    bar.set_xlabel(f"{label}; star: epicentre, ring: fitted front", labelpad=1.5)
    return picture
