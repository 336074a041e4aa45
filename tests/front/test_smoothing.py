"""Forward-backward smoothing of frames."""

from datetime import UTC, datetime

import numpy as np
import pytest

from rupture.errors import InputError
from rupture.event import Event
from rupture.front import SmoothSettings, smooth_front
from rupture.mapping import map_grid

EVENT = Event(datetime(2030, 1, 1, tzinfo=UTC), 20.0, 40.0, 10.0, 7.0)
TIME = np.arange(0.0, 30.0)


@pytest.fixture(scope="module")
def grid():
    return map_grid(EVENT, 80.0, 4.0)


def frames(grid, east_m, sharp=8.0):
    """Frames whose log ratio peaks at a place that moves along the east axis."""
    away = np.hypot(grid.east_m[:, None] - east_m, grid.north_m[:, None])
    return (sharp - 0.5 * (away / 8e3) ** 2).clip(-2.0).astype(np.float32)


def test_follows_a_front_and_sums_to_its_activity(grid):
    track = smooth_front(frames(grid, 2.5e3 * TIME), TIME, grid, 1.0, SmoothSettings())
    alive = track.active > 0.9
    assert alive[1:20].all()
    np.testing.assert_allclose(track.east_m[2:20], 2.5e3 * TIME[2:20], atol=5e3)
    np.testing.assert_allclose(track.north_m[2:20], 0.0, atol=1e3)
    np.testing.assert_allclose(track.probability.sum(axis=0), track.active, atol=1e-6)


def test_a_jump_faster_than_any_front_is_not_followed(grid):
    place = np.where(TIME == 10.0, 70e3, 2.5e3 * TIME)
    track = smooth_front(frames(grid, place), TIME, grid, 1.0, SmoothSettings())
    assert abs(track.east_m[10] - 25e3) < 15e3


def test_frames_that_say_nothing_end_the_rupture(grid):
    rows = frames(grid, 2.5e3 * TIME)
    rows[:, 15:] = -1.0
    track = smooth_front(rows, TIME, grid, 1.0, SmoothSettings())
    assert track.active[5] > 0.9
    assert track.active[-1] < 0.5
    assert (np.diff(track.active) < 1e-9).all()


def test_a_quarter_turn_of_the_world_turns_the_track(grid):
    row = frames(grid, 2.5e3 * TIME)
    side = int(np.sqrt(grid.east_m.size))
    cube = row.reshape(side, side, -1)
    turned = np.ascontiguousarray(np.rot90(cube, -1, axes=(0, 1))).reshape(row.shape)
    one, other = (smooth_front(r, TIME, grid, 1.0, SmoothSettings()) for r in (row, turned))
    np.testing.assert_allclose(np.abs(other.north_m), np.abs(one.east_m), atol=50.0)
    np.testing.assert_allclose(other.active, one.active, atol=1e-4)


@pytest.mark.parametrize("wrong", [{"fastest_km_s": 0.0}, {"trust": 2.0}])
def test_settings_are_checked(wrong):
    with pytest.raises(InputError, match=next(iter(wrong))):
        SmoothSettings(**wrong)
