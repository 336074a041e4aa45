"""What lies on a map: sites, rays, probability, credible areas, track; shared by the figures and the movie."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
from matplotlib.collections import LineCollection, PolyCollection
from matplotlib.colors import Colormap, ListedColormap, Normalize
from matplotlib.lines import Line2D
from matplotlib.patches import Circle
from matplotlib.patheffects import withStroke
from numpy.typing import NDArray

from rupture.pictures import style
from rupture.pictures.basemap import KM, Extent
from rupture.pictures.overlays import Overlay
from rupture.pictures.scene import RAY_PROBABILITY, Scene, credible_level

Array = NDArray[np.float64]

SHARES = (0.68, 0.95)
HALO = [withStroke(linewidth=1.8, foreground="white")]


def see_through(colours: Colormap, opaque_at: float = 0.25) -> Colormap:
    """Return the colour map with its low end fading to clear, so that the land shows where nothing is."""
    rgba = colours(np.linspace(0, 1, 256))
    rgba[:, 3] = np.clip(np.linspace(0, 1, 256) / opaque_at, 0, 1)
    return ListedColormap(rgba, name=f"{colours.name}_clear")


def time_scale(scene: Scene) -> Normalize:
    """Return the colour scale of source time: from the origin, or earlier activity, to the end of activity."""
    when = scene.source_time[scene.active]
    if when.size == 0:
        return Normalize(0.0, 1.0)
    return Normalize(min(0.0, float(when[0])), max(float(when[-1]), float(when[0]) + 1.0))


def wedge_reach_km(scene: Scene) -> Array:
    """Shape (sites,): how far a site's ray is drawn: past the source region."""
    away = np.hypot(*scene.site_km.T)
    tracked = scene.track_km[np.isfinite(scene.track_km[:, 0])]
    spread = float(np.hypot(*tracked.T).max()) if tracked.size else 0.0
    return away + np.maximum(spread, 0.2 * away)


def ray_polygon(scene: Scene, site: int, frame: int, reach_km: float) -> Array | None:
    """Corners of a site's ray wedge in km, shape (points, 2); None where the site has no ray then."""
    best, low, high, coherent = scene.rays[site, frame]
    if not (np.isfinite(best) and coherent >= RAY_PROBABILITY and scene.used[site]):
        return None
    angle = np.radians(np.linspace(low, high, max(2, int((high - low) / 4) + 2)))
    # On an azimuthal map a geodesic that does not pass the centre bends a little; at regional distances the bend
    # is below the width of the ray, but meridians converge: turn north at the site into north on the map.
    angle = angle + convergence(scene, site)
    rim = scene.site_km[site] + reach_km * np.stack([np.sin(angle), np.cos(angle)], axis=-1)
    return np.vstack([scene.site_km[site], rim])


def ray_end(scene: Scene, site: int, frame: int, reach_km: float) -> Array | None:
    """Far end of a site's best ray in km, or None."""
    best, _, _, coherent = scene.rays[site, frame]
    if not (np.isfinite(best) and coherent >= RAY_PROBABILITY and scene.used[site]):
        return None
    angle = np.radians(best) + convergence(scene, site)
    return scene.site_km[site] + reach_km * np.array([np.sin(angle), np.cos(angle)])


def convergence(scene: Scene, site: int) -> float:
    """Angle from north at the site to north on the map in rad: bearing of the centre on the map less its azimuth."""
    return float(scene.convergence[site])


def draw_rays(axes: Any, scene: Scene, frames: list[int], colours: Colormap, scale: Normalize) -> None:
    """Draw ray wedges  and best rays of all used sites at the chosen frames, coloured by source time."""
    reach = wedge_reach_km(scene)
    for frame in frames:
        colour = colours(scale(scene.source_time[frame]))
        wedges = [ray_polygon(scene, s, frame, reach[s]) for s in range(len(scene.codes))]
        ends = [ray_end(scene, s, frame, reach[s]) for s in range(len(scene.codes))]
        axes.add_collection(
            PolyCollection(
                [w * KM for w in wedges if w is not None], facecolors=[colour], alpha=0.12, linewidths=0, zorder=4
            ),
            autolim=False,
        )
        lines = [np.stack([scene.site_km[s], end]) * KM for s, end in enumerate(ends) if end is not None]
        axes.add_collection(
            LineCollection(lines, colors=[colour], linewidths=0.6, alpha=0.85, zorder=4.2), autolim=False
        )


