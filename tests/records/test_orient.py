import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra import numpy as hnp

from rupture.records.orient import axis_vector, channel_axis, to_east_north_up
from rupture.records.report import UnusableError

ANGLE = st.floats(0, 360, allow_nan=False)
TRIPLE = hnp.arrays(float, (3, 5), elements=st.floats(-1e3, 1e3))


def turn(angles, motion):
    """What sensors with these (azimuth, dip) record: projections, written out one by one."""
    rows = []
    for azimuth, dip in angles:
        a, d = np.radians(azimuth), np.radians(dip)
        rows.append(np.sin(a) * np.cos(d) * motion[0] + np.cos(a) * np.cos(d) * motion[1] - np.sin(d) * motion[2])
    return np.array(rows)


def back(angles, data):
    vectors = np.array([axis_vector(a, d) for a, d in angles])
    return to_east_north_up(vectors, data, np.ones(data.shape, bool))


@given(TRIPLE, ANGLE)
def test_round_trip_for_any_azimuth(motion, azimuth):
    angles = [(azimuth, 0.0), (azimuth + 90.0, 0.0), (0.0, -90.0)]
    found, valid, _ = back(angles, turn(angles, motion))
    assert valid.all()
    np.testing.assert_allclose(found, motion, atol=1e-9 * max(1.0, np.abs(motion).max()))


@given(TRIPLE, ANGLE, st.floats(-35, 35), st.sampled_from([-90.0, 90.0]), st.booleans())
def test_round_trip_for_tilted_flipped_and_left_handed_triples(motion, azimuth, tilt, vertical, swapped):
    angles = [(azimuth, tilt), (azimuth + 90.0, -tilt / 2), (0.0, vertical)]
    if swapped:
        angles = [angles[1], angles[0], angles[2]]
    found, _, _ = back(angles, turn(angles, motion))
    np.testing.assert_allclose(found, motion, atol=1e-9 * max(1.0, np.abs(motion).max()))


def test_galperin_axes():
    """Three equal slanted axes (azimuths 0, 120, 240; dip -35.26): SEED conventions of a symmetric triaxial sensor."""
    dip = -np.degrees(np.arctan(1 / np.sqrt(2)))
    angles = [(0.0, dip), (120.0, dip), (240.0, dip)]
    motion = np.array([[1.0], [-2.0], [3.0]])
    found, _, _ = back(angles, turn(angles, motion))
    np.testing.assert_allclose(found, motion, atol=1e-12)


def test_vertical_with_dip_plus_90_is_flipped():
    axis, note = channel_axis("HHZ", 0.0, 90.0)
    np.testing.assert_allclose(axis, [0, 0, -1], atol=1e-12)
    found, _, _ = to_east_north_up(axis[None], np.array([[5.0]]), np.ones((1, 1), bool))
    assert found[2, 0] == pytest.approx(-5.0)
    assert note == ""


def test_metadata_win_over_names():
    axis, _ = channel_axis("HHN", 90.0, 0.0)
    np.testing.assert_allclose(axis, [1, 0, 0], atol=1e-12)


def test_names_serve_only_where_angles_are_absent():
    assert channel_axis("HHZ", None, None)[0][2] == 1.0
    assert "from the name" in channel_axis("HHE", None, None)[1]
    with pytest.raises(UnusableError, match="HH1"):
        channel_axis("HH1", None, None)


def test_two_channels_give_what_they_span():
    angles = [(0.0, 0.0), (0.0, -90.0)]
    motion = np.array([[1.0], [2.0], [3.0]])
    found, valid, _ = back(angles, turn(angles, motion))
    assert valid[:, 0].tolist() == [False, True, True]
    assert found[:, 0].tolist() == pytest.approx([0.0, 2.0, 3.0])


def test_one_slanted_channel_gives_nothing():
    _, valid, _ = back([(30.0, 0.0)], np.ones((1, 4)))
    assert not valid.any()


def test_coplanar_axes_are_refused():
    with pytest.raises(UnusableError, match="one plane"):
        back([(0.0, 0.0), (90.0, 0.0), (45.0, 0.0)], np.ones((3, 2)))


def test_a_gap_masks_only_what_it_touches():
    vectors = np.array([axis_vector(a, d) for a, d in [(90.0, 0.0), (0.0, 0.0), (0.0, -90.0)]])
    valid = np.ones((3, 4), bool)
    valid[1, 2] = False
    data = np.arange(12.0).reshape(3, 4)
    found, good, _ = to_east_north_up(vectors, data, valid)
    assert good[1].tolist() == [True, True, False, True]
    assert good[[0, 2]].all()
    assert found[1, 2] == 0.0
