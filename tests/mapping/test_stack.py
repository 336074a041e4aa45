"""Rays on the map: geometry, the compiled sum against its slow twin, and a known moving source."""

from dataclasses import replace
from datetime import UTC, datetime

import numba
import numpy as np
import pytest

from rupture.direction import SiteDirection
from rupture.earth import build_earth
from rupture.errors import InputError
from rupture.event import Event
from rupture.geodesy import destination, distance_azimuth
from rupture.mapping import StackSettings, map_grid, site_geometry, stack_rays
from rupture.mapping.kernels import add_shifted_rows
from rupture.mapping.lookup import look_up_rows

EARTH = build_earth("uniform:3.5")
HOP_S = 0.5


def slow_sum(out, table, row, shift, stride):
    out = out.astype(float)
    for c in range(out.shape[0]):
        for f in range(out.shape[1]):
            place = f * stride + shift[c]
            low = int(np.floor(place))
            if row[c] >= 0 and low >= 0 and low + 1 < table.shape[1]:
                part = place - low
                out[c, f] += (1 - part) * table[row[c], low] + part * table[row[c], low + 1]
    return out


@pytest.mark.parametrize("stride", [1, 2, 3])
def test_compiled_sum_is_its_slow_twin(stride):
    rng = np.random.default_rng(stride)
    table = rng.standard_normal((7, 40)).astype(np.float32)
    row, shift = rng.integers(-1, 7, 200), rng.uniform(-60, 60, 200)
    start = rng.standard_normal((200, 25)).astype(np.float32)
    out = start.copy()
    add_shifted_rows(out, table, row, shift, stride)
    np.testing.assert_allclose(out, slow_sum(start, table, row, shift, stride), atol=2e-6)


def world(longitude=25.0, latitude=38.0, half_width=40.0):
    event = Event(datetime(2031, 1, 1, tzinfo=UTC), longitude, latitude, 10.0, 7.0)
    azimuth = np.radians([20.0, 95.0, 170.0, 230.0, 310.0])
    sites = destination(longitude, latitude, azimuth, 1e3 * np.array([60.0, 80.0, 70.0, 90.0, 65.0]))
    grid = map_grid(event, half_width, 4.0)
    return event, grid, sites, site_geometry(grid, *sites, EARTH)


def moving_source(event, sites, speed_m_s=2800.0, azimuth_deg=60.0, until_s=12.0, spread_deg=4.0):
    """Directions as a perfect estimator would give them for S of a front: von Mises in angle, lognormal in slowness."""
    theta, node = np.radians(3.0) * np.arange(120), np.geomspace(1 / 20e3, 1 / 400.0, 28)
    tau = np.arange(0, until_s, 0.05)
    lon, lat = destination(event.longitude_deg, event.latitude_deg, np.radians(azimuth_deg), speed_m_s * tau)
    time = np.arange(-10, 90, HOP_S)
    found = []
    for k in range(len(sites[0])):
        distance, _, back = distance_azimuth(lon, lat, sites[0][k], sites[1][k])
        path = np.hypot(distance, 1e4)
        arrival = tau + path / 3500.0
        ratio = np.zeros((120, 28, time.size))
        power = np.full(time.size, 1e-9)
        inside = np.flatnonzero((time >= arrival.min()) & (time <= arrival.max()))
        for t in inside:
            i = np.argmin(np.abs(arrival - time[t]))
            angle = np.cos(theta - back[i]) / np.radians(spread_deg) ** 2
            speed = -0.5 * ((np.log(node) - np.log(distance[i] / path[i] / 3500.0)) / 0.15) ** 2
            density = np.exp(angle - angle.max())[:, None] * np.exp(speed)
            ratio[:, :, t] = np.log(0.95 * density / density.mean() + 0.05)
            power[t] = 1 / path[i] ** 2
        ratio = np.ascontiguousarray(ratio, np.float32)
        found.append(
            SiteDirection(
                f"QQ.S{k}",
                time,
                np.array([[0.3, 1.2]]),
                np.array([4.0]),
                theta,
                node,
                ratio,
                ratio[None],
                np.where(np.isin(np.arange(time.size), inside), 1.0, 0.0)[None],
                power,
                np.full(time.size, 0.2),
            )
        )
    return found


