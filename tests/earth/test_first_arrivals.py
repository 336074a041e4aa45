"""First arrivals in layers: closed forms, slow layers, sources anywhere, derivative, scaling."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rupture.earth.first_arrivals import EARTH_RADIUS_KM, first_arrivals

FAR = np.linspace(0.0, 600.0, 601)


@settings(max_examples=20, deadline=None)
@given(metres=st.integers(0, 80_000), speed=st.floats(1, 9))
def test_uniform_sphere_is_crossed_along_chords(metres, speed):
    depth = 1e-3 * metres
    time, slowness = first_arrivals(np.array([0.0, 400.0]), np.array([speed, speed]), depth, FAR)
    angle = FAR / EARTH_RADIUS_KM
    deep = EARTH_RADIUS_KM - depth
    chord = np.sqrt(depth**2 + 4 * EARTH_RADIUS_KM * deep * np.sin(angle / 2) ** 2)
    assert time == pytest.approx(chord / speed, abs=3e-3 / speed)
    # d(chord)/d(arc) by the same triangle.
    expected = deep * np.sin(angle[1:]) / (chord[1:] * speed)
    assert slowness[1:] == pytest.approx(expected, abs=2e-3 / speed)


@settings(max_examples=30, deadline=None)
@given(
    thickness=st.lists(st.floats(1, 30), min_size=2, max_size=6),
    speeds=st.lists(st.floats(1.5, 5), min_size=7, max_size=7),
    depth=st.floats(0, 60),
)
def test_any_layers_give_a_gapless_curve_whose_slope_is_the_slowness(thickness, speeds, depth):
    """Slow layers under fast ones included, in which the ray theory of turning waves leaves shadows."""
    edges = np.concatenate([[0.0], np.cumsum(thickness), [400.0]])
    corners = np.repeat(edges, 2)[1:-1]
    values = np.repeat(speeds[: edges.size - 1], 2)
    time, slowness = first_arrivals(corners, values, depth, FAR)
    assert np.isfinite(time).all()
    assert (np.diff(time) > 0).all()
    rise = np.diff(time)
    # Within a step the slope lies between those of its ends; where branches cross it lies between theirs too.
    assert (rise <= np.maximum(slowness[1:], slowness[:-1]) + 1e-6).all()
    assert (rise >= np.minimum(slowness[1:], slowness[:-1]) - 1e-6).all()
    assert slowness.max() <= 1 / values.min()
    assert time[0] == pytest.approx(_upward(edges, speeds, depth), abs=2e-3)


def _upward(edges, speeds, depth):
    return sum(max(min(b, depth) - a, 0.0) / v for a, b, v in zip(edges[:-1], edges[1:], speeds, strict=False))


def test_a_slow_layer_is_crossed_not_run_along():
    """Fast over slow over half-space: no wave runs along the slow one; direct, then along the half-space (flat by hand)."""
    corners = np.array([0.0, 10, 10, 20, 20, 200])
    time, slowness = first_arrivals(corners, np.array([3.0, 3, 2, 2, 4, 4]), 0.0, np.array([20.0, 200.0]))
    assert time[0] == pytest.approx(20 / 3.0, abs=0.01)
    assert slowness[1] == pytest.approx(1 / 4, rel=0.01)
    by_hand = 200 / 4 * (1 - 20 / 6371) + 2 * sum(10 * np.sqrt(1 / v**2 - 1 / 16) for v in (3.0, 2.0))
    assert time[1] == pytest.approx(by_hand, abs=0.15)


@settings(max_examples=20, deadline=None)
@given(factor=st.floats(0.3, 3))
def test_faster_rock_divides_all_times(factor):
    corners, speed = np.array([0.0, 20, 20, 300]), np.array([5.8, 5.8, 8.0, 8.5])
    time, slowness = first_arrivals(corners, speed, 12.0, FAR)
    quick, flat = first_arrivals(corners, factor * speed, 12.0, FAR)
    np.testing.assert_allclose(quick, time / factor, rtol=1e-9)
    np.testing.assert_allclose(flat, slowness / factor, rtol=1e-7, atol=1e-12)


@pytest.mark.parametrize("depth", [0.0, 20.0, 35.0])
def test_sources_on_interfaces_are_the_limit_of_sources_beside_them(depth):
    corners, speed = np.array([0.0, 20, 20, 35, 35, 300]), np.array([5.8, 5.8, 6.5, 6.5, 8.0, 8.3])
    time, _ = first_arrivals(corners, speed, depth, FAR)
    for beside in (depth - 1e-3, depth + 1e-3):
        if beside > 0:
            near, _ = first_arrivals(corners, speed, beside, FAR)
            assert near == pytest.approx(time, abs=2e-3)
