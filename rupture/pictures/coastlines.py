"""Coastlines, land and borders from the packed Natural Earth files, laid on a local plane; never the network."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from rupture.geodesy import LocalPlane

DATA_FOLDER = Path(__file__).with_name("data")
SCALES = ("10m", "50m", "110m")

_EARTH_RADIUS_M = 6_371_008.8  # mean radius, IUGG; only decides what is far away
_CLAMP = 1.5  # land outside this multiple of the map's radius is moved onto that circle
_FARTHEST_RAD = np.radians(175.0)


@dataclass(frozen=True)
class World:
    """Land and borders of the whole Earth at one scale.

    Attributes
    ----------
    longitude_deg, latitude_deg
        Points of all arcs, shape (points,).
    arc_start
        First point of each arc, and one past the last, shape (arcs + 1,).
    polygons
        Rings of each piece of land, outer one first, then its lakes: arc numbers in walking order, `~n` is arc n
        backwards. Land lies on the right hand.
    coast, borders
        Numbers of the arcs that bound land, and of those that divide two countries.
    false_cut
        Shape (points,): True where the line from a point to the next only closes a polygon cut at 180 degrees.
    unit
        The points as unit vectors on the sphere, shape (points, 3).
    cap_centre, cap_radius_rad
        For each polygon a circle on the sphere around it: unit vector, shape (polygons, 3), and radius.
    """

    longitude_deg: NDArray[np.float64]
    latitude_deg: NDArray[np.float64]
    arc_start: NDArray[np.int64]
    polygons: tuple[tuple[NDArray[np.int32], ...], ...]
    coast: NDArray[np.int64]
    borders: NDArray[np.int32]
    false_cut: NDArray[np.bool_]
    unit: NDArray[np.float64]
    cap_centre: NDArray[np.float64]
    cap_radius_rad: NDArray[np.float64]


@dataclass(frozen=True)
class LocalLand:
    """What of the world falls on a map, in plane coordinates (m).

    Attributes
    ----------
    land
        Closed rings, each (points, 2); filled together with the non-zero rule they give the land.
    coast, borders
        Lines, each (points, 2).
    scale
        Which Natural Earth scale it is.
    """

    land: list[NDArray[np.float64]]
    coast: list[NDArray[np.float64]]
    borders: list[NDArray[np.float64]]
    scale: str


@lru_cache(maxsize=len(SCALES))
def load_world(scale: str) -> World:
    """Read one packed scale: 10m, 50m or 110m."""
    with np.load(DATA_FOLDER / f"land_{scale}.npz") as packed:
        deltas = np.ascontiguousarray(packed["delta"].transpose(1, 2, 0)).view("<i4")[..., 0]
        start = np.concatenate([[0], np.cumsum(packed["arc_size"], dtype=np.int64)])
        # Each arc's first delta is its absolute place: restart the running sum there.
        total = np.cumsum(deltas, axis=1, dtype=np.int64)
        before = np.concatenate([np.zeros((2, 1), np.int64), total], axis=1)[:, start[:-1]]
        grid = total - np.repeat(before, packed["arc_size"], axis=1)
        lon, lat = grid * packed["scale"][:, None] + packed["offset"][:, None]
        packed_rings = packed["ring_arc"]
        rings = np.split(packed_rings, np.cumsum(packed["ring_size"])[:-1])
        ends = np.cumsum(packed["polygon_size"])
        borders = packed["border_arc"]
    polygons = tuple(tuple(rings[a:b]) for a, b in zip([0, *ends[:-1]], ends, strict=True))
    coast = np.unique(np.where(packed_rings < 0, ~packed_rings, packed_rings)).astype(np.int64)
    at_cut = np.abs(np.abs(lon) - 180.0) < 0.02
    unit = _unit_vector(lon, lat)
    centres, radii = [], []
    for outer, *_ in polygons:
        corners = unit[np.concatenate([np.arange(start[_number(a)], start[_number(a) + 1]) for a in outer])]
        centre = corners.mean(axis=0)
        centre /= np.linalg.norm(centre)
        centres.append(centre)
        radii.append(np.arccos(np.clip((corners @ centre).min(), -1, 1)))
    return World(
        lon,
        lat,
        start,
        polygons,
        coast,
        borders,
        at_cut & np.roll(at_cut, -1),
        unit,
        np.array(centres),
        np.array(radii),
    )


def _unit_vector(longitude_deg: NDArray[np.float64], latitude_deg: NDArray[np.float64]) -> NDArray[np.float64]:
    lon, lat = np.radians(longitude_deg), np.radians(latitude_deg)
    return np.stack([np.cos(lat) * np.cos(lon), np.cos(lat) * np.sin(lon), np.sin(lat)], axis=-1)


def choose_scale(radius_m: float) -> str:
    """Return the Natural Earth scale for a map that reaches `radius_m` from its centre.

    Examples
    --------
    >>> choose_scale(300e3), choose_scale(2e6), choose_scale(9e6)
    ('10m', '50m', '110m')
    """
    return "10m" if radius_m < 1.0e6 else "50m" if radius_m < 5.0e6 else "110m"


def local_land(plane: LocalPlane, radius_m: float, scale: str | None = None) -> LocalLand:
    """Return land, coast and borders within a circle around the centre of a local plane.

    Nothing is cut at the date line or a pole. Points outside 1.5 times the circle are moved radially onto it,
    which keeps the topology, so that rings stay rings and an inland map is all land.

    Parameters
    ----------
    plane
        The plane; its centre is the centre of the circle.
    radius_m
        Radius of the circle in m, up to a third of the way around the Earth.
    scale
        A Natural Earth scale, or None to choose by the radius.
    """
    return _local_land(plane.longitude_deg, plane.latitude_deg, radius_m, scale or choose_scale(radius_m))


@lru_cache(maxsize=16)
def _local_land(longitude_deg: float, latitude_deg: float, radius_m: float, scale: str) -> LocalLand:
    # Kept, because one page of small maps asks for the same land a dozen times.
    plane = LocalPlane(longitude_deg, latitude_deg)
    world = load_world(scale)
    limit = min(_CLAMP * radius_m, _FARTHEST_RAD * _EARTH_RADIUS_M)
    frame = _local_frame(longitude_deg, latitude_deg)
    # On the sphere: enough to tell near from far.
    near = world.unit @ frame[2] > np.cos(limit / _EARTH_RADIUS_M)
    points = np.empty((near.size, 2))
    points[near] = np.stack(plane.to_plane(world.longitude_deg[near], world.latitude_deg[near]), axis=-1)

    near_count = np.concatenate([[0], np.cumsum(near)])[world.arc_start]
    has_near = np.diff(near_count) > 0
    land: list[NDArray[np.float64]] = []
    # A polygon without a point nearby matters only when it may wind around the map: when the circle around it holds
    # the centre of the map or the far side of the Earth.
    away = np.arccos(np.clip(world.cap_centre @ frame[2], -1, 1))
    around = np.minimum(away, np.pi - away) <= world.cap_radius_rad
    for polygon, winds in zip(world.polygons, around, strict=True):
        if not winds and not any(has_near[_number(arc)] for ring in polygon for arc in ring):
            continue
        shapes = [_ring_on_plane(world, ring, points, near, frame, limit) for ring in polygon]
        land += [shape for shape in shapes if shape is not None]
        # The outer ring has the land on its right unless the far side of the Earth is within it, and so have lakes.
        small = 1e-3 * np.pi * limit**2
        outer, *lakes = (0.0 if shape is None else _signed_area(shape) for shape in shapes)
        if (outer > small) != any(lake < -small for lake in lakes):
            land.append(_circle(2 * limit))
    coast, borders = (
        [piece for number in numbers if has_near[number] for piece in _pieces(world, int(number), points, near)]
        for numbers in (world.coast, world.borders)
    )
    return LocalLand(land, coast, borders, scale)


def _ring_on_plane(
    world: World,
    ring: NDArray[np.int32],
    points: NDArray[np.float64],
    near: NDArray[np.bool_],
    frame: NDArray[np.float64],
    limit: float,
) -> NDArray[np.float64] | None:
    """Return a ring in plane coordinates, or None where nothing of it can be seen."""
    index = np.concatenate([_walk(world, int(arc)) for arc in ring])
    close = near[index]
    if close.all():
        return points[index] if len(index) > 2 else None
    east, north, _ = frame @ world.unit[index].T
    azimuth = np.arctan2(east, north)
    if not close.any():
        # Wholly outside, it matters only when it winds around the map: all land, or all sea.
        turn = np.diff(azimuth, append=azimuth[0])
        if abs(_smallest_turn(turn).sum()) < np.pi:
            return None
    return _with_arcs(points[index], azimuth, close, limit)


def _number(arc: int) -> int:
    return arc if arc >= 0 else ~arc


def _smallest_turn(angle: NDArray[np.float64]) -> NDArray[np.float64]:
    return (angle + np.pi) % (2 * np.pi) - np.pi


def _walk(world: World, arc: int) -> NDArray[np.int64]:
    number = _number(arc)
    index = np.arange(world.arc_start[number], world.arc_start[number + 1])
    return index if arc >= 0 else index[::-1]


def _local_frame(longitude_deg: float, latitude_deg: float) -> NDArray[np.float64]:
    """Return unit vectors east, north and up at a place, shape (3, 3)."""
    lon, lat = np.radians([longitude_deg, latitude_deg])
    east = [-np.sin(lon), np.cos(lon), 0.0]
    north = [-np.sin(lat) * np.cos(lon), -np.sin(lat) * np.sin(lon), np.cos(lat)]
    return np.array([east, north, [np.cos(lat) * np.cos(lon), np.cos(lat) * np.sin(lon), np.sin(lat)]])


def _with_arcs(
    points: NDArray[np.float64], azimuth: NDArray[np.float64], near: NDArray[np.bool_], limit: float
) -> NDArray[np.float64]:
    """Move far points onto the circle: few of them where they lie closely, arcs between those that lie wide apart."""
    step = np.radians(5.0)
    sector = np.floor(azimuth / step)
    keep = near | np.roll(near, 1) | np.roll(near, -1) | (sector != np.roll(sector, 1))
    points, azimuth, near = points[keep], azimuth[keep], near[keep]
    points[~near] = limit * np.stack([np.sin(azimuth), np.cos(azimuth)], axis=1)[~near]
    turn = _smallest_turn(np.diff(azimuth))
    wide = np.flatnonzero(~near[:-1] & ~near[1:] & (np.abs(turn) > 3 * step))
    pieces, position = [], 0
    for at in wide.tolist():
        between = azimuth[at] + turn[at] * np.linspace(0, 1, int(abs(turn[at]) / step) + 2)[1:-1]
        pieces += [points[position : at + 1], limit * np.stack([np.sin(between), np.cos(between)], axis=1)]
        position = at + 1
    return np.concatenate([*pieces, points[position:]])


def _signed_area(ring: NDArray[np.float64]) -> float:
    east, north = ring.T
    return float(np.sum(east * np.roll(north, -1) - np.roll(east, -1) * north) / 2)


def _circle(radius_m: float) -> NDArray[np.float64]:
    """Return a ring that, walked clockwise, has everything on its right."""
    angle = np.linspace(0, 2 * np.pi, 73)
    return radius_m * np.stack([np.sin(angle), np.cos(angle)], axis=1)


def _pieces(
    world: World, number: int, points: NDArray[np.float64], near: NDArray[np.bool_]
) -> list[NDArray[np.float64]]:
    """Split an arc where it leaves the neighbourhood or follows a false line."""
    index = _walk(world, number)
    drawn = near[index[:-1]] & near[index[1:]] & ~world.false_cut[index[:-1]]
    if not drawn.any():
        return []
    edge = np.diff(np.concatenate([[False], drawn, [False]]).astype(np.int8))
    starts, stops = np.flatnonzero(edge == 1), np.flatnonzero(edge == -1)
    return [points[index[a : b + 1]] for a, b in zip(starts, stops, strict=True)]
