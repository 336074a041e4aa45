"""Tables and outlines of a result for other programs: CSV and GeoJSON."""

from __future__ import annotations

import csv
import json
from datetime import datetime, timedelta
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from rupture.geodesy import wrap_longitude

if TYPE_CHECKING:
    from rupture.result import Result

DIRECTION_COLUMNS = (
    "site", "time_utc", "seconds_after_origin", "band_low_hz", "band_high_hz",
    "back_azimuth_deg", "back_azimuth_p05_deg", "back_azimuth_p95_deg",
    "apparent_velocity_km_s", "apparent_velocity_p05_km_s", "apparent_velocity_p95_km_s", "probability_coherent",
)  # fmt: skip
TRACK_COLUMNS = (
    "time_utc", "source_time_s", "longitude_deg", "latitude_deg", "east_km", "north_km",
    "sigma_east_km", "sigma_north_km", "correlation", "probability_active",
)  # fmt: skip


def origin_time(result: Result) -> datetime:
    """Return the origin time of the event as an aware datetime."""
    return datetime.fromisoformat(result.summary["event"]["origin_time"].replace("Z", "+00:00"))


def utc_text(origin: datetime, seconds: float) -> str:
    """Return UTC in ISO 8601 with milliseconds, `seconds` after the origin time."""
    moment = origin + timedelta(seconds=float(seconds))
    return moment.replace(tzinfo=None).isoformat(timespec="milliseconds") + "Z"


def _number(value: float, digits: int) -> str:
    return "" if not np.isfinite(value) else f"{value:.{digits}f}"


def write_direction_csv(result: Result, path: str | Path) -> None:
    """Write one row per site, band and window; windows without data are left out."""
    data, origin = result.direction, origin_time(result)
    names = ("back_azimuth_best", "back_azimuth_p05", "back_azimuth_p95",
             "apparent_velocity_best", "apparent_velocity_p05", "apparent_velocity_p95", "probability_coherent")  # fmt: skip
    columns = [np.asarray(data[name].transpose("site", "band", "time").values) for name in names]
    times, low, high = (np.asarray(data[name].values) for name in ("time", "band_low", "band_high"))
    with Path(path).open("w", newline="", encoding="utf-8") as file:
        writer = csv.writer(file)
        writer.writerow(DIRECTION_COLUMNS)
        for i, code in enumerate(data["site"].values):
            for b in range(low.size):
                for t in np.flatnonzero(np.isfinite(columns[-1][i, b])):
                    values = [column[i, b, t] for column in columns]
                    writer.writerow(
                        [
                            code,
                            utc_text(origin, times[t]),
                            _number(times[t], 3),
                            f"{low[b]:g}",
                            f"{high[b]:g}",
                        ]
                        + [_number(v, 2) for v in values[:3]]
                        + [_number(v, 3) for v in values[3:]]
                    )


def write_track_csv(result: Result, path: str | Path) -> None:
    """Write the smoothed front, one row per source time."""
    track, origin = result.track, origin_time(result)
    assert track is not None
    with Path(path).open("w", newline="", encoding="utf-8") as file:
        writer = csv.writer(file)
        writer.writerow(TRACK_COLUMNS)
        for t, tau in enumerate(np.asarray(track["source_time"].values)):
            row = track.isel(source_time=t)
            see, snn, sen = (float(row[f"covariance_{k}"]) for k in ("ee", "nn", "en"))
            scale = np.sqrt(max(see, 0.0) * max(snn, 0.0))
            writer.writerow(
                [
                    utc_text(origin, tau),
                    _number(tau, 3),
                    _number(float(row["longitude"]), 5),
                    _number(float(row["latitude"]), 5),
                ]
                + [_number(v, 3) for v in (float(row["east"]), float(row["north"]), np.sqrt(see), np.sqrt(snn))]
                + [
                    _number(sen / scale if scale > 0 else 0.0, 3),
                    _number(float(row["active_probability"]), 4),
                ]
            )


