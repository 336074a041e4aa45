"""Credible areas and track for GIS and globe viewers: GeoJSON (RFC 7946) and KML 2.2, cut at the antimeridian."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any
from xml.sax.saxutils import escape

import numpy as np
from numpy.typing import NDArray

from rupture.exports import split_at_date_line
from rupture.pictures.layers import SHARES, area_rings
from rupture.pictures.scene import Scene, credible_level
from rupture.wording import SHORT_CAUTION

Array = NDArray[np.float64]


def area_polygons(scene: Scene, share: float) -> Any:
    """Return the smallest area that holds `share` of a field, as a shapely geometry in degrees.

    Longitudes lie within -180 and 180; what crosses the antimeridian is cut there, as RFC 7946 section 3.1.9 asks.
    An area around a pole is closed along the pole.

    Parameters
    ----------
    scene
        A result on a regular grid.
    share
        Share of the probability or energy within.
    """
    import shapely
    from shapely.affinity import translate

    level = credible_level(scene.total, share)
    rings = area_rings(scene, scene.total, level) if np.isfinite(level) else []
    whole = shapely.Polygon()
    for ring in rings:
        # Even-odd: a ring within another is a hole.
        whole = whole.symmetric_difference(_in_degrees(scene, ring))
    world = shapely.box(-180, -90, 180, 90)
    pieces = [translate(whole, xoff=turn).intersection(world) for turn in (-360.0, 0.0, 360.0)]
    return shapely.union_all(pieces)


def _in_degrees(scene: Scene, ring: Array) -> Any:
    import shapely

    lon, lat = scene.to_degrees(ring)
    lon = np.degrees(np.unwrap(np.radians(lon)))
    places = np.column_stack([lon, lat])
    if abs(lon[-1] - lon[0]) > 180:
        pole = 90.0 if lat.mean() > 0 else -90.0
        places = np.vstack([places, [lon[-1], pole], [lon[0], pole], places[:1]])
    return shapely.make_valid(shapely.Polygon(places))


def _polygons(geometry: Any) -> list[Any]:
    parts = getattr(geometry, "geoms", [geometry])
    return [part for part in parts if part.geom_type == "Polygon" and not part.is_empty]


def write_areas_geojson(scene: Scene, path: Path) -> Path:
    """Write the 68 and 95 % areas as GeoJSON."""
    from shapely import set_precision
    from shapely.geometry import mapping
    from shapely.geometry.polygon import orient

    features = []
    for share in SHARES:
        parts = [orient(part) for part in _polygons(set_precision(area_polygons(scene, share), 1e-6))]
        if parts:
            coordinates = [mapping(part)["coordinates"] for part in parts]
            features.append(
                {
                    "type": "Feature",
                    "geometry": {"type": "MultiPolygon", "coordinates": coordinates},
                    "properties": {"role": "credible area", "share": share, "field": scene.cells.name},
                }
            )
    path.write_text(json.dumps({"type": "FeatureCollection", "features": features}), encoding="utf-8")
    return path


def write_kml(scene: Scene, path: Path) -> Path:
    """Write epicentre, sites, front, fitted arms and, on a regular grid, the credible areas as KML 2.2."""
    from datetime import timedelta

    marks = [_point("epicentre", scene.event["longitude_deg"], scene.event["latitude_deg"], scene.title)]
    lon, lat = scene.result.sites["longitude"].values, scene.result.sites["latitude"].values
    for s, code in enumerate(scene.codes):
        about = scene.components[s] if scene.used[s] else f"{scene.components[s]}, not used"
        marks.append(_point(code, float(lon[s]), float(lat[s]), about))
    front_lon, front_lat = scene.to_degrees(scene.track_km)
    for f in np.flatnonzero(np.isfinite(scene.track_km[:, 0])):
        moment = scene.origin + timedelta(seconds=float(scene.source_time[f]))
        when = f"<TimeStamp><when>{moment:%Y-%m-%dT%H:%M:%S}.{moment.microsecond // 1000:03d}Z</when></TimeStamp>"
        marks.append(_point(f"front {scene.source_time[f]:.1f} s", float(front_lon[f]), float(front_lat[f]), "", when))
    for arm, place in enumerate(scene.front_km):
        known = place[np.isfinite(place[:, 0])]
        if len(known) > 1:
            parts = split_at_date_line(*scene.to_degrees(known))
            lines = "".join(
                f"<LineString><tessellate>1</tessellate>{_coordinates(*zip(*part, strict=True))}</LineString>"
                for part in parts
            )
            marks.append(
                f"<Placemark><name>fitted arm {arm + 1}</name><MultiGeometry>{lines}</MultiGeometry></Placemark>"
            )
    if scene.field is not None and not scene.field.is_trace:
        for share in SHARES:
            shapes = "".join(_polygon(part) for part in _polygons(area_polygons(scene, share)))
            marks.append(f"<Placemark><name>{share:.0%} area</name><MultiGeometry>{shapes}</MultiGeometry></Placemark>")
    body = "\n".join(marks)
    path.write_text(
        '<?xml version="1.0" encoding="UTF-8"?>\n<kml xmlns="http://www.opengis.net/kml/2.2"><Document>'
        f"<name>{escape(scene.title)}</name><description>{escape(SHORT_CAUTION)}</description>\n{body}\n</Document></kml>\n",
        encoding="utf-8",
    )
    return path


def _coordinates(longitude_deg: Any, latitude_deg: Any) -> str:
    places = " ".join(f"{lon:.6f},{lat:.6f}" for lon, lat in zip(longitude_deg, latitude_deg, strict=True))
    return f"<coordinates>{places}</coordinates>"


def _point(name: str, longitude_deg: float, latitude_deg: float, about: str, extra: str = "") -> str:
    place = f"<Point>{_coordinates([longitude_deg], [latitude_deg])}</Point>"
    return f"<Placemark><name>{escape(name)}</name><description>{escape(about)}</description>{extra}{place}</Placemark>"


def _polygon(part: Any) -> str:
    outer = f"<outerBoundaryIs><LinearRing>{_coordinates(*part.exterior.xy)}</LinearRing></outerBoundaryIs>"
    holes = "".join(
        f"<innerBoundaryIs><LinearRing>{_coordinates(*hole.xy)}</LinearRing></innerBoundaryIs>"
        for hole in part.interiors
    )
    return f"<Polygon>{outer}{holes}</Polygon>"
