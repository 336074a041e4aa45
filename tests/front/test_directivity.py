"""Apparent duration against azimuth (Ben-Menahem 1961; Haskell 1964)."""

import numpy as np
import pytest

from rupture.front import apparent_duration


def test_worked_example():
    """L 121 km, v_r 2.8, c 3.5 km/s: 8.6, 43, 78 s at 0, 90, 180 deg, by arithmetic."""
    found = apparent_duration(121e3, 2800.0, 3500.0, np.radians([0, 90, 180]))
    np.testing.assert_allclose(found, [121 / 2.8 - 121 / 3.5, 121 / 2.8, 121 / 2.8 + 121 / 3.5], rtol=1e-12)
    np.testing.assert_allclose(found, [8.6, 43, 78], atol=0.4)


def test_length_and_speed_follow_from_the_extremes():
    """L = c (t_max - t_min) / 2 and v_r = c (t_max - t_min) / (t_max + t_min), from the same formula."""
    longest, shortest = apparent_duration(90e3, 2600.0, 3500.0, np.pi), apparent_duration(90e3, 2600.0, 3500.0, 0.0)
    assert 3500 * (longest - shortest) / 2 == pytest.approx(90e3)
    assert 3500 * (longest - shortest) / (longest + shortest) == pytest.approx(2600)


def test_ahead_of_a_supershear_front_the_end_comes_first():
    assert apparent_duration(100e3, 5000.0, 3500.0, 0.0) == pytest.approx(100 / 3.5 - 100 / 5.0)
