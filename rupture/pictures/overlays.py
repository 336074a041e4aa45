"""Fault traces and aftershocks of the user's own (GeoJSON) to draw on the maps."""

from __future__ import annotations

import json
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rupture.errors import InputError
from rupture.pictures.scene import Scene

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Overlay:
    """Lines and points of one file.

    Attributes
    ----------
    name
        What the legend calls it: the collection's `name`, or the file's name.
    lines
        Each (points, 2): longitude and latitude in degrees.
    points
        Shape (points, 2): longitude and latitude in degrees.
    """

    name: str
    lines: tuple[Array, ...]
    points: Array

    def lines_km(self, scene: Scene) -> list[Array]:
        """Lines in km east and north of the epicentre."""
        return [scene.to_km(*line.T) for line in self.lines]

    def points_km(self, scene: Scene) -> Array:
        """Points in km east and north of the epicentre, shape (points, 2)."""
        return scene.to_km(*self.points.T)


def read_overlay(path: str | Path) -> Overlay:
    """Read a GeoJSON file (RFC 7946): lines and outlines of polygons as lines, points as points.

    Parameters
    ----------
    path
        A FeatureCollection, Feature or geometry.

    Raises
    ------
    InputError
        When the file is missing, is not GeoJSON, or holds no line and no point.
    """
    path = Path(path)
    try:
        content = json.loads(path.read_text(encoding="utf-8"))
    except FileNotFoundError:
        raise InputError(f"{path}: no such overlay file") from None
    except (OSError, UnicodeDecodeError, json.JSONDecodeError) as error:
        raise InputError(f"{path}: not a GeoJSON file ({error})") from error
    lines: list[Array] = []
    points: list[Any] = []
    try:
        for kind, coordinates in _geometries(content):
            if kind == "Point":
                points.append(_places([coordinates])[0])
            elif kind == "MultiPoint":
                points += list(_places(coordinates))
            elif kind == "LineString":
                lines.append(_places(coordinates))
            elif kind in ("MultiLineString", "Polygon"):
                lines += [_places(part) for part in coordinates]
            elif kind == "MultiPolygon":
                lines += [_places(ring) for polygon in coordinates for ring in polygon]
    except (TypeError, ValueError, KeyError, AttributeError) as error:
        raise InputError(
            f"{path}: not valid GeoJSON ({error}); coordinates are [longitude, latitude] in degrees"
        ) from error
    if not lines and not points:
        raise InputError(f"{path}: holds no line, polygon or point")
    name = content.get("name")
    return Overlay(str(name) if name else path.stem, tuple(lines), np.array(points).reshape(-1, 2))


def read_overlays(paths: Sequence[str | Path | Overlay]) -> list[Overlay]:
    """Read several; overlays that are already read pass through."""
    return [item if isinstance(item, Overlay) else read_overlay(item) for item in paths]


def _geometries(content: Any) -> Iterator[tuple[str, Any]]:
    if not isinstance(content, dict):
        raise ValueError("the outermost value is not an object")
    kind = content.get("type")
    if kind == "FeatureCollection":
        for feature in content["features"]:
            yield from _geometries(feature)
    elif kind == "Feature":
        if content.get("geometry") is not None:
            yield from _geometries(content["geometry"])
    elif kind == "GeometryCollection":
        for member in content["geometries"]:
            yield from _geometries(member)
    else:
        yield str(kind), content.get("coordinates")


def _places(coordinates: Any) -> Array:
    places = np.array([point[:2] for point in coordinates], float).reshape(-1, 2)
    if not np.isfinite(places).all() or np.abs(places[:, 1]).max(initial=0.0) > 90:
        raise ValueError("a latitude is beyond 90 degrees or a coordinate is not a number")
    return places
