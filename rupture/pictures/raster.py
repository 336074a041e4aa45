"""Coloured cells and ray wedges put straight into the pixels of a frame, edges smoothed.

A drawing library builds paths and clips, maps and blends arrays for every one of them; of a movie they are the dearest
parts. Pixels are counted from the upper left corner; a pixel's centre lies half a pixel inside.
"""

from __future__ import annotations

import numpy as np
from numba import njit
from numpy.typing import NDArray

Array = NDArray[np.float64]
Pixels = NDArray[np.uint8]


@njit(cache=True, nogil=True)
def fill_cells(
    frame: Pixels,
    values: Array,
    colours: Pixels,
    top: float,
    column: NDArray[np.int64],
    row: NDArray[np.int64],
    box: NDArray[np.int64],
) -> None:
    """Blend coloured cells into a frame, in place.

    Parameters
    ----------
    frame
        Shape (height, width, 4), RGBA, opaque.
    values
        Shape (rows, columns) of cells.
    colours
        Shape (256, 4), RGBA: the colour scale from 0 to `top`.
    top
        Value of the last colour.
    column, row
        Shape (width,) and (height,): cell column and row at each pixel.
    box
        First and last column, then first and last row of pixels that cells cover, ends left out.
    """
    last = colours.shape[0] - 1
    scale = colours.shape[0] / top
    for y in range(box[2], box[3]):
        line = values[row[y]]
        for x in range(box[0], box[1]):
            level = min(last, int(line[column[x]] * scale))
            share = int(colours[level, 3])
            if share == 0:
                continue
            for k in range(3):
                below = int(frame[y, x, k])
                frame[y, x, k] = (below * (255 - share) + int(colours[level, k]) * share + 127) // 255


@njit(cache=True, nogil=True, inline="always")
def _blend(frame: Pixels, y: int, x: int, colour: Array, share: float) -> None:
    for k in range(3):
        below = float(frame[y, x, k])
        frame[y, x, k] = int(below + (colour[k] - below) * share + 0.5)


@njit(cache=True, nogil=True)
def _span(a: float, rest: float, low: float, high: float) -> tuple[float, float]:
    """Cut the interval of x to where a x + rest >= 0."""
    if a > 1e-12:
        low = max(low, -rest / a)
    elif a < -1e-12:
        high = min(high, -rest / a)
    elif rest < 0:
        high = low - 1.0
    return low, high


@njit(cache=True, nogil=True)
def fill_wedges(
    frame: Pixels, apex: Array, edges: Array, reach: Array, colour: Array, alpha: float, box: NDArray[np.int64]
) -> None:
    """Blend circular sectors, one after the other, into a frame, in place.

    Parameters
    ----------
    frame
        Shape (height, width, 4), RGBA, opaque.
    apex
        Shape (wedges, 2): x and y of each corner in pixels.
    edges
        Shape (wedges, 2): first and last direction in rad, clockwise from up; NaN for no wedge.
    reach
        Shape (wedges,): radius in pixels.
    colour
        Red, green, blue, 0 to 255.
    alpha
        Opacity.
    box
        First and last column, then first and last row of pixels that may change, ends left out.
    """
    weight = int(alpha * 65536 + 0.5)
    paint = np.empty(3, np.int64)
    for k in range(3):
        paint[k] = int(colour[k] + 0.5) * weight + 32768
    for w in range(apex.shape[0]):
        first, last = edges[w, 0], edges[w, 1]
        if not np.isfinite(first + last):
            continue
        width = last - first
        x0, y0, far = apex[w, 0], apex[w, 1], reach[w]
        # Inward normals of both edges: a point is inside the half-plane where the product is positive.
        ax, ay = np.cos(first), np.sin(first)
        bx, by = -np.cos(last), -np.sin(last)
        narrow, whole = width < np.pi, width >= 2 * np.pi - 1e-9
        top = max(box[2], int(np.floor(y0 - far - 1)))
        bottom = min(box[3], int(np.ceil(y0 + far + 1)))
        for y in range(top, bottom):
            dy = y + 0.5 - y0
            chord = (far + 1.0) ** 2 - dy * dy
            if chord <= 0:
                continue
            low, high = -np.sqrt(chord), np.sqrt(chord)
            # Columns that are covered in full need no distances: they are nearly all.
            chord = (far - 1.0) ** 2 - dy * dy
            inner_low, inner_high = (-np.sqrt(chord), np.sqrt(chord)) if chord > 0 and (narrow or whole) else (1.0, 0.0)
            if narrow:
                low, high = _span(ax, ay * dy + 0.5, low, high)
                low, high = _span(bx, by * dy + 0.5, low, high)
                inner_low, inner_high = _span(ax, ay * dy - 0.5, inner_low, inner_high)
                inner_low, inner_high = _span(bx, by * dy - 0.5, inner_low, inner_high)
            start = max(box[0], int(np.ceil(low + x0 - 0.5)))
            stop = min(box[1], int(np.floor(high + x0 - 0.5)) + 1)
            full = max(start, int(np.ceil(inner_low + x0 - 0.5)))
            rest = min(stop, int(np.floor(inner_high + x0 - 0.5)) + 1)
            if inner_high < inner_low or rest <= full:
                full = rest = stop
            for x in range(full, rest):
                for k in range(3):
                    frame[y, x, k] = (int(frame[y, x, k]) * (65536 - weight) + paint[k]) >> 16
            for part in range(2):
                for x in range(start if part == 0 else rest, full if part == 0 else stop):
                    dx = x + 0.5 - x0
                    one = min(1.0, max(0.0, ax * dx + ay * dy + 0.5))
                    two = min(1.0, max(0.0, bx * dx + by * dy + 0.5))
                    cover = one * two if narrow else 1.0 - (1.0 - one) * (1.0 - two)
                    if whole:
                        cover = 1.0
                    away = dx * dx + dy * dy
                    if away > (far - 1.0) ** 2:
                        cover *= min(1.0, max(0.0, far - np.sqrt(away) + 0.5))
                    _blend(frame, y, x, colour, cover * alpha)


