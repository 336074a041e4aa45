"""A map in a local azimuthal equidistant projection: land, graticule, scale bar, locator; any place on Earth."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from matplotlib.collections import LineCollection
from matplotlib.patches import PathPatch
from matplotlib.path import Path
from numpy.typing import NDArray

from rupture.geodesy import LocalPlane, wrap_longitude
from rupture.pictures import style
from rupture.pictures.coastlines import LocalLand, local_land

Array = NDArray[np.float64]
KM = 1e3
_STEPS_DEG = (0.001, 0.002, 0.005, 0.01, 0.02, 0.05, 0.1, 0.2, 0.25, 0.5, 1.0, 2.0, 5.0, 10.0, 15.0, 30.0, 45.0)
_LETTER_MM = 1.3  # width of a letter of the graticule's names


@dataclass(frozen=True)
class Extent:
    """A rectangle in km east and north of a map's centre.

    Attributes
    ----------
    west, east, south, north
        Edges in km.
    """

    west: float
    east: float
    south: float
    north: float

    @classmethod
    def around(cls, places_km: Array, margin: float = 0.08, aspect: float = 1.0, least_km: float = 2.0) -> Extent:
        """Return the extent that holds all finite places, widened to `aspect` (width over height).

        Parameters
        ----------
        places_km
            Shape (..., 2): east and north in km.
        margin
            Share of the size that is left free on each side.
        aspect
            Width over height.
        least_km
            The smallest half size.
        """
        flat = places_km.reshape(-1, 2)
        flat = flat[np.isfinite(flat).all(axis=1)]
        low, high = (flat.min(axis=0), flat.max(axis=0)) if flat.size else (np.zeros(2), np.zeros(2))
        centre, half = (low + high) / 2, np.maximum((high - low) / 2, least_km) * (1 + 2 * margin)
        half = np.array([max(half[0], half[1] * aspect), max(half[1], half[0] / aspect)])
        return cls(centre[0] - half[0], centre[0] + half[0], centre[1] - half[1], centre[1] + half[1])

    @property
    def radius_km(self) -> float:
        """Distance of the farthest corner from the centre of the projection."""
        return float(max(np.hypot(e, n) for e in (self.west, self.east) for n in (self.south, self.north)))

    @property
    def width_km(self) -> float:
        """Width."""
        return self.east - self.west

    @property
    def height_km(self) -> float:
        """Height."""
        return self.north - self.south


def projected_axes(
    picture: style.Picture, plane: LocalPlane, extent: Extent, place_mm: tuple[float, float, float, float]
) -> Any:
    """Add Cartopy axes that show `extent` around the centre of `plane`; data coordinates are m east and north.

    Cartopy's own extent call takes the long way around at the date line, so the limits are set in the plane.

    Parameters
    ----------
    picture
        The figure.
    plane
        The local plane; its centre is the centre of the projection.
    extent
        What to show.
    place_mm
        Left, bottom, width, height on the page in mm; the width over height should be that of the extent.
    """
    import cartopy.crs as ccrs

    globe = ccrs.Globe(ellipse="WGS84")
    projection = ccrs.AzimuthalEquidistant(plane.longitude_deg, plane.latitude_deg, globe=globe)
    axes = picture.axes_mm(*place_mm, projection=projection)
    axes.set_xlim(extent.west * KM, extent.east * KM)
    axes.set_ylim(extent.south * KM, extent.north * KM)
    axes.spines["geo"].set(linewidth=0.7, edgecolor=style.INK, zorder=9)
    axes.set_facecolor(style.SEA)
    return axes


def draw_land(axes: Any, plane: LocalPlane, extent: Extent, lines: bool = True, scale: str | None = None) -> LocalLand:
    """Fill the land and draw coast and borders; return what was drawn.

    Parameters
    ----------
    axes
        Axes from `projected_axes`.
    plane, extent
        The map's plane and extent.
    lines
        Whether to draw coast and borders.
    scale
        A Natural Earth scale, or None to choose by the extent.
    """
    found = local_land(plane, extent.radius_km * KM, scale)
    if found.land:
        outline = Path.make_compound_path(*(Path(np.vstack([ring, ring[:1]]), closed=True) for ring in found.land))
        # The thin line in the colour of the land closes the seam where pieces meet at the date line.
        axes.add_artist(PathPatch(outline, facecolor=style.LAND, edgecolor=style.LAND, linewidth=0.3, zorder=0.5))
    if lines:
        axes.add_collection(LineCollection(found.coast, colors=style.COAST, linewidths=0.5, zorder=3), autolim=False)
        axes.add_collection(
            LineCollection(
                found.borders, colors=style.COAST, linewidths=0.45, linestyles=[(0, (4, 2, 1, 2))], zorder=3
            ),
            autolim=False,
        )
    return found


@dataclass(frozen=True)
class GridLine:
    """One meridian or parallel on a map.

    Attributes
    ----------
    label
        Its degrees, written out.
    places_km
        Shape (points, 2), NaN between pieces outside the extent.
    meridian
        Whether it is a meridian.
    """

    label: str
    places_km: Array
    meridian: bool


def grid_step_deg(span_deg: float, lines: int = 4) -> float:
    """Return a round step that puts about `lines` lines into a span."""
    return min(_STEPS_DEG, key=lambda step: abs(np.log(step * lines / max(span_deg, 1e-6))))


def graticule(plane: LocalPlane, extent: Extent) -> list[GridLine]:
    """Return meridians and parallels at round degrees across an extent, across the date line and a pole too."""
    edge = np.linspace(0, 1, 41)
    inside_e, inside_n = np.meshgrid(extent.west + edge * extent.width_km, extent.south + edge * extent.height_km)
    reach = np.hypot(inside_e, inside_n) < 19_500  # beyond lies the far side of the Earth
    lon, lat = plane.to_geographic(inside_e[reach] * KM, inside_n[reach] * KM)
    pole = next((sign for sign in (1, -1) if _holds_pole(plane, extent, sign)), 0)
    lat_low, lat_high = float(lat.min()), float(lat.max())
    if pole:
        lat_low, lat_high = (lat_low, 90.0) if pole > 0 else (-90.0, lat_high)
    turned = wrap_longitude(lon - plane.longitude_deg)
    around = pole != 0 or float(np.ptp(turned)) > 300
    lon_low, lon_high = (-180.0, 180.0) if around else (float(turned.min()), float(turned.max()))
    lat_step, lon_step = grid_step_deg(lat_high - lat_low), grid_step_deg(lon_high - lon_low, 6 if around else 4)
    out = []
    first = np.ceil((lon_low + plane.longitude_deg) / lon_step)
    last = np.floor((lon_high + plane.longitude_deg) / lon_step)
    if around:
        last = first + round(360 / lon_step) - 1
    stop = 90.0 - (lat_step if around else 0.0)
    for k in np.arange(first, last + 1):
        along = np.clip(np.linspace(lat_low - lat_step, lat_high + lat_step, 181), -stop, stop)
        out.append(GridLine(longitude_label(k * lon_step), _clipped(plane, extent, k * lon_step, along), True))
    for k in np.arange(np.ceil(lat_low / lat_step), np.floor(lat_high / lat_step) + 1):
        latitude = k * lat_step
        if abs(latitude) < 90:
            margin = 0.0 if around else lon_step
            along = plane.longitude_deg + np.linspace(lon_low - margin, lon_high + margin, 361)
            out.append(GridLine(latitude_label(latitude), _clipped(plane, extent, along, latitude), False))
    return [line for line in out if np.isfinite(line.places_km).any()]


def _holds_pole(plane: LocalPlane, extent: Extent, sign: int) -> bool:
    east, north = (float(v) / KM for v in plane.to_plane(0.0, 90.0 * sign))
    return extent.west < east < extent.east and extent.south < north < extent.north


def _clipped(plane: LocalPlane, extent: Extent, longitude: Any, latitude: Any) -> Array:
    """Places of a line, NaN outside the extent but for the one point beyond each end that carries it to the frame."""
    places = np.stack(plane.to_plane(longitude, latitude), axis=-1) / KM
    inside = (
        (places[:, 0] >= extent.west)
        & (places[:, 0] <= extent.east)
        & (places[:, 1] >= extent.south)
        & (places[:, 1] <= extent.north)
    )
    keep = inside.copy()
    keep[1:] |= inside[:-1]
    keep[:-1] |= inside[1:]
    # A jump across the far side of the Earth is no line.
    leap = np.hypot(*np.diff(places, axis=0).T) > 0.2 * max(extent.width_km, extent.height_km)
    places[~keep] = np.nan
    places[1:][leap & keep[1:] & ~inside[1:]] = np.nan
    places[:-1][leap & keep[:-1] & ~inside[:-1]] = np.nan
    return places


def _degrees(value: float) -> str:
    return f"{value:.3f}".rstrip("0").rstrip(".")


def longitude_label(longitude_deg: float) -> str:
    """Return a meridian's name.

    Examples
    --------
    >>> longitude_label(-179.5), longitude_label(180), longitude_label(361), longitude_label(0)
    ('179.5°W', '180°', '1°E', '0°')
    """
    value = round(float(wrap_longitude(longitude_deg)), 6)
    if abs(value) in (0.0, 180.0):
        return f"{abs(value):.0f}°"
    return f"{_degrees(abs(value))}°{'E' if value > 0 else 'W'}"


def latitude_label(latitude_deg: float) -> str:
    """Return a parallel's name, 0.5°S for -0.5."""
    value = round(latitude_deg, 6)
    return "0°" if value == 0 else f"{_degrees(abs(value))}°{'N' if value > 0 else 'S'}"