def split_at_date_line(longitude_deg: np.ndarray, latitude_deg: np.ndarray) -> list[list[list[float]]]:
    """Cut a line where it crosses the antimeridian, as RFC 7946 section 3.1.9 asks.

    Parameters
    ----------
    longitude_deg, latitude_deg
        Points of the line, shape (points,).

    Returns
    -------
    list of list of [longitude, latitude]
        One part per side, each with at least two points.

    Examples
    --------
    >>> split_at_date_line(np.array([179.0, -179.0]), np.array([0.0, 2.0]))
    [[[179.0, 0.0], [180.0, 1.0]], [[-180.0, 1.0], [-179.0, 2.0]]]
    """
    longitudes = np.asarray(wrap_longitude(longitude_deg), float)
    parts: list[list[list[float]]] = [[]]
    for i, (lon, lat) in enumerate(zip(longitudes, np.asarray(latitude_deg, float), strict=True)):
        if i and abs(lon - longitudes[i - 1]) > 180.0:
            edge = 180.0 if longitudes[i - 1] > 0 else -180.0
            ahead = lon + 2 * edge
            share = (edge - longitudes[i - 1]) / (ahead - longitudes[i - 1]) if ahead != longitudes[i - 1] else 0.0
            crossing = round(float(latitude_deg[i - 1] + share * (lat - latitude_deg[i - 1])), 6)
            parts[-1].append([edge, crossing])
            parts.append([[-edge, crossing]])
        parts[-1].append([round(float(lon), 6), round(float(lat), 6)])
    return [part for part in parts if len(part) > 1]


def write_track_geojson(result: Result, path: str | Path) -> None:
    """Write epicentre, sites, smoothed front points and fitted arms as GeoJSON (RFC 7946: longitude first)."""
    track, origin, summary = result.track, origin_time(result), result.summary
    assert track is not None
    event = summary["event"]
    features = [
        _point(
            event["longitude_deg"],
            event["latitude_deg"],
            {"role": "epicentre", "time_utc": event["origin_time"]},
        )
    ]
    for i, code in enumerate(result.sites["site"].values):
        row = result.sites.isel(site=i)
        features.append(
            _point(
                float(row["longitude"]),
                float(row["latitude"]),
                {"role": "site", "code": str(code), "used": bool(row["used"])},
            )
        )
    for t, tau in enumerate(np.asarray(track["source_time"].values)):
        row = track.isel(source_time=t)
        if np.isfinite(row["longitude"]) and float(row["active_probability"]) > 0.5:
            properties = {"role": "front", "time_utc": utc_text(origin, tau), "source_time_s": round(float(tau), 3),
                          "probability_active": round(float(row["active_probability"]), 4)}  # fmt: skip
            features.append(_point(float(row["longitude"]), float(row["latitude"]), properties))
    for arm in range(track.sizes.get("arm", 0)):
        lon, lat = (np.asarray(track[f"front_{n}"].isel(arm=arm).values) for n in ("longitude", "latitude"))
        parts = split_at_date_line(lon[np.isfinite(lon)], lat[np.isfinite(lon)]) if np.isfinite(lon).any() else []
        if parts:
            geometry: dict[str, Any] = (
                {"type": "LineString", "coordinates": parts[0]}
                if len(parts) == 1
                else {"type": "MultiLineString", "coordinates": parts}
            )
            features.append(
                {
                    "type": "Feature",
                    "geometry": geometry,
                    "properties": {"role": "fitted arm", "arm": arm + 1},
                }
            )
    Path(path).write_text(json.dumps({"type": "FeatureCollection", "features": features}, indent=1), encoding="utf-8")


def _point(longitude_deg: float, latitude_deg: float, properties: dict[str, Any]) -> dict[str, Any]:
    place = [round(float(wrap_longitude(longitude_deg)), 6), round(float(latitude_deg), 6)]
    return {"type": "Feature", "geometry": {"type": "Point", "coordinates": place}, "properties": properties}
