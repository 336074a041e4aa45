"""Cells where energy may have come from: a local map, or points along a fault trace."""

from __future__ import annotations

import json
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import ArrayLike, NDArray

from rupture.conventions import KM
from rupture.errors import InputError
from rupture.event import Event
from rupture.geodesy import LocalPlane, destination, distance_azimuth

Array = NDArray[np.float64]

MOST_CELLS = 250_000


@dataclass(frozen=True)
class Grid:
    """Cells at one depth.

    Attributes
    ----------
    longitude_deg, latitude_deg
        Shape (C,).
    depth_km
        Depth of all cells.
    east_m, north_m
        Azimuthal-equidistant coordinates around `centre`, shape (C,).
    shape
        (rows, columns) of a map, rows running north; (C,) of a trace.
    spacing_m
        Distance between cells.
    kind
        'map' or 'trace'.
    along_m
        Distance along a trace from the point nearest to the epicentre, shape (C,); None for a map.
    centre
        Longitude and latitude of the epicentre.
    """

    longitude_deg: Array
    latitude_deg: Array
    depth_km: float
    east_m: Array
    north_m: Array
    shape: tuple[int, ...]
    spacing_m: float
    kind: str
    along_m: Array | None
    centre: tuple[float, float]


def subsurface_length_km(magnitude: float) -> float:
    """Return the subsurface rupture length of Wells & Coppersmith (1994), all slip types: log10 L = -2.44 + 0.59 M."""
    return float(10 ** (-2.44 + 0.59 * magnitude))


def map_grid(event: Event, half_width_km: float | None = None, spacing_km: float | None = None) -> Grid:
    """Return a square map around the epicentre with true distances from it.

    Parameters
    ----------
    event
        Gives the centre and the depth of all cells.
    half_width_km
        By default one and a half times the rupture length of Wells & Coppersmith (1994), 30 km at least.
    spacing_km
        By default a fiftieth of the width.

    Raises
    ------
    InputError
        Without width and magnitude, for sizes that are not positive, or for more than 250,000 cells.
    """
    if half_width_km is None:
        if event.magnitude is None:
            raise InputError("the event has no magnitude, so the map has no size; give --magnitude or --half-width")
        half_width_km = max(30.0, 1.5 * subsurface_length_km(event.magnitude))
    spacing_km = half_width_km / 25.0 if spacing_km is None else spacing_km
    if not (half_width_km > 0 and 0 < spacing_km <= half_width_km):
        raise InputError(
            f"map of half width {half_width_km:g} km with cells of {spacing_km:g} km: sizes must be positive and fit"
        )
    count = int(np.floor(half_width_km / spacing_km))
    if (2 * count + 1) ** 2 > MOST_CELLS:
        raise InputError(
            f"{(2 * count + 1) ** 2} cells are more than {MOST_CELLS}; give a larger spacing or a smaller half width"
        )
    axis = spacing_km * KM * np.arange(-count, count + 1)
    north, east = (v.ravel() for v in np.meshgrid(axis, axis, indexing="ij"))
    plane = LocalPlane(event.longitude_deg, event.latitude_deg)
    longitude, latitude = plane.to_geographic(east, north)
    centre = (plane.longitude_deg, plane.latitude_deg)
    return Grid(
        longitude, latitude, event.depth_km, east, north, (axis.size, axis.size), spacing_km * KM, "map", None, centre
    )


def trace_grid(
    event: Event, longitude_deg: ArrayLike, latitude_deg: ArrayLike, spacing_km: float | None = None
) -> Grid:
    """Return points along a fault trace, equally spaced; distance along it counts from the point nearest the epicentre.

    Parameters
    ----------
    event
        Gives the depth of all cells and the origin of the distance.
    longitude_deg, latitude_deg
        Corners of the trace, shape (points,).
    spacing_km
        By default a hundredth of the trace.
    """
    lon, lat = (np.asarray(v, float) for v in (longitude_deg, latitude_deg))
    if lon.size < 2:
        raise InputError("a fault trace needs two points at least")
    leg, azimuth, _ = distance_azimuth(lon[:-1], lat[:-1], lon[1:], lat[1:])
    if not (leg > 0).all():
        keep = np.concatenate([[True], leg > 0])
        if keep.sum() < 2:
            raise InputError("all points of the fault trace are the same")
        return trace_grid(event, lon[keep], lat[keep], spacing_km)
    reach = np.concatenate([[0.0], np.cumsum(leg)])
    spacing = (reach[-1] / 100.0) if spacing_km is None else spacing_km * KM
    if not 0 < spacing <= reach[-1]:
        raise InputError(
            f"spacing of {spacing / KM:g} km along a trace of {reach[-1] / KM:.1f} km: it must be positive and fit"
        )
    along = np.arange(0.0, reach[-1] + 1e-6, spacing)
    part = np.clip(np.searchsorted(reach, along, side="right") - 1, 0, leg.size - 1)
    longitude, latitude = destination(lon[part], lat[part], azimuth[part], along - reach[part])
    plane = LocalPlane(event.longitude_deg, event.latitude_deg)
    east, north = plane.to_plane(longitude, latitude)
    along = along - along[int(np.argmin(np.hypot(east, north)))]
    centre = (plane.longitude_deg, plane.latitude_deg)
    return Grid(longitude, latitude, event.depth_km, east, north, (along.size,), float(spacing), "trace", along, centre)


def read_trace(path: str | Path) -> tuple[Array, Array]:
    """Read a fault trace from GeoJSON (RFC 7946): the one LineString in the file, or a MultiLineString joined end to end.

    Returns
    -------
    longitude_deg, latitude_deg
        Shape (points,).

    Raises
    ------
    InputError
        When the file is not GeoJSON or holds no line, or several separate ones.
    """
    path = Path(path)
    try:
        content = json.loads(path.read_text(encoding="utf-8"))
    except FileNotFoundError:
        raise InputError(f"{path}: no such trace file") from None
    except (OSError, ValueError) as error:
        raise InputError(f"{path}: not a GeoJSON file ({error})") from error
    lines = _lines(content)
    if len(lines) != 1:
        raise InputError(f"{path}: holds {len(lines)} lines; a fault trace is one LineString")
    try:
        points = np.array([[float(p[0]), float(p[1])] for p in lines[0]])
    except (TypeError, ValueError, IndexError):
        raise InputError(f"{path}: positions must be [longitude, latitude] in degrees") from None
    if points.shape[0] < 2 or not (np.abs(points[:, 1]) <= 90).all() or not (np.abs(points[:, 0]) <= 360).all():
        raise InputError(f"{path}: positions must be [longitude, latitude] in degrees, two of them at least")
    return points[:, 0], points[:, 1]


def _lines(content: object) -> list[list[list[float]]]:
    if not isinstance(content, dict):
        return []
    match content.get("type"):
        case "FeatureCollection":
            return [line for feature in content.get("features", []) for line in _lines(feature)]
        case "Feature":
            return _lines(content.get("geometry"))
        case "GeometryCollection":
            return [line for part in content.get("geometries", []) for line in _lines(part)]
        case "LineString":
            return [content.get("coordinates", [])]
        case "MultiLineString":
            return [[point for part in content.get("coordinates", []) for point in part]]
    return []
