"""Earth models by name and file, their tables, their cache and their sentences."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rupture.earth import TravelTimeTable, build_earth
from rupture.errors import InputError

CRUST = """# depth vp vs density
0 5.4 3.1 2.55
3 5.4 3.1 2.55
3 6.0 3.46 2.72
18 6.0 3.46 2.72
18 6.5 3.75 2.87
34 6.5 3.75 2.87
mantle
34 8.05 4.48 3.32
200 8.2 4.5 3.4
"""


@pytest.fixture
def nd_file(tmp_path):
    path = tmp_path / "crust.nd"
    path.write_text(CRUST, encoding="utf-8")
    return path


@settings(max_examples=25, deadline=None)
@given(speed=st.floats(0.5, 9), depth=st.floats(0, 60), distance=st.floats(0, 900))
def test_uniform_earth_in_closed_form(speed, depth, distance):
    earth = build_earth(f"uniform:{speed}")
    depth = round(depth, 2)
    for phase, ratio in (("P", 1.73), ("S", 1.0)):
        table = earth.table(phase, depth)
        path = np.hypot(distance, depth)
        # A line between nodes h apart errs by h^2/8 times the greatest bend, depth^2 / path^3, at most.
        h = 2.0 if distance < 98 else 4.0 if distance < 396 else 10.0
        nearest = np.hypot(max(distance - h, 0.0), depth)
        bend = depth**2 / nearest**3 if nearest > 0 else 0.0
        slack = 1e-9 + h**2 / 8 * bend / (ratio * speed)
        assert table.time(1e3 * distance) == pytest.approx(path / (ratio * speed), abs=slack)
    assert earth.table("S", depth).slowness(1e6) == pytest.approx(1e3 / np.hypot(1e3, depth) / (1e3 * speed), rel=1e-6)
    assert earth.s_speed_km_s(depth) == pytest.approx(speed)


@pytest.mark.parametrize("name", ["iasp91", "ak135", "prem"])
def test_named_models_have_monotone_tables(name):
    earth = build_earth(name)
    p, s = earth.table("P", 10.0, 250.0), earth.table("S", 10.0, 250.0)
    for table in (p, s):
        assert (np.diff(table.time_s) > 0).all()
        assert table.slowness_s_m.min() >= 0
        # Time is the integral of slowness.
        middle = 0.5 * (table.slowness_s_m[1:] + table.slowness_s_m[:-1])
        assert table.time_s[-1] - table.time_s[0] == pytest.approx((middle * np.diff(table.distance_m)).sum(), rel=0.01)
    assert (s.time_s > 1.6 * p.time_s).all()
    assert build_earth(name.upper()).content == earth.content


def test_layers_of_the_named_models():
    """S speed of the upper crust as ObsPy ships the models: ak135 3.46, iasp91 3.36, PREM 3.2 km/s."""
    for name, speed, lower in (("ak135", 3.46, 3.85), ("iasp91", 3.36, 3.75), ("prem", 3.2, 3.9)):
        earth = build_earth(name)
        assert earth.s_speed_km_s(5.0) == pytest.approx(speed, abs=0.005)
        assert earth.s_speed_km_s(22.0) == pytest.approx(lower, abs=0.005)
        assert earth.layers.top_km[0] == 0
        assert earth.s_speed_km_s(100.0) > 4.3


def test_file_of_layers(nd_file):
    earth = build_earth(str(nd_file))
    assert earth.s_speed_km_s(10.0) == pytest.approx(3.46)
    assert earth.s_speed_km_s(40.0) == pytest.approx(4.48, abs=0.02)
    table = earth.table("S", 10.0, 250.0)
    # A direct ray within the second and first layers only, by hand: 30 km away, straight enough for 0.1 s.
    assert table.time(30e3) == pytest.approx(np.hypot(30, 10) / 3.4, abs=0.25)
    assert earth.content != build_earth("ak135").content


def test_deeper_sources_arrive_later_overhead_and_table_reaches_as_asked():
    earth = build_earth("ak135")
    assert earth.table("S", 40.0, 250.0).time(0.0) > earth.table("S", 10.0, 250.0).time(0.0)
    far = earth.table("S", 10.0, 201.0)
    assert far.distance_m[-1] == 250e3
    with pytest.raises(InputError, match=r"1400 km lies beyond the travel-time table \(250 km\)"):
        far.time(1.4e6)
    with pytest.raises(InputError, match="beyond"):
        far.slowness([1e5, 1.4e6])


@pytest.mark.parametrize(
    ("spec", "words"),
    [
        ("uniform:fast", "must be a number"),
        ("uniform:35", "not one of rock"),
        ("uniform:-3", "not one of rock"),
        ("ak136", "unknown Earth model 'ak136'.*iasp91, ak135, prem"),
    ],
)
def test_models_that_do_not_exist(spec, words):
    with pytest.raises(InputError, match=words):
        build_earth(spec)


@pytest.mark.parametrize(
    ("change", "words"),
    [
        (("3 6.0 3.46 2.72", "3 six 3.46 2.72"), "line 4: '3 six 3.46 2.72' is neither"),
        (("18 6.5 3.75 2.87", "18 6.5 3.75"), "line 6: 3 numbers"),
        (("34 6.5 3.75 2.87", "12 6.5 3.75 2.87"), "line 7: depth 12 km lies above"),
        (("200 8.2 4.5 3.4", "200 4.2 4.5 3.4"), "line 10: vs must be below vp"),
        (("0 5.4 3.1 2.55", "1 5.4 3.1 2.55"), "starts at 1 km"),
        (("0 5.4 3.1 2.55\n3 5.4 3.1 2.55", "0 1.5 0 1.0\n3 1.5 0 1.0"), "uppermost layer is a fluid"),
        (("18 6.0 3.46 2.72", "18 1.5 0 1.0"), "line 5: a fluid"),
        (("18 6.0 3.46 2.72", "18 6.0 3.46 2.72 0 300"), "line 5: Qp and Qs must be positive"),
        (("34 8.05 4.48 3.32", "nan 8.05 4.48 3.32"), "line 9: every number must be finite"),
        ((CRUST, "0 5.4 3.1 2.55\n"), "fewer than two depths"),
    ],
)
def test_bad_files_are_told_with_their_line(nd_file, change, words):
    nd_file.write_text(CRUST.replace(*change), encoding="utf-8")
    with pytest.raises(InputError, match=words):
        build_earth(str(nd_file))


def test_file_that_is_no_text(tmp_path):
    path = tmp_path / "model.nd"
    path.write_bytes(b"\xff\xfe\x00\x81")
    with pytest.raises(InputError, match="cannot be read as a text file"):
        build_earth(str(path))


def test_unknown_phase():
    with pytest.raises(InputError, match=r"unknown phase 'Lg' \(known: P, S\)"):
        build_earth("uniform:3.5").table("Lg", 10.0)


def test_tables_with_gaps_or_jumps_are_refused():
    distance = np.arange(0, 100e3, 10e3)
    time, slowness = distance / 6000, np.full(distance.size, 1 / 6000)
    TravelTimeTable("P", 5.0, distance, time, slowness)
    hole = np.where(distance == 40e3, np.nan, time)
    with pytest.raises(InputError, match="no arrival at 40 km"):
        TravelTimeTable("P", 5.0, distance, hole, slowness)
    with pytest.raises(InputError, match="jumps near 40 km"):
        TravelTimeTable("P", 5.0, distance, time + 3.0 * (distance > 40e3), slowness)
    with pytest.raises(InputError, match="fall with distance near 40 km"):
        TravelTimeTable("P", 5.0, distance, time - 3.0 * (distance > 40e3), slowness)
    with pytest.raises(InputError, match="must increase"):
        TravelTimeTable("P", 5.0, distance[::-1], time, slowness)


def test_quality_factors_come_from_the_model_where_it_has_them():
    """PREM (Dziewonski & Anderson 1981) has Qs 600 in the crust, 80 in the low-velocity zone; ak135 as shipped has none."""
    prem, ak135 = build_earth("prem").layers, build_earth("ak135").layers
    assert prem.qs[prem.layer_at(10.0)] == 600
    assert prem.qs[prem.layer_at(120.0)] == 80
    assert (ak135.qs == 300).all()


def test_what_the_core_shades_is_told():
    with pytest.raises(InputError, match=r"no direct S at 12000 km \(it reaches 11000 km\)"):
        build_earth("ak135").table("S", 10.0, 12_000.0)


def test_tables_are_kept_in_memory():
    earth = build_earth("ak135")
    assert earth.table("P", 10.0, 101.0) is earth.table("P", 10.001, 240.0)
    assert earth.table("P", 10.0, 101.0) is not earth.table("P", 10.0, 400.0)
