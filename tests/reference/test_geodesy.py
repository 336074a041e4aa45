"""Distances and azimuths against Karney (2013) as his own library computes them, and against printed lines."""

import numpy as np
import pytest
from geographiclib.geodesic import Geodesic
from hypothesis import given, settings
from hypothesis import strategies as st

from rupture.geodesy import LocalPlane, destination, distance_azimuth

PLACE = st.tuples(st.floats(-180, 180), st.floats(-89.9, 89.9))


@settings(max_examples=100, deadline=None)
@given(start=PLACE, end=PLACE)
def test_inverse_problem(start, end):
    distance, azimuth, back = distance_azimuth(*start, *end)
    known = Geodesic.WGS84.Inverse(start[1], start[0], end[1], end[0])
    assert distance == pytest.approx(known["s12"], abs=1e-3)
    if 1.0 < known["s12"] < 1.99e7:
        for found, expected in ((azimuth, known["azi1"]), (back, known["azi2"] + 180)):
            off = np.angle(np.exp(1j * (found - np.radians(expected))))
            # A millimetre across at the end of the line.
            assert abs(off) < 1e-6 + 1e-2 / known["s12"]


@settings(max_examples=50, deadline=None)
@given(start=PLACE, azimuth=st.floats(0, 360), distance=st.floats(0, 2e6))
def test_direct_problem(start, azimuth, distance):
    longitude, latitude = destination(*start, np.radians(azimuth), distance)
    known = Geodesic.WGS84.Direct(start[1], start[0], azimuth, distance)
    assert latitude == pytest.approx(known["lat2"], abs=1e-8)
    assert Geodesic.WGS84.Inverse(latitude, longitude, known["lat2"], known["lon2"])["s12"] < 1e-3


def test_printed_lines():
    """Karney (2013), J. Geodesy 87, 43-55, Table 2 (direct) and Table 4 (inverse) on WGS84; values from memory."""
    longitude, latitude = destination(0.0, 40.0, np.radians(30.0), 10_000_000.0)
    assert latitude == pytest.approx(41.79331020506, abs=1e-8)
    assert longitude == pytest.approx(137.84490004377, abs=1e-8)
    distance, azimuth, _ = distance_azimuth(0.0, -30.12345, 0.00005, -30.12344)
    assert distance == pytest.approx(4.944208, abs=1e-5)
    assert np.degrees(azimuth) == pytest.approx(77.043533, abs=1e-4)
    # WGS84 by definition: a degree of the equator is a pi/180; the meridian quadrant is 10001.9657 km.
    assert distance_azimuth(0, 0, 1, 0)[0] == pytest.approx(6378137 * np.pi / 180, abs=1e-3)
    assert distance_azimuth(0, 0, 0, 90)[0] == pytest.approx(10_001_965.729, abs=1e-2)


@settings(max_examples=50, deadline=None)
@given(centre=PLACE, east=st.floats(-5e5, 5e5), north=st.floats(-5e5, 5e5))
def test_local_plane_is_azimuthal_equidistant(centre, east, north):
    plane = LocalPlane(*centre)
    longitude, latitude = plane.to_geographic(east, north)
    known = Geodesic.WGS84.Inverse(centre[1], centre[0], float(latitude), float(longitude))
    assert known["s12"] == pytest.approx(np.hypot(east, north), abs=1e-3)
    back = plane.to_plane(longitude, latitude)
    assert np.hypot(back[0] - east, back[1] - north) < 1e-3
