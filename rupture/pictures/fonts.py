"""Quick embedding of fonts in PDF.

Matplotlib cuts each font down to the letters used, and to do so reads all of it for every file: layout tables, names
of thousands of glyphs, most of which no PDF holds in the end. With DejaVu Sans that is most of the time that saving a
PDF takes. Here each font is cut down to the usual letters once per process, and Matplotlib goes on from there: what is
embedded stays the same. A letter from beyond takes the long way.
"""

from __future__ import annotations

import functools
import io
from collections.abc import Iterable, Iterator
from contextlib import contextmanager
from typing import Any

_LAYOUT_TABLES = ("GSUB", "GPOS", "GDEF", "kern", "FFTM")
_LETTERS = (*range(0x20, 0x180), *range(0x2010, 0x2040), *range(0x2070, 0x20A0), 0x2212, *range(0xFB00, 0xFB07))
"""Latin of all Europe, punctuation, superscripts, minus, ligatures (Unicode blocks)."""


class _Lean(io.BytesIO):
    """A font held in memory, in the place of a font's path."""

    face_index = 0


@functools.lru_cache(maxsize=8)
def lean_font(path: str) -> tuple[bytes, dict[int, int]]:
    """Return a TrueType font with the usual letters only, and the new number of each glyph by its old one."""
    from fontTools import subset  # type: ignore[import-untyped]

    options = subset.Options(layout_features=[], recommended_glyphs=True)
    options.drop_tables += _LAYOUT_TABLES
    font = subset.load_font(path, options)
    with font:
        cutter = subset.Subsetter(options)
        cutter.populate(unicodes=_LETTERS)
        cutter.subset(font)
        out = io.BytesIO()
        font.save(out, reorderTables=False)
    return out.getvalue(), dict(cutter.glyph_index_map)


@contextmanager
def _renumbered(cut: Any, number: dict[int, int], glyphs: Iterable[int]) -> Iterator[Any]:
    """Name glyphs of a cut font by the numbers that they have in the whole font."""
    with cut as found:
        mapping = {glyph: found.glyph_index_map[number[glyph]] for glyph in glyphs}
        yield found._replace(glyph_index_map=mapping)


@contextmanager
def quick_embedding() -> Iterator[None]:
    """Hand Matplotlib lean fonts while it saves; where it works otherwise than known here, it goes its own way."""
    import matplotlib.backends._backend_pdf_ps as module

    backend: Any = module
    own: Any = getattr(backend, "get_glyphs_subset", None)
    if own is None:
        yield
        return

    def subset(font: Any, glyphs: Any) -> Any:
        # Only a plain path: a collection's second face, or a path type of another version, is left alone.
        if getattr(font, "face_index", None) == 0 and str(font).lower().endswith(".ttf"):
            data, number = lean_font(str(font))
            if all(glyph in number for glyph in glyphs):
                return _renumbered(own(_Lean(data), {number[glyph] for glyph in glyphs}), number, glyphs)
        return own(font, glyphs)

    backend.get_glyphs_subset = subset
    try:
        yield
    finally:
        backend.get_glyphs_subset = own
