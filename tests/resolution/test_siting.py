"""One more site: where rays cross, and what comes out of files of places."""

import json
from datetime import UTC, datetime

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rupture.conventions import KM
from rupture.errors import InputError
from rupture.event import Event
from rupture.geodesy import destination, distance_azimuth
from rupture.resolution.siting import (
    BACK_AZIMUTH_SIGMA_DEG,
    Candidate,
    candidate_grid,
    rank,
    read_candidates,
    rupture_points,
)

EVENT = Event(datetime(2030, 1, 1, tzinfo=UTC), 10.0, 40.0, 10.0, 6.9, None)
HERE = np.zeros((1, 2))


def at(code, azimuth_deg, distance_km, cost=1.0):
    lon, lat = destination(EVENT.longitude_deg, EVENT.latitude_deg, np.radians(azimuth_deg), KM * distance_km)
    return Candidate(code, float(lon), float(lat), cost)


def existing(azimuth_deg, distance_km, kind="6C"):
    place = at("X", azimuth_deg, distance_km)
    return [(place.longitude_deg, place.latitude_deg, kind)]


@settings(max_examples=40, deadline=None)
@given(st.floats(0, 360), st.floats(40, 200), st.floats(40, 200), st.sampled_from([-1, 1]))
def test_a_site_across_the_ray_is_worth_more_than_one_along_it(azimuth, first_km, second_km, side):
    candidates = [
        at("along", azimuth, second_km),
        at("behind", azimuth + 180, second_km),
        at("across", azimuth + 90 * side, second_km),
    ]
    found = rank(EVENT, existing(azimuth, first_km), candidates, HERE, 1)
    assert found.chosen[0].code == "across"
    assert found.single[2] > found.single[0]


def test_gain_is_that_of_the_information_by_hand():
    """Two rays that cross at a right angle: det is the product of what each adds to the prior."""
    found = rank(EVENT, existing(0, 100), [at("E", 90, 80)], HERE, 1, prior_sigma_km=50.0)
    prior = 1 / 50.0**2
    sigma = np.radians(BACK_AZIMUTH_SIGMA_DEG["6C"])
    smear = 2.8 * 4.0 / np.sqrt(12.0)
    added = 1 / ((sigma * 80.0) ** 2 + smear**2)
    assert found.single[0] == pytest.approx(np.sqrt((prior + added) / prior), rel=1e-3)


def test_sites_without_rotation_are_worth_nothing():
    found = rank(EVENT, existing(0, 100), [at("E", 90, 80)], HERE, 1, components="3C")
    assert found.single[0] == pytest.approx(1.0)


def test_vertical_rotation_alone_is_worth_less():
    both = [
        rank(EVENT, existing(0, 100), [at("E", 90, 80)], HERE, 1, components=c).single[0] for c in ("6C", "3C+rotZ")
    ]
    assert both[0] > 1.3 * both[1] > 1.3


def test_cost_weighs():
    cheap_and_dear = [at("dear", 90, 80, cost=3.0), at("cheap", 60, 80)]
    assert rank(EVENT, existing(0, 100), cheap_and_dear, HERE, 1).chosen[0].code == "cheap"


def test_a_second_site_counts_what_the_first_told():
    candidates = [at("E", 90, 80), at("E2", 92, 80), at("N", 10, 90)]
    found = rank(EVENT, [], candidates, HERE, 2)
    assert {found.chosen[0].code, found.chosen[1].code} in ({"E", "N"}, {"E2", "N"})
    assert len({c.code for c in rank(EVENT, [], candidates, HERE, 3).chosen}) == 3


def test_points_follow_a_fault_both_ways():
    points = rupture_points(40.0, [90.0])
    np.testing.assert_allclose(points[:, 1], 0.0, atol=1e-6)
    assert points[:, 0].min() == pytest.approx(-40e3)
    assert points[:, 0].max() == pytest.approx(40e3)
    around = rupture_points(40.0, None)
    np.testing.assert_allclose(around.mean(axis=0), 0.0, atol=1e-6)


def test_grid_is_square_and_true_to_scale():
    grid = candidate_grid(EVENT, 100, 50)
    assert len(grid) == 25
    distance, azimuth, _ = distance_azimuth(
        EVENT.longitude_deg, EVENT.latitude_deg, grid[0].longitude_deg, grid[0].latitude_deg
    )
    assert float(distance) == pytest.approx(np.hypot(100e3, 100e3), rel=1e-3)
    assert np.degrees(float(azimuth)) % 360 == pytest.approx(225, abs=1)


def test_places_from_files(tmp_path):
    table = tmp_path / "places.csv"
    table.write_text("code,longitude_deg,latitude_deg,cost\nA,10.5,40.5,2\n,11,41,\n")
    assert read_candidates(table) == (Candidate("A", 10.5, 40.5, 2.0), Candidate("C2", 11.0, 41.0, 1.0))
    feature = {
        "type": "Feature",
        "geometry": {"type": "Point", "coordinates": [10.5, 40.5]},
        "properties": {"code": "A", "cost": 2},
    }
    points = tmp_path / "places.geojson"
    points.write_text(json.dumps({"type": "FeatureCollection", "features": [feature]}))
    assert read_candidates(points) == (Candidate("A", 10.5, 40.5, 2.0),)


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("code,longitude_deg,latitude_deg\nA,east,40\n", "place 1: longitude_deg and latitude_deg must be numbers"),
        ("code,longitude_deg,latitude_deg\nA,10,40\nB,10,95\n", "place 2: a place is out of range"),
        ("code,longitude_deg,latitude_deg,cost\nA,10,40,-1\n", "its cost not positive"),
        ("code,lon,lat\nA,10,40\n", "place 1: longitude_deg"),
        ("code,longitude_deg,latitude_deg\n", "holds no candidate place"),
        ("{oops", "not GeoJSON"),
    ],
)
def test_bad_places_are_told(tmp_path, text, said):
    path = tmp_path / "places.csv"
    path.write_text(text)
    with pytest.raises(InputError, match=said) as told:
        read_candidates(path)
    assert str(path) in str(told.value)


def test_a_missing_file_and_too_many_sites(tmp_path):
    with pytest.raises(InputError, match="cannot be read"):
        read_candidates(tmp_path / "none.csv")
    with pytest.raises(InputError, match="cannot choose 2 of 1 candidates"):
        rank(EVENT, [], [at("E", 90, 80)], HERE, 2)
