"""The movie: the map is drawn once, then only what moves is drawn over it, frame by frame."""

from __future__ import annotations

import warnings
from collections.abc import Callable, Iterator, Sequence
from pathlib import Path
from typing import Any

import numpy as np
from matplotlib.cm import ScalarMappable
from matplotlib.collections import LineCollection, PolyCollection
from numpy.typing import NDArray

from rupture.errors import InputError
from rupture.pictures import layers
from rupture.pictures import style as look
from rupture.pictures.answers import energy_series
from rupture.pictures.basemap import KM, Extent, draw_graticule, draw_land, draw_locator, draw_scale_bar, projected_axes
from rupture.pictures.clock import PastedText
from rupture.pictures.compose import Compositor
from rupture.pictures.encode import encode_h264, encode_images
from rupture.pictures.overlays import Overlay, read_overlays
from rupture.pictures.scene import Scene, credible_level
from rupture.result import Result

Array = NDArray[np.float64]
Frame = NDArray[np.uint8]

SHAPES = {"4:3": (1280, 960), "16:9": (1280, 720), "square": (960, 960)}
"""Width and height in pixels."""

_DPI = 160.0
_SECONDS = 12.0
_FRAMES_PER_S = (4.0, 30.0)


class Animation:
    """One movie on its way: a static picture and the artists that move on it.

    Parameters
    ----------
    result
        A result with a map.
    field
        'location' or 'energy'.
    shape
        One of `SHAPES`.
    style_file
        A Matplotlib style file, or None.
    overlays
        GeoJSON files of fault traces or aftershocks.
    """

    def __init__(
        self,
        result: Result,
        field: str,
        shape: str,
        style_file: str | Path | None,
        overlays: Sequence[str | Path | Overlay] = (),
    ) -> None:
        if shape not in SHAPES:
            raise InputError(f"movie shape must be one of {', '.join(SHAPES)}, not '{shape}'")
        self.scene = Scene.of(result, field)
        self.values, self.label = self.scene.cells.values, self.scene.cells.label
        self.pixels = SHAPES[shape]
        self.overlays = read_overlays(overlays)
        self.top = float(np.quantile(self.values[self.values > 0], 0.9995)) if (self.values > 0).any() else 1.0
        self.reach = layers.wedge_reach_km(self.scene)
        self.scale = layers.time_scale(self.scene)
        width, height = (size / _DPI / look.MM for size in self.pixels)
        self.picture = look.Picture(width, height, style_file)
        self.picture.set_dpi(_DPI)
        self._draw_static(width, height)
        self.moving = self._make_moving()
        self._background: Any = None

    def _draw_static(self, width: float, height: float) -> None:
        """Draw all that stays: land, sites, scale bar, time line, colour bar."""
        scene, picture = self.scene, self.picture
        line_height, foot = 13.0, 10.5
        left, bottom = 7.0, foot + line_height + 7.5
        map_width, map_height = width - left - 5, height - bottom - 13.5
        picture.text(
            left / width, 1 - 1.8 / height, scene.title, fontsize=7.6, weight="bold", va="top", parse_math=False
        )
        extent = layers.map_extent(scene, aspect=map_width / map_height)
        self.axes = projected_axes(picture, scene.plane, extent, (left, bottom, map_width, map_height))
        draw_land(self.axes, scene.plane, extent)
        draw_graticule(self.axes, scene.plane, extent)
        draw_scale_bar(self.axes, extent, share=0.16, corner=layers.scale_bar_corner(scene, extent))
        layers.draw_overlays(self.axes, scene, self.overlays)
        layers.draw_sites(self.axes, scene)
        inset = 0.2 * map_height
        place = (left + map_width - inset, bottom + map_height - inset, inset, inset)
        self.locator = draw_locator(picture, scene.plane, extent, place)
        self.line = picture.axes_mm(left + 5, foot, map_width * 0.66, line_height)
        for (name, (time, share)), colour in zip(
            energy_series(scene.result).items(), (look.probability_colours()(0.65), look.ACCENT), strict=False
        ):
            self.line.fill_between(time, share, step="mid", color=colour, alpha=0.25, linewidth=0)
            self.line.plot(time, share, drawstyle="steps-mid", color=colour, linewidth=0.9, label=name)
        self.line.set_xlim(float(scene.source_time[0]), float(scene.source_time[-1]))
        self.line.set_ylim(0)
        self.line.set_yticks([])
        self.line.set_ylabel("energy", fontsize=6.2)
        self.line.set_xlabel("source time after origin (s)", labelpad=1.0)
        self.line.legend(loc="upper right", fontsize=5.6, borderpad=0)
        bar = picture.axes_mm(left + map_width * 0.66 + 12, foot + 3, map_width * 0.34 - 12, 2.0)
        mappable = ScalarMappable(layers.Normalize(0, self.top), look.probability_colours())
        picture.colorbar(mappable, cax=bar, orientation="horizontal", extend="max")
        bar.set_xlabel(self.label, fontsize=6.2, labelpad=1.5)
        bar.tick_params(labelsize=5.8)
        bar.locator_params(axis="x", nbins=4)
        picture.text(0.5, 1.2 / height, look.SHORT_CAUTION, ha="center", va="bottom", fontsize=5.6, color=look.MUTED)
        per_mm = self.pixels[0] / width
        self.clock = PastedText(round(left * per_mm), round(5.4 * per_mm), 9.0, _DPI)
        self.extent: Extent = extent

    def _make_moving(self) -> list[Any]:
        """Make the artists that change, in drawing order."""
        axes = self.axes
        self.cells = layers.draw_cells(
            axes, self.scene, self.values[0], layers.see_through(look.probability_colours()), top=self.top
        )
        self.wedges = PolyCollection([], linewidths=0, facecolors=[look.time_colours()(0.0)], alpha=0.16)
        self.rays = LineCollection([], linewidths=0.8, colors=[look.time_colours()(0.0)], alpha=0.9)
        self.areas = LineCollection([], linewidths=[], colors=look.INK)
        self.trail = axes.scatter(
            [], [], c=[], cmap=look.time_colours(), norm=self.scale, s=13, edgecolors="white", linewidths=0.4
        )
        (self.front,) = axes.plot(
            [], [], marker="o", markersize=7, mfc="none", mec=look.ACCENT, mew=1.4, linestyle="none"
        )
        for collection in (self.wedges, self.rays, self.areas):
            axes.add_collection(collection, autolim=False)
        (self.star,) = axes.plot(
            [0], [0], marker="*", markersize=9, mfc=look.ACCENT, mec="white", mew=0.7, linestyle="none"
        )
        (self.cursor,) = self.line.plot(
            [0, 0], [0, 1], transform=self.line.get_xaxis_transform(), color=look.INK, linewidth=1.2
        )
        moving = [self.wedges, self.rays, self.cells, self.areas, self.trail, self.front, self.star, self.cursor]
        for order, artist in enumerate(moving):
            # Above all that stays, as blitting draws them, so that both ways of drawing give the same picture.
            artist.set_zorder(20 + order)
        return moving

    def set_frame(self, frame: int) -> None:
        """Move every artist to one frame."""
        scene = self.scene
        colour = look.time_colours()(self.scale(float(scene.source_time[frame])))
        self._set_cells(self.values[frame])
        wedges = [layers.ray_polygon(scene, s, frame, self.reach[s]) for s in range(len(scene.codes))]
        ends = [layers.ray_end(scene, s, frame, self.reach[s]) for s in range(len(scene.codes))]
        self.wedges.set_verts([wedge * KM for wedge in wedges if wedge is not None])
        self.wedges.set_facecolor(colour)
        self.rays.set_segments(
            [np.stack([scene.site_km[s], end]) * KM for s, end in enumerate(ends) if end is not None]
        )
        self.rays.set_color(colour)
        past = np.isfinite(scene.track_km[:, 0]) & (np.arange(scene.source_time.size) <= frame)
        self.trail.set_offsets(scene.track_km[past] * KM if past.any() else np.empty((0, 2)))
        self.trail.set_array(scene.source_time[past])
        self._set_marks(frame)

    def _set_marks(self, frame: int) -> None:
        """Move what lies over cells, rays and track: areas, front, cursor and clock."""
        scene = self.scene
        now = float(scene.source_time[frame])
        rings: list[Array] = []
        widths: list[float] = []
        if scene.active[frame] and not scene.cells.is_trace:
            for share, width in zip(layers.SHARES, (1.1, 0.6), strict=True):
                level = credible_level(self.values[frame], share)
                found = layers.area_rings(scene, self.values[frame], level) if np.isfinite(level) else []
                rings += [ring * KM for ring in found]
                widths += [width] * len(found)
        self.areas.set_segments(rings)
        self.areas.set_linewidth(widths or [0.0])
        fronts = scene.front_km[:, frame]
        self.front.set_data(fronts[:, 0] * KM, fronts[:, 1] * KM)
        self.cursor.set_xdata([now, now])
        self.clock.text = f"{now:+6.1f} s   {scene.utc(now)} UTC"

    def _set_cells(self, values: Array) -> None:
        """Show one frame's cells; of a regular grid only the rectangle in which there is something to see."""
        if self.scene.cells.is_trace:
            self.cells.set_array(values)
            return
        seen = self.seen(values)
        self.cells.set_visible(seen is not None)
        if seen is None:
            return
        (bottom, top), (left, right) = seen
        west, east, south, north = (edge * KM for edge in self.scene.cells.edges_km)
        width, height = (east - west) / values.shape[1], (north - south) / values.shape[0]
        self.cells.set_data(values[bottom:top, left:right])
        self.cells.set_extent(
            (west + left * width, west + right * width, south + bottom * height, south + top * height)
        )

    def seen(self, values: Array) -> tuple[tuple[int, int], tuple[int, int]] | None:
        """Return rows and columns, ends left out, of the rectangle of cells in which there is something to see."""
        seen = values > 0.002 * self.top
        rows, columns = np.flatnonzero(seen.any(axis=1)), np.flatnonzero(seen.any(axis=0))
        if rows.size == 0:
            return None
        return (int(rows[0]), int(rows[-1]) + 1), (int(columns[0]), int(columns[-1]) + 1)

    def _finished(self) -> Frame:
        canvas: Any = self.picture.canvas
        frame = np.asarray(canvas.buffer_rgba())
        self.clock.paste(frame)
        return frame

    def frames(self, progress: Callable[[int, int], None] | None = None) -> Iterator[Frame]:
        """Yield every frame, (height, width, 4) RGBA; the buffer is used again by the next one."""
        canvas: Any = self.picture.canvas
        with look.style_context(self.picture.rupture_style):
            for artist in self.moving:
                artist.set_animated(True)
            canvas.draw()
            renderer = canvas.get_renderer()
            background = canvas.copy_from_bbox(self.picture.bbox)
            # The locator lies over the map: its pixels are put back on top instead of being drawn again.
            locator = canvas.copy_from_bbox(self.locator.get_window_extent().padded(2))
            paint = Compositor(self)
            under = [self.areas] if paint.has_cells else [self.cells, self.areas]
            over = self.moving[self.moving.index(self.trail) + 1 :]
            pixels = np.asarray(canvas.buffer_rgba())
            count = self.scene.source_time.size
            for frame in range(count):
                canvas.restore_region(background)
                paint.rays(pixels, frame)
                if paint.has_cells:
                    paint.cells(pixels, frame)
                else:
                    self._set_cells(self.values[frame])
                self._set_marks(frame)
                for artist in under:
                    artist.draw(renderer)
                paint.trail(pixels, frame)
                for artist in over:
                    artist.draw(renderer)
                canvas.restore_region(locator)
                yield self._finished()
                if progress is not None:
                    progress(frame + 1, count)

    def redrawn_frames(self, first: int = 0) -> Iterator[Frame]:
        """Yield frames from `first` on by drawing the whole picture anew: the slow, obvious twin of `frames`."""
        canvas: Any = self.picture.canvas
        with look.style_context(self.picture.rupture_style):
            for artist in self.moving:
                artist.set_animated(False)
            for frame in range(first, self.scene.source_time.size):
                self.set_frame(frame)
                canvas.draw()
                yield self._finished()


