"""`rupture siting`: where one more site helps most to see where a front is."""

from __future__ import annotations

import csv
import json
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rupture.conventions import KM
from rupture.errors import InputError
from rupture.event import Event
from rupture.geodesy import LocalPlane
from rupture.resolution.information import mean_log_area, position_information

Array = NDArray[np.float64]

BACK_AZIMUTH_SIGMA_DEG = {"6C": 5.0, "Z+rotH": 5.0, "3C+rotZ": 12.0, "3C": np.inf}
"""Back-azimuth scatter of one independent window of S waves with coda; measured on synthetic records of the ray engine,
where `rupture resolve` gives it for a network of one's own."""


SMEAR_M = 2800.0 * 4.0 / np.sqrt(12.0)
"""Standard deviation of where a front of 2.8 km/s is within a window of 4 s, m."""


@dataclass(frozen=True)
class Candidate:
    """A place where a site could be built; `cost` weighs against gain when ranked."""

    code: str
    longitude_deg: float
    latitude_deg: float
    cost: float = 1.0


def read_candidates(path: str | Path) -> tuple[Candidate, ...]:
    """Read candidate places: CSV with columns code, longitude_deg, latitude_deg and perhaps cost, or GeoJSON points.

    Raises
    ------
    InputError
        Naming the file and the row.
    """
    path = Path(path)
    try:
        text = path.read_text(encoding="utf-8")
    except (OSError, UnicodeDecodeError) as error:
        raise InputError(f"{path}: cannot be read ({error})") from error
    rows = _geojson_rows(path, text) if text.lstrip().startswith("{") else list(csv.DictReader(text.splitlines()))
    found = []
    for number, row in enumerate(rows, start=1):
        try:
            place = Candidate(
                str(row.get("code") or f"C{number}"),
                float(row["longitude_deg"]),
                float(row["latitude_deg"]),
                float(row.get("cost") or 1.0),
            )
        except (KeyError, TypeError, ValueError):
            raise InputError(
                f"{path}, place {number}: longitude_deg and latitude_deg must be numbers in degrees"
            ) from None
        if not (-360 <= place.longitude_deg <= 360 and -90 <= place.latitude_deg <= 90 and place.cost > 0):
            raise InputError(f"{path}, place {number}: a place is out of range or its cost not positive")
        found.append(place)
    if not found:
        raise InputError(f"{path}: holds no candidate place")
    return tuple(found)


def _geojson_rows(path: Path, text: str) -> list[dict[str, Any]]:
    try:
        content = json.loads(text)
    except ValueError as error:
        raise InputError(f"{path}: not GeoJSON ({error})") from error
    rows = []
    for feature in content.get("features", []):
        geometry = feature.get("geometry") or {}
        if geometry.get("type") == "Point":
            longitude, latitude = geometry["coordinates"][:2]
            rows.append({"longitude_deg": longitude, "latitude_deg": latitude, **(feature.get("properties") or {})})
    return rows


def candidate_grid(event: Event, half_width_km: float, spacing_km: float) -> tuple[Candidate, ...]:
    """Return candidates on a square grid around the epicentre."""
    axis = np.arange(-half_width_km, half_width_km + spacing_km / 2, spacing_km) * KM
    east, north = np.meshgrid(axis, axis)
    longitude, latitude = LocalPlane(event.longitude_deg, event.latitude_deg).to_geographic(east.ravel(), north.ravel())
    return tuple(
        Candidate(f"G{k + 1}", float(a), float(b)) for k, (a, b) in enumerate(zip(longitude, latitude, strict=True))
    )


def rupture_points(length_km: float, azimuths_deg: Sequence[float] | None) -> Array:
    """Return east and north (m) of points that fronts pass: along given azimuths both ways, or evenly over the disc.

    Parameters
    ----------
    length_km
        Expected rupture length.
    azimuths_deg
        Known fault azimuths; None: every direction alike.
    """
    angles = np.arange(0, 360, 15.0) if azimuths_deg is None else np.ravel([[a, a + 180] for a in azimuths_deg])
    reach = np.linspace(0.0, length_km * KM, 8)
    distance, angle = np.meshgrid(reach, np.radians(angles))
    return np.stack([(distance * np.sin(angle)).ravel(), (distance * np.cos(angle)).ravel()], axis=1)


@dataclass(frozen=True)
class Ranking:
    """Result of a greedy search.

    Attributes
    ----------
    chosen
        Candidates in the order in which they should be built.
    shrink
        Factor by which each shrinks the mean error area of the front's place, given those before it.
    single
        The same for every candidate alone as the next one, shape (candidates,).
    """

    chosen: tuple[Candidate, ...]
    shrink: tuple[float, ...]
    single: Array


def rank(
    event: Event,
    existing: Sequence[tuple[float, float, str]],
    candidates: Sequence[Candidate],
    points_m: Array,
    count: int,
    components: str = "6C",
    prior_sigma_km: float = 50.0,
) -> Ranking:
    """Choose the next sites greedily by the information about front position (Fisher information of back-azimuths).

    Parameters
    ----------
    event
        Centre of the plane.
    existing
        Longitude, latitude (degrees) and components of sites there are; may be empty.
    candidates
        Places; gains are divided by cost when ranked.
    points_m
        Front positions that matter, shape (points, 2).
    count
        How many to choose.
    components
        What a new site records.
    prior_sigma_km
        How well the place of a front is known before any site is asked.
    """
    if count < 1 or count > len(candidates):
        raise InputError(f"cannot choose {count} of {len(candidates)} candidates")
    plane = LocalPlane(event.longitude_deg, event.latitude_deg)

    def information(places: Sequence[tuple[float, float]], kinds: Sequence[str]) -> Array:
        east, north = plane.to_plane([p[0] for p in places], [p[1] for p in places])
        sigma = np.radians([BACK_AZIMUTH_SIGMA_DEG.get(kind, np.inf) for kind in kinds])
        places_m = np.stack([east, north], axis=1)
        distance = np.linalg.norm(points_m[:, None] - places_m[None], axis=2)
        # From nearby a front turns within one window: the place across the ray is never known better than that.
        blurred = np.hypot(sigma, SMEAR_M / np.maximum(distance, 1.0))
        return position_information(points_m, places_m, blurred)

    now = np.zeros((points_m.shape[0], 2, 2))
    if existing:
        now = information([s[:2] for s in existing], [s[2] for s in existing]).sum(axis=1)
    each = information([(c.longitude_deg, c.latitude_deg) for c in candidates], [components] * len(candidates))
    cost = np.array([c.cost for c in candidates])
    prior = prior_sigma_km * KM
    chosen: list[int] = []
    shrink: list[float] = []
    single: Array | None = None
    for _ in range(count):
        base = mean_log_area(now, prior)
        gain = np.array([base - mean_log_area(now + each[:, k], prior) for k in range(len(candidates))])
        if single is None:
            single = np.exp(gain)
        gain[chosen] = -np.inf
        best = int(np.argmax(gain / cost))
        chosen.append(best)
        shrink.append(float(np.exp(gain[best])))
        now = now + each[:, best]
    assert single is not None
    return Ranking(tuple(candidates[k] for k in chosen), tuple(shrink), single)
