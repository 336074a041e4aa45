"""First arrivals against TauP (Crotwell et al. 1999; ObsPy's) asked directly, and against printed travel times."""

import numpy as np
import pytest
from obspy.taup import TauPyModel

from rupture.earth import build_earth

FIRST = {"P": ("p", "P", "Pn"), "S": ("s", "S", "Sn")}
KM_DEG = 6371.0 * np.pi / 180


def earliest(taup, depth, degrees, phase):
    arrivals = taup.get_travel_times(depth, degrees, list(FIRST[phase]))
    return arrivals[0].time, arrivals[0].ray_param / 6371e3


@pytest.mark.parametrize("phase", ["P", "S"])
@pytest.mark.parametrize(("name", "depth"), [("ak135", 12.0), ("ak135", 35.0), ("iasp91", 0.0), ("prem", 18.0)])
def test_first_arrivals_to_two_degrees_are_those_of_taup(name, depth, phase):
    """Pg or Pn, Sg or Sn, whichever is first: times to 10 ms, slownesses to 1 % where no two branches cross."""
    table = build_earth(name).table(phase, depth, 250.0)
    taup = TauPyModel(name)
    smooth = 0
    for degrees in np.random.default_rng(3).uniform(0.05, 2.0, 10):
        time, slowness = earliest(taup, depth, degrees, phase)
        place = 1e3 * KM_DEG * degrees
        assert table.time(place) == pytest.approx(time, abs=0.01)
        # Between nodes half a kilometre from a crossover the slowness changes from one branch to the other.
        if np.ptp(table.slowness(place + np.array([-3e3, 3e3]))) < 0.05 * slowness:
            smooth += 1
            assert table.slowness(place) == pytest.approx(slowness, rel=0.01)
    assert smooth >= 5


@pytest.mark.parametrize("phase", ["P", "S"])
@pytest.mark.parametrize(("name", "depth"), [("ak135", 600.0), ("iasp91", 33.0), ("prem", 200.0)])
def test_first_arrivals_far_away_are_those_of_taup(name, depth, phase):
    """Through triplications of the transition zone and slow layers, to 95 degrees: 0.05 s and 1 %."""
    table = build_earth(name).table(phase, depth, KM_DEG * 96)
    taup = TauPyModel(name)
    for degrees in (4.3, 11.0, 17.0, 24.0, 47.0, 80.0, 95.0):
        time, slowness = earliest(taup, depth, degrees, phase)
        assert table.time(1e3 * KM_DEG * degrees) == pytest.approx(time, abs=0.05)
        assert table.slowness(1e3 * KM_DEG * degrees) == pytest.approx(slowness, rel=0.01)


def test_direct_and_head_wave_by_hand(tmp_path):
    """Over one interface on a flat Earth (any textbook); along an interface 30 km down the way is shorter."""
    path = tmp_path / "two.nd"
    path.write_text("0 6 3.5 2.7\n30 6 3.5 2.7\nmantle\n30 8 4.5 3.3\n300 8 4.5 3.3\n", encoding="utf-8")
    earth = build_earth(str(path))
    for phase, v1, v2 in (("P", 6.0, 8.0), ("S", 3.5, 4.5)):
        table = earth.table(phase, 10.0, 500.0)
        for x in (20.0, 60.0, 300.0):
            direct = np.hypot(x, 10.0) / v1
            head = x / v2 * (1 - 30 / 6371) + (30 + 20) * np.sqrt(1 / v1**2 - 1 / v2**2)
            assert table.time(1e3 * x) == pytest.approx(min(direct, head), abs=0.12)


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
