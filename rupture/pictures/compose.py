"""What moves on the map of a movie, put into the pixels of its frames."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from rupture.pictures import layers
from rupture.pictures import style as look
from rupture.pictures.basemap import KM
from rupture.pictures.scene import RAY_PROBABILITY

if TYPE_CHECKING:
    from rupture.pictures.movie import Animation

Array = NDArray[np.float64]
Pixels = NDArray[np.uint8]


class Compositor:
    """Paints wedges, rays and cells of one animation as its artists would, without drawing.

    Parameters
    ----------
    animation
        The animation; its picture has been drawn once, so that its axes have their place.
    """

    def __init__(self, animation: Animation) -> None:
        from rupture.pictures import raster

        self._raster = raster
        self._animation = animation
        scene, axes = animation.scene, animation.axes
        wide, high = animation.pixels
        corner, unit = axes.transData.transform([[0.0, 0.0], [KM, KM]])
        per_km = unit - corner
        self.box = np.array(
            [
                max(0, round(axes.bbox.x0)), min(wide, round(axes.bbox.x1)),
                max(0, high - round(axes.bbox.y1)), min(high, high - round(axes.bbox.y0)),
            ]
        )  # fmt: skip
        self._apex = np.stack(
            [corner[0] + scene.site_km[:, 0] * per_km[0], high - corner[1] - scene.site_km[:, 1] * per_km[1]], axis=-1
        )
        self._reach = animation.reach * float(per_km[0])
        turned = np.radians(scene.rays[..., :3]) + scene.convergence[:, None, None]
        shown = scene.used[:, None] & np.isfinite(scene.rays[..., 0]) & (scene.rays[..., 3] >= RAY_PROBABILITY)
        self._angles = np.where(shown[..., None], turned, np.nan)
        self._line_width = float(np.ravel(animation.rays.get_linewidth())[0]) * animation.picture.get_dpi() / 72
        self._colours = np.round(look.time_colours()(animation.scale(scene.source_time))[:, :3] * 255)
        past = np.isfinite(scene.track_km[:, 0])
        self._known = np.flatnonzero(past)
        self._track = np.stack(
            [corner[0] + scene.track_km[past, 0] * per_km[0], high - corner[1] - scene.track_km[past, 1] * per_km[1]],
            axis=-1,
        )
        dots = animation.trail
        self._dot = float(np.sqrt(dots.get_sizes()[0])) / 2, float(np.ravel(dots.get_linewidth())[0])
        self._place_cells(corner, per_km, wide, high)

    def _place_cells(self, corner: Array, per_km: Array, wide: int, high: int) -> None:
        scene = self._animation.scene
        self.has_cells = not scene.cells.is_trace
        if not self.has_cells:
            return
        west, east, south, north = scene.cells.edges_km
        rows, columns = self._animation.values.shape[1:]
        x = (np.arange(wide) + 0.5 - corner[0]) / per_km[0]
        y = (high - np.arange(high) - 0.5 - corner[1]) / per_km[1]
        self._column = np.floor((x - west) / (east - west) * columns).astype(np.int64)
        self._row = np.floor((y - south) / (north - south) * rows).astype(np.int64)
        clear = layers.see_through(look.probability_colours())
        self._cell_colours = np.round(np.asarray(clear(np.arange(256))) * 255).astype(np.uint8)

    def rays(self, frame: Pixels, index: int) -> None:
        """Paint the wedges of one frame and their best rays over them."""
        best, low, high = np.moveaxis(self._angles[:, index], -1, 0)
        colour = self._colours[index]
        self._raster.fill_wedges(
            frame, self._apex, np.stack([low, high], axis=-1), self._reach, colour, self._animation.wedges.get_alpha(), self.box
        )  # fmt: skip
        end = self._apex + self._reach[:, None] * np.stack([np.sin(best), -np.cos(best)], axis=-1)
        self._raster.fill_lines(
            frame, self._apex, end, self._line_width, colour, self._animation.rays.get_alpha(), self.box
        )

    def cells(self, frame: Pixels, index: int) -> None:
        """Paint the cells of one frame: only the rectangle in which there is something to see."""
        values = self._animation.values[index]
        seen = self._animation.seen(values)
        if seen is None:
            return
        (bottom, top), (left, right) = seen
        columns = np.flatnonzero((self._column >= left) & (self._column < right))
        rows = np.flatnonzero((self._row >= bottom) & (self._row < top))
        if columns.size == 0 or rows.size == 0:
            return
        edges = np.array([columns[0], columns[-1] + 1, rows[0], rows[-1] + 1])
        self._raster.fill_cells(
            frame, values, self._cell_colours, self._animation.top, self._column, self._row, _within(edges, self.box)
        )

    def trail(self, frame: Pixels, index: int) -> None:
        """Paint the front's places up to one frame."""
        count = int(np.searchsorted(self._known, index, side="right"))
        radius, rim = (size * self._animation.picture.get_dpi() / 72 for size in self._dot)
        self._raster.fill_dots(frame, self._track[:count], radius, rim, self._colours[self._known[:count]], self.box)


def _within(edges: NDArray[Any], box: NDArray[Any]) -> NDArray[Any]:
    out = np.where([True, False, True, False], np.maximum(edges, box), np.minimum(edges, box))
    return np.asarray(out)
