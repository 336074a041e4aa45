"""Kinematic sources: moment, places, times, spectra."""

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rupture.errors import InputError
from rupture.geodesy import distance_azimuth
from rupture.synthetic.scaling import Scaling, haskell_corner_hz, moment_from_magnitude, rupture_size_km
from rupture.synthetic.source import Arm, KinematicSource, scaled_arms
from rupture.synthetic.sub_events import level_corner_hz, make_sub_events, moment_rate_corner_hz

MECHANISM = (65.0, 90.0, 0.0)
ONE = KinematicSource(10.0, 45.0, 10.0, 7.3, MECHANISM, (Arm(65.0, 90.0, 2.8),))
STILL = KinematicSource(10.0, 45.0, 10.0, 6.8, MECHANISM, duration_s=20.0)


def along(source, events):
    """Distance and azimuth of sub-events from the epicentre in km and degrees."""
    d, a, _ = distance_azimuth(source.longitude_deg, source.latitude_deg, events.longitude_deg, events.latitude_deg)
    return d / 1e3, np.degrees(a)


@settings(max_examples=25, deadline=None)
@given(st.floats(5.0, 8.5), st.integers(0, 10**6), st.sampled_from([1, 2]), st.integers(20, 300))
def test_moments_add_up_exactly(magnitude, seed, arms, count):
    source = KinematicSource(
        10.0, 45.0, 20.0, magnitude, MECHANISM, scaled_arms(magnitude, MECHANISM, (2.8, 2.5)[:arms]), sub_events=count
    )
    events = make_sub_events(source, seed)
    assert events.moment_nm.sum() == pytest.approx(moment_from_magnitude(magnitude), rel=1e-12)
    assert (events.moment_nm > 0).all()
    assert events.time_s.size == count
    assert (np.diff(events.time_s) >= 0).all()
    assert events.time_s[0] == 0


def test_one_arm_runs_along_strike_at_its_speed():
    distance, azimuth = along(ONE, make_sub_events(ONE, 1))
    far = distance > 3
    assert np.abs((azimuth[far] - 65 + 180) % 360 - 180).max() < 0.6  # meridians converge
    assert distance.max() == pytest.approx(90, abs=1)
    late = make_sub_events(ONE, 1).time_s - distance / 2.8
    assert np.abs(late).max() < 4.5 * ONE.front_spread_s
    # Every tenth of the arm radiates.
    assert (np.histogram(distance, np.linspace(0, 90, 11))[0] > 0.8 * distance.size / 10).all()


def test_two_arms_share_the_moment_by_length():
    source = replace(ONE, arms=(Arm(65.0, 60.0, 2.8), Arm(245.0, 30.0, 2.4)))
    events = make_sub_events(source, 2)
    distance, azimuth = along(source, events)
    first = np.abs((azimuth - 65 + 180) % 360 - 180) < 90
    assert events.moment_nm[first].sum() / source.moment_nm == pytest.approx(2 / 3, rel=1e-6)
    assert np.abs(events.time_s[~first] - distance[~first] / 2.4).max() < 1.0
    given_shares = replace(ONE, arms=(Arm(65.0, 60.0, 2.8, 0.2), Arm(245.0, 30.0, 2.4, 0.8)))
    events = make_sub_events(given_shares, 2)
    _, azimuth = along(given_shares, events)
    first = np.abs((azimuth - 65 + 180) % 360 - 180) < 90
    assert events.moment_nm[first].sum() / source.moment_nm == pytest.approx(0.2, rel=1e-6)


def test_speed_may_change_on_the_way_and_pass_the_shear_speed():
    arm = Arm(65.0, 100.0, ((0.0, 2.5), (25.0, 5.0), (75.0, 2.0)))
    np.testing.assert_allclose(arm.front_time_s(np.array([0, 25, 75, 100])), [0, 10, 20, 32.5])
    source = replace(ONE, arms=(arm,), front_spread_s=0.0)
    events = make_sub_events(source, 3)
    distance, _ = along(source, events)
    np.testing.assert_allclose(events.time_s, np.sort(arm.front_time_s(distance)), atol=0.15)


def test_plane_lies_on_its_dip_and_breaks_outward():
    source = replace(ONE, mechanism_deg=(65.0, 45.0, 90.0), depth_km=15.0, width_km=20.0, front_spread_s=0.0)
    events = make_sub_events(source, 4)
    assert events.depth_km.min() > 15 - 7.1
    assert events.depth_km.max() < 15 + 7.1
    assert events.depth_km.max() - events.depth_km.min() > 12
    distance, azimuth = along(source, events)
    off = distance * np.sin(np.radians(azimuth - 65))  # to the right of strike, where it dips down
    np.testing.assert_allclose(off, events.depth_km - 15, atol=0.35)
    reach = np.hypot(distance * np.cos(np.radians(azimuth - 65)), (events.depth_km - 15) * np.sqrt(2))
    np.testing.assert_allclose(events.time_s[1:], reach[1:] / 2.8, atol=0.2)


def test_stationary_source_stays():
    events = make_sub_events(STILL, 5)
    distance, _ = along(STILL, events)
    assert distance.max() < 2.01
    assert events.time_s.max() == pytest.approx(20, abs=0.5)
    assert np.abs(np.corrcoef(events.time_s, events.longitude_deg)[0, 1]) < 0.3


def test_same_seed_same_events():
    a, b, c = (make_sub_events(ONE, seed) for seed in (7, 7, 8))
    np.testing.assert_array_equal(a.moment_nm, b.moment_nm)
    np.testing.assert_array_equal(a.longitude_deg, b.longitude_deg)
    assert not np.array_equal(a.moment_nm, c.moment_nm)


