"""The 90 % interval of back-azimuth on records of another forward model: a source in one place, rays in layers, noise.

The full-wavefield engine takes half a minute for the same; its figures stand in the documentation.
"""

import numpy as np
import pytest

from rupture.direction import DirectionSettings, estimate_direction, intervals
from rupture.geodesy import distance_azimuth
from rupture.site import Site
from rupture.synthetic import read_scenario
from rupture.synthetic.simulate import ground_motion, noise_at


@pytest.fixture(scope="module")
def windows():
    """For each lacking set of components: inside, width in deg and error in deg of all coherent windows."""
    scenario = read_scenario("stationary", coda={"energy_ratio": 0.0})
    ground, event = ground_motion(scenario), scenario.as_event()
    step, start = ground.sampling.step_s, ground.sampling.start_s
    answer = {}
    for kind, absent in (("6C", ()), ("Z+rotH", (0, 1, 5)), ("3C+rotZ", (3, 4))):
        rows = []
        for station, motion in zip(ground.stations, ground.records, strict=True):
            data = motion + noise_at(station, scenario, ground.sampling.samples, step)
            valid = np.ones(data.shape, bool)
            valid[list(absent)] = False
            place = station.longitude_deg, station.latitude_deg
            site = Site(station.code, *place, 0.0, start, step, np.where(valid, data, 0.0), valid, (0.02, 6.0))
            distance, _, truth = distance_azimuth(event.longitude_deg, event.latitude_deg, *place)
            found = estimate_direction(site, (start + 5, -2.0), DirectionSettings(hop_s=1.0))
            got = intervals(found)
            use = (found.coherent > 0.9) & (found.time_s > distance / 6500) & (found.time_s < distance / 2000 + 25)
            low, high = got.back_azimuth_p05_rad[use], got.back_azimuth_p95_rad[use]
            width = (high - low) % (2 * np.pi)
            off = np.angle(np.exp(1j * (got.back_azimuth_best_rad[use] - truth)))
            rows.append(np.array([(truth - low) % (2 * np.pi) <= width, np.degrees(width), np.degrees(np.abs(off))]))
        answer[kind] = np.concatenate(rows, axis=1)
    return answer


@pytest.mark.parametrize(("kind", "error_deg"), [("6C", 4.0), ("Z+rotH", 4.0), ("3C+rotZ", 15.0)])
def test_intervals_hold_the_truth(windows, kind, error_deg):
    inside, width, off = windows[kind]
    print(
        f"{kind}: {inside.size} windows, {inside.mean():.3f} inside, width {np.median(width):.1f} deg, error {np.median(off):.1f}/{np.percentile(off, 90):.1f} deg"
    )
    assert inside.size > 100
    assert inside.mean() > 0.9
    assert np.percentile(off, 90) < error_deg
