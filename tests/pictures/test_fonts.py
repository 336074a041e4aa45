"""Fonts are embedded quicker than Matplotlib does it alone, and no differently."""

from pathlib import Path

import pytest
from matplotlib import font_manager, ft2font
from matplotlib.backends import _backend_pdf_ps as backend

from rupture.pictures.fonts import lean_font, quick_embedding

TEXT = "Änderung fi µ 10⁻⁵ m²/s⁴, 68 % – Ł −3 °"


def outlines(path: object, numbers: set[int]) -> dict[int, tuple[list[tuple[int, int]], int]]:
    """Outline and width of each glyph as it is embedded."""
    with backend.get_glyphs_subset(path, numbers) as cut:  # type: ignore[arg-type]
        glyphs, widths = cut.font["glyf"], cut.font["hmtx"]
        names = cut.font.getGlyphOrder()
        out = {}
        for number in numbers:
            name = names[cut.glyph_index_map[number]]
            out[number] = (list(glyphs[name].getCoordinates(glyphs)[0]), widths[name][0])
        return out


@pytest.mark.parametrize("weight", ["normal", "bold"])
def test_the_same_glyphs_are_embedded(weight: str) -> None:
    path = font_manager.findfont(font_manager.FontProperties(family="DejaVu Sans", weight=weight))
    font = ft2font.FT2Font(str(path))
    numbers = {font.get_char_index(ord(letter)) for letter in TEXT}
    assert numbers <= set(lean_font(str(path))[1])
    slow = outlines(path, numbers)
    with quick_embedding():
        assert outlines(path, numbers) == slow


def test_a_letter_from_beyond_takes_the_long_way(tmp_path: Path) -> None:
    path = font_manager.findfont("DejaVu Sans")
    number = ft2font.FT2Font(str(path)).get_char_index(ord("ა"))
    assert number
    assert number not in lean_font(str(path))[1]
    slow = outlines(path, {number})
    with quick_embedding():
        assert outlines(path, {number}) == slow


def test_matplotlib_is_left_as_it_was() -> None:
    own = backend.get_glyphs_subset
    with pytest.raises(RuntimeError), quick_embedding():
        assert backend.get_glyphs_subset is not own
        raise RuntimeError
    assert backend.get_glyphs_subset is own
