"""A running text for movie frames: each letter is drawn once, then its pixels are pasted."""

from __future__ import annotations

import numpy as np
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from numpy.typing import NDArray

from rupture.pictures import style

Pixels = NDArray[np.uint8]
LETTERS = "0123456789+-:. sUTC"


class PastedText:
    """Text in a fixed-width font at a fixed place on a white page.

    Drawing text is the dearest part of a frame; only some twenty different letters ever occur in a clock.

    Parameters
    ----------
    left, top
        Upper left corner in pixels, counted from the upper left corner of the frame.
    points
        Font size.
    dpi
        Pixels per inch of the frame.
    """

    def __init__(self, left: int, top: int, points: float, dpi: float) -> None:
        self.left, self.top = left, top
        self.text = ""
        # DejaVu Sans Mono, which Matplotlib carries, is 0.602 em wide in every letter.
        self.width = round(0.602 * points * dpi / 72)
        self.height = round(1.5 * points * dpi / 72)
        self._letters = {letter: self._draw(letter, points, dpi) for letter in LETTERS}

    def _draw(self, letter: str, points: float, dpi: float) -> Pixels:
        figure = Figure(figsize=(self.width / dpi, self.height / dpi), dpi=dpi, facecolor="white")
        canvas = FigureCanvasAgg(figure)
        figure.text(0, 0.3, letter, fontsize=points, family="DejaVu Sans Mono", color=style.INK)
        canvas.draw()
        return np.array(canvas.buffer_rgba())[: self.height, : self.width]

    def paste(self, frame: Pixels) -> None:
        """Put the text into a frame, (height, width, 4), in place; letters that were not foreseen stay blank."""
        for k, letter in enumerate(self.text):
            pixels = self._letters.get(letter)
            left = self.left + k * self.width
            if pixels is not None and left + self.width <= frame.shape[1]:
                frame[self.top : self.top + self.height, left : left + self.width] = pixels
