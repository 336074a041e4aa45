"""From counts to acceleration and rotation rate: instrument response removed, resampled in the same step."""

from __future__ import annotations

import copy
import math
import warnings
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.fft import next_fast_len, rfft, rfftfreq
from scipy.signal import czt

from rupture.records.report import UnusableError
from rupture.records.units import Unit, parse_unit

Array = NDArray[np.float64]

TARGET_ORDER = {"translation": 2, "rotation": 1}
"""Order of differentiation that sites carry: acceleration and rotation rate."""

_MISMATCH = 0.05
"""Stage gains and stated sensitivity farther apart than this are worth a note (common practice: 5 %)."""


@dataclass(frozen=True)
class Instrument:
    """What turns counts into ground motion.

    Attributes
    ----------
    unit
        Input unit.
    unit_name
        As the metadata spell it.
    sensitivity
        Counts per SI unit (m, rad, m/s, ...) at the reference frequency; its sign is the polarity.
    stages
        ObsPy response whose input unit is neutral, or None when only the sensitivity is known or wanted.
    notes
        What was odd, in words.
    """

    unit: Unit
    unit_name: str
    sensitivity: float
    stages: Any = None
    notes: tuple[str, ...] = ()

    def transfer(self, frequency_hz: Array) -> NDArray[np.complex128]:
        """Return counts per SI input unit at each frequency, shape as the frequencies."""
        if self.stages is None:
            return np.full(frequency_hz.shape, self.sensitivity, complex)
        return _evaluate(self.stages, frequency_hz) / self.unit.scale


def instrument_of(response: Any, full: bool) -> Instrument:
    """Read an ObsPy response and decide what it measures.

    Parameters
    ----------
    response
        ObsPy response object of a channel, or None.
    full
        Use all stages; the sensitivity alone serves where stages are missing or cannot be evaluated.

    Raises
    ------
    UnusableError
        No response, unknown unit, or a sensitivity that is zero or not a number.
    """
    if response is None:
        raise UnusableError("the metadata hold no response; give StationXML at response level")
    overall = response.instrument_sensitivity
    stages = sorted(response.response_stages, key=lambda s: s.stage_sequence_number)
    notes: list[str] = []
    first = stages[0].input_units if stages else None
    name = first or (overall.input_units if overall else None)
    unit = parse_unit(name)
    value = overall.value if overall is not None else None
    if value is None and stages and all(s.stage_gain for s in stages):
        value = math.prod(s.stage_gain for s in stages)
        notes.append("no overall sensitivity, taken from the stage gains")
    elif overall is not None and overall.input_units and first and overall.input_units.upper() != first.upper():
        other = parse_unit(overall.input_units)
        if (other.quantity, other.order, other.scale) != (unit.quantity, unit.order, unit.scale):
            notes.append(f"stage 1 takes {first}, the sensitivity {overall.input_units}; stage 1 is believed")
            if other.quantity == unit.quantity and other.order == unit.order and value is not None:
                value *= unit.scale / other.scale
    if value is None or not math.isfinite(value) or value == 0.0:
        shown = "missing" if value is None else f"{value:g}"
        raise UnusableError(f"the sensitivity is {shown}; correct it in the StationXML")
    if value < 0:
        notes.append("the sensitivity is negative: polarity turned")
    plain = Instrument(unit, str(name), value / unit.scale, None, tuple(notes))
    if not full:
        return plain
    if not any(type(s).__name__ != "ResponseStage" for s in stages):
        return Instrument(unit, str(name), plain.sensitivity, None, (*notes, "no response stages: sensitivity only"))
    return _with_stages(plain, response, stages, float(getattr(overall, "frequency", None) or 1.0))


def _with_stages(plain: Instrument, response: Any, stages: list[Any], reference_hz: float) -> Instrument:
    neutral = copy.deepcopy(response)
    for stage in neutral.response_stages:
        if stage.stage_sequence_number == stages[0].stage_sequence_number:
            # ObsPy and evalresp then neither scale nor integrate nor differentiate: that is ours to do.
            stage.input_units = "M/S"
    try:
        gain = complex(_evaluate(neutral, np.array([reference_hz]))[0]) / plain.unit.scale
    except Exception as error:
        note = f"the response stages cannot be evaluated ({error}): sensitivity only"
        return Instrument(plain.unit, plain.unit_name, plain.sensitivity, None, (*plain.notes, note))
    notes = list(plain.notes)
    if not np.isfinite(gain) or gain == 0:
        notes.append("the response stages give no answer at the reference frequency: sensitivity only")
        return Instrument(plain.unit, plain.unit_name, plain.sensitivity, None, tuple(notes))
    if abs(abs(gain) / abs(plain.sensitivity) - 1.0) > _MISMATCH:
        notes.append(
            f"the stages give {abs(gain):.4g} counts per SI unit at {reference_hz:g} Hz, the stated sensitivity is"
            f" {abs(plain.sensitivity):.4g}; the stages are used"
        )
    return Instrument(plain.unit, plain.unit_name, plain.sensitivity, neutral, tuple(notes))


def _evaluate(response: Any, frequency_hz: Array) -> NDArray[np.complex128]:
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        values = response.get_evalresp_response_for_frequencies(
            np.asarray(frequency_hz, float), output="VEL", hide_sensitivity_mismatch_warning=True
        )
    return np.asarray(values, complex)


