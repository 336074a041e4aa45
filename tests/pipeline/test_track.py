"""`rupture track` end to end on a small earthquake, and what it leaves."""

import csv
import json
import os
from pathlib import Path

import numpy as np
import pytest

from rupture.exports import DIRECTION_COLUMNS, TRACK_COLUMNS
from rupture.result import Result


@pytest.fixture(scope="module")
def left(made, tmp_path_factory):
    from rupture.cli import main

    folder = tmp_path_factory.mktemp("track")
    job = folder / "job.toml"
    job.write_text(
        "[fit]\nparticles = 100\nresamples = 4\n[null_tests]\nruptures = 3\n[energy]\ncells = 11\nupdates = 15\nresamples = 2\n"
    )
    before = Path.cwd()
    os.chdir(made.folder)
    try:
        # Relative paths on the command line, as people give them.
        given = ["--records", "records", "--inventory", "inventory.xml", "--event", "event.xml"]
        assert main(["track", str(job), *given, "--quiet", "--out", str(folder / "out")]) == 0
    finally:
        os.chdir(before)
    return folder / "out"


def test_everything_is_left_and_nothing_else(left):
    names = {p.name for p in left.iterdir()}
    expected = {
        "result.nc", "summary.json", "movie.mp4", "movie_energy.mp4", "report.html", "figures", "direction.csv", "track.csv",
        "track.geojson", "job.toml",
    }  # fmt: skip
    assert names == expected
    assert {"map.png", "map.pdf", "directions.png"} <= {p.name for p in (left / "figures").iterdir()}


def test_summary(left):
    summary = json.loads((left / "summary.json").read_text())
    assert set(summary) >= {"event", "sites", "rupture", "reliability", "agreement", "provenance"}
    assert set(summary["event"]) >= {"origin_time", "longitude_deg", "latitude_deg", "depth_km"}
    for site in summary["sites"]:
        assert set(site) >= {
            "code", "used", "reason", "components", "distance_km", "azimuth_deg", "azimuth_correction_deg", "time_correction_s",
            "corrections",
        }  # fmt: skip
        for correction in site["corrections"]:
            assert set(correction) == {"kind", "value", "uncertainty", "unit", "noticed", "applied"}
    rupture = summary["rupture"]
    assert rupture["kind"] in ("stationary", "unilateral", "bilateral", "undetermined")
    assert sum(rupture["kind_probability"].values()) == pytest.approx(1.0, abs=1e-3)
    assert set(summary["reliability"]) >= {"false_direction_probability", "direction_error_deg_p90", "sentence"}
    assert set(summary["provenance"]) >= {"versions", "inputs", "settings", "seed", "seconds"}
    assert all(len(digest) == 64 for digest in summary["provenance"]["inputs"].values())
    turned = (rupture["direction_deg"]["best"] - 60.0 + 180.0) % 360.0 - 180.0
    assert abs(turned) < 25.0


def test_result_opens_with_units(left):
    result = Result.load(left / "result.nc")
    for group in ("sites", "direction", "map", "track"):
        assert getattr(result, group) is not None
    total = result.map["location_probability"].sum(["northing", "easting"]) + result.map["no_source_probability"]
    np.testing.assert_allclose(total, 1.0, atol=1e-3)
    assert result.map["longitude"].attrs["units"] == "degrees_east"
    assert result.map["source_time"].attrs["units"] == "s"
    assert "Unilateral" in result._repr_html_() or "ndetermined" in result._repr_html_()


def test_tables(left):
    with (left / "direction.csv").open() as file:
        rows = list(csv.reader(file))
    assert tuple(rows[0]) == DIRECTION_COLUMNS
    assert len(rows) > 100
    with (left / "track.csv").open() as file:
        assert tuple(next(csv.reader(file))) == TRACK_COLUMNS
    places = json.loads((left / "track.geojson").read_text())
    assert places["type"] == "FeatureCollection"
    for feature in places["features"]:
        if feature["geometry"]["type"] == "Point":
            longitude, latitude = feature["geometry"]["coordinates"]
            assert -180 <= longitude <= 180
            assert -90 <= latitude <= 90


def test_the_resolved_job_repeats_the_run_from_any_folder(left, run, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    code, out, err = run(
        "track", left / "job.toml", "--no-null-tests", "--no-energy", "--quiet", "--json", "--out", tmp_path / "again"
    )
    assert code == 0, err
    first = json.loads((left / "summary.json").read_text())["rupture"]
    assert json.loads(out)["rupture"] == first


def test_redraw_and_direction(left, made, run, tmp_path):
    code, _, err = run("redraw", left / "result.nc", "--quiet", "--out", tmp_path / "again")
    assert code == 0, err
    assert (tmp_path / "again" / "report.html").is_file()
    one = sorted((made.folder / "records").glob("*.mseed"))[0]
    code, _, err = run("direction", "--records", one, *made.arguments[2:], "--quiet", "--out", tmp_path / "directions")
    assert code == 0, err
    assert (tmp_path / "directions" / "direction.csv").is_file()
    code, _, err = run("redraw", tmp_path / "nothing.nc", "--out", tmp_path / "x")
    assert code == 2
    assert "nothing.nc" in err
