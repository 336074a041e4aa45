"""From what the stages return to labelled datasets with units: the groups of result.nc."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from rupture.conventions import KM

if TYPE_CHECKING:
    import xarray as xr

    from rupture.direction import SiteDirection
    from rupture.mapping import Grid

Array = NDArray[np.float64]

_UNITS: dict[str, dict[str, str]] = {
    "longitude": {"units": "degrees_east", "standard_name": "longitude"},
    "latitude": {"units": "degrees_north", "standard_name": "latitude"},
    "source_time": {"units": "s", "long_name": "source time, seconds after the origin time"},
    "time": {"units": "s", "long_name": "window centre, seconds after the origin time"},
    "back_azimuth": {"units": "degrees", "long_name": "back-azimuth, clockwise from north, toward the source"},
    "easting": {"units": "km", "long_name": "east of the epicentre (azimuthal equidistant, WGS84)"},
    "northing": {"units": "km", "long_name": "north of the epicentre (azimuthal equidistant, WGS84)"},
    "along": {"units": "km", "long_name": "distance along the rupture direction or trace"},
}


def labelled(dimensions: str, values: Any, units: str = "1", long_name: str = "") -> tuple[Any, Any, dict[str, str]]:
    """Return an xarray variable triple; `dimensions` is a blank-separated list."""
    return dimensions.split(), values, {"units": units, "long_name": long_name}


def coordinate(name: str, values: Any) -> tuple[str, Any, dict[str, str]]:
    """Return a coordinate triple with its units."""
    return name, values, _UNITS[name]


def site_dataset(rows: Sequence[Mapping[str, Any]]) -> xr.Dataset:
    """Return the sites group.

    Parameters
    ----------
    rows
        One mapping per site: code, longitude, latitude, elevation, used, reason, components, distance (km),
        azimuth (degrees), p_arrival and s_arrival (s).
    """
    import xarray as xr

    units = {
        "longitude": "degrees_east", "latitude": "degrees_north", "elevation": "m", "distance": "km",
        "azimuth": "degrees", "p_arrival": "s", "s_arrival": "s",
    }  # fmt: skip
    variables: dict[str, Any] = {
        name: labelled("site", [row[name] for row in rows], unit) for name, unit in units.items()
    }
    for name in ("used", "reason", "components"):
        variables[name] = ("site", np.asarray([row[name] for row in rows], bool if name == "used" else str))
    return xr.Dataset(variables, coords={"site": [row["code"] for row in rows]})


def direction_dataset(directions: Sequence[SiteDirection]) -> xr.Dataset:
    """Return the direction group: posteriors and intervals of all sites on one time axis.

    Sites whose bands or windows differ are kept apart along `band`: the axis holds every band that occurs, and a
    site has NaN where it has no such band.
    """
    import xarray as xr

    from rupture.direction import intervals

    hop = float(directions[0].time_s[1] - directions[0].time_s[0]) if directions[0].time_s.size > 1 else 1.0
    first = min(d.time_s[0] for d in directions)
    count = round((max(d.time_s[-1] for d in directions) - first) / hop) + 1
    time = first + hop * np.arange(count)
    bands = sorted(
        {
            (float(low), float(high), float(w))
            for d in directions
            for (low, high), w in zip(d.band_hz, d.window_s, strict=True)
        }
    )
    theta = directions[0].back_azimuth_rad
    shape = (len(directions), len(bands), count)
    names = ("back_azimuth_best", "back_azimuth_p05", "back_azimuth_p95",
             "apparent_velocity_best", "apparent_velocity_p05", "apparent_velocity_p95", "probability_coherent")  # fmt: skip
    values = {name: np.full(shape, np.nan, np.float32) for name in names}
    probability = np.full((len(directions), count, theta.size), np.nan, np.float32)
    power = np.full((len(directions), count), np.nan)
    for i, d in enumerate(directions):
        start = round((d.time_s[0] - first) / hop)
        here = slice(start, start + d.time_s.size)
        found = intervals(d)
        position = [
            bands.index((float(low), float(high), float(w)))
            for (low, high), w in zip(d.band_hz, d.window_s, strict=True)
        ]
        angles = (found.back_azimuth_best_rad, found.back_azimuth_p05_rad, found.back_azimuth_p95_rad)
        speeds = (found.apparent_velocity_best_m_s, found.apparent_velocity_p05_m_s, found.apparent_velocity_p95_m_s)
        for name, angle in zip(names[:3], angles, strict=True):
            values[name][i, position, here] = np.degrees(angle)
        for name, speed in zip(names[3:6], speeds, strict=True):
            values[name][i, position, here] = speed / KM
        values[names[6]][i, position, here] = d.coherent
        probability[i, here] = back_azimuth_share(d).T
        power[i, here] = d.power
    units = ("degrees",) * 3 + ("km/s",) * 3 + ("1",)
    variables: dict[str, Any] = {n: labelled("site band time", values[n], u) for n, u in zip(names, units, strict=True)}
    variables["probability"] = labelled("site time back_azimuth", probability, "1", "share of the posterior in the bin")
    variables["power"] = labelled("site time", power, "m2 s-4", "mean square ground acceleration above the noise")
    for k, name in enumerate(("band_low", "band_high", "window")):
        variables[name] = labelled("band", [b[k] for b in bands], "s" if name == "window" else "Hz")
    return xr.Dataset(
        variables,
        coords={
            "site": [d.code for d in directions],
            "time": coordinate("time", time),
            "back_azimuth": coordinate("back_azimuth", np.degrees(theta)),
        },
    )


def back_azimuth_share(direction: SiteDirection) -> NDArray[np.float32]:
    """Return the posterior share of each back-azimuth bin, all bands, shape (A, T); NaN where masked."""
    ratio = direction.log_ratio
    largest = ratio.max(axis=(0, 1), keepdims=True)
    weight = np.exp(ratio - largest).mean(axis=1)
    share = (weight / weight.sum(axis=0)).astype(np.float32)
    share[:, np.isnan(direction.coherent).all(axis=0)] = np.nan
    return share


def grid_coordinates(grid: Grid, source_time_s: Array) -> tuple[str, tuple[int, ...], dict[str, Any]]:
    """Return dimension names, the shape of one frame and the coordinates of a grid's variables."""
    coordinates: dict[str, Any] = {"source_time": coordinate("source_time", source_time_s)}
    if grid.kind == "map":
        rows, columns = grid.shape
        coordinates["easting"] = coordinate("easting", grid.east_m.reshape(grid.shape)[0] / KM)
        coordinates["northing"] = coordinate("northing", grid.north_m.reshape(grid.shape)[:, 0] / KM)
        for name in ("longitude", "latitude"):
            plane = getattr(grid, f"{name}_deg").reshape(grid.shape)
            coordinates[name] = (["northing", "easting"], plane, _UNITS[name])
        return "northing easting", (rows, columns), coordinates
    coordinates["along"] = ("cell", np.asarray(grid.along_m, float) / KM, _UNITS["along"])
    for name in ("longitude", "latitude"):
        coordinates[name] = ("cell", getattr(grid, f"{name}_deg"), _UNITS[name])
    return "cell", (grid.longitude_deg.size,), coordinates