def instrument_band(instrument: Instrument, rate_hz: float, floor_db: float) -> tuple[float, float]:
    """Return the frequencies in Hz around the response maximum at which the instrument answers well enough.

    Displacement, velocity or acceleration: the one in which the instrument is flattest counts, whatever its
    metadata are written in.

    Parameters
    ----------
    rate_hz
        Sampling rate of the channel.
    floor_db
        Allowed distance below the maximum.
    """
    frequency = np.geomspace(1e-3, 0.5 * rate_hz, 400)
    size = np.abs(instrument.transfer(frequency))
    variants = [size * frequency ** (instrument.unit.order - order) for order in range(3)]
    flattest = max(variants, key=lambda v: np.count_nonzero(v > 0.7 * v.max()))
    enough = flattest >= flattest.max() * 10.0 ** (-floor_db / 20.0)
    top = int(flattest.argmax())
    low = top - int(np.argmin(enough[top::-1])) + 1 if not enough[: top + 1].all() else 0
    high = top + int(np.argmin(enough[top:])) - 1 if not enough[top:].all() else frequency.size - 1
    return float(frequency[low]), float(frequency[high])


@dataclass(frozen=True)
class Corners:
    """Corners in Hz of the cosine pre-filter: 0 below `stop_low`, 1 from `low` to `high`, 0 above `stop_high`."""

    stop_low: float
    low: float
    high: float
    stop_high: float

    def gain(self, frequency_hz: Array) -> Array:
        """Return the filter's gain, shape as the frequencies."""
        rise = np.clip((frequency_hz - self.stop_low) / (self.low - self.stop_low), 0.0, 1.0)
        fall = np.clip((self.stop_high - frequency_hz) / (self.stop_high - self.high), 0.0, 1.0)
        return 0.25 * (1.0 - np.cos(np.pi * rise)) * (1.0 - np.cos(np.pi * fall))


def edge_s(duration_s: float, low_hz: float) -> float:
    """Return the length in s of the cosine taper at each end of a piece of record."""
    return min(0.02 * duration_s, 0.5 / low_hz, 5.0)


def deconvolve(
    samples: Array,
    start_s: float,
    rate_hz: float,
    instrument: Instrument,
    order: int,
    corners: Corners,
    water_level_db: float,
    times: tuple[float, float, int],
) -> Array:
    """Remove the response from one piece without holes and give it on any even time grid.

    The filtered spectrum is summed at the wanted times by a chirp z-transform: exact for a band-limited
    record, for any two sampling rates and any fraction of a sample in between, with no shift in time. The
    pre-filter ends below both Nyquist frequencies, so that nothing aliases.

    Parameters
    ----------
    samples
        Raw counts, finite, shape (n,).
    start_s, rate_hz
        Time of the first sample and sampling rate.
    instrument
        Its response.
    order
        Wanted order of differentiation: 0, 1 or 2.
    corners
        Pre-filter.
    water_level_db
        Floor of the response below its maximum.
    times
        First time, step and number of the wanted samples.

    Returns
    -------
    ndarray
        SI units, shape (number,).

    References
    ----------
    Rabiner, Schafer & Rader (1969), The chirp z-transform algorithm.
    """
    first_s, step_s, number = times
    duration = samples.size / rate_hz
    ramp = np.linspace(-1.0, 1.0, samples.size)
    mean = samples.mean()
    slope = ramp @ (samples - mean) / max(ramp @ ramp, 1e-300)
    flat = samples - mean - slope * ramp
    edge = min(round(edge_s(duration, corners.low) * rate_hz), samples.size // 2)
    if edge:
        window = 0.5 * (1.0 - np.cos(np.pi * (np.arange(edge) + 0.5) / edge))
        flat[:edge] *= window
        flat[-edge:] *= window[::-1]
    # The zero-phase filter rings for about the inverse of its narrowest slope: keep the wrap-around clear of it.
    pad = 2.0 / (corners.low - corners.stop_low)
    size = next_fast_len(samples.size + math.ceil(pad * rate_hz), real=True)
    frequency = rfftfreq(size, 1.0 / rate_hz)
    keep = slice(int(np.searchsorted(frequency, corners.stop_low)), int(np.searchsorted(frequency, corners.stop_high)))
    f = frequency[keep]
    transfer = instrument.transfer(f)
    floor = np.abs(transfer).max() * 10.0 ** (-water_level_db / 20.0)
    magnitude = np.maximum(np.abs(transfer), 1e-300)
    transfer = transfer / magnitude * np.maximum(magnitude, floor)
    spectrum = rfft(flat, size)[keep] * corners.gain(f) / transfer
    spectrum *= (2j * np.pi * f) ** (order - instrument.unit.order)
    delay = first_s - start_s
    spectrum *= np.exp(2j * np.pi * f * delay)
    spacing = frequency[1]
    turn = np.exp(2j * np.pi * spacing * step_s)
    summed = czt(spectrum, m=number, w=turn)
    carrier = np.exp(2j * np.pi * f[0] * step_s * np.arange(number))
    return np.asarray(2.0 / size * (summed * carrier).real)
