"""The one look of all pictures: sizes, colours, markers, and figures that keep it when they are saved."""

from __future__ import annotations

import functools
import textwrap
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any, Concatenate, ParamSpec, Protocol

import matplotlib as mpl
import numpy as np
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.colors import Colormap, ListedColormap
from matplotlib.figure import Figure
from numpy.typing import ArrayLike, NDArray

from rupture.errors import InputError
from rupture.pictures.fonts import quick_embedding
from rupture.result import Result
from rupture.wording import SHORT_CAUTION

MM = 1 / 25.4
ONE_COLUMN_MM = 88.0
TWO_COLUMNS_MM = 180.0

INK = "#1d2126"
MUTED = "#5f676f"
FAINT = "#b9bfc5"
LAND = "#e9e7e1"
SEA = "#f3f7fa"
COAST = "#7d8187"
OVERLAY = "#2f6b3c"
ACCENT = "#b3261e"
OUTLINE = "#ffffff"

SITE_MARKERS = {"6C": "^", "3C + vertical rotation": "v", "Z + horizontal rotation": "s", "other components": "D"}
"""Marker by what a site has; shape, not colour, tells the kinds apart."""

ARM_DASHES: tuple[Any, ...] = ("-", (0, (3.5, 1.6)))

_RC: dict[str, Any] = {
    "font.family": "sans-serif",
    "font.sans-serif": ["DejaVu Sans"],
    "font.size": 7.0,
    "axes.titlesize": 7.5,
    "axes.titleweight": "bold",
    "axes.titlelocation": "left",
    "axes.labelsize": 7.0,
    "axes.labelcolor": INK,
    "axes.edgecolor": INK,
    "axes.linewidth": 0.6,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "xtick.labelsize": 6.4,
    "ytick.labelsize": 6.4,
    "xtick.color": INK,
    "ytick.color": INK,
    "xtick.major.width": 0.6,
    "ytick.major.width": 0.6,
    "xtick.major.size": 2.6,
    "ytick.major.size": 2.6,
    "lines.linewidth": 1.1,
    "legend.fontsize": 6.2,
    "legend.frameon": False,
    "legend.handlelength": 1.8,
    "legend.borderaxespad": 0.2,
    "text.color": INK,
    "figure.facecolor": "white",
    "savefig.facecolor": "white",
    "savefig.dpi": 300,
    "figure.dpi": 150,
    # Text stays text in PDF and SVG, so that it can be searched, read aloud and edited.
    "pdf.fonttype": 42,
    "svg.fonttype": "none",
    "path.simplify": True,
}


def _lab_to_rgb(lightness: ArrayLike, chroma: ArrayLike, hue_deg: ArrayLike) -> NDArray[np.float64]:
    """CIELAB (polar, D65) to sRGB by the CIE 1976 formulas and IEC 61966-2-1; clipped to the gamut."""
    lightness, chroma, hue = (np.asarray(v, float) for v in (lightness, chroma, np.radians(hue_deg)))
    fy = (lightness + 16) / 116
    f = np.stack([fy + chroma * np.cos(hue) / 500, fy, fy - chroma * np.sin(hue) / 200])
    xyz = np.where(f > 6 / 29, f**3, 3 * (6 / 29) ** 2 * (f - 4 / 29)) * np.array([0.95047, 1.0, 1.08883])[:, None]
    to_linear = np.array([[3.2406, -1.5372, -0.4986], [-0.9689, 1.8758, 0.0415], [0.0557, -0.2040, 1.0570]])
    linear = np.clip(to_linear @ xyz, 0, 1)
    return np.where(linear <= 0.0031308, 12.92 * linear, 1.055 * linear ** (1 / 2.4) - 0.055).T


@functools.cache
def probability_colours() -> Colormap:
    """White to dark blue, lightness falling evenly (CIELAB), for probabilities and energy."""
    t = np.linspace(0, 1, 256)
    return ListedColormap(
        _lab_to_rgb(99 - 79 * t, 42 * np.sin(0.5 * np.pi * np.minimum(1, t / 0.75)), 238 + 50 * t),
        name="rupture_probability",
    )


@functools.cache
def time_colours() -> Colormap:
    """Dark purple over red to amber, lightness rising evenly (CIELAB), for source time."""
    t = np.linspace(0, 1, 256)
    return ListedColormap(_lab_to_rgb(22 + 54 * t, 52 + 16 * t, (322 + 110 * t) % 360), name="rupture_time")