def map_dataset(
    grid: Grid, source_time_s: Array, cells: Mapping[str, tuple[Any, str, str]], series: Mapping[str, Any]
) -> xr.Dataset:
    """Return a group on the grid.

    Parameters
    ----------
    grid
        The grid.
    source_time_s
        Frames, shape (F,).
    cells
        Name to (values of shape (C, F), units, long name).
    series
        Name to values of shape (F,).
    """
    import xarray as xr

    dimensions, shape, coordinates = grid_coordinates(grid, source_time_s)
    variables: dict[str, Any] = {
        name: labelled(
            f"source_time {dimensions}", np.ascontiguousarray(values.T, np.float32).reshape(-1, *shape), units, text
        )
        for name, (values, units, text) in cells.items()
    }
    variables |= {name: labelled("source_time", values) for name, values in series.items()}
    attributes = {
        "grid_mapping": "azimuthal_equidistant",
        "longitude_of_projection_origin": float(grid.centre[0]),
        "latitude_of_projection_origin": float(grid.centre[1]),
    }
    return xr.Dataset(variables, coords=coordinates, attrs=attributes)


def along_axis_probability(grid: Grid, location_probability: NDArray[Any], azimuth_rad: float) -> tuple[Array, Array]:
    """Return km along an azimuth through the grid's centre and the probability there, shapes (L,), (F, L)."""
    if grid.kind == "trace":
        return np.asarray(grid.along_m, float) / KM, np.asarray(location_probability.T, float)
    along = grid.east_m * np.sin(azimuth_rad) + grid.north_m * np.cos(azimuth_rad)
    index = np.rint((along - along.min()) / grid.spacing_m).astype(int)
    total = np.zeros((location_probability.shape[1], index.max() + 1))
    np.add.at(total.T, index, location_probability)
    return (along.min() + grid.spacing_m * np.arange(index.max() + 1)) / KM, total
