"""The data of each figure as plain tables, so that others can draw their own."""

from __future__ import annotations

import csv
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rupture.conventions import COMPONENTS
from rupture.pictures.answers import KINDS, energy_series
from rupture.pictures.distance import energy_along
from rupture.pictures.layers import SHARES, area_rings
from rupture.pictures.panels import coherence, posterior_interval, predicted_curves
from rupture.pictures.scene import Scene, credible_level

Column = Sequence[Any] | NDArray[Any]


@dataclass(frozen=True)
class Table:
    """Named columns of one length.

    Attributes
    ----------
    name
        What is added to the figure's file name; empty for its only table.
    columns
        Column names, units in them, and values.
    """

    name: str
    columns: Mapping[str, Column]
    suffix = "csv"

    def write(self, path: Path) -> Path:
        """Write as CSV; numbers with seven digits, missing ones empty."""
        with path.open("w", newline="", encoding="utf-8") as stream:
            writer = csv.writer(stream, lineterminator="\n")
            writer.writerow(self.columns)
            writer.writerows(zip(*(_texts(column) for column in self.columns.values()), strict=True))
        return path


@dataclass(frozen=True)
class Grid:
    """Values over two uniform axes, for programs that read grids.

    Attributes
    ----------
    name
        What is added to the figure's file name.
    axes
        Two of (name, unit, values), the slow axis first.
    value
        Name and unit of the values.
    values
        Shape (slow, fast); NaN where there is none.
    """

    name: str
    axes: tuple[tuple[str, str, NDArray[Any]], tuple[str, str, NDArray[Any]]]
    value: tuple[str, str]
    values: NDArray[Any]
    suffix = "nc"

    def write(self, path: Path) -> Path:
        """Write as NetCDF (classic format, which every program reads), by the CF conventions."""
        from scipy.io import netcdf_file

        with netcdf_file(path, "w") as file:
            file.Conventions = "CF-1.8"
            for name, unit, values in self.axes:
                file.createDimension(name, len(values))
                axis = file.createVariable(name, "d", (name,))
                axis[:] = values
                axis.units = unit
            variable = file.createVariable(self.value[0], "f", tuple(name for name, _, _ in self.axes))
            variable[:] = self.values
            variable.units = self.value[1]
            variable._FillValue = np.float32(np.nan)
        return path


def _texts(column: Column) -> list[str]:
    """Return a column's values as text; one format call for all numbers, the quickest that Python has."""
    values = np.asarray(column)
    if values.dtype.kind != "f":
        return [str(value) for value in column]
    finite = np.isfinite(values)
    if finite.all():
        return ("%.7g\n" * values.size % tuple(values.tolist())).split("\n")[:-1]
    return [f"{value:.7g}" if known else "" for value, known in zip(values.tolist(), finite.tolist(), strict=True)]


def map_tables(scene: Scene) -> list[Table]:
    """Sites, rays, track, line source, cells and credible areas of the map figure."""
    sites = scene.result.sites
    out = [
        Table(
            "sites",
            {
                "site": scene.codes, "longitude_deg": sites["longitude"].values, "latitude_deg": sites["latitude"].values,
                "components": scene.components, "used": scene.used.astype(int), "reason": [str(r) for r in sites["reason"].values],
            },
        )
    ]  # fmt: skip
    rays = scene.rays
    picked = [
        (s, f) for f in range(scene.source_time.size) for s in range(len(scene.codes)) if np.isfinite(rays[s, f, 0])
    ]
    if picked:
        s, f = np.array(picked).T
        out.append(
            Table(
                "rays",
                {
                    "source_time_s": scene.source_time[f], "site": [scene.codes[i] for i in s], "window_time_s": scene.s_arrival[s, f],
                    "back_azimuth_deg": rays[s, f, 0] % 360, "back_azimuth_p16_deg": rays[s, f, 1] % 360,
                    "back_azimuth_p84_deg": rays[s, f, 2] % 360, "probability_coherent": rays[s, f, 3],
                },
            )
        )  # fmt: skip
    out += _track_tables(scene)
    if scene.field is not None:
        total = scene.total
        lon, lat = scene.to_degrees(scene.cells.places_km)
        out.append(Table("cells", {"longitude_deg": lon.ravel(), "latitude_deg": lat.ravel(), "share": total.ravel()}))
        out += _area_table(scene, total)
    return out


def _track_tables(scene: Scene) -> list[Table]:
    track = scene.result.track
    if track is None:
        return []
    columns: dict[str, Column] = {"source_time_s": track["source_time"].values.astype(float)}
    for name, unit in (("longitude", "deg"), ("latitude", "deg"), ("east", "km"), ("north", "km")):
        columns[f"{name}_{unit}"] = track[name].values
    for name in ("covariance_ee", "covariance_nn", "covariance_en"):
        columns[f"{name}_km2"] = track[name].values
    columns["active_probability"] = track["active_probability"].values
    for arm in range(scene.front_km.shape[0]):
        columns[f"arm{arm + 1}_longitude_deg"] = track["front_longitude"].values[arm]
        columns[f"arm{arm + 1}_latitude_deg"] = track["front_latitude"].values[arm]
    return [Table("track", columns)]


