"""Sites held against each other: one late clock, one wrong sensitivity among eight."""

from dataclasses import replace

import numpy as np
import pytest

from rupture.geodesy import destination, distance_azimuth
from rupture.records import RecordSettings, read_sites
from rupture.records.arrivals import arrivals_from_times, first_arrivals
from rupture.records.crosscheck import common_part

AZIMUTHS = np.radians([10.0, 60.0, 100.0, 150.0, 200.0, 240.0, 290.0, 330.0])
DISTANCES = np.array([45.0, 60.0, 80.0, 55.0, 95.0, 70.0, 110.0, 65.0]) * 1e3


@pytest.fixture
def eight(kit, tmp_path, six, event):
    def make(late=0.0, factor=1.0):
        stream, stations = None, {}
        inventory = None
        for i, (azimuth, distance) in enumerate(zip(AZIMUTHS, DISTANCES, strict=True)):
            lon, lat = destination(event.longitude_deg, event.latitude_deg, azimuth, distance)
            name = f"S{i}"
            _, _, back = distance_azimuth(event.longitude_deg, event.latitude_deg, lon, lat)
            times = first_arrivals(distance, event.depth_km)
            # The invented Earth is half a second slow everywhere and 1 % slow along the way.
            p, s = 0.5 + 1.01 * times.p_s, 0.5 + 1.01 * times.s_s
            waves = [
                replace(w, amplitude=w.amplitude * (50e3 / distance) ** 1.3)
                for w in kit.rough_waves(i, float(np.degrees(back)), p, s)
            ]
            world = kit.World(tmp_path, waves, length=180.0, seed=i, noise=2e4)
            stations[name] = (float(lon), float(lat), 0.0)
            world.places = stations
            bad = i == 3
            instruments = [replace(s, station=name, rate=20.0, gain=s.gain * (factor if bad else 1.0)) for s in six]
            part = world.records(instruments)
            for trace in part:
                trace.stats.starttime += late if bad else 0.0
            stream = part if stream is None else stream + part
            told = world.inventory([replace(s, station=name, rate=20.0) for s in six])
            inventory = told if inventory is None else inventory + told
        data, metadata = world.write([], stream, inventory)
        return read_sites([data], [metadata], event, RecordSettings(before_s=60.0, after_s=110.0))

    return make


def of(found, kind):
    return {v.code: c for v in found.verdicts for c in v.corrections if c.kind == kind}


def test_healthy(eight):
    found = eight()
    assert len(found.sites) == 8
    assert not any(c.noticed for c in of(found, "travel time").values())
    assert not any(c.noticed for c in of(found, "amplitude").values())
    assert all(s.time_error_s > 0 for s in found.sites)


@pytest.mark.parametrize("late", [0.7, -2.0])
def test_late_site(eight, late):
    times = of(eight(late=late), "travel time")
    assert [code for code, c in times.items() if c.noticed] == ["XX.S3"]
    assert times["XX.S3"].value == pytest.approx(late, abs=0.4)
    assert times["XX.S3"].applied == (abs(late) > 3 * times["XX.S3"].uncertainty)


@pytest.mark.parametrize("factor", [0.1, 1e9])
def test_wrong_sensitivity_of_a_whole_site(eight, factor):
    sizes = of(eight(factor=factor), "amplitude")
    assert [code for code, c in sizes.items() if c.noticed] == ["XX.S3"]
    assert sizes["XX.S3"].value == pytest.approx(np.log10(factor), abs=0.5)
    assert "check the sensitivity" in sizes["XX.S3"].note


def test_common_part_of_residuals_is_robust():
    travel = np.linspace(5.0, 30.0, 9)
    residual = 0.3 + 0.02 * travel
    residual[4] += 5.0
    line, scatter = common_part(travel, residual)
    assert line(10.0) == pytest.approx(0.5, abs=1e-9)
    assert scatter == pytest.approx(0.0, abs=1e-9)
    assert common_part(travel[:3], residual[:3]) is None


def test_arrivals_of_the_users_own_earth():
    model = arrivals_from_times(lambda distance, depth: (distance / 6000.0, distance / 3500.0))
    found = model(60_000.0, 10.0)
    assert (found.p_s, found.s_s) == pytest.approx((10.0, 60 / 3.5))
    assert (found.p_slowness_s_m, found.s_slowness_s_m) == pytest.approx((1 / 6000, 1 / 3500))