FRAMES = np.arange(0.0, 12.0, 1.0)
S_ONLY = StackSettings(phases=("S",))


@pytest.fixture(scope="module")
def stacked():
    event, grid, sites, geometry = world()
    directions = moving_source(event, sites)
    return grid, geometry, directions, stack_rays(directions, grid, geometry, [20.0] * 5, FRAMES, S_ONLY)


def test_a_moving_source_comes_out_where_it_was(stacked):
    grid, _, _, stack = stacked
    best = stack.location_probability.argmax(axis=0)
    true_east, true_north = 2800 * FRAMES * np.sin(np.radians(60)), 2800 * FRAMES * np.cos(np.radians(60))
    off = np.hypot(grid.east_m[best] - true_east, grid.north_m[best] - true_north)
    # Cells are 4 km apart, windows every 0.5 s: a cell's diagonal, and what the front runs in a frame.
    assert off[1:-1].max() < 5700
    assert (stack.no_source[1:-1] < 0.01).all()
    power = (stack.energy.sum(axis=0)[1:-1] > 0).all()
    assert power


def test_probabilities_and_nothing_sum_to_one(stacked):
    _, _, _, stack = stacked
    np.testing.assert_allclose(stack.location_probability.sum(axis=0, dtype=float) + stack.no_source, 1.0, atol=1e-5)
    assert stack.location_probability.dtype == np.float32
    assert stack.location_probability.flags.c_contiguous


def test_silence_has_no_source():
    event, grid, sites, geometry = world()
    quiet = [
        replace(d, log_ratio=np.zeros_like(d.log_ratio), power=np.zeros(d.time_s.size))
        for d in moving_source(event, sites)
    ]
    stack = stack_rays(quiet, grid, geometry, [20.0] * 5, FRAMES, S_ONLY)
    np.testing.assert_allclose(stack.no_source, 0.5, atol=1e-5)
    np.testing.assert_allclose(stack.location_probability, 0.5 / grid.longitude_deg.size, rtol=1e-4)
    assert (stack.energy == 0).all()


def test_energy_follows_the_power_of_the_source(stacked):
    grid, geometry, directions, plain = stacked
    late = [
        replace(d, power=d.power * np.where(np.arange(d.time_s.size) * HOP_S - 10 > 26, 25.0, 1.0)) for d in directions
    ]
    louder = stack_rays(late, grid, geometry, [20.0] * 5, FRAMES, S_ONLY)
    before, after = (s.energy.sum(axis=0) / s.energy.sum() for s in (plain, louder))
    assert after[-4:].sum() > 1.3 * before[-4:].sum()
    np.testing.assert_array_equal(louder.location_probability, plain.location_probability)


def test_order_of_sites_does_not_matter(stacked):
    _event, grid, sites, _ = world()
    order = [3, 0, 4, 2, 1]
    directions = [stacked[2][k] for k in order]
    geometry = site_geometry(grid, sites[0][order], sites[1][order], EARTH)
    stack = stack_rays(directions, grid, geometry, [20.0] * 5, FRAMES, S_ONLY)
    np.testing.assert_allclose(stack.log_ratio, stacked[3].log_ratio, atol=1e-4)
    np.testing.assert_allclose(stack.energy, stacked[3].energy, rtol=1e-3, atol=1e-7)


def test_one_thread_or_two_give_the_same_bits(stacked):
    if numba.config.NUMBA_NUM_THREADS < 2:
        pytest.skip("one thread only here")
    grid, geometry, directions, _ = stacked
    before, results = numba.get_num_threads(), []
    for count in (1, 2):
        numba.set_num_threads(count)
        results.append(stack_rays(directions, grid, geometry, [20.0] * 5, FRAMES, S_ONLY))
    numba.set_num_threads(before)
    for name in ("log_ratio", "location_probability", "energy"):
        assert getattr(results[0], name).tobytes() == getattr(results[1], name).tobytes()


