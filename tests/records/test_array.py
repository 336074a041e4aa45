import numpy as np
import pytest

from rupture.records.array import (
    ArrayGeometry,
    array_motion,
    compact_group,
    highest_wavenumber,
    plane_weights,
    rotation_weights,
    strain_error,
    value_weights,
)
from rupture.records.report import UnusableError

CROSS = np.array([[0.0, 0.0], [1.0, 0.0], [-1.0, 0.0], [0.0, 1.0], [0.0, -1.0]]) * 500.0
RANDOM = np.random.default_rng(5).uniform(-500, 500, (8, 2))


def flat(places):
    return np.column_stack([places, np.zeros(len(places))])


def records(kit, places, width=0.5, slowness=1 / 3500.0, back_azimuth=3.717):
    wave = kit.Wave(10.0, back_azimuth, slowness, radial=0.7, transverse=1.1, vertical=0.9, width=width)
    t = np.arange(0.0, 20.0, 0.05)
    acceleration = np.array([wave.translation(t, 2, *p) for p in places])
    velocity = np.array([wave.translation(t, 1, *p) for p in places])
    return wave, t, acceleration, velocity


@pytest.mark.parametrize("back_azimuth", np.radians([0.0, 90.0, 180.0, 270.0, 33.0]))
@pytest.mark.parametrize("verticals_alone", [True, False])
def test_against_the_rotation_of_a_plane_wave(kit, back_azimuth, verticals_alone):
    places = CROSS - CROSS.mean(axis=0)
    wave, t, a, v = records(kit, places, width=2.0, back_azimuth=back_azimuth)
    valid = np.ones(a.shape, bool)
    if verticals_alone:
        valid[:, :2] = False
    data, good = array_motion(flat(places), a, v, valid, 0.0, 0.1)
    truth = np.vstack([wave.translation(t, 2), wave.rotation(t, 1)])
    present = [2, 3, 4] if verticals_alone else range(6)
    assert np.flatnonzero(good.all(axis=1)).tolist() == list(present)
    for i in present:
        scale = np.abs(truth[:3]).max() if i < 3 else np.abs(truth[3:]).max()
        assert np.abs(data[i] - truth[i]).max() < 0.01 * scale
    assert not data[~good].any()


@pytest.mark.parametrize("places", [CROSS, RANDOM], ids=["cross", "random"])
@pytest.mark.parametrize("share", [0.03, 0.1, 0.3])
def test_stated_error_is_the_error_of_a_monochromatic_wave(places, share):
    """At the highest wavenumber the slope over the value is off by the stated share in the worst direction."""
    places = places - places.mean(axis=0)
    k = highest_wavenumber(places, share)
    worst = 0.0
    t = np.linspace(0.0, 1.0, 400, endpoint=False)
    for theta in np.linspace(0, np.pi, 37):
        ray = k * np.array([np.sin(theta), np.cos(theta)])
        z = np.cos(2 * np.pi * t[None] - (places @ ray)[:, None])
        value, (_, east, north) = value_weights(places) @ z, plane_weights(places) @ z
        # The value stands for the true motion, so that the true slopes are those of a wave with this value.
        phasor = 2 * np.mean(value * np.exp(-2j * np.pi * t))
        slopes = [2 * np.mean(s * np.exp(-2j * np.pi * t)) for s in (east, north)]
        worst = max(worst, np.linalg.norm(slopes + 1j * ray * phasor) / np.linalg.norm(ray * phasor))
    assert worst == pytest.approx(share, rel=0.06)


def test_slope_of_a_cross_has_the_published_limit():
    """Spudich & Fletcher (2008): aperture under a quarter of the wavelength for 90 % (read in ObsPy's docstring)."""
    wavelength = 4 * ArrayGeometry(flat(CROSS)).aperture_m
    k = 2 * np.pi / wavelength
    slope = plane_weights(CROSS)[1] @ np.exp(-1j * k * CROSS[:, 0])
    assert abs(slope / (-1j * k) - 1) == pytest.approx(0.1, abs=0.01)


