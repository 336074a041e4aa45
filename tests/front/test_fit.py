"""Line-source fit on observations of exact kinematics (kinematic.py), which shares no code with it."""

from dataclasses import replace

import numpy as np
import pytest

from rupture.earth import build_earth
from rupture.errors import InputError
from rupture.front import FitSettings, directivity_durations, fit_rupture, prior_for, resample_fit
from rupture.front.fit import longest_duration_s
from rupture.synthetic.responses import ray_responses

QUICK = FitSettings(particles=200, hop_s=2.0)


@pytest.fixture(scope="module")
def responses():
    return ray_responses(build_earth("uniform:3.5").layers, 10.0, 600.0)


@pytest.fixture(scope="module")
def fitted(kinematic, responses):
    """Fits by scene, made once."""
    made = {}

    def fit(scene, seed=1):
        if (scene, seed) not in made:
            made[scene, seed] = fit_rupture(
                kinematic.observe(scene), *scene.sites(), scene.event, responses, QUICK, seed
            )
        return made[scene, seed]

    return fit


def degrees_off(found_rad, true_deg):
    return abs((np.degrees(found_rad) - true_deg + 180) % 360 - 180)


def holds(fit, name, truth, scale=1.0):
    _, low, high = fit.interval(name)
    return low <= truth * scale <= high


@pytest.mark.parametrize(("azimuth", "length", "speed"), [(68.0, 80.0, 2.8), (250.0, 60.0, 2.0), (340.0, 110.0, 4.4)])
def test_one_way_rupture(kinematic, fitted, azimuth, length, speed):
    fit = fitted(kinematic.Scene((kinematic.Arm(azimuth, length, speed),)))
    assert fit.kind == "unilateral"
    assert degrees_off(fit.interval("azimuth_rad")[0], azimuth) < 5
    assert fit.interval("speed_m_s")[0] == pytest.approx(1e3 * speed, rel=0.2)
    assert fit.interval("length_m")[0] == pytest.approx(1e3 * length, rel=0.2)


def test_rupture_both_ways(kinematic, fitted):
    arms = kinematic.Arm(30.0, 60.0, 2.8), kinematic.Arm(210.0, 40.0, 2.6)
    fit = fitted(kinematic.Scene(arms))
    assert fit.kind == "bilateral"
    assert degrees_off(fit.interval("azimuth_rad")[0], 30) < 15
    assert degrees_off(fit.interval("second_azimuth_rad")[0], 210) < 15
    assert fit.interval("length_m")[0] == pytest.approx(60e3, rel=0.3)
    assert fit.interval("second_length_m")[0] == pytest.approx(40e3, rel=0.35)


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_rupture_that_never_moves_has_no_direction(kinematic, fitted, seed):
    fit = fitted(kinematic.Scene(duration_s=20.0, seed=seed))
    assert fit.kind in ("stationary", "undetermined")
    assert fit.kind_probability["stationary"] == max(fit.kind_probability.values())


def test_order_of_sites_does_not_matter(kinematic, responses, fitted):
    scene = kinematic.Scene((kinematic.Arm(68.0, 80.0, 2.8),))
    lon, lat = scene.sites()
    again = fit_rupture(kinematic.observe(scene)[::-1], lon[::-1], lat[::-1], scene.event, responses, QUICK, 1)
    one, other = fitted(scene), again
    assert degrees_off(one.interval("azimuth_rad")[0], np.degrees(other.interval("azimuth_rad")[0])) < 3
    assert one.interval("length_m")[0] == pytest.approx(other.interval("length_m")[0], rel=0.08)


def test_longitudes_may_go_round_the_world(kinematic, responses, fitted):
    scene = kinematic.Scene((kinematic.Arm(68.0, 80.0, 2.8),))
    lon, lat = scene.sites()
    event = replace(scene.event, longitude_deg=scene.longitude_deg - 360)
    again = fit_rupture(kinematic.observe(scene), lon + 360, lat, event, responses, QUICK, 1)
    np.testing.assert_allclose(again.samples["unilateral"], fitted(scene).samples["unilateral"], rtol=1e-3, atol=1e-2)


def test_same_seed_same_numbers(kinematic, responses, fitted):
    scene = kinematic.Scene(duration_s=20.0, seed=1)
    again = fit_rupture(kinematic.observe(scene), *scene.sites(), scene.event, responses, QUICK, 1)
    assert again.kind_probability == fitted(scene).kind_probability


def test_resamples_agree_with_the_posterior(kinematic, responses, fitted):
    scene = kinematic.Scene((kinematic.Arm(68.0, 80.0, 2.8),))
    fit = fitted(scene)
    found = resample_fit(
        kinematic.observe(scene), *scene.sites(), scene.event, responses, QUICK, fit, seed=1, resamples=10
    )
    for name in ("azimuth_rad", "speed_m_s", "length_m"):
        _, low, high = found.interval(name)
        _, fit_low, fit_high = fit.interval(name)
        # Both say how uncertain the same answer is: neither is a small part of the other, and they overlap.
        assert low < fit_high
        assert fit_low < high
        assert 0.15 < (high - low) / (fit_high - fit_low) < 3
    assert np.isfinite(found.jackknife_error("speed_m_s"))
    assert found.most_decisive("azimuth_rad")[0] in found.sites


def test_envelopes_alone_tell_a_one_way_rupture(kinematic, responses):
    scene = kinematic.Scene((kinematic.Arm(68.0, 80.0, 2.8),))
    longest = longest_duration_s(prior_for(scene.event))
    check = directivity_durations(kinematic.observe(scene), *scene.sites(), scene.event, responses, longest)
    assert degrees_off(check.direction_rad[0], 68) < 25
    assert check.explained > 0.5
    flat = kinematic.Scene(duration_s=20.0)
    still = directivity_durations(kinematic.observe(flat), *flat.sites(), flat.event, responses, longest)
    # Without a rupture that moves, durations are alike all round, and the line that fits is short.
    assert still.length_m[0] < 0.6 * check.length_m[0]


def test_settings_are_checked():
    for wrong in ({"particles": 10}, {"trust": 0.0}, {"kind_threshold": 0.2}, {"resamples": 1}, {"hop_s": -1.0}):
        with pytest.raises(InputError, match=next(iter(wrong))):
            FitSettings(**wrong)