@pytest.mark.parametrize("place", [(179.95, 10.0), (-180.0, -40.0), (30.0, 89.0)])
def test_date_line_and_pole_change_nothing(place):
    event, grid, sites, geometry = world(*place)
    stack = stack_rays(moving_source(event, sites), grid, geometry, [20.0] * 5, FRAMES, S_ONLY)
    best = stack.location_probability[:, 6].argmax()
    expected = 2800 * 6 * np.array([np.sin(np.radians(60)), np.cos(np.radians(60))])
    assert np.hypot(grid.east_m[best] - expected[0], grid.north_m[best] - expected[1]) < 5700


def test_longitudes_shifted_round_the_world_are_the_same_geometry():
    _, grid, sites, plain = world(170.0, 10.0)
    moved = site_geometry(grid, sites[0] + 360.0, sites[1], EARTH)
    for name in ("distance_m", "back_azimuth_rad", "azimuth_rad"):
        np.testing.assert_allclose(getattr(moved, name), getattr(plain, name), rtol=1e-9)


def test_a_site_on_a_cell_and_on_the_epicentre():
    event, grid, sites, _ = world()
    lon, lat = np.append(sites[0], event.longitude_deg), np.append(sites[1], event.latitude_deg)
    geometry = site_geometry(grid, lon, lat, EARTH)
    centre = int(np.argmin(np.hypot(grid.east_m, grid.north_m)))
    assert np.isnan(geometry.back_azimuth_rad[-1, centre])
    assert geometry.travel_time_s["S"][-1, centre] == pytest.approx(10 / 3.5, abs=1e-6)
    directions = moving_source(event, (lon, lat))
    stack = stack_rays(directions, grid, geometry, [20.0] * 6, FRAMES, S_ONLY)
    assert np.isfinite(stack.log_ratio).all()
    assert np.isfinite(stack.energy).all()


def test_p_and_s_together_and_progress(stacked):
    grid, geometry, directions, plain = stacked
    calls = []
    both = stack_rays(
        directions, grid, geometry, [18.0] * 5, FRAMES, StackSettings(), lambda k, n: calls.append((k, n))
    )
    assert calls == [(k, 5) for k in range(1, 6)]
    # What these directions hold begins after S of the hypocentre less half a window: P is left out of it.
    np.testing.assert_allclose(both.log_ratio, plain.log_ratio, atol=1e-5)
    late = stack_rays(directions, grid, geometry, [40.0] * 5, FRAMES, StackSettings())
    assert np.abs(late.log_ratio - plain.log_ratio).max() > 1.0


def test_frames_that_do_not_fit_and_bad_settings(stacked):
    grid, geometry, directions, _ = stacked
    with pytest.raises(InputError, match="a whole multiple is needed"):
        stack_rays(directions, grid, geometry, [20.0] * 5, np.arange(0, 5, 0.7), S_ONLY)
    for change, words in (
        ({"phases": ()}, "phases"),
        ({"phases": ("Lg",)}, "phases"),
        ({"slowness_spread": 0.0}, "spread"),
        ({"source_share": 1.0}, "source_share"),
    ):
        with pytest.raises(InputError, match=words):
            StackSettings(**change)


def test_a_doubtful_clock_blurs_its_rays():
    """The same direction, flickering from one window to the next, says less through a clock that may be 2 s off."""
    time = np.arange(0.0, 40.0, 0.5)
    angle, slow = np.radians(3.0) * np.arange(120), np.geomspace(5e-5, 2.5e-3, 28)
    ratio = np.zeros((120, 28, 80), np.float32)
    ratio[30, :, 40] = 4.0
    direction = SiteDirection(
        "ZZ.A", time, np.array([[0.2, 0.5]]), np.array([4.0]), angle, slow, ratio, ratio[None], np.ones((1, 80)),
        np.ones(80), np.ones(80),
    )  # fmt: skip
    peak = []
    for error_s in (0.0, 2.0):
        table, row = look_up_rows(direction, np.array([np.pi / 2]), np.array([3e-4]), 0.25, error_s)
        peak.append(table[row[0]].max())
    assert peak[1] < 0.6 * peak[0]