def draw_graticule(axes: Any, plane: LocalPlane, extent: Extent, labels: bool = True) -> None:
    """Draw meridians and parallels, and label them where they meet the frame."""
    lines = graticule(plane, extent)
    axes.add_collection(
        LineCollection([line.places_km * KM for line in lines], colors=style.FAINT, linewidths=0.35, zorder=1.8),
        autolim=False,
    )
    if not labels:
        return
    taken: dict[str, list[float]] = {"bottom": [], "left": [], "top": [], "right": []}
    width_mm = axes.get_position().width * axes.figure.get_figwidth() / style.MM
    per_letter = _LETTER_MM / width_mm * extent.width_km
    for line in lines:
        sides = ("bottom", "top") if line.meridian else ("left", "right")
        others = ("left", "right") if line.meridian else ("bottom", "top")
        # Each line is named once, at its own side of the map where it reaches it, else where it leaves the map.
        for side in (*sides, *others):
            at = _frame_crossing(line.places_km, extent, side)
            if at is None:
                continue
            low, high = (extent.west, extent.east) if side in ("bottom", "top") else (extent.south, extent.north)
            room = per_letter * (len(line.label) + 1.5)
            free = not any(abs(at - other) < room for other in taken[side])
            if free and low + 0.02 * (high - low) < at < high - 0.02 * (high - low):
                taken[side].append(at)
                _frame_label(axes, extent, side, at, line.label)
            break


