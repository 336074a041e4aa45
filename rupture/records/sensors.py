"""From raw channels to one sensor: checked, deconvolved, oriented, on the common time grid."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from rupture.records.arrivals import Arrivals
from rupture.records.checks import Checked, check_channel, mask_grid
from rupture.records.metadata import STRONG_MOTION, ChannelMetadata, quantity_of
from rupture.records.orient import channel_axis, to_east_north_up
from rupture.records.read import RawChannel
from rupture.records.relations import octaves
from rupture.records.report import ChannelFound, ChannelReport, UnusableError
from rupture.records.response import (
    TARGET_ORDER,
    Corners,
    Instrument,
    deconvolve,
    edge_s,
    instrument_band,
    instrument_of,
)
from rupture.records.settings import RecordSettings

Array = NDArray[np.float64]
Bool = NDArray[np.bool_]

_TRANSITION = 0.9
"""Pre-filter: the pass band ends at this share of its stop frequency, the stop frequency stays below Nyquist."""
_LOWEST_HZ = 0.02
"""Default lowest frequency (own choice): below it long-period noise and tilt rule near an earthquake."""
_PERIODS = 4.0
"""Periods of the lowest frequency that must fit into the record."""


@dataclass(frozen=True)
class Grid:
    """The common time grid: times are index * step_s; index `first` is the first sample."""

    first: int
    number: int
    step_s: float

    @property
    def times_s(self) -> Array:
        """Sample times in s after the origin time, shape (number,)."""
        return np.asarray((self.first + np.arange(self.number)) * self.step_s, float)


@dataclass(frozen=True)
class Prepared:
    """One channel that passed the checks, still in counts."""

    channel: str
    metadata: ChannelMetadata
    instrument: Instrument
    checked: Checked
    axis: Array
    report: ChannelReport


@dataclass(frozen=True)
class Sensor:
    """The channels of one sensor, not yet filtered.

    Attributes
    ----------
    name
        NET.STA.LOC.BI: network, station, location, band and instrument code.
    quantity
        "translation" or "rotation".
    channels
        What is usable of it.
    """

    name: str
    quantity: str
    channels: tuple[Prepared, ...]

    @property
    def station(self) -> str:
        """NET.STA."""
        return ".".join(self.name.split(".")[:2])

    @property
    def strong_motion(self) -> bool:
        """Whether it is an accelerometer by its code."""
        return self.name[-1] == STRONG_MOTION

    @property
    def clipped(self) -> bool:
        """Whether any of its channels clips."""
        return any(c.checked.clipped_share > 0 for c in self.channels)

    @property
    def rate_hz(self) -> float:
        """Lowest sampling rate of its channels."""
        return min(c.checked.pieces[0].rate_hz for c in self.channels)

    @property
    def seconds(self) -> float:
        """Length of record in s, summed over channels."""
        return sum(p.samples.size / p.rate_hz for c in self.channels for p in c.checked.pieces)

    @property
    def place(self) -> tuple[float, float, float, float]:
        """Longitude, latitude in degrees, elevation and depth in m of its first channel."""
        m = self.channels[0].metadata
        return m.longitude_deg, m.latitude_deg, m.elevation_m, m.depth_m


@dataclass(frozen=True)
class Motion:
    """Records of one sensor in SI units, East, North, Up.

    Attributes
    ----------
    data, valid
        Shape (3, samples) on the common grid.
    band_hz
        Pass band of the pre-filter.
    reports
        Rows of the quality table with what was done.
    """

    data: Array
    valid: Bool
    band_hz: tuple[float, float]
    reports: tuple[ChannelReport, ...]


def prepare(raw: RawChannel, metadata: ChannelMetadata, settings: RecordSettings) -> Prepared | ChannelReport:
    """Check one channel and find its instrument; a table row with the reason when it cannot be used."""
    station = ".".join(raw.channel.split(".")[:2])
    first, last = (raw.segments[0], raw.segments[-1]) if raw.segments else (None, None)
    found = ChannelFound(
        metadata.unit_name, first.rate_hz if first else None, first.start_s if first else None,
        last.end_s if last else None, metadata.azimuth_deg, metadata.dip_deg, metadata.sensor,
        timing_quality_percent=raw.timing_quality_percent,
    )  # fmt: skip
    row = ChannelReport(station, raw.channel, found)
    try:
        instrument = instrument_of(metadata.response, settings.response == "full")
        expected = quantity_of(raw.channel)
        if instrument.unit.quantity != expected:
            raise UnusableError(
                f"the channel code says {expected}, the input unit '{instrument.unit_name}' is one of"
                f" {instrument.unit.quantity}; correct one of them"
            )
        axis, note = channel_axis(raw.channel, metadata.azimuth_deg, metadata.dip_deg)
        checked = check_channel(raw, settings)
    except UnusableError as reason:
        return replace(row, reason=str(reason))
    odd = tuple(n for n in (*metadata.notes, *instrument.notes, note) if n)
    found = replace(found, gaps=checked.gaps, gap_s=round(checked.gap_s, 3))
    return Prepared(
        raw.channel, metadata, instrument, checked, axis, replace(row, found=found, missing=(*odd, *checked.notes))
    )


def corners_of(sensor: Sensor, grid: Grid, settings: RecordSettings) -> Corners:
    """Return the pre-filter for a sensor: what record, instrument, sampling and settings all allow.

    Raises
    ------
    UnusableError
        When nothing is left between the lowest and the highest usable frequency.
    """
    lows = [settings.low_hz or _LOWEST_HZ]
    stop = min(0.5 / grid.step_s, 0.5 * sensor.rate_hz)
    highs = [_TRANSITION**2 * stop]
    for channel in sensor.channels:
        longest = max((p.samples.size - 1) / p.rate_hz for p in channel.checked.pieces)
        lows.append(_PERIODS / max(longest, 1e-9))
        low, high = instrument_band(channel.instrument, sensor.rate_hz, settings.response_floor_db)
        lows.append(low)
        highs.append(high)
    low, high = max(lows), min(highs)
    if not high > 2.0 * low:
        raise UnusableError(f"only {low:.3g} to {high:.3g} Hz are usable: less than an octave")
    return Corners(0.5 * low, low, high, min(high / _TRANSITION, _TRANSITION * stop))


def motion_of(
    sensor: Sensor,
    corners: Corners,
    grid: Grid,
    settings: RecordSettings,
    arrivals: Arrivals,
    order: int | None = None,
    late_s: float = 0.0,
) -> Motion:
    """Filter all channels of a sensor and turn them to East, North, Up.

    Parameters
    ----------
    sensor
        Channels in counts.
    corners
        Pre-filter, from `corners_of` (one for all sensors of a site).
    grid
        Common time grid.
    settings
        Limits.
    arrivals
        First P and S, for the signal-to-noise ratio.
    order
        Wanted order of differentiation; None for acceleration or rotation rate.
    late_s
        By how much the sensor's clock is late; taken off all its times.

    Raises
    ------
    UnusableError
        When no piece is long enough, or the axes lie in one plane.
    """
    wanted = TARGET_ORDER[sensor.quantity] if order is None else order
    data, valid, reports = [], [], []
    for channel in sensor.channels:
        values, good, note = _filtered(channel, corners, grid, settings, wanted, late_s)
        data.append(values)
        valid.append(good)
        steps = _steps(channel.instrument, corners, grid, settings, wanted)
        steps += (f"moved by {-late_s:+.3f} s",) if late_s else ()
        missing = (*channel.report.missing, note) if note else channel.report.missing
        ratio = signal_to_noise(values, good, grid, arrivals)
        bands = snr_bands(values, good, grid, arrivals, (corners.low, corners.high))
        reports.append(replace(channel.report, done=steps, missing=missing, snr=ratio, snr_bands=bands))
    axes = np.array([c.axis for c in sensor.channels])
    turned, turned_valid, _ = to_east_north_up(axes, np.array(data), np.array(valid))
    if not turned_valid.any():
        raise UnusableError("no sample is left after masking, or no channel lies along East, North or Up")
    pass_band = (corners.low, corners.high)
    return Motion(turned, turned_valid, pass_band, tuple(replace(r, used=True) for r in reports))


def _filtered(
    channel: Prepared, corners: Corners, grid: Grid, settings: RecordSettings, order: int, late_s: float
) -> tuple[Array, Bool, str]:
    out = np.zeros(grid.number)
    spans = []
    short = 0
    for piece in (replace(p, start_s=p.start_s - late_s) for p in channel.checked.pieces):
        length = (piece.samples.size - 1) / piece.rate_hz
        if length < 1.0 / corners.low:
            short += 1
            continue
        a = max(int(np.ceil(piece.start_s / grid.step_s)) - grid.first, 0)
        b = min(int(np.floor(piece.end_s / grid.step_s)) + 1 - grid.first, grid.number)
        if b <= a:
            continue
        times = ((grid.first + a) * grid.step_s, grid.step_s, b - a)
        out[a:b] = deconvolve(
            piece.samples, piece.start_s, piece.rate_hz, channel.instrument, order, corners,
            settings.water_level_db, times,
        )  # fmt: skip
        spans.append((piece.start_s, piece.end_s, edge_s(length, corners.low)))
    masked = [(start - late_s, end - late_s) for start, end in channel.checked.masked]
    valid = mask_grid(spans, masked, settings.guard_s, grid.times_s)
    note = f"{short} pieces shorter than one period of {corners.low:.3g} Hz left out" if short else ""
    return np.where(valid, out, 0.0), valid, note


def _steps(
    instrument: Instrument, corners: Corners, grid: Grid, settings: RecordSettings, order: int
) -> tuple[str, ...]:
    what = "full response" if instrument.stages is not None else "sensitivity"
    kind = ("displacement", "velocity", "acceleration") if instrument.unit.quantity == "translation" else (
        "rotation angle", "rotation rate", "rotational acceleration")  # fmt: skip
    level = f", water level {settings.water_level_db:g} dB" if instrument.stages is not None else ""
    return (
        f"{what} removed from {instrument.unit_name} to {kind[order]}{level}",
        f"pre-filter {corners.stop_low:.3g}-{corners.low:.3g}-{corners.high:.3g}-{corners.stop_high:.3g} Hz",
        f"resampled to {1.0 / grid.step_s:g} Hz",
        "turned to East, North, Up",
    )


def signal_to_noise(data: Array, valid: Bool, grid: Grid, arrivals: Arrivals) -> float | None:
    """Return the ratio of root mean squares of the signal and of what came before P; None without either.

    Parameters
    ----------
    data, valid
        Shape (samples,).
    grid
        Time grid.
    arrivals
        The signal runs from P to as long again after S, at least 20 s; the noise ends 2 s before P.
    """
    times = grid.times_s
    end = arrivals.s_s + max(arrivals.s_s - arrivals.p_s, 20.0)
    before = valid & (times < arrivals.p_s - 2.0)
    signal = valid & (times >= arrivals.p_s) & (times <= end)
    if np.count_nonzero(before) * grid.step_s < 5.0 or not signal.any():
        return None
    noise = float(np.sqrt(np.mean(data[before] ** 2)))
    return float(np.sqrt(np.mean(data[signal] ** 2))) / noise if noise > 0 else None


def snr_bands(
    data: Array, valid: Bool, grid: Grid, arrivals: Arrivals, band_hz: tuple[float, float]
) -> tuple[tuple[float, float, float], ...]:
    """Return the signal-to-noise ratio per octave, from the power spectra of both stretches.

    Parameters
    ----------
    data, valid
        Shape (samples,).
    grid, arrivals
        As for `signal_to_noise`.
    band_hz
        Usable band.

    Returns
    -------
    tuple
        (lowest Hz, highest Hz, ratio of amplitudes); empty where there is no noise to compare with.
    """
    times = grid.times_s
    end = arrivals.s_s + max(arrivals.s_s - arrivals.p_s, 20.0)
    stretches = [valid & (times < arrivals.p_s - 2.0), valid & (times >= arrivals.p_s) & (times <= end)]
    spectra = []
    for stretch in stretches:
        if np.count_nonzero(stretch) * grid.step_s < 5.0:
            return ()
        part = data[stretch]
        window = np.hanning(part.size)
        spectra.append(
            (np.fft.rfftfreq(part.size, grid.step_s), np.abs(np.fft.rfft(part * window)) ** 2 / (window @ window))
        )
    found = []
    for low, high in octaves(*band_hz):
        before, signal = (
            float(power[(f >= low) & (f < high)].mean()) if ((f >= low) & (f < high)).any() else 0.0
            for f, power in spectra
        )
        if before > 0:
            found.append((round(low, 4), round(high, 4), float(np.sqrt(signal / before))))
    return tuple(found)