def make_movie(
    result: Result,
    path: str | Path,
    field: str = "location",
    shape: str = "4:3",
    style: str | Path | None = None,
    progress: Callable[[int, int], None] | None = None,
    overlays: Sequence[str | Path | Overlay] = (),
) -> Path:
    """Write the movie of location probability (or energy) with rays, track, areas and a time line.

    Parameters
    ----------
    result
        A result with a map.
    path
        The file; its suffix chooses the format: .mp4 (H.264), .webp or .gif. Written beside and moved into place.
    field
        'location': the ray stack; 'energy': the energy inversion.
    shape
        '4:3' (1280 x 960), '16:9' (1280 x 720) or 'square' (960 x 960).
    style
        A Matplotlib style file to lay over the house look.
    progress
        Called with (done, total) frames.
    overlays
        GeoJSON files of fault traces or aftershocks.

    Returns
    -------
    pathlib.Path
        What was written: the path, or its .webp twin when this machine has no H.264 encoder.

    Raises
    ------
    InputError
        When nothing was mapped, or for an unknown suffix, field or shape.
    """
    path = Path(path)
    if path.suffix not in (".mp4", ".webp", ".gif"):
        raise InputError(f"{path}: a movie is written as .mp4, .webp or .gif")
    with look.style_context(style):
        animation = Animation(result, field, shape, style, overlays)
    count = animation.scene.source_time.size
    rate = float(np.clip(count / _SECONDS, *_FRAMES_PER_S))
    if path.suffix == ".mp4":
        try:
            return encode_h264(animation.frames(progress), animation.pixels, rate, path)
        except LookupError as error:
            path = path.with_suffix(".webp")
            warnings.warn(f"no H.264 encoder here ({error}); the movie is written as {path.name}", stacklevel=2)
    return encode_images(animation.frames(progress), rate, path)
