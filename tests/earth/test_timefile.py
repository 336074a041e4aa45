"""Travel times from the user's own CSV file."""

import numpy as np
import pytest

from rupture.earth import build_earth
from rupture.earth.responses import first_arrival_responses
from rupture.errors import InputError
from rupture.settings import read_job

SPEED = {"P": 6.0, "S": 3.4}


def content(
    depths=(5.0, 15.0), distances=range(0, 301, 2), phases=("P", "S"), header="phase,depth_km,distance_km,time_s"
):
    lines = [header]
    for phase in phases:
        for z in depths:
            lines += [f"{phase},{z},{x},{np.hypot(x, z) / SPEED[phase]:.4f}" for x in distances]
    return "\n".join(lines) + "\n"


@pytest.fixture
def path(tmp_path):
    path = tmp_path / "times.csv"
    path.write_text(content(), encoding="utf-8")
    return path


def test_times_slowness_and_speeds_are_those_of_the_file(path):
    earth = build_earth(str(path))
    for depth, slack in ((5.0, 1e-3), (15.0, 1e-3), (10.0, 0.4)):
        for phase, speed in SPEED.items():
            table = earth.table(phase, depth, 250.0)
            assert table.time(120e3) == pytest.approx(np.hypot(120, depth) / speed, abs=slack)
            assert 1e3 * table.slowness(120e3) == pytest.approx(120 / np.hypot(120, depth) / speed, rel=2e-3)
    assert earth.layers.vs_km_s[0] == pytest.approx(3.4, abs=0.01)
    assert earth.layers.vp_km_s[0] == pytest.approx(6.0, abs=0.01)
    assert earth.reach_km == 300


def test_between_depths_lies_between_their_times(path):
    earth = build_earth(str(path))
    upper, middle, lower = (earth.table("S", z, 250.0).time(60e3) for z in (5.0, 12.0, 15.0))
    assert middle == pytest.approx(0.3 * upper + 0.7 * lower, abs=1e-9)


def test_columns_in_any_order_and_more_of_them(tmp_path, path):
    other = tmp_path / "other.csv"
    rows = [line.split(",") for line in path.read_text(encoding="utf-8").splitlines()]
    lines = [
        ", ".join([r[3], "note" if k == 0 else "x", r[1], r[0].lower() if k else r[0], r[2]])
        for k, r in enumerate(rows)
    ]
    other.write_text("\ufeff" + "\n".join(lines), encoding="utf-8")
    one, two = build_earth(str(path)).table("P", 7.0, 300.0), build_earth(str(other)).table("P", 7.0, 300.0)
    np.testing.assert_array_equal(one.time_s, two.time_s)


def test_strong_waves_end_where_the_file_ends(path):
    responses = first_arrival_responses(build_earth(str(path)), 10.0, 900.0)
    assert responses.time_s.shape == (2, 301)


def test_depths_and_distances_outside_the_file(path):
    earth = build_earth(str(path))
    with pytest.raises(InputError, match="from 5 to 15 km depth; 20 km lies outside"):
        earth.table("P", 20.0, 100.0)
    with pytest.raises(InputError, match="reaches 300 km"):
        earth.table("P", 10.0, 301.0)


def test_one_depth_alone_serves_that_depth(path):
    path.write_text(content(depths=(8.0,)), encoding="utf-8")
    assert build_earth(str(path)).table("S", 8.0, 100.0).time(0.0) == pytest.approx(8 / 3.4, abs=1e-3)


@pytest.mark.parametrize(
    ("text", "words"),
    [
        (content(header="phase,depth,distance_km,time_s"), "no column depth_km"),
        ("", "no column phase, depth_km"),
        (content(phases=("S",)), "holds no times of P"),
        (content() + "Lg,5,10,3\n", r"line 606: phase 'Lg' is neither"),
        (content() + "P,5,ten,3\n", "line 606: depth_km, distance_km and time_s must be numbers"),
        (content() + "P,5\n", "line 606: depth_km"),
        (content() + "P,5,-1,3\n", "cannot be negative"),
        (content() + "P,5,nan,3\n", "cannot be negative or endless"),
        (content() + "P,5,10,3\n", "P from 5 km: two times at 10 km"),
        (content(distances=range(10, 300, 10)), "the first of them 0"),
        (content() + "P,5,302,90\n", "P from 5 km: the time jumps beyond 300 km"),
        (content() + "P,5,302,9\n", "P from 5 km: the time falls beyond 300 km"),
    ],
)
def test_files_that_cannot_be_taken(path, text, words):
    path.write_text(text, encoding="utf-8")
    with pytest.raises(InputError, match=words):
        build_earth(str(path)).table("P", 5.0, 300.0)


def test_binary_file(path):
    path.write_bytes(b"phase,\xff\xfe")
    with pytest.raises(InputError, match="cannot be read as a CSV file"):
        build_earth(str(path))


def test_path_in_a_job_file_is_relative_to_its_folder(path):
    job = path.with_name("job.toml")
    job.write_text('[earth]\nmodel = "times.csv"\n', encoding="utf-8")
    assert build_earth(read_job(job).earth.model).reach_km == 300