def draw_sites(axes: Any, scene: Scene, names: bool = True, size: float = 4.6) -> list[Line2D]:
    """Draw sites with a shape per kind, hollow when not used; return legend handles."""
    handles: list[Line2D] = []
    kinds = [style.site_marker(text) for text in scene.components]
    for kind, marker in style.SITE_MARKERS.items():
        for used in (True, False):
            where = [s for s, k in enumerate(kinds) if k == kind and bool(scene.used[s]) == used]
            if not where:
                continue
            look: dict[str, Any] = {
                "marker": marker,
                "markersize": size,
                "mec": style.INK,
                "mew": 0.7,
                "linestyle": "none",
            }
            look["mfc"] = style.INK if used else "white"
            axes.plot(*(scene.site_km[where].T * KM), zorder=7, **look)
            label = "6C site" if kind == "6C" else kind
            handles.append(Line2D([], [], label=label if used else f"{label}, not used", **look))
    if names:
        _name_sites(axes, scene)
    return handles


def _name_sites(axes: Any, scene: Scene) -> None:
    """Write the codes outside the ring of sites, where no ray crosses them, unless the frame is in the way there."""
    (west, east), (south, north) = axes.get_xlim(), axes.get_ylim()
    middle, size = np.array([west + east, south + north]) / 2, np.array([east - west, north - south])
    for s, code in enumerate(scene.codes):
        place = scene.site_km[s] * KM
        out = scene.site_km[s] / max(float(np.hypot(*scene.site_km[s])), 1e-9)
        tight = np.abs(place - middle) > np.array([0.36, 0.46]) * size
        out = np.where(tight, -np.sign(place - middle) * np.maximum(np.abs(out), 0.5), out)
        axes.annotate(
            code.split(".")[-1], tuple(place), xytext=5.2 * out, textcoords="offset points", parse_math=False,
            ha="left" if out[0] > 0.4 else "right" if out[0] < -0.4 else "center",
            va="bottom" if out[1] > 0.4 else "top" if out[1] < -0.4 else "center",
            fontsize=6.0, zorder=8, path_effects=HALO, clip_on=True,
        )  # fmt: skip


def draw_epicentre(axes: Any) -> Line2D:
    """Draw the epicentre star; return its legend handle."""
    look: dict[str, Any] = {
        "marker": "*",
        "markersize": 9.5,
        "mfc": style.ACCENT,
        "mec": "white",
        "mew": 0.7,
        "linestyle": "none",
    }
    axes.plot([0.0], [0.0], zorder=7.5, **look)
    return Line2D([], [], label="epicentre", **look)


def draw_cells(axes: Any, scene: Scene, values: Array, colours: Colormap, top: float | None = None) -> Any:
    """Draw values per cell: an image on a regular grid, a band of colour along a fault trace."""
    top = top or float(values.max()) or 1.0
    scale = Normalize(0.0, top)
    if scene.cells.is_trace:
        places = scene.cells.places_km * KM
        middle = (places[1:] + places[:-1]) / 2
        ends = np.vstack([places[:1], middle, places[-1:]])
        band = LineCollection(
            list(np.stack([ends[:-1], ends[1:]], axis=1)),
            array=values,
            cmap=colours,
            norm=scale,
            linewidths=5,
            capstyle="butt",
            zorder=2,
        )
        axes.add_collection(band, autolim=False)
        return band
    west, east, south, north = (v * KM for v in scene.cells.edges_km)
    axes_limits = axes.get_xlim(), axes.get_ylim()
    # Matplotlib's own image call: Cartopy's would warp an image that already lies in the map's plane.
    image = super(type(axes), axes).imshow(
        values, extent=(west, east, south, north), origin="lower", cmap=colours, norm=scale, interpolation="nearest",
        zorder=2, aspect="equal",
    )  # fmt: skip
    axes.set_xlim(axes_limits[0])
    axes.set_ylim(axes_limits[1])
    return image


def draw_areas(axes: Any, scene: Scene, probability: Array) -> list[Line2D]:
    """Draw the smallest areas that hold 68 and 95 % of a probability; return legend handles."""
    handles = []
    for share, width, dash in zip(SHARES, (1.1, 0.8), ("-", (0, (4, 1.5))), strict=True):
        level = credible_level(probability, share)
        if not np.isfinite(level):
            continue
        look: dict[str, Any] = {"color": style.INK, "linewidth": width, "linestyle": dash}
        handles.append(Line2D([], [], label=f"{share:.0%} area", **look))
        if scene.cells.is_trace:
            inside = probability >= level
            places = np.where(inside[:, None], scene.cells.places_km, np.nan) * KM
            axes.plot(*places.T, zorder=5, solid_capstyle="butt", alpha=0.9, **(look | {"linewidth": 2.2 * width}))
            continue
        for ring in area_rings(scene, probability, level):
            axes.plot(*(ring.T * KM), zorder=5, **look)
    return handles


