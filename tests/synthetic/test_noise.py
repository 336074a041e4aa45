"""Noise: generated spectra against the wanted ones, Peterson's models, self-noise figures."""

import numpy as np
import pytest
from scipy.signal import welch

from rupture.errors import InputError
from rupture.synthetic.noise import (
    RotationSensor,
    TranslationSensor,
    coloured_noise,
    ground_acceleration,
    ground_rotation,
    peterson_db,
    rotation_self_noise,
    translation_self_noise,
)

BANDS = [(0.1, 0.2), (0.2, 0.5), (0.5, 1.0), (1.0, 2.0), (2.0, 5.0)]


@pytest.mark.parametrize(
    "spectrum",
    [
        ground_acceleration(0.0),
        ground_acceleration(0.7),
        rotation_self_noise(RotationSensor.PORTABLE),
        rotation_self_noise(RotationSensor.ARRAY_DERIVED, 300.0),
    ],
)
def test_generated_noise_has_the_wanted_spectrum(spectrum):
    rate = 20.0
    noise = coloured_noise(spectrum, 120_000, 1 / rate, np.random.default_rng(1))
    frequency, density = welch(noise, rate, nperseg=4096)
    for low, high in BANDS:
        inside = (frequency >= low) & (frequency < high)
        assert 10 * np.log10(np.mean(density[inside] / spectrum(frequency[inside]))) == pytest.approx(0, abs=0.4)


def test_variance_is_the_integral_of_the_spectrum():
    """20 nrad/s/sqrt(Hz) over 0.1-1 Hz is 19 nrad/s rms (arithmetic)."""
    level = 20e-9
    noise = coloured_noise(
        lambda f: np.where((f > 0.1) & (f < 1), level**2, 0.0), 200_000, 0.1, np.random.default_rng(2)
    )
    assert noise.std() == pytest.approx(19e-9, rel=0.02)


def test_ends_do_not_join():
    noise = coloured_noise(lambda f: f**-4.0, 2000, 0.05, np.random.default_rng(3))
    steps = np.abs(np.diff(noise))
    assert abs(noise[-1] - noise[0]) > 5 * steps.mean()


def test_same_seed_same_noise():
    a, b, c = (coloured_noise(ground_acceleration(0.5), 500, 0.05, np.random.default_rng(s)) for s in (4, 4, 5))
    np.testing.assert_array_equal(a, b)
    assert not np.allclose(a, c)


def test_peterson_models():
    """Peterson (1993), tables 3 and 4: A + B log10(T) in dB for acceleration; coefficients from memory, T in s."""
    low = {0.1: (-162.36, 5.64), 1.0: (-166.40, 28.90), 4.5: (-141.10, 0.0), 10.0: (-132.18, -31.57)}
    for period, (a, b) in low.items():
        got = peterson_db(np.array([1 / period]), 0.0)[0]
        assert got == pytest.approx(a + b * np.log10(period), abs=0.6), period
    assert peterson_db(np.array([10.0]), 1.0)[0] == pytest.approx(-108.73 - 17.23 * np.log10(0.1), abs=0.6)
    middle = peterson_db(np.array([0.3]), 0.5)
    assert middle == pytest.approx((peterson_db(np.array([0.3]), 0.0) + peterson_db(np.array([0.3]), 1.0)) / 2)


def test_self_noise_figures():
    """Published portable rotation sensors 35-45, early ones to 120 nrad/s/sqrt(Hz); best 20-30 and 1e-11 rad/s/sqrt(Hz) of large rings from memory."""
    f = np.array([0.1, 1.0])
    level = {s: np.sqrt(rotation_self_noise(s)(f)) for s in RotationSensor}
    assert (level[RotationSensor.PORTABLE] >= 20e-9).all()
    assert (level[RotationSensor.PORTABLE] <= 45e-9).all()
    np.testing.assert_allclose(level[RotationSensor.PORTABLE_OLD], 120e-9)
    np.testing.assert_allclose(level[RotationSensor.RING_LASER], 1e-11)
    # Array: sqrt(2) a / (2 pi f d).
    element = np.sqrt(translation_self_noise(TranslationSensor.ACCELEROMETER)(f))
    np.testing.assert_allclose(level[RotationSensor.ARRAY_DERIVED], np.sqrt(2) * element / (2 * np.pi * f * 200.0))


def test_ambient_rotation_is_acceleration_over_speed():
    f = np.array([0.2, 1.0])
    np.testing.assert_allclose(ground_rotation(0.3)(f) * 3000.0**2, ground_acceleration(0.3)(f))


def test_bad_noise():
    with pytest.raises(InputError, match="finite and not negative"):
        coloured_noise(lambda f: -f, 100, 0.1, np.random.default_rng(1))
    with pytest.raises(InputError, match="between 0"):
        peterson_db(np.array([1.0]), 3.0)
    with pytest.raises(InputError, match="positive aperture"):
        rotation_self_noise(RotationSensor.ARRAY_DERIVED, 0.0)
