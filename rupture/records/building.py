"""Make one site: filter its sensors alike, put them into one array, say how it went."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from rupture.conventions import KM
from rupture.event import Event
from rupture.geodesy import LocalPlane, distance_azimuth
from rupture.records.array import ArrayGeometry, array_motion, highest_wavenumber, strain_error
from rupture.records.arrivals import Arrivals
from rupture.records.clocks import time_shift
from rupture.records.corrections import examine
from rupture.records.pairing import ArrayPlan, SinglePlan
from rupture.records.relations import Mean, mean_or_none
from rupture.records.report import Calibration, ChannelReport, Correction, SiteVerdict, UnusableError
from rupture.records.response import Corners
from rupture.records.sensors import Grid, Sensor, corners_of, motion_of
from rupture.records.settings import RecordSettings
from rupture.site import Site

_LEAST_SHIFT_S = 0.03
"""Shifts between the instruments of a site below this do not matter below a few Hz."""
_SURE = 3.0
_EPICENTRAL_M = 2000.0
"""A site closer than this to the epicentre has no back-azimuth to be held against."""

Made = tuple[Site | None, SiteVerdict, list[ChannelReport]]


@dataclass(frozen=True)
class Context:
    """What all sites of a run share.

    Attributes
    ----------
    grid
        Common time grid.
    settings
        Filters, limits, corrections.
    arrivals
        First arrivals by sensor name.
    event
        The earthquake.
    calibration
        What other earthquakes have said, by site code.
    """

    grid: Grid
    settings: RecordSettings
    arrivals: Mapping[str, Arrivals]
    event: Event
    calibration: Mapping[str, Calibration]


def single_site(plan: SinglePlan, context: Context) -> Made:
    """Make a site of one translation and one rotation sensor, or of what there is of them.

    Returns
    -------
    site, verdict, rows
        The site is None when nothing of it can be used.
    """
    first = plan.translation or plan.rotation
    assert first is not None
    lon, lat, up, _ = first.place
    site, rows, failed = _records(plan, context, 0.0)
    notes, coherence = [plan.note, *failed], float("nan")
    found: tuple[Correction, ...] = ()
    if site is not None and site.valid[:3].any():
        arrivals = context.arrivals[first.name]
        shift, late_s = _clock(site, arrivals, context)
        if late_s:
            moved, moved_rows, failed = _records(plan, context, late_s)
            site, rows = (moved, moved_rows) if moved is not None else (site, rows)
        site, found, coherence = _examined(site, arrivals, context, shift)
        refused = ""
    else:
        refused = "; ".join(failed) or plan.note or "no usable translation channel"
    return _verdict(site, plan.code, (lon, lat, up), refused, notes, rows, found, coherence)


def _records(plan: SinglePlan, context: Context, late_s: float) -> tuple[Site | None, list[ChannelReport], list[str]]:
    """Filter both sensors alike, the rotation sensor's clock put right by so many seconds."""
    grid, settings = context.grid, context.settings
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
        turning = sensor.quantity == "rotation"
        place = slice(3, 6) if turning else slice(0, 3)
        late = late_s if turning else 0.0
        try:
            motion = motion_of(sensor, shared, grid, settings, context.arrivals[sensor.name], late_s=late)
        except UnusableError as error:
            failed.append(f"{sensor.name}: {error}")
            rows += _refused(sensor, plan.code, str(error))
            continue
        data[place], valid[place] = motion.data, motion.valid
        rows += [replace(r, site=plan.code) for r in motion.reports]
    lon, lat, up, _ = present[0].place
    band = (shared.low, shared.high) if shared is not None else (0.0, 0.0)
    return _trimmed(plan.code, lon, lat, up, grid, data, valid, band, 0.0), rows, failed


def _clock(site: Site, arrivals: Arrivals, context: Context) -> tuple[Correction | None, float]:
    """Return what the records say about the rotation sensor's clock, and by how much to move its records."""
    known = context.calibration.get(site.code, Calibration()).time_shift_s
    means = [m for m in (time_shift(site, arrivals), Mean(*known, 1) if known else None) if m is not None]
    shift = mean_or_none(means)
    if shift is None:
        return None, 0.0
    seen = abs(shift.value) > max(_LEAST_SHIFT_S, _SURE * shift.error)
    applied = seen and context.settings.corrections.time_shift
    note = (
        f"the rotation sensor is {abs(shift.value):.3f} s {'late' if shift.value > 0 else 'early'} against translation"
    )
    return Correction("time shift", shift.value, shift.error, "s", seen, applied, note), shift.value if applied else 0.0