@njit(cache=True, nogil=True)
def fill_lines(
    frame: Pixels, start: Array, stop: Array, width: float, colour: Array, alpha: float, box: NDArray[np.int64]
) -> None:
    """Blend straight lines into a frame, in place; lines with NaN are left out.

    Parameters
    ----------
    frame
        Shape (height, width, 4), RGBA, opaque.
    start, stop
        Shape (lines, 2): x and y of both ends in pixels.
    width
        Width in pixels, above 1.
    colour, alpha, box
        As in `fill_wedges`.
    """
    half = width / 2
    for i in range(start.shape[0]):
        x0, y0 = start[i, 0], start[i, 1]
        dx, dy = stop[i, 0] - x0, stop[i, 1] - y0
        length = np.hypot(dx, dy)
        if not length > 0:
            continue
        ux, uy = dx / length, dy / length
        top = max(box[2], int(np.floor(min(y0, y0 + dy) - half - 1)))
        bottom = min(box[3], int(np.ceil(max(y0, y0 + dy) + half + 1)))
        for y in range(top, bottom):
            ry = y + 0.5 - y0
            low, high = min(0.0, dx) - half - 1.0, max(0.0, dx) + half + 1.0
            low, high = _span(-uy, ux * ry + half + 0.5, low, high)
            low, high = _span(uy, -ux * ry + half + 0.5, low, high)
            low, high = _span(ux, uy * ry + 0.5, low, high)
            low, high = _span(-ux, -uy * ry + length + 0.5, low, high)
            first = max(box[0], int(np.ceil(low + x0 - 0.5)))
            last = min(box[1], int(np.floor(high + x0 - 0.5)) + 1)
            for x in range(first, last):
                rx = x + 0.5 - x0
                aside, along = abs(ux * ry - uy * rx), ux * rx + uy * ry
                cover = min(1.0, max(0.0, half - aside + 0.5))
                cover *= min(1.0, max(0.0, along + 0.5)) * min(1.0, max(0.0, length - along + 0.5))
                _blend(frame, y, x, colour, cover * alpha)


@njit(cache=True, nogil=True)
def fill_dots(frame: Pixels, centre: Array, radius: float, rim: float, colours: Array, box: NDArray[np.int64]) -> None:
    """Paint discs with a white rim, one after the other, into a frame, in place.

    Parameters
    ----------
    frame
        Shape (height, width, 4), RGBA, opaque.
    centre
        Shape (dots, 2): x and y in pixels.
    radius, rim
        Radius of the disc, and width of the rim that is laid half inside and half outside of it, in pixels.
    colours
        Shape (dots, 3): red, green, blue, 0 to 255.
    box
        As in `fill_wedges`.
    """
    white = np.full(3, 255.0)
    half = rim / 2
    size = radius + half + 1.0
    for i in range(centre.shape[0]):
        x0, y0 = centre[i, 0], centre[i, 1]
        for y in range(max(box[2], int(np.floor(y0 - size))), min(box[3], int(np.ceil(y0 + size)) + 1)):
            for x in range(max(box[0], int(np.floor(x0 - size))), min(box[1], int(np.ceil(x0 + size)) + 1)):
                away = np.hypot(x + 0.5 - x0, y + 0.5 - y0)
                disc = min(1.0, max(0.0, radius - away + 0.5))
                if disc > 0:
                    _blend(frame, y, x, colours[i], disc)
                ring = min(1.0, max(0.0, radius + half - away + 0.5)) - min(1.0, max(0.0, radius - half - away + 0.5))
                if ring > 0:
                    _blend(frame, y, x, white, ring)
