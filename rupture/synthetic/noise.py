"""Noise of ground and sensors as power spectra, and time series with any spectrum."""

from __future__ import annotations

from collections.abc import Callable
from enum import StrEnum
from functools import cache

import numpy as np
from numpy.typing import NDArray

from rupture.errors import InputError

Spectrum = Callable[[NDArray[np.float64]], NDArray[np.float64]]
"""One-sided power spectral density against frequency in Hz."""

AMBIENT_SPEED_M_S = 3000.0
"""Phase speed in m/s by which ambient acceleration becomes ambient rotation rate (Rayleigh waves of the crust, common practice)."""


class TranslationSensor(StrEnum):
    """Classes of translation sensor."""

    ACCELEROMETER = "accelerometer"
    BROADBAND = "broadband"
    LOW_GAIN = "low-gain-broadband"


class RotationSensor(StrEnum):
    """Classes of rotation sensor."""

    PORTABLE = "portable-fibre-optic"
    PORTABLE_OLD = "portable-fibre-optic-early"
    RING_LASER = "large-ring-laser"
    ARRAY_DERIVED = "array-derived"


ROTATION_SELF_NOISE = {
    # Published portable instruments: 35-45, earlier ones up to 120 nrad/s/sqrt(Hz); best ones 20-30 (from memory).
    RotationSensor.PORTABLE: 30e-9,
    RotationSensor.PORTABLE_OLD: 120e-9,
    # Of the order of 1e-11 rad/s/sqrt(Hz) (from memory).
    RotationSensor.RING_LASER: 1e-11,
}
"""Amplitude spectral density of self-noise in rad/s/sqrt(Hz), flat."""

TRANSLATION_SELF_NOISE_DB = {
    # Typical figures of data sheets, from memory: decibels relative to 1 (m/s^2)^2/Hz, flat above 0.01 Hz.
    TranslationSensor.ACCELEROMETER: -120.0,
    TranslationSensor.BROADBAND: -185.0,
    TranslationSensor.LOW_GAIN: -160.0,
}


@cache
def _peterson(low: bool) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    from obspy.signal.spectral_estimation import get_nhnm, get_nlnm

    period, level = get_nlnm() if low else get_nhnm()
    order = np.argsort(1 / period)
    return np.log10(1 / period[order]), np.asarray(level)[order]


def peterson_db(frequency_hz: NDArray[np.float64], level: float) -> NDArray[np.float64]:
    """Return ground noise between the low and the high model of Peterson (1993), dB relative to 1 (m/s^2)^2/Hz.

    Parameters
    ----------
    frequency_hz
        Frequencies in Hz, any shape; beyond the models' range their ends hold.
    level
        0 for the low model, 1 for the high one; in between their decibels are interpolated.

    Examples
    --------
    >>> [float(round(v)) for v in peterson_db(np.array([0.2, 1.0]), 0.0)]
    [-141.0, -166.0]
    """
    if not -0.5 <= level <= 1.5:
        raise InputError(f"ground noise level {level:g} must lie between 0 (low model) and 1 (high model)")
    place = np.log10(np.maximum(frequency_hz, 1e-6))
    low, high = (np.interp(place, *_peterson(which)) for which in (True, False))
    return low + level * (high - low)


def ground_acceleration(level: float) -> Spectrum:
    """Return the spectrum of ambient acceleration, (m/s^2)^2/Hz; see `peterson_db`."""
    return lambda f: 10 ** (peterson_db(f, level) / 10)


def ground_rotation(level: float) -> Spectrum:
    """Return the spectrum of ambient rotation rate, (rad/s)^2/Hz: ambient acceleration over a phase speed."""
    return lambda f: 10 ** (peterson_db(f, level) / 10) / AMBIENT_SPEED_M_S**2


def translation_self_noise(sensor: TranslationSensor) -> Spectrum:
    """Return self-noise of a translation sensor as acceleration, (m/s^2)^2/Hz, flat."""
    return lambda f: np.full(np.shape(f), 10 ** (TRANSLATION_SELF_NOISE_DB[sensor] / 10))


def rotation_self_noise(
    sensor: RotationSensor,
    aperture_m: float = 200.0,
    element: TranslationSensor = TranslationSensor.ACCELEROMETER,
) -> Spectrum:
    """Return self-noise of a rotation sensor as rotation rate, (rad/s)^2/Hz.

    Parameters
    ----------
    sensor
        Class of sensor. Array-derived rotation is a difference of two velocities over the aperture (Spudich et al. 1995): its noise is that
        of the elements, 2 S_acc / (2 pi f aperture)^2.
    aperture_m, element
        Aperture in m and class of the sensors of an array; not used for the others.
    """
    if sensor is RotationSensor.ARRAY_DERIVED:
        if not aperture_m > 0:
            raise InputError("an array needs a positive aperture")
        acceleration = translation_self_noise(element)
        return lambda f: 2 * acceleration(f) / (2 * np.pi * np.maximum(f, 1e-3) * aperture_m) ** 2
    return lambda f: np.full(np.shape(f), ROTATION_SELF_NOISE[sensor] ** 2)


def coloured_noise(spectrum: Spectrum, samples: int, step_s: float, rng: np.random.Generator) -> NDArray[np.float64]:
    """Return Gaussian noise with a given one-sided power spectrum, shape (samples,).

    Random Fourier coefficients over twice the length, of which one half is kept, so that the end does not join the start.

    Parameters
    ----------
    spectrum
        One-sided power spectral density, unit^2/Hz, of frequencies in Hz.
    samples, step_s
        Length and sampling interval in s.
    rng
        Source of random numbers; the same state gives the same noise.
    """
    length = 2 * samples
    frequency = np.asarray(np.fft.rfftfreq(length, step_s), np.float64)
    density = np.zeros(frequency.size)
    density[1:] = spectrum(frequency[1:])
    if not (np.isfinite(density).all() and (density >= 0).all()):
        raise InputError("a noise spectrum must be finite and not negative")
    draw = rng.standard_normal((2, frequency.size))
    # Variance S df per frequency: E|X|^2 = S length / (2 step).
    coefficients = np.sqrt(density * length / (4 * step_s)) * (draw[0] + 1j * draw[1])
    return np.fft.irfft(coefficients, length)[:samples]
