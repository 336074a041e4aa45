"""f-k directions of an array of verticals on exact plane waves, and bad input."""

from dataclasses import replace

import numpy as np
import pytest

from rupture.errors import DataError, InputError
from rupture.records import RecordSettings, array_directions


@pytest.fixture
def array(kit, tmp_path, six, event):
    """Nine stations within a kilometre; P and a slower wave from different sides."""
    rng = np.random.default_rng(4)
    waves = [
        kit.Wave(20.0, np.radians(235.0), 1 / 5000.0, vertical=1.0, width=0.15),
        kit.Wave(40.0, np.radians(130.0), 1 / 2500.0, vertical=1.0, width=0.15),
    ]
    world = kit.World(tmp_path, waves, length=160.0)
    degree = 1 / 111_195.0
    for i in range(9):
        east, north = rng.uniform(-500, 500, 2)
        world.places[f"S{i}"] = (20.5 + east * degree / np.cos(np.radians(35.3)), 35.3 + north * degree, 0.0)
        world.offsets[f"S{i}"] = (east, north)
    sensors = [replace(six[0], station=f"S{i}", rate=40.0) for i in range(9)]
    data, metadata = world.write(sensors)

    def run(**changes):
        arguments = {
            "stations": [f"S{i}" for i in range(9)], "band_hz": (0.5, 3.0), "window_s": 4.0, "hop_s": 1.0,
            "span_s": (10.0, 50.0), "settings": RecordSettings(before_s=60.0, after_s=95.0),
        }  # fmt: skip
        return array_directions([data], [metadata], event, **(arguments | changes))

    return run


def test_direction_and_slowness_of_plane_waves(array):
    found = array()
    for time, azimuth, velocity in ((20.0, 235.0, 5000.0), (40.0, 130.0, 2500.0)):
        near = np.argmin(np.abs(found.time_s - time))
        assert np.degrees(found.back_azimuth_rad[near]) == pytest.approx(azimuth, abs=3.0)
        assert found.slowness_s_m[near] == pytest.approx(1 / velocity, rel=0.06)
        assert found.relative_power[near] > 0.9
    assert found.code.startswith("XX.S")
    assert np.diff(found.time_s) == pytest.approx(1.0, abs=0.06)


def test_bands_and_spans_outside_the_records(array):
    with pytest.raises(InputError, match="not inside the usable"):
        array(band_hz=(0.5, 15.0))
    with pytest.raises(DataError, match="do not cover"):
        array(span_s=(500.0, 600.0))
    with pytest.raises(InputError, match="NONE has no usable"):
        array(stations=["S0", "S1", "NONE"])
