"""Make one site: filter its sensors alike, put them into one array, say how it went."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from rupture.conventions import KM
from rupture.event import Event
from rupture.geodesy import LocalPlane
from rupture.records.array import ArrayGeometry, array_motion, highest_wavenumber, strain_error
from rupture.records.arrivals import Arrivals
from rupture.records.pairing import ArrayPlan, SinglePlan
from rupture.records.report import ChannelReport, SiteVerdict, UnusableError
from rupture.records.response import Corners
from rupture.records.sensors import Grid, Sensor, corners_of, motion_of
from rupture.records.settings import RecordSettings
from rupture.site import Site

Made = tuple[Site | None, SiteVerdict, list[ChannelReport]]


def single_site(
    plan: SinglePlan, grid: Grid, settings: RecordSettings, arrivals: dict[str, Arrivals], event: Event
) -> Made:
    """Make a site of one translation and one rotation sensor, or of what there is of them.

    Returns
    -------
    site, verdict, rows
        The site is None when nothing of it can be used.
    """
    present = [s for s in (plan.translation, plan.rotation) if s is not None]
    data, valid = np.zeros((6, grid.number)), np.zeros((6, grid.number), bool)
    rows: list[ChannelReport] = []
    failed: list[str] = []
    corners: dict[str, Corners] = {}
    for sensor in present:
        try:
            corners[sensor.name] = corners_of(sensor, grid, settings)
        except UnusableError as error:
            failed.append(f"{sensor.name}: {error}")
            rows += _refused(sensor, plan.code, str(error))
    shared, why = _shared(list(corners.values()))
    for sensor in present:
        if sensor.name not in corners:
            continue
        if shared is None:
            # Both sensors work, but not at the same frequencies: translation alone is left.
            shared = corners[sensor.name]
        elif why and sensor.quantity == "rotation":
            failed.append(f"{sensor.name}: {why}")
            rows += _refused(sensor, plan.code, why)
            continue
        place = slice(0, 3) if sensor.quantity == "translation" else slice(3, 6)
        try:
            motion = motion_of(sensor, shared, grid, settings, arrivals[sensor.name])
        except UnusableError as error:
            failed.append(f"{sensor.name}: {error}")
            rows += _refused(sensor, plan.code, str(error))
            continue
        data[place], valid[place] = motion.data, motion.valid
        rows += [replace(r, site=plan.code) for r in motion.reports]
    lon, lat, up, _ = present[0].place
    band = (shared.low, shared.high) if shared is not None else (0.0, 0.0)
    site = _trimmed(plan.code, lon, lat, up, grid, data, valid, band, 0.0)
    refused = "" if valid[:3].any() else "; ".join(failed) or plan.note or "no usable translation channel"
    return _verdict(site, plan.code, (lon, lat, up), refused, [plan.note, *failed], rows)


def _refused(sensor: Sensor, code: str, reason: str) -> list[ChannelReport]:
    return [replace(c.report, site=code, reason=reason) for c in sensor.channels]


def _shared(corners: Sequence[Corners]) -> tuple[Corners | None, str]:
    """Return the filter that the sensors of a site share, or None and why there is none."""
    if not corners:
        return None, ""
    try:
        return _common(corners), ""
    except UnusableError as error:
        return None, str(error)


def _common(corners: Sequence[Corners]) -> Corners:
    """Return one filter for all sensors of a site, so that rotation and translation stay comparable."""
    low, high = max(c.low for c in corners), min(c.high for c in corners)
    if not high > 2.0 * low:
        raise UnusableError(f"its sensors share only {low:.3g} to {high:.3g} Hz")
    return Corners(max(c.stop_low for c in corners), low, high, min(c.stop_high for c in corners))


def array_site(
    plan: ArrayPlan, grid: Grid, settings: RecordSettings, arrivals: dict[str, Arrivals], event: Event
) -> Made:
    """Make a site of an array: a plane through its sensors gives motion and rotation at the centre.

    Returns
    -------
    site, verdict, rows
        The site is None where the array cannot serve; the verdict then says its range.
    """
    place = _centre(plan.sensors)
    rows: list[ChannelReport] = []
    try:
        local = LocalPlane(place[0], place[1])
        lon, lat = np.array([s.place[:2] for s in plan.sensors]).T
        east, north = local.to_plane(lon, lat)
        up = np.array([s.place[2] - s.place[3] for s in plan.sensors]) - place[2]
        places = np.column_stack([east, north, up])
        aperture = ArrayGeometry(places).aperture_m
        limit = highest_wavenumber(places[:, :2], settings.array_error_share)
        highest_hz = limit * plan.velocity_m_s / (2.0 * np.pi)
        corners = _common([corners_of(s, grid, settings) for s in plan.sensors])
        share = aperture * limit / (2.0 * np.pi)
        said = (
            f"array of {len(plan.sensors)}, aperture {aperture / KM:.3g} km: its rotation is within"
            f" {100 * settings.array_error_share:.0f} % up to {highest_hz:.3g} Hz for waves of {plan.velocity_m_s / KM:.3g} km/s"
            f" and faster (aperture {share:.2f} of a wavelength)"
        )
        if not highest_hz > 2.0 * corners.low:
            raise UnusableError(
                f"{said}, but its records begin at {corners.low:.3g} Hz: less than an octave is left; use stations closer"
                " together or lower frequencies"
            )
        acceleration, velocity, valid = _array_records(plan, corners, grid, settings, arrivals, rows)
        data, good = array_motion(places, acceleration, velocity, valid, limit, settings.array_error_share)
        if not good[3:].any():
            raise UnusableError(f"{said}; at no time have enough of its sensors a record")
    except UnusableError as reason:
        rows = [replace(c.report, site=plan.code, reason=str(reason)) for s in plan.sensors for c in s.channels]
        return _verdict(None, plan.code, place, str(reason), [], rows)
    band = (corners.low, min(corners.high, highest_hz))
    error = float(strain_error(places[:, :2], np.array([2.0 * np.pi * band[1] / plan.velocity_m_s]))[0])
    site = _trimmed(plan.code, *place, grid, data, good, band, error)
    return _verdict(site, plan.code, place, "", [said], rows)


def _centre(sensors: Sequence[Sensor]) -> tuple[float, float, float]:
    lon, lat, up, deep = np.array([s.place for s in sensors]).T
    plane = LocalPlane(float(lon[0]), float(lat[0]))
    east, north = plane.to_plane(lon, lat)
    longitude, latitude = plane.to_geographic(east.mean(), north.mean())
    return float(longitude), float(latitude), float((up - deep).mean())


def _array_records(
    plan: ArrayPlan,
    corners: Corners,
    grid: Grid,
    settings: RecordSettings,
    arrivals: dict[str, Arrivals],
    rows: list[ChannelReport],
) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.bool_]]:
    shape = (len(plan.sensors), 3, grid.number)
    acceleration, velocity, valid = np.zeros(shape), np.zeros(shape), np.zeros(shape, bool)
    for number, sensor in enumerate(plan.sensors):
        motion = motion_of(sensor, corners, grid, settings, arrivals[sensor.name])
        rate = motion_of(sensor, corners, grid, settings, arrivals[sensor.name], order=1)
        acceleration[number], velocity[number], valid[number] = motion.data, rate.data, motion.valid
        rows += [replace(r, site=plan.code, done=(*r.done, "plane through the array")) for r in motion.reports]
    return acceleration, velocity, valid


def _trimmed(
    code: str,
    longitude_deg: float,
    latitude_deg: float,
    elevation_m: float,
    grid: Grid,
    data: NDArray[np.float64],
    valid: NDArray[np.bool_],
    band_hz: tuple[float, float],
    error_share: float,
) -> Site | None:
    """Cut to the stretch in which anything is valid; None when nothing is."""
    where = np.flatnonzero(valid.any(axis=0))
    if not where.size:
        return None
    keep = slice(int(where[0]), int(where[-1]) + 1)
    return Site(
        code, longitude_deg, latitude_deg, elevation_m, (grid.first + keep.start) * grid.step_s, grid.step_s,
        data[:, keep].copy(), valid[:, keep].copy(), band_hz, error_share,
    )  # fmt: skip


def _verdict(
    site: Site | None,
    code: str,
    place: tuple[float, float, float],
    reason: str,
    notes: Sequence[str],
    rows: list[ChannelReport],
) -> Made:
    kind = site.kind if site is not None else "empty"
    said = [n for n in notes if n]
    if site is not None and not reason:
        masked = 1.0 - site.valid[site.present].mean()
        start = f"{kind}, {site.band_hz[0]:.3g} to {site.band_hz[1]:.3g} Hz"
        said = [start, *([f"{100 * masked:.1f} % masked"] if masked > 0.001 else []), *said]
    verdict = SiteVerdict(code, *place, kind, not reason and site is not None, reason, "; ".join(said))
    return site, verdict, rows