def _frame_crossing(places: Array, extent: Extent, side: str) -> float | None:
    """Where a line first crosses one side of the frame: km along that side."""
    axis, level = {
        "bottom": (1, extent.south),
        "top": (1, extent.north),
        "left": (0, extent.west),
        "right": (0, extent.east),
    }[side]
    low, high = (extent.west, extent.east) if axis == 1 else (extent.south, extent.north)
    away = places[:, axis] - level
    with np.errstate(invalid="ignore"):
        for i in np.flatnonzero(away[:-1] * away[1:] <= 0):
            if away[i] == away[i + 1]:
                continue
            share = away[i] / (away[i] - away[i + 1])
            at = float(places[i, 1 - axis] + share * (places[i + 1, 1 - axis] - places[i, 1 - axis]))
            if low <= at <= high:
                return at
    return None


def _frame_label(axes: Any, extent: Extent, side: str, at_km: float, text: str) -> None:
    place, offset, ha, va, turn = {
        "bottom": ((at_km, extent.south), (0, -2.5), "center", "top", 0),
        "top": ((at_km, extent.north), (0, 2.5), "center", "bottom", 0),
        "left": ((extent.west, at_km), (-2.5, 0), "right", "center", 90),
        "right": ((extent.east, at_km), (2.5, 0), "left", "center", 90),
    }[side]
    axes.annotate(
        text, (place[0] * KM, place[1] * KM), xytext=offset, textcoords="offset points", ha=ha, va=va,
        rotation=turn, rotation_mode="default", fontsize=6.0, color=style.MUTED, annotation_clip=False,
    )  # fmt: skip


