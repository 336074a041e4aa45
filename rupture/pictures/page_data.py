"""What the report page draws, as one JSON document: small integers, images packed and deflated."""

from __future__ import annotations

import base64
import math
import zlib
from collections.abc import Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rupture.pictures import layers, style
from rupture.pictures.answers import energy_series
from rupture.pictures.basemap import KM, Extent, graticule
from rupture.pictures.coastlines import local_land
from rupture.pictures.distance import s_speed_km_s
from rupture.pictures.overlays import Overlay
from rupture.pictures.panels import coherence, predicted_curves, used_spans, window_of_interest
from rupture.pictures.posteriors import SIZES, has_sample, posterior_sample, stated_interval
from rupture.pictures.scene import Scene, credible_level

Array = NDArray[np.float64]

IMAGE_BUDGET_BYTES = 2_800_000
"""Deflated size that one movie may take in the page; a larger one is averaged over blocks of cells."""

_LAND_UNIT_KM = 0.1


def page_data(scene: Scene, overlays: Sequence[Overlay] = ()) -> dict[str, Any]:
    """Return everything that the page's script needs, JSON-able and without NaN.

    Parameters
    ----------
    scene
        The result to show.
    overlays
        Fault traces and aftershocks for the map.
    """
    result = scene.result
    extent = layers.map_extent(scene, aspect=1.7)
    out: dict[str, Any] = {
        "origin": scene.origin.isoformat(),
        "lagged": scene.lagged,
        "times": _numbers(scene.source_time, 3),
        "frame": _first_frame(scene),
        "map": _map(scene, extent, overlays),
        "fields": [],
        "sites": [_site(scene, s) for s in range(len(scene.codes))],
        "timeScale": [layers.time_scale(scene).vmin, layers.time_scale(scene).vmax],
        "colours": {"probability": _colours(style.probability_colours()), "time": _colours(style.time_colours())},
    }
    shown = [scene] if scene.field is not None else []
    if result.energy is not None:
        shown.append(Scene.of(result, "energy"))
    out["fields"] = [_field(scene, one) for one in shown]
    if result.map is not None:
        out["energy"] = {
            name: _numbers(np.interp(scene.source_time, time, values, left=0.0, right=0.0), 6)
            for name, (time, values) in energy_series(result).items()
        }
    if result.track is not None:
        out["track"] = {
            "x": _numbers(scene.track_km[:, 0], 2), "y": _numbers(scene.track_km[:, 1], 2),
            "fronts": [{"x": _numbers(p[:, 0], 2), "y": _numbers(p[:, 1], 2)} for p in scene.front_km],
        }  # fmt: skip
        if "along_probability" in result.track:
            out["along"] = _along(scene)
        out["posterior"] = [
            _histogram(scene, name, label, unit) for name, label, unit in POSTERIORS if has_sample(result, name)
        ]
    return out


POSTERIORS = (("azimuth_deg", "direction", "deg"), *SIZES)


def _numbers(values: Array, digits: int) -> list[float | None]:
    """Round; None where a value is missing."""
    return [None if not math.isfinite(v) else round(float(v), digits) for v in np.asarray(values, float).ravel()]


def _packed(values: NDArray[Any]) -> str:
    return base64.b64encode(zlib.compress(np.ascontiguousarray(values).tobytes(), 9)).decode()


def _colours(colours: Any) -> str:
    return "".join(f"{r:02x}{g:02x}{b:02x}" for r, g, b in (colours(np.arange(256))[:, :3] * 255).round().astype(int))


