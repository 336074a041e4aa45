"""Travel times of the user's own, from a CSV file: columns phase, depth_km, distance_km, time_s in any order."""

from __future__ import annotations

import csv
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from rupture.conventions import KM
from rupture.earth.tables import TravelTimeTable
from rupture.errors import InputError

Array = NDArray[np.float64]

COLUMNS = ("phase", "depth_km", "distance_km", "time_s")

_STEEPEST = 10.0
"""No ground slows waves to a tenth of their usual speed along the surface; a mistyped time does."""


@dataclass(frozen=True)
class TimeFile:
    """Times at depths and distances, both phases.

    Attributes
    ----------
    where
        The file, for messages.
    curves
        For each phase and depth in km: distances in km and times in s, shape (D,) each.
    reach_km
        Greatest distance that all curves have.
    p_speed_km_s, s_speed_km_s
        Median of straight path over time: what stands in for layers in the synthetic engines.
    """

    where: str
    curves: dict[str, dict[float, tuple[Array, Array]]] = field(repr=False)
    reach_km: float
    p_speed_km_s: float
    s_speed_km_s: float

    def table(self, phase: str, depth_km: float, longest_km: float) -> TravelTimeTable:
        """Return the table of a depth, linear between the file's depths; slowness is the derivative of time.

        Raises
        ------
        InputError
            When the depth lies outside those of the file.
        """
        curves = self.curves[phase]
        depths = np.array(sorted(curves))
        if not depths[0] <= depth_km <= depths[-1]:
            raise InputError(
                f"{self.where}: {phase} is given from {depths[0]:g} to {depths[-1]:g} km depth; {depth_km:g} km lies outside"
            )
        lower = max(int(np.searchsorted(depths, depth_km)), min(1, depths.size - 1))
        pair = depths[max(lower - 1, 0)], depths[lower]
        share = (depth_km - pair[0]) / (pair[1] - pair[0]) if pair[1] > pair[0] else 0.0
        (near, early), (far, late) = (curves[float(z)] for z in pair)
        distance = np.union1d(near, far)
        distance = np.append(distance[distance < longest_km], longest_km)
        time = (1 - share) * np.interp(distance, near, early) + share * np.interp(distance, far, late)
        slowness = np.maximum(np.gradient(time, distance), 0.0)
        return TravelTimeTable(phase, depth_km, KM * distance, time, slowness / KM)


def read_times(path: Path) -> TimeFile:
    """Read a file of travel times.

    Raises
    ------
    InputError
        Naming the file, and the line or the phase and depth.
    """
    points: dict[str, dict[float, list[tuple[float, float]]]] = {"P": {}, "S": {}}
    try:
        with path.open(encoding="utf-8-sig", newline="") as file:
            reader = csv.DictReader(file, skipinitialspace=True)
            missing = [name for name in COLUMNS if name not in (reader.fieldnames or ())]
            if missing:
                raise InputError(
                    f"{path}: no column {', '.join(missing)}; the first line must name {', '.join(COLUMNS)}"
                )
            for row in reader:
                phase, depth, distance, time = _point(row, f"{path}, line {reader.line_num}")
                points[phase].setdefault(depth, []).append((distance, time))
    except (OSError, UnicodeDecodeError, csv.Error) as error:
        raise InputError(f"{path}: cannot be read as a CSV file ({error})") from error
    curves = {
        phase: {z: _curve(found, f"{path}: {phase} from {z:g} km") for z, found in depths.items()}
        for phase, depths in points.items()
    }
    for phase, depths in curves.items():
        if not depths:
            raise InputError(f"{path}: holds no times of {phase}; both P and S are needed")
    reach = min(float(distance[-1]) for depths in curves.values() for distance, _ in depths.values())
    return TimeFile(str(path), curves, reach, *(_speed(curves[phase]) for phase in ("P", "S")))


def _point(row: dict[str, str | None], where: str) -> tuple[str, float, float, float]:
    phase = (row["phase"] or "").strip().upper()
    if phase not in ("P", "S"):
        raise InputError(f"{where}: phase '{row['phase']}' is neither P nor S")
    try:
        depth, distance, time = (float(row[name] or "") for name in COLUMNS[1:])
    except ValueError:
        raise InputError(f"{where}: depth_km, distance_km and time_s must be numbers") from None
    if not all(0 <= v < np.inf for v in (depth, distance, time)):
        raise InputError(f"{where}: depth_km, distance_km and time_s cannot be negative or endless")
    return phase, depth, distance, time


def _curve(points: list[tuple[float, float]], where: str) -> tuple[Array, Array]:
    distance, time = np.array(sorted(points)).T
    if distance.size < 2 or distance[0] != 0:
        raise InputError(f"{where}: needs two distances at least, the first of them 0")
    if not (np.diff(distance) > 0).all():
        double = distance[int(np.argmin(np.diff(distance)))]
        raise InputError(f"{where}: two times at {double:g} km")
    slope = np.diff(time) / np.diff(distance)
    if not (slope >= 0).all():
        raise InputError(f"{where}: the time falls beyond {distance[int(slope.argmin())]:g} km")
    if (slope > _STEEPEST * np.median(slope)).any():
        raise InputError(f"{where}: the time jumps beyond {distance[int(slope.argmax())]:g} km")
    return distance, time


def _speed(curves: dict[float, tuple[Array, Array]]) -> float:
    ratios = [np.hypot(d, z)[t > 0] / t[t > 0] for z, (d, t) in curves.items()]
    return float(np.median(np.concatenate(ratios)))
