"""Exact plane waves of every type come out where they came from."""

import numpy as np
import pytest

from rupture.direction import DirectionSettings, estimate_direction, intervals

ONE_BAND = DirectionSettings(bands_hz=((0.3, 1.2),), window_s=8.0, hop_s=1.0)
NOISE_S = (-38.0, -8.0)


def off_deg(angle_rad, truth_deg):
    return np.abs((np.degrees(angle_rad) - truth_deg + 180) % 360 - 180)


def windows(found, first=8.0, last=30.0):
    return (found.time_s >= first) & (found.time_s <= last)


@pytest.mark.parametrize("back_azimuth", [3.0, 118.0, 291.5])
@pytest.mark.parametrize(("kind", "speed"), [("P", 8000.0), ("SV", 4200.0), ("Rayleigh", 2900.0), ("S", 3600.0)])
def test_six_components_give_back_azimuth_and_speed(waves, kind, speed, back_azimuth):
    found = estimate_direction(waves.record(kind, back_azimuth, speed, noise=0.003), NOISE_S, ONE_BAND)
    answer, use = intervals(found), windows(found)
    assert off_deg(answer.back_azimuth_best_rad[0, use], back_azimuth).max() < 3.0
    assert answer.apparent_velocity_best_m_s[0, use] == pytest.approx(speed, rel=0.15)
    assert (found.coherent[0, use] > 0.99).all()


@pytest.mark.parametrize("back_azimuth", [40.0, 220.0])
@pytest.mark.parametrize("kind", ["SH", "Love"])
def test_horizontally_polarised_waves_have_no_180_degree_ambiguity(waves, kind, back_azimuth):
    """rot_Z alone gives the slowness across the motion; that it lies across is what the polarisation term adds."""
    site = waves.record(kind, back_azimuth, 3300.0, noise=0.003, absent=(3, 4))
    found = estimate_direction(site, NOISE_S, ONE_BAND)
    best = intervals(found).back_azimuth_best_rad[0, windows(found)]
    assert off_deg(best, back_azimuth).max() < 25.0
    opposite = np.exp(found.log_ratio[..., windows(found)]).mean(axis=1)
    turned = np.roll(opposite, opposite.shape[0] // 2, axis=0)
    row = round(back_azimuth / 3)
    # As far as the prior share of stray waves lets any direction fall.
    assert turned[row] == pytest.approx(ONE_BAND.stray_share, rel=1e-3)
    assert (opposite[row] > 10).all()


def test_love_wave_on_six_components_fills_the_line_that_the_vertical_rotation_allows(waves):
    """With no vertical motion the horizontal rotations say nothing; the truth stays inside most 90 % intervals."""
    held, width = [], []
    for seed in range(4):
        found = estimate_direction(waves.record("Love", 130.0, 3300.0, noise=0.003, seed=seed), NOISE_S, ONE_BAND)
        answer, use = intervals(found), windows(found)
        low, high = (np.degrees(getattr(answer, f"back_azimuth_{p}_rad")[0, use]) for p in ("p05", "p95"))
        held.append((130.0 - low) % 360 <= (high - low) % 360)
        width.append((high - low) % 360)
    assert np.mean(held) > 0.8
    assert 30 < np.median(width) < 180


@pytest.mark.parametrize(
    ("name", "absent", "kind", "limit_deg"),
    [("3C+rotZ", (3, 4), "S", 6.0), ("Z+rotH", (0, 1, 5), "P", 3.0), ("Z+rotH", (0, 1, 5), "Rayleigh", 3.0)],
)
def test_sites_that_lack_components(waves, name, absent, kind, limit_deg):
    site = waves.record(kind, 77.0, 3600.0, noise=0.003, absent=absent)
    assert site.kind == name
    found = estimate_direction(site, NOISE_S, ONE_BAND)
    best = intervals(found).back_azimuth_best_rad[0, windows(found)]
    assert np.median(off_deg(best, 77.0)) < limit_deg


def test_two_bands_say_more_than_one(waves):
    site = waves.record("S", 77.0, 3600.0, noise=0.1)
    both = estimate_direction(
        site, NOISE_S, DirectionSettings(bands_hz=((0.2, 0.5), (0.5, 1.2)), window_s=8.0, hop_s=1.0)
    )
    np.testing.assert_allclose(both.log_ratio, both.band_log_ratio.sum(axis=0), atol=1e-5)
    use = windows(both)
    share = np.exp(both.log_ratio[..., use]).mean(axis=1)
    peak = share / share.sum(axis=0)
    single = np.exp(both.band_log_ratio[0][..., use]).mean(axis=1)
    assert np.median(peak.max(axis=0)) > np.median((single / single.sum(axis=0)).max(axis=0))
