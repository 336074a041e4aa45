"""First arrivals against TauP asked directly, and against printed travel times."""

import numpy as np
import pytest
from obspy.taup import TauPyModel

from rupture.earth import build_earth

FIRST = {"P": ("p", "P", "Pn", "Pg"), "S": ("s", "S", "Sn", "Sg")}
KM_DEG = 6371.0 * np.pi / 180


@pytest.mark.parametrize("phase", ["P", "S"])
@pytest.mark.parametrize("name", ["ak135", "iasp91", "prem"])
def test_first_arrivals_to_two_degrees_are_those_of_taup(name, phase):
    table = build_earth(name).table(phase, 10.0, 250.0)
    taup = TauPyModel(name)
    for degrees in np.random.default_rng(3).uniform(0.02, 2.0, 14):
        arrivals = taup.get_travel_times(10.0, degrees, list(FIRST[phase]))
        earliest = min(arrivals, key=lambda a: a.time)
        assert table.time(1e3 * KM_DEG * degrees) == pytest.approx(earliest.time, abs=0.04)


def test_slowness_is_that_of_taup_away_from_crossovers():
    table = build_earth("ak135").table("P", 10.0, 250.0)
    taup = TauPyModel("ak135")
    checked = 0
    for degrees in np.arange(0.15, 2.0, 0.15):
        near = [
            taup.get_travel_times(10.0, d, list(FIRST["P"]))[0].ray_param / 6371e3
            for d in (degrees - 0.04, degrees, degrees + 0.04)
        ]
        expected = near[1]
        if np.ptp(near) > 0.03 * expected:
            continue  # two branches cross, or the ray has just left its source
        checked += 1
        assert table.slowness(1e3 * KM_DEG * degrees) == pytest.approx(expected, rel=0.02)
    assert checked >= 8


def test_layers_of_a_file_are_those_of_taup_and_of_rays_by_hand(tmp_path):
    """Direct and head waves over one interface, flat-Earth formulas (any textbook); 30 km down the way is shorter."""
    path = tmp_path / "two.nd"
    path.write_text("0 6 3.5 2.7\n30 6 3.5 2.7\nmantle\n30 8 4.5 3.3\n300 8 4.5 3.3\n", encoding="utf-8")
    earth = build_earth(str(path))
    for phase, v1, v2 in (("P", 6.0, 8.0), ("S", 3.5, 4.5)):
        table = earth.table(phase, 10.0, 500.0)
        for x in (20.0, 60.0, 300.0):
            direct = np.hypot(x, 10.0) / v1
            head = x / v2 * (1 - 30 / 6371) + (30 + 20) * np.sqrt(1 / v1**2 - 1 / v2**2)
            assert table.time(1e3 * x) == pytest.approx(min(direct, head), abs=0.15)


@pytest.mark.parametrize(
    ("name", "phase", "degrees", "seconds"),
    [
        # Kennett & Engdahl (1991), iasp91 tables, surface focus, 6 min 9.5 s; from memory.
        ("iasp91", "P", 30.0, 369.5),
        # Kennett, Engdahl & Buland (1995), ak135, surface focus; from memory.
        ("ak135", "P", 30.0, 369.5),
    ],
)
def test_printed_times(name, phase, degrees, seconds):
    table = build_earth(name).table(phase, 0.0, KM_DEG * 30.0)
    assert table.time(1e3 * KM_DEG * degrees) == pytest.approx(seconds, abs=1.5)
