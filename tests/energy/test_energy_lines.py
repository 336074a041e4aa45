"""Line sources read off an energy movie, and whether two answers agree."""

from __future__ import annotations

import numpy as np
import pytest

from rupture.energy.lines import line_answer, line_density, line_summary
from rupture.inverting import EnergyStage, agreement, differences

AXIS = np.arange(-60e3, 61e3, 8e3)
NORTH, EAST = (v.ravel() for v in np.meshgrid(AXIS, AXIS, indexing="ij"))
TIME = np.arange(-3.0, 40.0)


def movie(*arms: tuple[float, float, float]) -> np.ndarray:
    """Energy of fronts (azimuth in degrees, speed in km/s, length in km) with 6 km of spread; painted without the model."""
    out = np.zeros((EAST.size, TIME.size))
    for azimuth, speed, length in arms:
        for step in np.arange(0.0, length, 0.5):
            f = round(step / speed) + 3
            x, y = step * 1e3 * np.sin(np.radians(azimuth)), step * 1e3 * np.cos(np.radians(azimuth))
            out[:, f] += np.exp(-0.5 * ((EAST - x) ** 2 + (NORTH - y) ** 2) / 6e3**2)
    return out + 1e-3 * out.max()


def test_density_integrates_to_one() -> None:
    parameters = np.array([0.0, 0.0, 5.0, np.log(9e3), 0.0, 1.0, np.log(2500.0), np.log(40e3)])
    e, t = (np.repeat(EAST, TIME.size), np.tile(TIME, EAST.size))
    total = line_density("unilateral", parameters, e, np.repeat(NORTH, TIME.size), t, 1.0).sum() * 8e3**2
    assert total == pytest.approx(1.0, abs=0.02)


def test_unilateral_is_read_back() -> None:
    answer = line_answer(movie((65.0, 2.8, 55.0)), EAST, NORTH, TIME, 40.0)
    assert answer.kind == "unilateral"
    assert np.degrees(answer.values["azimuth_rad"][0]) == pytest.approx(65.0, abs=4.0)
    assert answer.values["speed_m_s"][0] == pytest.approx(2800.0, rel=0.12)
    assert answer.values["length_m"][0] == pytest.approx(55e3, rel=0.12)


def test_bilateral_with_unequal_arms_is_read_back() -> None:
    answer = line_answer(movie((20.0, 2.5, 50.0), (200.0, 2.5, 25.0)), EAST, NORTH, TIME, 40.0)
    assert answer.kind == "bilateral"
    assert np.degrees(answer.values["azimuth_rad"][0]) == pytest.approx(20.0, abs=8.0)
    assert np.degrees(answer.values["second_azimuth_rad"][0]) == pytest.approx(200.0, abs=12.0)
    assert answer.values["length_m"][0] > answer.values["second_length_m"][0]


def test_stationary_is_never_a_confident_direction() -> None:
    energy = np.exp(-0.5 * (EAST**2 + NORTH**2) / 8e3**2)[:, None] * ((TIME >= 0) & (TIME < 20))
    answer = line_answer(energy + 1e-3, EAST, NORTH, TIME, 40.0)
    assert answer.kind in ("stationary", "undetermined")
    assert answer.kind_probability["stationary"] == max(answer.kind_probability.values())


def test_resamples_make_the_intervals() -> None:
    movies = [movie((65.0 + d, 2.8, 55.0)) for d in (-6.0, 6.0)]
    answer = line_answer(movie((65.0, 2.8, 55.0)), EAST, NORTH, TIME, 40.0, movies)
    best, low, high = np.degrees(answer.values["azimuth_rad"])
    assert low < 59.0 < best < 71.0 < high
    assert line_summary(answer)["direction_deg"]["p05"] == pytest.approx(low, abs=1e-3)


def test_agreement_names_both_stages_and_what_differs() -> None:
    ray = {
        "kind": "unilateral",
        "direction_deg": {"best": 60.0, "p05": 50.0, "p95": 70.0},
        "speed_km_s": {"best": 1.5, "p05": 1.3, "p95": 1.7},
    }
    energy = {
        "kind": "bilateral",
        "direction_deg": {"best": 65.0, "p05": 60.0, "p95": 70.0},
        "speed_km_s": {"best": 2.8, "p05": 2.5, "p95": 3.0},
    }
    both = agreement(ray, EnergyStage(None, energy))
    assert both is not None
    assert both["differ"] is True
    assert both["reason"] == "kind: unilateral and bilateral; speed: 1.5 and 2.8 km/s"
    assert differences(ray, ray) == []
    missing = agreement(ray, EnergyStage(None, None, "too far"))
    assert missing == {
        "ray_stack": ray,
        "energy_inversion": None,
        "differ": False,
        "reason": "energy not inverted: too far",
    }
    assert agreement(ray, None) is None