def area_rings(scene: Scene, probability: Array, level: float) -> list[Array]:
    """Return closed rings in km around the cells of a regular grid whose probability is at least `level`."""
    from contourpy import LineType, contour_generator

    # Only the rectangle that holds the area, with one cell around it, so that every ring closes.
    inside = probability >= level
    rows, columns = np.flatnonzero(inside.any(axis=1)), np.flatnonzero(inside.any(axis=0))
    if rows.size == 0:
        return []
    part = np.s_[rows[0] : rows[-1] + 3, columns[0] : columns[-1] + 3]
    padded = np.pad(probability, 1)[part]
    east, north = scene.cells.places_km[0, :, 0], scene.cells.places_km[:, 0, 1]
    east = np.concatenate([[2 * east[0] - east[1]], east, [2 * east[-1] - east[-2]]])[part[1]]
    north = np.concatenate([[2 * north[0] - north[1]], north, [2 * north[-1] - north[-2]]])[part[0]]
    rings = contour_generator(east, north, padded, line_type=LineType.Separate).lines(level * (1 - 1e-9))
    return [np.asarray(ring) for ring in rings if len(ring) > 3]


def draw_track(axes: Any, scene: Scene, colours: Colormap, scale: Normalize, size: float = 17.0) -> list[Line2D]:
    """Draw the smoothed front, coloured by source time, and the fitted line source; return legend handles."""
    handles = []
    for arm, place in enumerate(scene.front_km):
        known = place[np.isfinite(place[:, 0])]
        if len(known) > 1:
            look: dict[str, Any] = {"color": style.INK, "linewidth": 1.0, "linestyle": style.ARM_DASHES[arm % 2]}
            axes.plot(*(known.T * KM), zorder=6.2, **look)
            axes.annotate(
                "", known[-1] * KM, known[-2] * KM, zorder=6.3,
                arrowprops={"arrowstyle": "-|>", "color": style.INK, "lw": 1.0, "mutation_scale": 9, "shrinkA": 0, "shrinkB": 0},
            )  # fmt: skip
            # An arrow in the legend too: an area's edge is a black line as well.
            name = "line source, fitted" if arm == 0 else "second arm"
            handles.append(Line2D([], [], label=name, marker=">", markersize=3.4, **look))
    known = np.isfinite(scene.track_km[:, 0])
    if known.any():
        axes.scatter(
            *(scene.track_km[known].T * KM), c=scene.source_time[known], cmap=colours, norm=scale, s=size, edgecolors="white",
            linewidths=0.5, zorder=6,
        )  # fmt: skip
        middle = colours(0.5)
        handles.append(
            Line2D(
                [],
                [],
                marker="o",
                markersize=4,
                mfc=middle,
                mec="white",
                mew=0.5,
                linestyle="none",
                label="front, smoothed",
            )
        )
    return handles


def draw_ellipses(axes: Any, scene: Scene, frames: list[int], colours: Colormap, scale: Normalize) -> None:
    """Draw the 68 % ellipse of the smoothed front at chosen frames."""
    turn = np.linspace(0, 2 * np.pi, 73)
    circle = np.sqrt(-2 * np.log(1 - SHARES[0])) * np.stack([np.cos(turn), np.sin(turn)])
    for frame in frames:
        covariance, centre = scene.track_covariance_km2[frame], scene.track_km[frame]
        if not (np.isfinite(covariance).all() and np.isfinite(centre).all()):
            continue
        values, vectors = np.linalg.eigh(covariance)
        ring = centre[:, None] + (vectors * np.sqrt(np.maximum(values, 0))) @ circle
        axes.plot(*(ring * KM), color=colours(scale(scene.source_time[frame])), linewidth=0.9, zorder=5.5)


def draw_overlays(axes: Any, scene: Scene, overlays: Sequence[Overlay], size: float = 3.0) -> list[Line2D]:
    """Draw fault traces and aftershocks under everything else; return legend handles."""
    handles = []
    looks = (("-", "o"), ((0, (5, 1.5)), "s"), ((0, (1, 1)), "D"))
    for k, overlay in enumerate(overlays):
        dash, marker = looks[k % len(looks)]
        line: dict[str, Any] = {"color": style.OVERLAY, "linewidth": 0.9, "linestyle": dash}
        point: dict[str, Any] = {"marker": marker, "markersize": size, "mfc": "none", "mec": style.OVERLAY, "mew": 0.5}
        for places in overlay.lines_km(scene):
            axes.plot(*(places.T * KM), zorder=3.5, **line)
        if overlay.points.size:
            axes.plot(*(overlay.points_km(scene).T * KM), zorder=3.6, linestyle="none", **point)
        shown = (line if overlay.lines else {"linestyle": "none"}) | (point if overlay.points.size else {})
        handles.append(Line2D([], [], label=overlay.name, **shown))
    return handles