def _area_table(scene: Scene, total: Any) -> list[Table]:
    if scene.cells.is_trace:
        return []
    share, ring_number, places = [], [], []
    for part in SHARES:
        level = credible_level(total, part)
        rings = area_rings(scene, total, level) if np.isfinite(level) else []
        for number, ring in enumerate(rings, start=1):
            share += [part] * len(ring)
            ring_number += [number] * len(ring)
            places.append(ring)
    if not places:
        return []
    lon, lat = scene.to_degrees(np.vstack(places))
    return [Table("areas", {"share": share, "ring": ring_number, "longitude_deg": lon, "latitude_deg": lat})]


def direction_tables(scene: Scene, index: int) -> list[Table | Grid]:
    """Posterior image and curves of one site."""
    direction = scene.direction
    time = direction["time"].values.astype(float)
    axis = direction["back_azimuth"].values.astype(float)
    share = np.asarray(direction["probability"].values[index], float)
    interval = posterior_interval(scene, index)
    curves: dict[str, Column] = {
        "seconds_after_origin": time,
        "back_azimuth_deg": interval[:, 0] % 360,
        "back_azimuth_p05_deg": interval[:, 1] % 360,
        "back_azimuth_p95_deg": interval[:, 2] % 360,
        "probability_coherent": coherence(scene, index),
        "power_m2_s4": direction["power"].values[index],
    }
    for arm, curve in enumerate(predicted_curves(scene)[:, index]):
        curves[f"predicted_arm{arm + 1}_deg"] = curve
    image = Grid(
        "posterior",
        (("seconds_after_origin", "s", time), ("back_azimuth", "degree", axis)),
        ("probability", "1"),
        share,
    )
    return [Table("", curves), image]


def along_tables(scene: Scene) -> list[Table | Grid]:
    """Image and fitted front of the distance figure."""
    track = scene.result.track
    assert track is not None
    along = track["along"].values.astype(float)
    share = np.asarray(track["along_probability"].values, float)
    time = track["source_time"].values.astype(float)
    image = Grid("", (("source_time", "s", time), ("along", "km", along)), ("probability", "1"), share)
    front: dict[str, Column] = {"source_time_s": time}
    for arm in range(scene.front_km.shape[0]):
        front[f"arm{arm + 1}_km"] = track["front_distance"].values[arm]
    return [image, Table("front", front)]


def energy_along_tables(scene: Scene) -> list[Table | Grid]:
    """Image of the energy-distance figure; the scene is that of the energy."""
    time, along, density = energy_along(scene)
    return [Grid("", (("source_time", "s", time), ("along", "km", along)), ("energy", "km-1 s-1"), density)]


def energy_fit_tables(scene: Scene) -> list[Table]:
    """Power at each site, observed and predicted, and the objective of the inversion."""
    energy = scene.result.energy
    assert energy is not None
    time, codes = energy["time"].values.astype(float), [str(code) for code in energy["site"].values]
    power = {
        "site": np.repeat(codes, time.size),
        "seconds_after_origin": np.tile(time, len(codes)),
        "observed_power_m2_s4": energy["observed_power"].values.ravel(),
        "predicted_power_m2_s4": energy["predicted_power"].values.ravel(),
    }
    out = [Table("", power)]
    if "objective" in energy:
        objective = energy["objective"].values
        out.append(Table("convergence", {"update": np.arange(1, objective.size + 1), "objective": objective}))
    return out


def section_tables(scene: Scene) -> list[Grid]:
    """Corrected records of each site: components E, N, Up of acceleration (m/s^2), then of rotation rate (rad/s)."""
    return [
        Grid(
            site.code,
            (("component", "1", np.arange(len(COMPONENTS))), ("seconds_after_origin", "s", site.times_s)),
            ("motion", "m s-2, rad s-1"),
            np.where(site.valid, site.data, np.nan),
        )
        for site in scene.result.records
        if site.code in scene.codes
    ]


def posterior_tables(scene: Scene) -> list[Table]:
    """All draws of the line-source fit."""
    track = scene.result.track
    assert track is not None
    columns: dict[str, Column] = {"kind": [str(kind) for kind in track["kind"].values]}
    for k, name in enumerate(track["parameter"].values):
        columns[str(name)] = track["sample"].values[:, k]
    return [Table("", columns)]


def kinds_tables(scene: Scene) -> list[Table]:
    """Kind probabilities and null-test figures."""
    shares = scene.result.summary["rupture"]["kind_probability"]
    reliability = scene.result.summary.get("reliability") or {}
    tests = {k: v for k, v in reliability.items() if k.endswith("_probability") and isinstance(v, int | float)}
    names = [*sorted(shares, key=lambda k: KINDS.index(k) if k in KINDS else len(KINDS)), *tests]
    return [Table("", {"quantity": names, "probability": [{**shares, **tests}[name] for name in names]})]


def energy_tables(scene: Scene) -> list[Table]:
    """Energy against source time, one table per way of finding it."""
    return [
        Table(name.replace(" ", "_"), {"source_time_s": time, "energy_share_per_s": values})
        for name, (time, values) in energy_series(scene.result).items()
    ]


def frames_tables(scene: Scene) -> list[Table]:
    """Cells of the frames figure, long form; cells below a ten-thousandth of the largest value are left out."""
    values = scene.cells.values
    flat = values.reshape(values.shape[0], -1)
    lon, lat = (v.ravel() for v in scene.to_degrees(scene.cells.places_km))
    frame, cell = np.nonzero(flat > 1e-4 * flat.max())
    return [
        Table(
            "",
            {
                "source_time_s": scene.source_time[frame], "longitude_deg": lon[cell], "latitude_deg": lat[cell], "value": flat[frame, cell],
            },
        )
    ]  # fmt: skip
