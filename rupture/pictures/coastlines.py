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
    borders
        Numbers of the arcs that divide two countries.
    """

    longitude_deg: NDArray[np.float64]
    latitude_deg: NDArray[np.float64]
    arc_start: NDArray[np.int64]
    polygons: tuple[tuple[NDArray[np.int32], ...], ...]
    borders: NDArray[np.int32]


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
        rings = np.split(packed["ring_arc"], np.cumsum(packed["ring_size"])[:-1])
        ends = np.cumsum(packed["polygon_size"])
        borders = packed["border_arc"]
    polygons = tuple(tuple(rings[a:b]) for a, b in zip([0, *ends[:-1]], ends, strict=True))
    return World(lon, lat, start, polygons, borders)


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
    distance, azimuth = _spherical(plane, world.longitude_deg, world.latitude_deg)
    near = distance < limit
    east, north = limit * np.sin(azimuth), limit * np.cos(azimuth)
    east[near], north[near] = plane.to_plane(world.longitude_deg[near], world.latitude_deg[near])
    points = np.stack([east, north], axis=1)

    near_count = np.concatenate([[0], np.cumsum(near)])[world.arc_start]
    has_near = np.diff(near_count) > 0
    land: list[NDArray[np.float64]] = []
    for polygon in world.polygons:
        shapes = [_ring_on_plane(world, ring, points, azimuth, near, has_near, limit) for ring in polygon]
        land += [shape for shape in shapes if shape is not None]
        # The outer ring has the land on its right unless the far side of the Earth is within it, and so have lakes.
        small = 1e-3 * np.pi * limit**2
        outer, *lakes = (0.0 if shape is None else _signed_area(shape) for shape in shapes)
        if (outer > small) != any(lake < -small for lake in lakes):
            land.append(_circle(2 * limit))
    false_cut = _along_date_line(world)
    coast = [
        piece
        for number in np.unique([_number(arc) for polygon in world.polygons for ring in polygon for arc in ring])
        if has_near[number]
        for piece in _pieces(world, number, points, near, false_cut)
    ]
    borders = [
        piece
        for number in world.borders
        if has_near[number]
        for piece in _pieces(world, int(number), points, near, false_cut)
    ]
    return LocalLand(land, coast, borders, scale)


def _ring_on_plane(
    world: World,
    ring: NDArray[np.int32],
    points: NDArray[np.float64],
    azimuth: NDArray[np.float64],
    near: NDArray[np.bool_],
    has_near: NDArray[np.bool_],
    limit: float,
) -> NDArray[np.float64] | None:
    """Return a ring in plane coordinates, or None where nothing of it can be seen."""
    index = np.concatenate([_walk(world, int(arc)) for arc in ring])
    if not any(has_near[_number(arc)] for arc in ring):
        # Wholly outside, it matters only when it winds around the map: all land, or all sea.
        turn = np.diff(azimuth[index], append=azimuth[index[0]])
        if abs(_smallest_turn(turn).sum()) < np.pi:
            return None
    shape = _with_arcs(points[index], azimuth[index], near[index], limit)
    return shape if len(shape) > 2 else None


def _number(arc: int) -> int:
    return arc if arc >= 0 else ~arc


def _smallest_turn(angle: NDArray[np.float64]) -> NDArray[np.float64]:
    return (angle + np.pi) % (2 * np.pi) - np.pi


def _walk(world: World, arc: int) -> NDArray[np.int64]:
    number = _number(arc)
    index = np.arange(world.arc_start[number], world.arc_start[number + 1])
    return index if arc >= 0 else index[::-1]


def _spherical(
    plane: LocalPlane, longitude_deg: NDArray[np.float64], latitude_deg: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Distance in m and azimuth in rad from the centre, on the sphere: enough to tell near from far."""
    delta = np.radians(longitude_deg - plane.longitude_deg)
    lat, lat0 = np.radians(latitude_deg), np.radians(plane.latitude_deg)
    east = np.cos(lat) * np.sin(delta)
    north = np.cos(lat0) * np.sin(lat) - np.sin(lat0) * np.cos(lat) * np.cos(delta)
    up = np.sin(lat0) * np.sin(lat) + np.cos(lat0) * np.cos(lat) * np.cos(delta)
    return np.arctan2(np.hypot(east, north), up) * _EARTH_RADIUS_M, np.arctan2(east, north)


def _with_arcs(
    points: NDArray[np.float64], azimuth: NDArray[np.float64], near: NDArray[np.bool_], limit: float
) -> NDArray[np.float64]:
    """Drop far points that follow far points closely, and walk the circle where two far points lie wide apart."""
    step = np.radians(15.0)
    keep: list[NDArray[np.float64]] = []
    last_far: float | None = None
    far_at = np.flatnonzero(~near)
    position = 0
    for at in far_at.tolist():
        if at > position:
            keep.append(points[position:at])
            last_far = None
        position = at + 1
        turn = 0.0 if last_far is None else float(_smallest_turn(azimuth[at] - last_far))
        ends = at + 1 >= len(near) or near[at + 1]
        if last_far is not None and abs(turn) < step and not ends:
            continue
        if last_far is not None and abs(turn) > step:
            between = last_far + turn * np.linspace(0, 1, int(abs(turn) / step) + 2)[1:-1]
            keep.append(limit * np.stack([np.sin(between), np.cos(between)], axis=1))
        keep.append(points[at : at + 1])
        last_far = azimuth[at]
    keep.append(points[position:])
    return np.concatenate(keep)


def _signed_area(ring: NDArray[np.float64]) -> float:
    east, north = ring.T
    return float(np.sum(east * np.roll(north, -1) - np.roll(east, -1) * north) / 2)


def _circle(radius_m: float) -> NDArray[np.float64]:
    """Return a ring that, walked clockwise, has everything on its right."""
    angle = np.linspace(0, 2 * np.pi, 73)
    return radius_m * np.stack([np.sin(angle), np.cos(angle)], axis=1)


def _along_date_line(world: World) -> NDArray[np.bool_]:
    """Shape (points,): True where the line from this point to the next only closes a polygon cut at 180 degrees."""
    at_cut = np.abs(np.abs(world.longitude_deg) - 180.0) < 0.02
    return at_cut & np.roll(at_cut, -1)


def _pieces(
    world: World, number: int, points: NDArray[np.float64], near: NDArray[np.bool_], false_cut: NDArray[np.bool_]
) -> list[NDArray[np.float64]]:
    """Split an arc where it leaves the neighbourhood or follows a false line."""
    index = _walk(world, number)
    drawn = near[index[:-1]] & near[index[1:]] & ~false_cut[index[:-1]]
    if not drawn.any():
        return []
    edge = np.diff(np.concatenate([[False], drawn, [False]]).astype(np.int8))
    starts, stops = np.flatnonzero(edge == 1), np.flatnonzero(edge == -1)
    return [points[index[a : b + 1]] for a, b in zip(starts, stops, strict=True)]