def draw_mechanism(picture: style.Picture, scene: Scene, place_mm: tuple[float, float, float, float]) -> None:
    """Draw the beachball of the event's mechanism, when the event has one: lower hemisphere, equal area."""
    mechanism = scene.event.get("mechanism_deg")
    if not mechanism:
        return
    axes = picture.axes_mm(*place_mm)
    axes.set(xlim=(-1.08, 1.08), ylim=(-1.08, 1.08))
    axes.set_axis_off()
    axes.set_zorder(9)
    edge = np.linspace(-1.0, 1.0, 161)
    strike, dip, rake = mechanism
    pattern = p_radiation(strike, dip, rake, *np.meshgrid(edge, edge))
    rim = Circle((0, 0), 1, facecolor="white", edgecolor=style.INK, linewidth=0.6)
    axes.add_patch(rim)
    axes.contourf(edge, edge, pattern, levels=[0, 2], colors=[style.MUTED]).set_clip_path(rim)
    axes.add_patch(Circle((0, 0), 1, facecolor="none", edgecolor=style.INK, linewidth=0.6))


def p_radiation(strike_deg: float, dip_deg: float, rake_deg: float, east: Array, north: Array) -> Array:
    """Return the P radiation of a double couple on the lower hemisphere, seen in equal-area projection.

    Slip and normal vectors and the equal-area projection as in Aki & Richards (2002), chapter 4: the radiation is
    2 (g.n)(g.d) for the unit vector g of the ray.

    Parameters
    ----------
    strike_deg, dip_deg, rake_deg
        Mechanism in degrees.
    east, north
        Places on the projection, the rim at radius 1; any shape. Beyond the rim the rim's value continues.

    Returns
    -------
    ndarray
        Between -1 and 1, positive where the first motion is up.
    """
    strike, dip, rake = np.radians([strike_deg, dip_deg, rake_deg])
    # North, east, down.
    slip = np.array(
        [
            np.cos(rake) * np.cos(strike) + np.cos(dip) * np.sin(rake) * np.sin(strike),
            np.cos(rake) * np.sin(strike) - np.cos(dip) * np.sin(rake) * np.cos(strike),
            -np.sin(dip) * np.sin(rake),
        ]
    )
    normal = np.array([-np.sin(dip) * np.sin(strike), np.sin(dip) * np.cos(strike), -np.cos(dip)])
    radius = np.minimum(np.hypot(east, north), 1.0)
    azimuth = np.arctan2(east, north)
    takeoff = 2 * np.arcsin(radius / np.sqrt(2))
    ray = np.stack([np.sin(takeoff) * np.cos(azimuth), np.sin(takeoff) * np.sin(azimuth), np.cos(takeoff)])
    return 2 * np.tensordot(normal, ray, 1) * np.tensordot(slip, ray, 1)


def map_extent(scene: Scene, aspect: float = 1.0, sites: bool = True) -> Extent:
    """Return the extent that holds the sites, the track and the 95 % area, or only the source region."""
    return Extent.around(
        np.vstack([scene.site_km, source_places(scene)] if sites else [source_places(scene)]),
        aspect=aspect,
        margin=0.09,
    )


def scale_bar_corner(scene: Scene, extent: Extent) -> str:
    """Return the lower corner, 'left' or 'right', in which no site is in a scale bar's way; left when both are free."""
    east = (scene.site_km[:, 0] - extent.west) / extent.width_km
    low = (scene.site_km[:, 1] - extent.south) / extent.height_km < 0.14
    return "right" if (low & (east < 0.34)).any() and not (low & (east > 0.66)).any() else "left"


def source_places(scene: Scene) -> Array:
    """Places in km that the source region consists of: epicentre, track, line source, cells of the 95 % area."""
    places = [np.zeros((1, 2)), scene.track_km, *scene.front_km]
    if scene.field is not None and scene.total.any():
        level = credible_level(scene.total, SHARES[1])
        places.append(scene.cells.places_km[scene.total >= level])
    return np.vstack([p.reshape(-1, 2) for p in places])
