"""Array f-k direction, window by window: what six-component directions of the same array are held against."""

from __future__ import annotations

import warnings
from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from rupture.conventions import KM
from rupture.errors import DataError, InputError
from rupture.event import Event
from rupture.records.arrivals import first_arrivals
from rupture.records.assemble import prepare_run
from rupture.records.building import Context
from rupture.records.pairing import ArrayPlan
from rupture.records.sensors import corners_of, motion_of
from rupture.records.settings import RecordSettings

Array = NDArray[np.float64]

_STEPS = 40
"""Slowness steps from the middle of the grid to its edge."""


@dataclass(frozen=True)
class ArrayDirections:
    """f-k directions of one array and band.

    Attributes
    ----------
    code
        Name of the array, as of the site that `rupture.records.read_sites` makes of it.
    time_s
        Window centres, s after the origin, shape (T,).
    back_azimuth_rad, slowness_s_m
        Of the largest beam, shape (T,); NaN where a sensor has no valid record in the window.
    relative_power
        Beam power over the mean power of the sensors, 0-1, shape (T,).
    band_hz, window_s
        Band and window length.
    """

    code: str
    time_s: Array
    back_azimuth_rad: Array
    slowness_s_m: Array
    relative_power: Array
    band_hz: tuple[float, float]
    window_s: float


def array_directions(
    records: Sequence[str | Path],
    inventory: Sequence[str | Path],
    event: Event,
    stations: Sequence[str],
    band_hz: tuple[float, float],
    window_s: float,
    hop_s: float,
    span_s: tuple[float, float],
    slowest_km_s: float = 2.0,
    settings: RecordSettings | None = None,
) -> ArrayDirections:
    """Run ObsPy's f-k analysis on the verticals of an array, response removed as for its six-component site.

    Parameters
    ----------
    records, inventory, event, settings
        As for `rupture.records.read_sites`.
    stations
        Members (NET.STA or STA).
    band_hz
        Band in Hz.
    window_s, hop_s
        Window length and step; the step is met to within a sample.
    span_s
        First start and last end of windows, s after the origin.
    slowest_km_s
        Edge of the slowness grid, as apparent velocity.

    Returns
    -------
    ArrayDirections
        One direction per window.

    Raises
    ------
    InputError
        Stations without usable records, or a band that the records do not hold.
    DataError
        When the records do not cover the span.

    References
    ----------
    Capon (1969); the beam is the conventional one (obspy.signal.array_analysis.array_processing).
    """
    settings = replace(
        settings or RecordSettings(), arrays=(tuple(stations),), automatic_arrays=False, need_rotation=False
    )
    plan, context, _ = prepare_run(records, inventory, event, settings, {}, first_arrivals)
    (array,) = plan.arrays
    data, valid, usable = _verticals(array, context)
    low, high = band_hz
    if not usable[0] <= low < high <= usable[1]:
        raise InputError(
            f"array {array.code}: the band {low:g}-{high:g} Hz is not inside the usable {usable[0]:.3g}-{usable[1]:.3g} Hz"
        )
    return _beams(array, context, data, valid, band_hz, window_s, hop_s, span_s, slowest_km_s)


def _verticals(array: ArrayPlan, context: Context) -> tuple[Array, NDArray[np.bool_], tuple[float, float]]:
    """Return vertical velocity of all members on the common grid, where valid, and their common band."""
    corners = [corners_of(s, context.grid, context.settings) for s in array.sensors]
    narrow = replace(
        corners[0],
        stop_low=max(c.stop_low for c in corners),
        low=max(c.low for c in corners),
        high=min(c.high for c in corners),
        stop_high=min(c.stop_high for c in corners),
    )
    motions = [
        motion_of(s, narrow, context.grid, context.settings, context.arrivals[s.name], order=1) for s in array.sensors
    ]
    data, valid = (np.array([getattr(m, name)[2] for m in motions]) for name in ("data", "valid"))
    return np.asarray(data), np.asarray(valid.all(axis=0)), (narrow.low, narrow.high)


def _beams(
    array: ArrayPlan,
    context: Context,
    data: Array,
    valid: NDArray[np.bool_],
    band_hz: tuple[float, float],
    window_s: float,
    hop_s: float,
    span_s: tuple[float, float],
    slowest_km_s: float,
) -> ArrayDirections:
    from obspy import Stream, Trace, UTCDateTime
    from obspy.core.util import AttribDict
    from obspy.signal.array_analysis import array_processing

    grid, times = context.grid, context.grid.times_s
    start, end = max(span_s[0], times[0]), min(span_s[1], times[-1])
    if end - start < window_s:
        raise DataError(
            f"array {array.code}: the records do not cover {span_s[0]:g} to {span_s[1]:g} s after the origin"
        )
    stream = Stream()
    for sensor, row in zip(array.sensors, data, strict=True):
        lon, lat, up, deep = sensor.place
        trace = Trace(row.copy())
        trace.stats.update({"station": sensor.station[-5:], "delta": grid.step_s, "starttime": UTCDateTime(times[0])})
        trace.stats.coordinates = AttribDict(longitude=lon, latitude=lat, elevation=(up - deep) / KM)
        stream += trace
    edge = 1.0 / slowest_km_s
    with warnings.catch_warnings():
        # Empty windows divide zero by zero inside; they are masked below.
        warnings.simplefilter("ignore")
        found = array_processing(
            stream, window_s, min(hop_s / window_s, 1.0), -edge, edge, -edge, edge, edge / _STEPS, -1e9, -1e9,
            band_hz[0], band_hz[1], UTCDateTime(start), UTCDateTime(end), 0, timestamp="julsec", method=0,
        )  # fmt: skip
    if not len(found):
        raise DataError(f"array {array.code}: no window between {start:g} and {end:g} s")
    first, power, _, back_azimuth, slowness = np.asarray(found, float).T
    centre = first + 0.5 * window_s
    masked = np.array([not valid[(times >= t) & (times < t + window_s)].all() for t in first])
    return ArrayDirections(
        array.code,
        centre,
        np.where(masked, np.nan, np.radians(back_azimuth) % (2.0 * np.pi)),
        np.where(masked, np.nan, slowness / KM),
        np.where(masked, 0.0, power),
        band_hz,
        window_s,
    )