def _first_frame(scene: Scene) -> int:
    frames = scene.ray_frames(3)
    return frames[len(frames) // 2] if frames else 0


def _lines(lines: list[Array]) -> list[list[int]]:
    """Each line as a flat list of integers, the first place absolute, then steps; in units of 0.1 km."""
    out = []
    for line in lines:
        whole = np.round(line / KM / _LAND_UNIT_KM).astype(int)
        steps = np.diff(whole, axis=0, prepend=np.zeros((1, 2), int))
        keep = np.ones(len(steps), bool)
        keep[1:] = steps[1:].any(axis=1)
        out.append(steps[keep].ravel().tolist())
    return out


def _map(scene: Scene, extent: Extent, overlays: Sequence[Overlay]) -> dict[str, Any]:
    found = local_land(scene.plane, extent.radius_km * KM)
    return {
        "extent": [round(v, 3) for v in (extent.west, extent.east, extent.south, extent.north)],
        "unit": _LAND_UNIT_KM,
        "overlays": [
            {
                "name": item.name,
                "lines": _lines([line * KM for line in item.lines_km(scene)]),
                "x": _numbers(item.points_km(scene)[:, 0], 2),
                "y": _numbers(item.points_km(scene)[:, 1], 2),
            }
            for item in overlays
        ],
        "land": _lines(found.land),
        "coast": _lines(found.coast),
        "borders": _lines(found.borders),
        "grid": [
            {"label": line.label, "meridian": line.meridian, "x": _numbers(p[:, 0], 2), "y": _numbers(p[:, 1], 2)}
            for line in graticule(scene.plane, extent)
            for p in [_trimmed(line.places_km)]
        ],
    }


def _trimmed(places: Array) -> Array:
    """Leave out the places off the map at both ends of a line."""
    known = np.flatnonzero(np.isfinite(places[:, 0]))
    return places[known[0] : known[-1] + 1]


def _site(scene: Scene, s: int) -> dict[str, Any]:
    sites = scene.result.sites
    rays = scene.rays[s]
    shown = (rays[:, 3] >= layers.RAY_PROBABILITY) & bool(scene.used[s])
    turn = np.degrees(layers.convergence(scene, s))
    return {
        "code": scene.codes[s],
        "components": scene.components[s],
        "used": bool(scene.used[s]),
        "reason": str(sites["reason"].values[s]),
        "distance": round(float(sites["distance"].values[s]), 1),
        "azimuth": round(float(sites["azimuth"].values[s]), 1),
        "marker": style.site_marker(scene.components[s]),
        "x": round(float(scene.site_km[s, 0]), 2),
        "y": round(float(scene.site_km[s, 1]), 2),
        "turn": round(turn, 3),
        "reach": round(float(layers.wedge_reach_km(scene)[s]), 1),
        "rays": [_numbers(np.where(shown, rays[:, k], np.nan), 1) for k in range(3)],
        "panel": _panel(scene, s),
    }


def _panel(scene: Scene, s: int) -> dict[str, Any] | None:
    direction = scene.direction
    share = np.asarray(direction["probability"].values[s], float)
    known = np.isfinite(share).all(axis=1)
    if not known.any():
        return None
    low, high = window_of_interest(scene)
    time = direction["time"].values.astype(float)
    inside = (time >= low) & (time <= high)
    axis = direction["back_azimuth"].values.astype(float)
    density = share[inside] / (360.0 / axis.size)
    top = float(np.nanquantile(density, 0.995)) if np.isfinite(density).any() else 1.0
    image = np.where(np.isfinite(density), 1 + np.clip(density / max(top, 1 / 360), 0, 1) * 254, 0)
    curves = predicted_curves(scene)[:, s][:, inside]
    return {
        "time": _numbers(time[inside], 3),
        "axis": [float(axis[0]), 360.0 / axis.size, axis.size],
        "top": top,
        "image": _packed(np.nan_to_num(image).round().astype(np.uint8)),
        "home": round(float(scene.home_back_azimuth[s]), 2),
        "arrivals": {
            "P": _numbers(scene.result.sites["p_arrival"].values[s : s + 1], 2)[0],
            "S": _numbers(scene.result.sites["s_arrival"].values[s : s + 1], 2)[0],
        },
        "curves": [_numbers(curve, 1) for curve in curves],
        "coherent": _numbers(coherence(scene, s)[inside], 3),
        "spans": [[round(a, 2), round(b, 2)] for a, b in used_spans(scene, s)],
    }


def _field(scene: Scene, own: Scene) -> dict[str, Any]:
    """Pack one movie: 8 bits on a square-root scale, so that small values keep their digits; averaged if too large.

    The page has the frames of `scene`; a field with other frames gives the nearest of its own.
    """
    field = own.cells
    nearest = np.abs(own.source_time[None] - scene.source_time[:, None]).argmin(axis=1)
    values = field.values[nearest]
    block = 1
    while True:
        coarse = values if block == 1 else _block_mean(values, block)
        top = float(coarse.max()) or 1.0
        packed = _packed(np.round(255 * np.sqrt(np.clip(coarse / top, 0, 1))).astype(np.uint8))
        if len(packed) <= IMAGE_BUDGET_BYTES or min(coarse.shape[1:]) <= 8:
            break
        block += 1
    shown = values[scene.active] if scene.active.any() else values
    return {
        "name": field.name,
        "label": field.label,
        "top": top,
        "show": float(np.quantile(shown, 0.9995)) or top,
        "shape": list(coarse.shape[1:]),
        "block": block,
        "image": packed,
        "summary": [_frame_summary(own, frame) for frame in values],
        "cells": _cells(own),
    }


def _block_mean(values: Array, block: int) -> Array:
    """Average over square blocks of cells; the last block of a row or column may be smaller."""
    out = values
    for axis in range(1, values.ndim):
        edges = np.arange(0, out.shape[axis], block)
        count = np.diff(np.append(edges, out.shape[axis]))
        shape = [-1 if k == axis else 1 for k in range(out.ndim)]
        out = np.add.reduceat(out, edges, axis=axis) / count.reshape(shape)
    return out


def _frame_summary(scene: Scene, frame: Array) -> list[float]:
    """Most probable cell (km east, km north) and the radius of a circle as large as the 68 % area, km."""
    flat = frame.ravel()
    place = scene.cells.places_km.reshape(-1, 2)[int(np.argmax(flat))]
    if scene.cells.is_trace:
        return [round(float(place[0]), 1), round(float(place[1]), 1), 0.0]
    level = credible_level(frame, layers.SHARES[0])
    west, east, south, north = scene.cells.edges_km
    area = (flat >= level).sum() * (east - west) * (north - south) / flat.size
    return [round(float(place[0]), 1), round(float(place[1]), 1), round(float(np.sqrt(area / np.pi)), 1)]


def _cells(scene: Scene) -> dict[str, Any]:
    """Places of the cells; longitude and latitude are given for the reading under the pointer."""
    places = scene.cells.places_km.reshape(-1, 2)
    lon, lat = scene.to_degrees(places)
    out: dict[str, Any] = {
        "trace": scene.cells.is_trace,
        "longitude": _packed(np.round(lon * 1e4).astype("<i4")),
        "latitude": _packed(np.round(lat * 1e4).astype("<i4")),
    }
    if scene.cells.is_trace:
        return out | {"x": _numbers(places[:, 0], 2), "y": _numbers(places[:, 1], 2)}
    return out | {"edges": [round(v, 4) for v in scene.cells.edges_km], "shape": list(scene.cells.places_km.shape[:2])}


def _along(scene: Scene) -> dict[str, Any]:
    track = scene.result.track
    assert track is not None
    along = track["along"].values.astype(float)
    step = float(along[1] - along[0]) if along.size > 1 else 1.0
    density = np.nan_to_num(np.asarray(track["along_probability"].values, float)) / step
    top = float(np.quantile(density, 0.998)) or 1.0
    sign = np.where(np.arange(track.sizes["arm"]) == 0, 1.0, -1.0)
    return {
        "along": _numbers(along, 3), "top": top, "image": _packed(np.round(1 + 254 * np.clip(density / top, 0, 1)).astype(np.uint8)),
        "times": _numbers(track["source_time"].values.astype(float), 3),
        "fronts": [_numbers(f * k, 2) for f, k in zip(track["front_distance"].values, sign, strict=True)],
        "sSpeed": s_speed_km_s(scene.result),
    }  # fmt: skip


def _histogram(scene: Scene, name: str, label: str, unit: str) -> dict[str, Any]:
    draws = posterior_sample(scene.result, name)
    low, best, high = stated_interval(scene.result, name)
    if name == "azimuth_deg":
        # Around the best direction, so that a direction near north is one peak.
        draws = (draws - best + 180) % 360 - 180 + best
    density, edges = np.histogram(draws, bins=min(40, max(8, int(np.sqrt(draws.size)))), density=True)
    return {
        "name": name, "label": label, "unit": unit, "edges": _numbers(edges, 5), "density": _numbers(density, 6),
        "interval": _numbers(np.array([low, best, high]), 3),
    }  # fmt: skip
