"""What is painted into pixels covers what geometry says, edges smoothed."""

import numpy as np
import pytest

from rupture.pictures import raster

WHITE = np.full(3, 255.0)
ALL = np.array([0, 300, 0, 200])


def black() -> np.ndarray:
    frame = np.zeros((200, 300, 4), np.uint8)
    frame[..., 3] = 255
    return frame


def covered(frame: np.ndarray) -> float:
    return float(frame[..., 0].sum()) / 255


@pytest.mark.parametrize("first_deg", [0.0, 37.0, 90.0, 211.0])
@pytest.mark.parametrize("width_deg", [4.0, 60.0, 179.0, 190.0, 300.0, 360.0])
def test_a_wedge_covers_the_area_of_its_sector(first_deg: float, width_deg: float) -> None:
    frame = black()
    first, width, reach = np.radians(first_deg), np.radians(width_deg), 80.0
    raster.fill_wedges(
        frame, np.array([[150.3, 100.2]]), np.array([[first, first + width]]), np.array([reach]), WHITE, 1.0, ALL
    )
    assert covered(frame) == pytest.approx(0.5 * width * reach**2, rel=0.01, abs=2.0)
    # Angles clockwise from up: the middle of the wedge is painted, its opposite is not.
    middle = first + width / 2
    x, y = 150.3 + 40 * np.sin(middle), 100.2 - 40 * np.cos(middle)
    assert frame[int(y), int(x), 0] == 255
    if width_deg < 180:
        assert frame[int(200.4 - y), int(300.6 - x), 0] == 0


def test_what_is_missing_or_outside_the_box_is_not_painted() -> None:
    frame = black()
    nowhere = np.array([[np.nan, np.nan]])
    raster.fill_wedges(frame, np.array([[150.0, 100.0]]), nowhere, np.array([50.0]), WHITE, 1.0, ALL)
    raster.fill_lines(frame, np.array([[10.0, 10.0]]), nowhere, 2.0, WHITE, 1.0, ALL)
    assert covered(frame) == 0
    box = np.array([120, 130, 90, 95])
    raster.fill_wedges(
        frame, np.array([[150.0, 100.0]]), np.array([[0.0, 2 * np.pi]]), np.array([90.0]), WHITE, 1.0, box
    )
    assert covered(frame) == 50
    assert (frame[90:95, 120:130, :3] == 255).all()


@pytest.mark.parametrize("angle_deg", [0.0, 30.0, 90.0, 135.0, 260.0])
def test_a_line_covers_width_times_length(angle_deg: float) -> None:
    frame = black()
    start = np.array([[150.4, 99.7]])
    end = start + 70 * np.array([[np.sin(np.radians(angle_deg)), -np.cos(np.radians(angle_deg))]])
    raster.fill_lines(frame, start, end, 1.8, WHITE, 1.0, ALL)
    assert covered(frame) == pytest.approx(1.8 * 70, rel=0.03)


def test_a_dot_covers_its_disc_and_its_rim_is_white() -> None:
    frame = black()
    grey = np.full((1, 3), 128.0)
    raster.fill_dots(frame, np.array([[150.5, 100.5]]), 20.0, 4.0, grey, ALL)
    assert frame[100, 150, 0] == 128
    assert frame[100, 170, 0] == 255
    ring, disc = np.pi * (22**2 - 18**2), np.pi * 18**2
    assert covered(frame) == pytest.approx(ring + disc * 128 / 255, rel=0.01)


def test_opacity_blends_by_porter_and_duff_over() -> None:
    """Porter & Duff (1984): over an opaque ground, result = ground (1 - alpha) + paint alpha."""
    frame = black()
    frame[..., :3] = (200, 100, 0)
    colour = np.array([0.0, 50.0, 250.0])
    raster.fill_wedges(
        frame, np.array([[150.0, 100.0]]), np.array([[0.0, 2 * np.pi]]), np.array([50.0]), colour, 0.16, ALL
    )
    assert frame[100, 150, :3] == pytest.approx(np.array([200, 100, 0]) * 0.84 + colour * 0.16, abs=1)
    assert (frame[..., 3] == 255).all()


def test_cells_take_the_colours_of_their_values() -> None:
    frame = black()
    frame[..., :3] = 100
    values = np.array([[0.0, 0.5], [2.0, 9.0]])
    colours = np.zeros((256, 4), np.uint8)
    colours[:, 0], colours[:, 3] = np.arange(256), 255
    colours[0, 3] = 0
    column, row = np.repeat([0, 1], 150), np.repeat([1, 0], 100)
    raster.fill_cells(frame, values, colours, 2.0, column, row, np.array([10, 290, 5, 195]))
    assert frame[150, 20, 0] == 100  # nothing there: the ground shows
    assert frame[150, 200, 0] == 64
    assert frame[20, 20, 0] == frame[20, 200, 0] == 255  # at the top of the scale and beyond
    assert frame[0, 20, 0] == frame[20, 5, 0] == 100  # outside the box
