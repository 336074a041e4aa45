"""Sensors as recorders see them: response, channel codes, full scale; from SI ground motion to counts."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rupture.errors import InputError
from rupture.synthetic.noise import RotationSensor, TranslationSensor

G = 9.80665
"""Standard gravity in m/s^2."""


@dataclass(frozen=True)
class Response:
    """Response of a channel: counts per unit of ground motion.

    Attributes
    ----------
    unit
        Unit of the input in StationXML spelling: M/S**2, M/S or RAD/S.
    sensitivity
        Counts per unit at `frequency_hz`.
    frequency_hz
        Where the sensitivity holds.
    full_scale
        Largest count; beyond it the channel is clipped.
    poles, zeros
        Laplace poles and zeros in rad/s; empty for a flat response.
    instrument
        Second letter of the channel code.
    description
        What the metadata call the sensor.
    """

    unit: str
    sensitivity: float
    frequency_hz: float
    full_scale: int
    poles: tuple[complex, ...]
    zeros: tuple[complex, ...]
    instrument: str
    description: str

    @property
    def normalisation(self) -> float:
        """Factor A0 that makes the poles and zeros 1 at `frequency_hz`."""
        s = 2j * np.pi * self.frequency_hz
        return float(abs(np.prod([s - p for p in self.poles]) / np.prod([s - z for z in self.zeros])))

    def shape(self, frequency_hz: NDArray[np.float64]) -> NDArray[np.complex128]:
        """Return the response over the sensitivity, shape of the frequencies (Hz), for exp(+i omega t)."""
        s = 2j * np.pi * frequency_hz
        out = np.full(frequency_hz.shape, self.normalisation, complex)
        for zero in self.zeros:
            out *= s - zero
        for pole in self.poles:
            out /= s - pole
        return out


def _velocity_sensor(corner_hz: float, damping: float) -> tuple[tuple[complex, ...], tuple[complex, ...]]:
    omega = 2 * np.pi * corner_hz
    real, imaginary = -damping * omega, omega * np.sqrt(1 - damping**2)
    return (complex(real, imaginary), complex(real, -imaginary)), (0j, 0j)


_POLES, _ZEROS = _velocity_sensor(1 / 120, 0.707)

# Full scale 2 g over 2^23 counts: a 24-bit recorder. Broadband full scales are common practice; the low-gain one stands strong motion.
RESPONSES: dict[TranslationSensor | RotationSensor, Response] = {
    TranslationSensor.ACCELEROMETER: Response(
        "M/S**2", 2**23 / (2 * G), 1.0, 2**23 - 1, (), (), "N", "accelerometer, flat, full scale 2 g"
    ),
    TranslationSensor.BROADBAND: Response(
        "M/S", 2**23 / 0.013, 1.0, 2**23 - 1, _POLES, _ZEROS, "H", "broadband seismometer, 120 s, full scale 13 mm/s"
    ),
    TranslationSensor.LOW_GAIN: Response(
        "M/S", 2**23 / 1.0, 1.0, 2**23 - 1, _POLES, _ZEROS, "L", "low-gain seismometer, 120 s, full scale 1 m/s"
    ),
    RotationSensor.PORTABLE: Response(
        "RAD/S", 1e9, 1.0, 2**28, (), (), "J", "portable fibre-optic rotation sensor, 1 nrad/s per count"
    ),
    RotationSensor.PORTABLE_OLD: Response(
        "RAD/S", 1e9, 1.0, 2**28, (), (), "J", "early portable fibre-optic rotation sensor, 1 nrad/s per count"
    ),
    RotationSensor.RING_LASER: Response("RAD/S", 1e12, 1.0, 2**28, (), (), "J", "large ring laser, 1 prad/s per count"),
    RotationSensor.ARRAY_DERIVED: Response(
        "RAD/S", 1e9, 1.0, 2**28, (), (), "J", "rotation rate derived from a small array, 1 nrad/s per count"
    ),
}
"""Response of each class of sensor."""


def band_letter(rate_hz: float, short_period: bool = False) -> str:
    """Return the band code of a sampling rate for sensors with a long period (FDSN source identifiers).

    Examples
    --------
    >>> band_letter(20.0), band_letter(100.0), band_letter(250.0)
    ('B', 'H', 'C')
    """
    if 10 <= rate_hz < 80:
        return "B"
    if 80 <= rate_hz < 250:
        return "H"
    if 250 <= rate_hz < 1000:
        return "C"
    if 1 < rate_hz < 10:
        return "M"
    raise InputError(f"a sampling rate of {rate_hz:g} Hz is outside 1 to 1000 Hz")


def to_counts(motion: NDArray[np.float64], step_s: float, response: Response) -> NDArray[np.int32]:
    """Return what the recorder writes for ground acceleration (m/s^2) or rotation rate (rad/s), shape (samples,).

    Rounded to whole counts and held at full scale.

    Parameters
    ----------
    motion
        Ground motion, shape (samples,).
    step_s
        Sampling interval in s.
    response
        The channel.
    """
    if response.unit == "M/S":
        from scipy.fft import next_fast_len

        # Zeros in front: the sensor is at rest; its long period needs room at the end.
        length = next_fast_len(motion.size + int(600 / step_s), real=True)
        frequency = np.asarray(np.fft.rfftfreq(length, step_s), np.float64)
        spectrum = np.fft.rfft(motion, length)
        spectrum[1:] *= response.shape(frequency[1:]) / (2j * np.pi * frequency[1:])
        spectrum[0] = 0.0
        analogue = np.fft.irfft(spectrum, length)[: motion.size]
    else:
        analogue = motion
    counts = np.rint(analogue * response.sensitivity)
    return np.clip(counts, -response.full_scale, response.full_scale).astype(np.int32)
