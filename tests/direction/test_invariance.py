"""Turning the world, louder records and later clocks change nothing but what they must; gaps say nothing."""

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rupture.direction import DirectionSettings, SiteDirection, default_bands, estimate_direction, intervals
from rupture.errors import DataError, InputError

QUICK = DirectionSettings(bands_hz=((0.3, 1.2),), window_s=6.0, hop_s=2.0)
NOISE_S = (-38.0, -8.0)
FEW = settings(max_examples=6, deadline=None)


@pytest.fixture(scope="module")
def site(waves):
    return waves.record("S", 77.0, 3600.0, noise=0.05)


@pytest.fixture(scope="module")
def plain(site):
    return estimate_direction(site, NOISE_S, QUICK)


@FEW
@given(steps=st.integers(1, 119))
def test_turning_the_world_turns_the_answer(site, plain, steps):
    angle = np.radians(3.0 * steps)
    # Clockwise as seen from above, as azimuths count.
    turn = np.array([[np.cos(angle), np.sin(angle)], [-np.sin(angle), np.cos(angle)]])
    data = site.data.copy()
    data[0:2], data[3:5] = turn @ site.data[0:2], turn @ site.data[3:5]
    found = estimate_direction(replace(site, data=data), NOISE_S, QUICK)
    # Noise of both horizontal sensors is measured, hence slightly unlike, and turns with them.
    np.testing.assert_allclose(found.log_ratio, np.roll(plain.log_ratio, steps, axis=0), atol=2e-3)
    np.testing.assert_allclose(found.coherent, plain.coherent, atol=1e-6)


@FEW
@given(exponent=st.floats(-6, 6))
def test_louder_records_change_nothing(site, plain, exponent):
    found = estimate_direction(replace(site, data=site.data * 10**exponent), NOISE_S, QUICK)
    np.testing.assert_allclose(found.log_ratio, plain.log_ratio, atol=1e-4)
    np.testing.assert_allclose(found.power, plain.power * 10 ** (2 * exponent), rtol=1e-6)


@FEW
@given(hops=st.integers(-500, 500))
def test_a_later_clock_moves_the_windows(site, plain, hops):
    delay = hops * QUICK.hop_s
    moved = replace(site, start_s=site.start_s + delay)
    found = estimate_direction(moved, (NOISE_S[0] + delay, NOISE_S[1] + delay), QUICK)
    np.testing.assert_allclose(found.time_s, plain.time_s + delay)
    np.testing.assert_allclose(found.log_ratio, plain.log_ratio, atol=1e-4)


def test_window_times_are_multiples_of_the_hop_on_any_clock(site):
    found = estimate_direction(replace(site, start_s=site.start_s + 0.73), NOISE_S, QUICK)
    np.testing.assert_allclose(found.time_s / QUICK.hop_s, np.rint(found.time_s / QUICK.hop_s), atol=1e-9)


def test_masked_windows_say_nothing(waves, site, plain):
    valid = site.valid.copy()
    gap = (site.times_s > 12) & (site.times_s < 14)
    valid[2, gap] = False
    found = estimate_direction(waves.make_site(site.data, valid=valid), NOISE_S, QUICK)
    touched = (found.time_s > 12 - 3) & (found.time_s < 14 + 3)
    assert touched.sum() >= 3
    assert (found.log_ratio[..., touched] == 0).all()
    assert np.isnan(found.coherent[:, touched]).all()
    assert (found.power[touched] == 0).all()
    answer = intervals(found)
    for name in (
        "back_azimuth_best_rad",
        "back_azimuth_p05_rad",
        "apparent_velocity_best_m_s",
        "apparent_velocity_p95_m_s",
    ):
        assert np.isnan(getattr(answer, name)[:, touched]).all()
    away = np.abs(found.time_s - 13) > 20
    np.testing.assert_allclose(found.log_ratio[..., away], plain.log_ratio[..., away], atol=1e-3)
    assert np.isfinite(found.coherent[:, away]).all()


def test_a_gap_of_an_absent_component_masks_nothing(waves, site):
    valid = site.valid.copy()
    valid[5, 300:350] = False
    found = estimate_direction(waves.make_site(site.data, absent=(0, 1, 5), valid=valid), NOISE_S, QUICK)
    assert np.isfinite(found.coherent).all()


def test_noise_alone_is_no_wave(waves):
    rng = np.random.default_rng(4)
    shares, peaks = [], []
    for _ in range(4):
        data = rng.standard_normal((6, 6000)) * np.array([1, 1, 1, 1e-4, 1e-4, 1e-4])[:, None]
        found = estimate_direction(waves.make_site(data), NOISE_S, replace(QUICK, window_s=8.0))
        shares.append(found.coherent[0])
        angle = np.exp(found.log_ratio).mean(axis=1)
        peaks.append(angle.max(axis=0))
    alarm = np.mean(np.concatenate(shares) > 0.9)
    print(f"share of noise windows taken for a wave: {alarm:.4f}")
    assert alarm < 0.01
    assert np.mean(np.concatenate(peaks) > 10) < 0.02


