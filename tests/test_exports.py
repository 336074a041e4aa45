"""Tables and outlines for other programs: columns as promised, values as in the result, GeoJSON by RFC 7946."""

import csv
import importlib.util
import json
from datetime import datetime
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from rupture.exports import (
    DIRECTION_COLUMNS,
    TRACK_COLUMNS,
    split_at_date_line,
    utc_text,
    write_direction_csv,
    write_track_csv,
    write_track_geojson,
)
from rupture.result import Result


def _build(**changes: object) -> Result:
    spec = importlib.util.spec_from_file_location("fabricated", Path(__file__).parent / "pictures" / "fabricated.py")
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module.fabricated_result(
        **({"cells": 21, "sites": 3, "step_s": 2.0, "spacing_km": 9.0, "energy": False} | changes)
    )


@pytest.fixture(scope="module")
def result() -> Result:
    return _build(longitude_deg=179.9, latitude_deg=-17.0, second_km=40.0)


def rows(path: Path) -> list[dict[str, str]]:
    with path.open(newline="", encoding="utf-8") as stream:
        return list(csv.DictReader(stream))


def test_direction_table_holds_every_window(result: Result, tmp_path: Path) -> None:
    write_direction_csv(result, tmp_path / "direction.csv")
    table = rows(tmp_path / "direction.csv")
    assert tuple(table[0]) == DIRECTION_COLUMNS
    known = np.isfinite(result.direction["probability_coherent"].values)
    assert len(table) == known.sum()
    origin = datetime.fromisoformat(result.summary["event"]["origin_time"].replace("Z", "+00:00"))
    for row in table[:: max(1, len(table) // 50)]:
        data = result.direction.sel(site=row["site"], time=float(row["seconds_after_origin"]), method=None)
        band = int(np.argmin(np.abs(data["band_low"].values - float(row["band_low_hz"]))))
        assert float(row["back_azimuth_deg"]) == pytest.approx(float(data["back_azimuth_best"][band]), abs=0.006)
        assert float(row["apparent_velocity_km_s"]) == pytest.approx(
            float(data["apparent_velocity_best"][band]), abs=6e-4
        )
        moment = datetime.fromisoformat(row["time_utc"].replace("Z", "+00:00"))
        assert (moment - origin).total_seconds() == pytest.approx(float(row["seconds_after_origin"]), abs=1e-3)


def test_track_table_is_the_smoothed_front(result: Result, tmp_path: Path) -> None:
    write_track_csv(result, tmp_path / "track.csv")
    table = rows(tmp_path / "track.csv")
    assert tuple(table[0]) == TRACK_COLUMNS
    track = result.track
    assert track is not None
    assert len(table) == track.sizes["source_time"]
    for row, east, variance in zip(table, track["east"].values, track["covariance_ee"].values, strict=True):
        assert (row["east_km"] == "") == (not np.isfinite(east))
        if row["east_km"]:
            assert float(row["east_km"]) == pytest.approx(east, abs=6e-4)
            assert float(row["sigma_east_km"]) ** 2 == pytest.approx(variance, rel=2e-3, abs=2e-3)
            assert -1 <= float(row["correlation"]) <= 1
            assert -180 <= float(row["longitude_deg"]) <= 180


def test_outlines_follow_rfc_7946(result: Result, tmp_path: Path) -> None:
    """RFC 7946: longitude before latitude, within 180 degrees, nothing crosses the antimeridian (section 3.1.9)."""
    import shapely

    write_track_geojson(result, tmp_path / "track.geojson")
    text = (tmp_path / "track.geojson").read_text(encoding="utf-8")
    features = json.loads(text)["features"]
    roles = [feature["properties"]["role"] for feature in features]
    assert roles.count("epicentre") == 1
    assert roles.count("site") == result.sites.sizes["site"]
    assert roles.count("fitted arm") == 2
    assert roles.count("front") > 3
    shapes = shapely.from_geojson(text)
    assert shapely.is_valid(shapes)
    west, south, east, north = shapes.bounds
    assert -180 <= west <= east <= 180
    assert -18.5 < south < north < -15.5
    for feature in features:
        if feature["geometry"]["type"] != "Point":
            parts = feature["geometry"]["coordinates"]
            for part in parts if feature["geometry"]["type"] == "MultiLineString" else [parts]:
                assert np.abs(np.diff([place[0] for place in part])).max() < 180
    # The rupture starts 10 km west of the antimeridian and runs east across it.
    first = next(feature for feature in features if feature["properties"].get("arm") == 1)
    assert first["geometry"]["type"] == "MultiLineString"


@given(
    start=st.floats(-180, 179.99),
    steps=st.lists(st.floats(-3, 3), min_size=1, max_size=12),
    turns=st.integers(-2, 2),
)
def test_cutting_a_line_keeps_its_length(start: float, steps: list[float], turns: int) -> None:
    """The parts together are as long as the line, whatever multiple of 360 degrees its longitudes carry."""
    longitude = start + np.concatenate([[0.0], np.cumsum(steps)])
    latitude = np.linspace(10.0, 11.0, longitude.size)
    parts = split_at_date_line(longitude + 360.0 * turns, latitude)
    whole = np.hypot(np.diff(longitude), np.diff(latitude)).sum()
    pieces = sum(float(np.hypot(*np.diff(np.array(part), axis=0).T).sum()) for part in parts)
    assert pieces == pytest.approx(whole, abs=1e-3)
    for part in parts:
        assert np.abs(np.array(part)[:, 0]).max() <= 180
        assert np.abs(np.diff(np.array(part)[:, 0])).max() < 180


def test_utc_is_iso_8601_and_crosses_midnight() -> None:
    origin = datetime.fromisoformat("2031-12-31T23:59:59.500+00:00")
    assert utc_text(origin, 0.75) == "2032-01-01T00:00:00.250Z"
    assert utc_text(origin, -0.5) == "2031-12-31T23:59:59.000Z"
