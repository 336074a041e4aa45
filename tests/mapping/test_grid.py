"""Grids of cells: maps anywhere on Earth, traces, GeoJSON and what is wrong with it."""

import json
from datetime import UTC, datetime

import numpy as np
import pytest

from rupture.errors import InputError
from rupture.event import Event
from rupture.geodesy import distance_azimuth
from rupture.mapping import map_grid, read_trace, trace_grid


def event(longitude=10.0, latitude=45.0, magnitude=7.0):
    return Event(datetime(2031, 1, 1, tzinfo=UTC), longitude, latitude, 12.0, magnitude)


@pytest.mark.parametrize("place", [(10.0, 45.0), (179.9, -17.0), (-60.0, 89.0), (5.0, -89.5)])
def test_cells_lie_at_true_distance_and_azimuth_from_the_epicentre(place):
    grid = map_grid(event(*place), 60.0, 5.0)
    assert grid.shape == (25, 25)
    distance, azimuth, _ = distance_azimuth(*grid.centre, grid.longitude_deg, grid.latitude_deg)
    np.testing.assert_allclose(distance, np.hypot(grid.east_m, grid.north_m), atol=1e-3)
    away = distance > 1
    turn = np.arctan2(grid.east_m, grid.north_m) - azimuth
    np.testing.assert_allclose(np.angle(np.exp(1j * turn[away])), 0, atol=1e-7)
    assert (np.abs(grid.longitude_deg) <= 180).all()
    north = grid.north_m.reshape(grid.shape)
    assert (np.diff(north, axis=0) > 0).all()
    assert grid.depth_km == 12.0


def test_longitude_counted_round_the_world_is_the_same_map():
    one, other = map_grid(event(190.0, 10.0), 50.0, 5.0), map_grid(event(-170.0, 10.0), 50.0, 5.0)
    np.testing.assert_allclose(one.longitude_deg, other.longitude_deg, atol=1e-9)
    assert one.centre == other.centre


def test_default_size_follows_the_magnitude():
    """Wells & Coppersmith (1994), all slip types: log10 L = -2.44 + 0.59 M."""
    grid = map_grid(event(magnitude=7.5))
    assert grid.east_m.max() == pytest.approx(1.5e3 * 10 ** (-2.44 + 0.59 * 7.5), rel=0.05)
    assert map_grid(event(magnitude=4.0)).east_m.max() == pytest.approx(30e3, rel=0.05)


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        ((-5.0, 1.0), "sizes must be positive"),
        ((10.0, 20.0), "must be positive and fit"),
        ((500.0, 1.0), "more than 250000"),
    ],
)
def test_maps_that_cannot_be(arguments, words):
    with pytest.raises(InputError, match=words):
        map_grid(event(), *arguments)


def test_map_without_magnitude_or_size():
    with pytest.raises(InputError, match="no magnitude"):
        map_grid(event(magnitude=None))


def test_trace_is_equally_spaced_and_counts_from_the_epicentre():
    lon, lat = [9.0, 10.0, 10.0, 11.0], [45.0, 45.2, 45.2, 44.8]  # one corner twice
    grid = trace_grid(event(10.0, 45.25), lon, lat, 2.0)
    step, _, _ = distance_azimuth(
        grid.longitude_deg[:-1], grid.latitude_deg[:-1], grid.longitude_deg[1:], grid.latitude_deg[1:]
    )
    # At the corner the straight line between neighbours cuts it.
    assert np.sort(step)[1:] == pytest.approx(2000.0, abs=0.1)
    assert step.min() > 1900
    nearest = np.argmin(np.abs(grid.along_m))
    assert grid.along_m[nearest] == 0
    assert nearest == np.argmin(np.hypot(grid.east_m, grid.north_m))
    assert grid.kind == "trace"
    assert trace_grid(event(), lon, lat).longitude_deg.size == 101


def test_trace_over_the_date_line_has_no_jump():
    grid = trace_grid(event(180.0, 0.0), [179.5, -179.5], [0.0, 0.0], 1.0)
    assert np.ptp(grid.east_m) == pytest.approx(111.3e3, rel=0.01)
    assert (np.diff(grid.east_m) > 0).all()


@pytest.mark.parametrize(
    ("lon", "lat", "spacing", "words"),
    [
        ([1.0], [2.0], 1.0, "two points"),
        ([1.0, 1.0], [2.0, 2.0], 1.0, "the same"),
        ([1.0, 1.1], [2.0, 2.0], 50.0, "must be positive and fit"),
    ],
)
def test_traces_that_cannot_be(lon, lat, spacing, words):
    with pytest.raises(InputError, match=words):
        trace_grid(event(), lon, lat, spacing)


LINE = {"type": "LineString", "coordinates": [[10.0, 45.0, 5.0], [10.5, 45.5]]}


def wrap(geometry):
    return {"type": "FeatureCollection", "features": [{"type": "Feature", "properties": {}, "geometry": geometry}]}


@pytest.mark.parametrize(
    "content",
    [
        LINE,
        {"type": "Feature", "geometry": LINE},
        wrap(LINE),
        wrap({"type": "GeometryCollection", "geometries": [LINE, {"type": "Point", "coordinates": [1, 2]}]}),
        wrap({"type": "MultiLineString", "coordinates": [[[10.0, 45.0]], [[10.5, 45.5]]]}),
    ],
)
def test_one_line_in_any_wrapping(tmp_path, content):
    path = tmp_path / "trace.geojson"
    path.write_text(json.dumps(content), encoding="utf-8")
    longitude, latitude = read_trace(path)
    np.testing.assert_array_equal(longitude, [10.0, 10.5])
    np.testing.assert_array_equal(latitude, [45.0, 45.5])


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("not json", "not a GeoJSON file"),
        ("[1, 2]", "holds 0 lines"),
        (json.dumps(wrap({"type": "Point", "coordinates": [1, 2]})), "holds 0 lines"),
        (json.dumps({"type": "GeometryCollection", "geometries": [LINE, LINE]}), "holds 2 lines"),
        (json.dumps({"type": "LineString", "coordinates": [[1, 2]]}), "two of them at least"),
        (json.dumps({"type": "LineString", "coordinates": [[45, 100], [46, 101]]}), r"\[longitude, latitude\]"),
        (json.dumps({"type": "LineString", "coordinates": [["a", 1], [2, 3]]}), r"\[longitude, latitude\]"),
        (json.dumps(wrap(None)), "holds 0 lines"),
    ],
)
def test_files_that_hold_no_trace(tmp_path, text, words):
    path = tmp_path / "trace.geojson"
    path.write_text(text, encoding="utf-8")
    with pytest.raises(InputError, match=words):
        read_trace(path)


def test_no_such_trace(tmp_path):
    with pytest.raises(InputError, match="no such trace file"):
        read_trace(tmp_path / "none.geojson")
