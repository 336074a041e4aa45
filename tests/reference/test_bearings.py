"""Bearings-only location against published and computed values."""

import numpy as np
import pytest

from rupture.resolution.information import ellipse_axes_m, mean_log_area, position_information


@pytest.mark.parametrize(
    # Arithmetic of the classical information matrix (Stansfield 1947): sigma 2 deg, sites at 100 km, rays that
    # cross at the angle given.
    ("crossing_deg", "axes_km"),
    [(90, (3.5, 3.5)), (60, (2.9, 4.9)), (30, (2.6, 9.5)), (15, (2.5, 19.0))],
)
def test_semi_axes_of_two_crossing_rays(crossing_deg, axes_km):
    angle = np.radians([0.0, crossing_deg])
    sites = 100e3 * np.stack([np.sin(angle), np.cos(angle)], axis=1)
    information = position_information(np.zeros((1, 2)), sites, np.full(2, np.radians(2.0))).sum(axis=1)
    np.testing.assert_allclose(ellipse_axes_m(information)[0] / 1e3, axes_km, rtol=0.02)


@pytest.mark.parametrize("count", [3, 4, 7])
def test_evenly_spread_sites(count):
    """Semi-axes sigma r sqrt(2 / n), from the trace of the information matrix."""
    angle = 2 * np.pi * np.arange(count) / count
    sites = 100e3 * np.stack([np.sin(angle), np.cos(angle)], axis=1)
    sigma = np.radians(2.0)
    information = position_information(np.zeros((1, 2)), sites, np.full(count, sigma)).sum(axis=1)
    np.testing.assert_allclose(ellipse_axes_m(information)[0], sigma * 100e3 * np.sqrt(2 / count), rtol=1e-9)


def test_two_bearings_are_best_at_right_angles():
    """Bishop et al. (2010), Automatica 46, 479-492: for two equal bearings the optimum separation is 90 degrees."""
    separation = np.radians(np.arange(5, 176))
    areas = []
    for angle in separation:
        sites = 100e3 * np.array([[0.0, 1.0], [np.sin(angle), np.cos(angle)]])
        information = position_information(np.zeros((1, 2)), sites, np.full(2, 0.03)).sum(axis=1)
        areas.append(mean_log_area(information, 1e9))
    assert np.degrees(separation[np.argmin(areas)]) == pytest.approx(90.0)


def test_arrival_times_with_unknown_source_time_against_direct_inversion():
    """The Schur complement equals the position block of the inverse of the full 3 x 3 matrix."""
    rng = np.random.default_rng(1)
    sites = rng.normal(0, 80e3, (5, 2))
    point = np.array([[3e3, -7e3]])
    sigma, sigma_t, slowness = np.full(5, 0.05), np.full(5, 0.5), np.full(5, 1 / 3500.0)
    full = np.zeros((3, 3))
    for (east, north), s, st, p in zip(sites, sigma, sigma_t, slowness, strict=True):
        de, dn = point[0, 0] - east, point[0, 1] - north
        r = np.hypot(de, dn)
        across = np.array([dn, -de, 0.0]) / r
        full += np.outer(across, across) / (s * r) ** 2
        row = np.array([p * de / r, p * dn / r, 1.0])
        full += np.outer(row, row) / st**2
    expected = np.linalg.inv(np.linalg.inv(full)[:2, :2])
    found = position_information(point, sites, sigma, sigma_t, slowness)[0]
    np.testing.assert_allclose(found, expected, rtol=1e-9)


def test_a_site_on_the_point_adds_no_bearing():
    information = position_information(np.zeros((1, 2)), np.zeros((1, 2)), np.array([0.03]))
    assert not information.any()