@pytest.mark.parametrize(("magnitude", "stress_drop"), [(7.3, 5.0), (7.0, 8.0), (6.5, 3.0)])
def test_high_frequency_level_is_that_of_the_stress_drop(magnitude, stress_drop):
    """Brune (1970): fc = 2.34 beta / (2 pi a), a^3 = 7 M0 / (16 stress drop), worked here apart from the code."""
    source = replace(
        ONE, magnitude=magnitude, stress_drop_mpa=stress_drop, arms=scaled_arms(magnitude, MECHANISM, (2.8,))
    )
    events = make_sub_events(source, 1)
    radius = (7 * 10 ** (1.5 * magnitude + 9.05) / (16 * stress_drop * 1e6)) ** (1 / 3)
    assert level_corner_hz(events) == pytest.approx(2.34 * 3500 / (2 * np.pi * radius), rel=0.01)
    # The coherent sum has the same level: some 20 independent speckles leave its fourth root 6 % uncertain.
    frequency = np.linspace(0.5, 1.5, 800)
    spectrum = coherent(events, frequency)
    level = np.sqrt(np.mean(np.abs(spectrum * (2 * np.pi * frequency) ** 2) ** 2))
    assert np.sqrt(level / source.moment_nm) / (2 * np.pi) == pytest.approx(level_corner_hz(events), rel=0.17)


def coherent(events, frequency):
    rise, t = events.rise_time_s[:, None], events.time_s[:, None]
    x = frequency * rise
    shape = np.sinc(x) / (1 - x**2)
    return (events.moment_nm[:, None] * shape * np.exp(-2j * np.pi * frequency * (t + rise / 2))).sum(axis=0)


def test_pulse_is_haskells_far_below_the_rise_times():
    """Haskell (1964): seen square to the fault the spectrum is |sinc(f L / v)| where sub-events are short."""
    source = replace(
        ONE, sub_events=4000, shortest_rise_s=0.05, longest_rise_s=0.3, slip_spread=0.0, front_spread_s=0.0
    )
    events = make_sub_events(source, 3)
    duration = 90 / 2.8
    frequency = np.array([0.25, 0.5, 0.75, 1.0, 1.5]) / duration
    got = np.abs(coherent(events, frequency)) / source.moment_nm
    np.testing.assert_allclose(got, np.abs(np.sinc(frequency * duration)), atol=0.06)
    corner = haskell_corner_hz(90e3, 2800.0, 3500.0, np.pi / 2)
    assert corner == pytest.approx(1 / (np.pi * duration))


def test_corner_by_integrals_lies_between_haskells_and_the_sub_events():
    events = make_sub_events(ONE, 1)
    corner = moment_rate_corner_hz(events)
    assert haskell_corner_hz(90e3, 2800.0, 3500.0, np.pi / 2) < corner < 1 / events.rise_time_s.min()


def test_energy_reaches_2_hz_all_along_the_front():
    events = make_sub_events(ONE, 1)
    distance, _ = along(ONE, events)
    for low, high in ((0.3, 1.0), (1.0, 2.0)):
        frequency = np.linspace(low, high, 50)
        x = frequency * events.rise_time_s[:, None]
        power = ((events.moment_nm[:, None] * np.sinc(x) / (1 - x**2) * frequency**2) ** 2).sum(axis=1)
        share = np.histogram(distance, np.linspace(0, 90, 7), weights=power)[0] / power.sum()
        assert share.min() > 0.4 / 6
        assert share.max() < 2.0 / 6


def test_published_scalings():
    """Wells & Coppersmith (1994), subsurface length; Leonard (2010) strike-slip, from memory: M = 5.27 + log L above 45 km."""
    length, width = rupture_size_km(7.0, 0.0)
    assert length == pytest.approx(10 ** (-2.57 + 0.62 * 7))
    assert length * width == pytest.approx(10 ** (-3.42 + 0.90 * 7))
    assert rupture_size_km(7.0, 90.0)[0] == pytest.approx(10 ** (-2.42 + 0.58 * 7))
    assert rupture_size_km(7.0, -90.0)[0] == pytest.approx(10 ** (-2.44 + 0.59 * 7))
    assert rupture_size_km(7.3, 180.0, Scaling.LEONARD_2010)[0] == pytest.approx(10 ** (7.3 - 5.27))


@pytest.mark.parametrize(
    ("make", "words"),
    [
        (lambda: Arm(0.0, 0.0), "has no length"),
        (lambda: Arm(0.0, 50.0, 2800.0), "km/s, not m/s"),
        (lambda: Arm(0.0, 50.0, ((5.0, 2.8),)), "start at 0 km"),
        (lambda: Arm(0.0, 50.0, ((0.0, 2.8), (0.0, 3.0))), "increase"),
        (lambda: replace(ONE, arms=(Arm(0.0, 1.0),) * 3), "at most two arms"),
        (lambda: replace(ONE, depth_km=0.0), "not below the surface"),
        (lambda: replace(ONE, width_km=25.0), "reaches above the surface"),
        (lambda: replace(ONE, sub_events=3), "at least 20"),
        (lambda: replace(ONE, shortest_rise_s=5.0, longest_rise_s=1.0), "rise times"),
        (lambda: replace(ONE, arms=(Arm(0.0, 1.0, 2.8, 0.5), Arm(180.0, 1.0))), "shares of the moment"),
        (lambda: replace(STILL, duration_s=0.0), "positive duration_s"),
        (lambda: replace(ONE, stress_drop_mpa=0.0), "must be positive"),
    ],
)
def test_bad_sources(make, words):
    with pytest.raises(InputError, match=words):
        make()