def _examined(
    site: Site, arrivals: Arrivals, context: Context, shift: Correction | None
) -> tuple[Site, tuple[Correction, ...], float]:
    event = context.event
    distance, _, back_azimuth = distance_azimuth(
        event.longitude_deg, event.latitude_deg, site.longitude_deg, site.latitude_deg
    )
    if distance < _EPICENTRAL_M:
        # On the epicentre there is no direction that waves should come from.
        return site, (shift,) if shift is not None else (), float("nan")
    known = context.calibration.get(site.code, Calibration())
    found = examine(site, arrivals, float(back_azimuth) + np.pi, context.settings.corrections, known)
    corrections = ((shift,) if shift is not None else ()) + found.corrections
    return found.site, corrections, found.coherence


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


def array_site(plan: ArrayPlan, context: Context) -> Made:
    """Make a site of an array: a plane through its sensors gives motion and rotation at the centre.

    Returns
    -------
    site, verdict, rows
        The site is None where the array cannot serve; the verdict then says its range.
    """
    grid, settings = context.grid, context.settings
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
        acceleration, velocity, valid = _array_records(plan, corners, context, rows)
        data, good = array_motion(places, acceleration, velocity, valid, limit, settings.array_error_share)
        if not good[3:].any():
            raise UnusableError(f"{said}; at no time have enough of its sensors a record")
    except UnusableError as reason:
        rows = [replace(c.report, site=plan.code, reason=str(reason)) for s in plan.sensors for c in s.channels]
        return _verdict(None, plan.code, place, str(reason), [], rows)
    band = (corners.low, min(corners.high, highest_hz))
    error = float(strain_error(places[:, :2], np.array([2.0 * np.pi * band[1] / plan.velocity_m_s]))[0])
    site = _trimmed(plan.code, *place, grid, data, good, band, error)
    found: tuple[Correction, ...] = ()
    coherence = float("nan")
    if site is not None:
        site, found, coherence = _examined(site, context.arrivals[plan.sensors[0].name], context, None)
    return _verdict(site, plan.code, place, "", [said], rows, found, coherence)


def _centre(sensors: Sequence[Sensor]) -> tuple[float, float, float]:
    lon, lat, up, deep = np.array([s.place for s in sensors]).T
    plane = LocalPlane(float(lon[0]), float(lat[0]))
    east, north = plane.to_plane(lon, lat)
    longitude, latitude = plane.to_geographic(east.mean(), north.mean())
    return float(longitude), float(latitude), float((up - deep).mean())


def _array_records(
    plan: ArrayPlan, corners: Corners, context: Context, rows: list[ChannelReport]
) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.bool_]]:
    shape = (len(plan.sensors), 3, context.grid.number)
    acceleration, velocity, valid = np.zeros(shape), np.zeros(shape), np.zeros(shape, bool)
    for number, sensor in enumerate(plan.sensors):
        arrivals = context.arrivals[sensor.name]
        motion = motion_of(sensor, corners, context.grid, context.settings, arrivals)
        rate = motion_of(sensor, corners, context.grid, context.settings, arrivals, order=1)
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
    corrections: tuple[Correction, ...] = (),
    coherence: float = float("nan"),
) -> Made:
    kind = site.kind if site is not None else "empty"
    said = [n for n in notes if n]
    if site is not None and not reason:
        masked = 1.0 - site.valid[site.present].mean()
        start = f"{kind}, {site.band_hz[0]:.3g} to {site.band_hz[1]:.3g} Hz"
        said = [start, *([f"{100 * masked:.1f} % masked"] if masked > 0.001 else []), *said]
    verdict = SiteVerdict(
        code, *place, kind, not reason and site is not None, reason, "; ".join(said), coherence, corrections
    )
    return site, verdict, rows