def test_a_dead_record_is_no_wave(waves):
    found = estimate_direction(waves.make_site(np.zeros((6, 800))), NOISE_S, QUICK)
    np.testing.assert_allclose(found.log_ratio, 0.0, atol=1e-5)
    assert (found.coherent <= 0.5 + 1e-9).all()
    assert (found.power == 0).all()


def test_log_ratio_is_bounded_below_and_a_density(site, plain):
    assert plain.log_ratio.min() >= np.log(QUICK.stray_share) - 1e-5
    np.testing.assert_allclose(np.exp(plain.log_ratio).mean(axis=(0, 1)), 1.0, rtol=1e-4)


def test_a_site_turned_by_an_unknown_angle_is_less_sure(site, plain):
    found = estimate_direction(replace(site, azimuth_error_rad=np.radians(8.0)), NOISE_S, QUICK)
    use = found.time_s > 5
    width = [
        np.median(((i.back_azimuth_p95_rad - i.back_azimuth_p05_rad) % (2 * np.pi))[0, use])
        for i in (intervals(plain), intervals(found))
    ]
    # 90 % of a Gaussian of 8 deg spans 26.3 deg; its own width comes on top.
    assert np.degrees(width[1]) == pytest.approx(np.hypot(26.3, np.degrees(width[0])), rel=0.05)


@pytest.mark.parametrize("mode", [0.0, 1.0, 359.0, 178.5])
def test_intervals_on_the_circle_around_north(mode):
    theta = np.radians(3.0) * np.arange(120)
    gap = (np.degrees(theta) - mode + 180) % 360 - 180
    density = -0.5 * (gap / 5.0) ** 2
    ratio = np.repeat(density[:, None, None], 8, axis=1).astype(np.float32)
    nothing = np.zeros(1)
    direction = SiteDirection(
        "QQ.TEST", nothing, np.array([[0.3, 1.2]]), np.array([6.0]), theta, np.geomspace(1e-4, 1e-3, 8),
        ratio, ratio[None], np.ones((1, 1)), nothing, nothing,
    )  # fmt: skip
    found = intervals(direction)
    best, low, high = (np.degrees(getattr(found, f"back_azimuth_{name}_rad")[0, 0]) for name in ("best", "p05", "p95"))
    assert abs((best - mode + 180) % 360 - 180) < 0.2
    assert abs((low - (mode - 1.645 * 5) + 180) % 360 - 180) < 0.5
    assert abs((high - (mode + 1.645 * 5) + 180) % 360 - 180) < 0.5
    assert all(0 <= v < 360 for v in (best, low, high))


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"bands_hz": ((1.0, 0.5),)}, "lower corner"),
        ({"slowest_km_s": 30.0}, "slowest_km_s"),
        ({"back_azimuth_step_deg": 0.0}, "back_azimuth_step_deg"),
        ({"slowness_count": 2}, "slowness_count"),
        ({"hop_s": 0.0}, "hop_s"),
        ({"window_s": 0.1}, "window_s"),
        ({"stray_share": 0.0}, "stray_share"),
        ({"model_error_share": 1.0}, "model_error_share"),
        ({"polarisation_ratio": -1.0}, "polarisation_ratio"),
    ],
)
def test_bad_settings_are_named(change, words):
    with pytest.raises(InputError, match=words):
        DirectionSettings(**change)


def test_what_a_record_cannot_give_is_said(waves, site):
    with pytest.raises(DataError, match=r"QQ\.TEST .*no rotation"):
        estimate_direction(waves.make_site(site.data, absent=(3, 4, 5)), NOISE_S, QUICK)
    with pytest.raises(DataError, match="above its Nyquist"):
        estimate_direction(site, NOISE_S, replace(QUICK, bands_hz=((1.0, 4.9),)))
    with pytest.raises(DataError, match=r"3\.0 s of record before the first arrival"):
        estimate_direction(site, (-10.0, -7.0), QUICK)
    with pytest.raises(DataError, match="shorter than one window"):
        estimate_direction(site, NOISE_S, replace(QUICK, window_s=200.0))
    with pytest.raises(DataError, match="too narrow"):
        default_bands(replace(site, band_hz=(0.3, 0.35)))


def test_default_bands_lie_within_the_record(site):
    assert default_bands(site) == ((0.2, 0.5), (0.5, 1.2))
    assert default_bands(replace(site, band_hz=(0.05, 0.84))) == ((0.2, 0.5), (0.5, 0.84))
    assert default_bands(replace(site, band_hz=(1.5, 3.0))) == ((1.5, 3.0),)
