"""Scattered coda: energy, decay, plane waves, arrays."""

from dataclasses import replace

import numpy as np
import pytest

from rupture.conventions import ACCELERATION, ROTATION
from rupture.earth.layers import LayeredModel
from rupture.errors import InputError
from rupture.geodesy import destination
from rupture.synthetic.coda import CodaSettings, ScatteringEngine, group_places, plane_s_waves, scatter
from rupture.synthetic.engine import Receivers, Sampling
from rupture.synthetic.ray import ray_records
from rupture.synthetic.source import Arm, KinematicSource
from rupture.synthetic.sub_events import make_sub_events

MODEL = LayeredModel("uniform", [0.0], [6.0], [3.46], [2700.0], [600.0], [300.0])
SAMPLING = Sampling(-10.0, 0.05, 3000, 4.0)
SETTINGS = CodaSettings(energy_ratio=0.7, decay_s=6.0)


def pulse():
    """A six-component record: a vertical pulse of 2 Hz at 20 s and a smaller one east."""
    out = np.zeros((6, SAMPLING.samples))
    t = SAMPLING.step_s * np.arange(SAMPLING.samples) - 20.0
    out[2] = np.exp(-((t / 0.3) ** 2)) * np.cos(2 * np.pi * 2 * t)
    out[0] = 0.5 * out[2]
    return out


def coda_of(offset, seed=1, **changes):
    return scatter(
        pulse(), 0.8, np.atleast_2d(offset), MODEL, SAMPLING, replace(SETTINGS, **changes), np.random.default_rng(seed)
    )


def test_energy_ratio_is_kept():
    coda = coda_of([0.0, 0.0])[0]
    ratio = np.sum(coda[ACCELERATION] ** 2) / np.sum(pulse()[ACCELERATION] ** 2)
    assert ratio == pytest.approx(0.7)


def test_energy_decays_as_told():
    power = np.mean([np.sum(coda_of([0.0, 0.0], seed)[0, ACCELERATION] ** 2, axis=0) for seed in range(60)], axis=0)
    t = SAMPLING.step_s * np.arange(SAMPLING.samples) - 20.0
    assert power[t < -2].max() < 1e-3 * power.max()
    after = t > 0
    assert np.sum(t[after] * power[after]) / power[after].sum() == pytest.approx(6.0, rel=0.15)


def test_forward_share_sets_where_waves_come_from():
    """Slowness directions from the horizontal rotations: rot_E = -p_N a_Z, rot_N = p_E a_Z summed over the coda."""

    def pull(share):
        total = np.zeros(2)
        for seed in range(20):
            acc, rot = (coda_of([0.0, 0.0], seed, forward_share=share)[0, part] for part in (ACCELERATION, ROTATION))
            total += [np.sum(rot[1] * acc[2]), -np.sum(rot[0] * acc[2])]
        return total

    onward = np.array([np.sin(0.8 + np.pi), np.cos(0.8 + np.pi)])
    strong, none = pull(1.0), pull(0.0)
    assert strong @ onward / np.linalg.norm(strong) > 0.99
    assert np.linalg.norm(none) < 0.4 * np.linalg.norm(strong)


def test_scattered_waves_are_plane_waves_at_a_free_surface():
    rng = np.random.default_rng(5)
    slowness, six = plane_s_waves(rng.uniform(0, 6, 30), rng.random(30), rng.standard_normal((30, 2, 3)), MODEL)
    assert np.hypot(*slowness).max() < 1 / 3460.0
    p_east, p_north = slowness[:, :, None]
    east, north, up, rot_e, rot_n, rot_z = six.transpose(1, 0, 2)
    np.testing.assert_allclose(rot_e, -p_north * up)
    np.testing.assert_allclose(rot_n, p_east * up)
    np.testing.assert_allclose(rot_z, -(p_east * north - p_north * east) / 2)


def test_sensors_of_an_array_see_the_same_waves_later():
    """Finite differences over 40 m of the coda give its rotation."""
    step = 20.0
    coda = coda_of([[0.0, 0.0], [-step, 0.0], [step, 0.0], [0.0, -step], [0.0, step]])
    omega = 2 * np.pi * np.fft.rfftfreq(SAMPLING.samples, SAMPLING.step_s)
    rate = np.fft.irfft(1j * omega * np.fft.rfft(coda[0], axis=1), SAMPLING.samples, axis=1)
    slope_east, slope_north = (coda[2, 2] - coda[1, 2]) / (2 * step), (coda[4, 2] - coda[3, 2]) / (2 * step)
    for got, want in ((rate[3], slope_north), (rate[4], -slope_east)):
        assert np.sum((got - want) ** 2) < 0.01 * np.sum(want**2)


def test_places_are_grouped():
    lon, lat = destination(10.0, 45.0, np.radians([0, 90, 200, 200]), np.array([0.0, 150.0, 90e3, 90.3e3]))
    places = group_places(lon, lat)
    assert [list(members) for members, _ in places] == [[0, 1], [2, 3]]
    np.testing.assert_allclose(places[0][1], [[0, 0], [150, 0]], atol=0.01)


def test_engine_with_coda():
    source = KinematicSource(10.0, 45.0, 10.0, 6.5, (65.0, 90.0, 0.0), (Arm(65.0, 20.0, 2.8),), sub_events=40)
    events = make_sub_events(source, 1)
    sites = Receivers(*destination(10.0, 45.0, np.radians([20, 140]), np.array([60e3, 90e3])))
    plain = ray_records(events, sites, MODEL, SAMPLING)
    off = ScatteringEngine(ray_records, replace(SETTINGS, energy_ratio=0.0), 1)(events, sites, MODEL, SAMPLING)
    np.testing.assert_allclose(off, plain, atol=2e-3 * np.abs(plain).max())
    one, same, other = (ScatteringEngine(ray_records, SETTINGS, s)(events, sites, MODEL, SAMPLING) for s in (1, 1, 2))
    np.testing.assert_array_equal(one, same)
    assert not np.allclose(one, other, atol=0.01 * np.abs(one).max())
    gain = np.sum(one[:, ACCELERATION] ** 2) / np.sum(plain[:, ACCELERATION] ** 2)
    assert 1.3 < gain < 2.4


@pytest.mark.parametrize("change", [{"energy_ratio": -1.0}, {"decay_s": 0.0}, {"forward_share": 1.5}, {"waves": 2}])
def test_bad_coda(change):
    with pytest.raises(InputError, match=next(iter(change)) if "waves" not in change else "scattered waves"):
        replace(SETTINGS, **change)