def test_value_that_falls_as_the_slope_does_carries_a_cross_further():
    """Slope over the plain mean is off by twice as much and more, and always to the slow side."""
    k = highest_wavenumber(CROSS, 0.1)
    mean = np.abs(strain_error(CROSS, np.array([k]))[0])
    plain = []
    for theta in np.radians([0, 45]):
        phase = np.exp(-1j * k * CROSS @ [np.sin(theta), np.cos(theta)])
        value, east, north = plane_weights(CROSS) @ phase
        plain.append(np.hypot(abs(east), abs(north)) / (k * abs(value)) - 1)
    assert min(plain) > 0
    assert max(plain) > 2 * mean


def test_value_of_sensors_on_a_circle_is_their_mean():
    angles = np.radians([0.0, 120.0, 240.0])
    np.testing.assert_allclose(value_weights(np.column_stack([np.sin(angles), np.cos(angles)])), 1 / 3, atol=1e-9)


def test_error_grows_with_the_square_of_the_wavenumber():
    k = highest_wavenumber(CROSS, 0.1) / 8
    small, large = strain_error(CROSS, np.array([k, 2 * k]))
    assert large / small == pytest.approx(4.0, rel=0.05)


def test_solver_weights_are_the_plane_where_the_ground_is_level():
    places = flat(RANDOM - RANDOM.mean(axis=0))
    weights, possible = rotation_weights(places, np.ones((8, 3), bool))
    _, east, north = plane_weights(places[:, :2])
    assert possible.all()
    np.testing.assert_allclose(weights[0, :, 2], north, atol=1e-9)
    np.testing.assert_allclose(weights[1, :, 2], -east, atol=1e-9)
    np.testing.assert_allclose(weights[2, :, 1], 0.5 * east, atol=1e-9)
    np.testing.assert_allclose(weights[2, :, 0], -0.5 * north, atol=1e-9)


def test_sensors_in_a_line_or_too_few_are_refused():
    with pytest.raises(UnusableError, match="stand in a line"):
        plane_weights(np.array([[0.0, 0.0], [1.0, 1.0], [2.0, 2.05], [3.0, 3.0]]))
    with pytest.raises(UnusableError, match="2 sensors"):
        plane_weights(CROSS[:2])


def test_a_sensor_that_fails_for_a_while_leaves_a_plane_through_the_others(kit):
    places = RANDOM - RANDOM.mean(axis=0)
    wave, t, a, v = records(kit, places, width=2.0)
    valid = np.ones(a.shape, bool)
    valid[2, :, 100:200] = False
    a[2, :, 100:200] = v[2, :, 100:200] = 1e6
    data, good = array_motion(flat(places), a, v, valid, 0.0, 0.1)
    truth = np.vstack([wave.translation(t, 2), wave.rotation(t, 1)])
    assert good.all()
    assert np.abs(data[3:] - truth[3:]).max() < 0.03 * np.abs(truth[3:]).max()


def test_too_few_sensors_left_masks(kit):
    _, _, a, v = records(kit, CROSS)
    valid = np.ones(a.shape, bool)
    valid[1:4, :, 100:200] = False
    _, good = array_motion(flat(CROSS), a, v, valid, 0.0, 0.1)
    assert not good[:, 100:200].any()
    assert good[:, :100].all()


def test_compact_group_takes_the_near_and_leaves_the_far():
    far = np.array([[20_000.0, 0.0], [0.0, 20_000.0]])
    found, score = compact_group(np.vstack([CROSS, far]), 0, 0.1, 2 * np.pi * 0.5 / 3500.0)
    assert sorted(found) == [0, 1, 2, 3, 4]
    assert score > 0
    assert compact_group(CROSS * 40, 0, 0.1, 2 * np.pi * 0.5 / 3500.0) == ([], 0.0)