def round_length_km(target_km: float) -> float:
    """Return the largest of 1, 2, 5 times a power of ten that is not longer than `target_km`.

    Examples
    --------
    >>> round_length_km(73.0), round_length_km(0.34)
    (50.0, 0.2)
    """
    power = 10.0 ** np.floor(np.log10(target_km))
    return float(max(step * power for step in (1, 2, 5) if step * power <= target_km * (1 + 1e-9)))


def draw_scale_bar(axes: Any, extent: Extent, share: float = 0.25, corner: str = "left") -> float:
    """Draw a bar of a round length in a lower corner; return its length in km.

    Lengths are true in every direction from the centre, and within 1 % anywhere on a map of 1500 km radius.
    """
    from matplotlib.patheffects import withStroke

    length = round_length_km(share * extent.width_km)
    bottom = extent.south + 0.035 * extent.height_km
    left = extent.west + 0.04 * extent.width_km if corner == "left" else extent.east - 0.04 * extent.width_km - length
    halo = [withStroke(linewidth=2.4, foreground="white")]
    cap = 0.008 * extent.height_km
    axes.plot(
        np.array([left, left, left + length, left + length]) * KM, np.array([bottom + cap, bottom, bottom, bottom + cap]) * KM,
        color=style.INK, linewidth=1.0, zorder=10, path_effects=halo, solid_capstyle="butt", solid_joinstyle="miter",
    )  # fmt: skip
    number = f"{length:g}" if length >= 1 else f"{length * 1000:g}"
    axes.text(
        (left + length / 2) * KM, (bottom + 0.012 * extent.height_km) * KM, f"{number} {'km' if length >= 1 else 'm'}",
        ha="center", va="bottom", fontsize=6.2, zorder=10, path_effects=halo,
    )  # fmt: skip
    return length


def draw_locator(
    picture: style.Picture, plane: LocalPlane, extent: Extent, place_mm: tuple[float, float, float, float]
) -> Any:
    """Draw a small map of the wider surroundings with the extent marked in it: where on Earth this is."""
    half = float(np.clip(extent.radius_km * 6, 1500, 9000))
    wide = Extent(-half, half, -half, half)
    axes = projected_axes(picture, plane, wide, place_mm)
    draw_land(axes, plane, wide, lines=False)
    draw_graticule(axes, plane, wide, labels=False)
    box = np.array(
        [
            [extent.west, extent.south],
            [extent.east, extent.south],
            [extent.east, extent.north],
            [extent.west, extent.north],
        ]
    )
    if extent.width_km > 0.06 * wide.width_km:
        axes.plot(*(np.vstack([box, box[:1]]).T * KM), color=style.ACCENT, linewidth=1.0, zorder=8)
    else:
        axes.plot(*(box.mean(axis=0) * KM), marker="s", markersize=3.6, mfc="none", mec=style.ACCENT, mew=1.1, zorder=8)
    return axes