class Picture(Figure):
    """A Matplotlib figure that keeps the look it was drawn in when it is saved, and shows itself in Jupyter."""

    def __init__(self, width_mm: float, height_mm: float, style: str | Path | None) -> None:
        super().__init__(figsize=(width_mm * MM, height_mm * MM))
        FigureCanvasAgg(self)
        self.rupture_style = style

    def savefig(self, *args: Any, **kwargs: Any) -> None:
        """Save as Matplotlib does, in the look the figure was drawn in."""
        # No smaller file is worth a third of the time that drawing a page takes.
        if str(kwargs.get("format") or (args and args[0]) or "").lower().endswith("png"):
            kwargs["pil_kwargs"] = {"compress_level": 3, **(kwargs.get("pil_kwargs") or {})}
        with style_context(self.rupture_style), quick_embedding():
            super().savefig(*args, **kwargs)

    def axes_mm(self, left: float, bottom: float, width: float, height: float, **kwargs: Any) -> Any:
        """Add axes at a place given in mm from the lower left corner of the page."""
        full_width, full_height = self.get_size_inches() / MM
        place = (left / full_width, bottom / full_height, width / full_width, height / full_height)
        return self.add_axes(place, **kwargs)

    def heading(self, text: str, left_mm: float = 10.0) -> None:
        """Write the line that says which earthquake this is, broken where the page is narrow."""
        width, height = self.get_size_inches() / MM
        lines = textwrap.wrap(text, max(20, int((width - left_mm) / 1.55)))
        self.text(
            left_mm / width,
            1 - 1.6 / height,
            "\n".join(lines),
            fontsize=7.0,
            weight="bold",
            va="top",
            parse_math=False,
            linespacing=1.25,
        )

    def _repr_png_(self) -> bytes:
        import io

        buffer = io.BytesIO()
        self.savefig(buffer, format="png", dpi=150)
        return buffer.getvalue()


def _read_style(path: Path) -> dict[str, Any]:
    try:
        lines = path.read_text(encoding="utf-8").splitlines()
    except (OSError, UnicodeDecodeError) as error:
        raise InputError(f"{path}: no such Matplotlib style file, or not a text file ({error})") from error
    for number, line in enumerate(lines, start=1):
        # Matplotlib only logs an unknown key and goes on without it.
        key = line.split("#")[0].split(":")[0].strip()
        if key and key not in mpl.rcParams:
            raise InputError(f"{path}, line {number}: Matplotlib has no style setting '{key}'")
    try:
        return {
            str(k): v for k, v in mpl.rc_params_from_file(path, fail_on_error=True, use_default_template=False).items()
        }
    except ValueError as error:
        raise InputError(f"{path}: not a Matplotlib style file ({str(error).strip()})") from error


@contextmanager
def style_context(style: str | Path | None = None) -> Iterator[None]:
    """Draw in the house look, with a Matplotlib style file on top if one is given.

    Raises
    ------
    InputError
        When the style file is missing or holds a key that Matplotlib does not know.
    """
    user = {} if style is None else _read_style(Path(style))
    keep = {"backend", "backend_fallback", "interactive", "toolbar", "webagg.port", "webagg.address"}
    # From Matplotlib's own defaults, so that a figure does not depend on whose machine draws it.
    look: dict[Any, Any] = {key: value for key, value in mpl.rcParamsDefault.items() if key not in keep}
    look |= _RC | {key: value for key, value in user.items() if key not in keep}
    with mpl.rc_context(look):
        yield


P = ParamSpec("P")


class FigureFunction(Protocol):
    """A figure as one call on a result."""

    __name__: str

    def __call__(
        self, result: Result, *args: Any, columns: int = 2, style: str | Path | None = None, **kwargs: Any
    ) -> Picture:
        """Draw it."""
        ...


def figure_function(draw: Callable[Concatenate[Result, str | Path | None, float, P], Picture]) -> FigureFunction:
    """Turn `draw(result, style, width_mm, ...)` into a figure function with the keywords `columns` and `style`.

    The drawing runs inside the style and gets the short caution at its foot.
    """

    @functools.wraps(draw)
    def wrapped(
        result: Result, *args: Any, columns: int = 2, style: str | Path | None = None, **kwargs: Any
    ) -> Picture:
        if columns not in (1, 2):
            raise InputError(f"columns must be 1 or 2, not {columns!r}")
        with style_context(style):
            picture = draw(result, style, ONE_COLUMN_MM if columns == 1 else TWO_COLUMNS_MM, *args, **kwargs)
            height_mm = picture.get_size_inches()[1] / MM
            picture.text(0.5, 1.2 / height_mm, SHORT_CAUTION, ha="center", va="bottom", fontsize=5.4, color=MUTED)
        return picture

    return wrapped


def power_of_ten(value: float, position: int | None = None) -> str:
    """Label a tick of a logarithmic axis in plain text, which stays text in every format.

    Examples
    --------
    >>> power_of_ten(1e-05), power_of_ten(1.0)
    ('10⁻⁵', '1')
    """
    exponent = round(np.log10(value)) if value > 0 else 0
    return "1" if exponent == 0 else "10" + str(exponent).translate(str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹"))


def site_marker(components: str) -> str:
    """Return which of `SITE_MARKERS` a site's components belong to.

    Examples
    --------
    >>> site_marker("6C"), site_marker("3C+rotZ"), site_marker("Z+rotH"), site_marker("3C")
    ('6C', '3C + vertical rotation', 'Z + horizontal rotation', 'other components')
    """
    known = {"6C": "6C", "3C+rotZ": "3C + vertical rotation", "Z+rotH": "Z + horizontal rotation"}
    return known.get(components, "other components")
