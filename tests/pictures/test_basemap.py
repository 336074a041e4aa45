"""Maps anywhere: extents, graticule names, scale bar, and never a download."""

import socket
import sys
from collections.abc import Callable
from typing import Any

import numpy as np
import pytest
from geographiclib.geodesic import Geodesic

from rupture.geodesy import LocalPlane
from rupture.pictures import basemap, style
from rupture.pictures.basemap import Extent, draw_graticule, draw_land, draw_scale_bar, graticule, projected_axes
from rupture.result import Result


def square(half_km: float) -> Extent:
    return Extent(-half_km, half_km, -half_km, half_km)


def labels(lon: float, lat: float, half_km: float) -> list[str]:
    """Names that a map shows around its frame."""
    with style.style_context():
        picture = style.Picture(100, 100, None)
        plane = LocalPlane(lon, lat)
        axes = projected_axes(picture, plane, square(half_km), (12, 12, 76, 76))
        draw_graticule(axes, plane, square(half_km))
        return [text.get_text() for text in axes.texts]


def test_names_on_both_sides_of_the_date_line() -> None:
    found = labels(179.9, -17.0, 200.0)
    assert {"179°E", "180°", "179°W"} <= set(found)
    assert any(name.endswith("°S") for name in found)


def test_near_the_pole_parallels_and_meridians_are_named() -> None:
    found = labels(30.0, 89.0, 300.0)
    assert any(name.endswith("°E") for name in found)
    assert any(name.endswith("°W") for name in found)


@pytest.mark.parametrize(("lon", "lat"), [(0, 0), (179.9, -17), (30, 89), (-120, -89.9), (12.3, 45.6), (-180, 67)])
@pytest.mark.parametrize("half_km", [0.5, 20.0, 400.0, 5000.0])
def test_every_map_has_names_and_lines_only_where_it_is(lon: float, lat: float, half_km: float) -> None:
    plane = LocalPlane(lon, lat)
    lines = graticule(plane, square(half_km))
    assert sum(line.meridian for line in lines) >= 2
    assert sum(not line.meridian for line in lines) >= 1
    for line in lines:
        places = line.places_km[np.isfinite(line.places_km[:, 0])]
        steps = np.hypot(*np.diff(line.places_km, axis=0).T)
        assert np.nanmax(steps) < 2 * half_km  # no chord across the map
        assert np.abs(places).max() < 4 * half_km
    assert len(labels(lon, lat, half_km)) >= 2


@pytest.mark.parametrize(("lon", "lat"), [(0, 0), (179.9, -17), (30, 89), (12.3, 45.6)])
def test_lines_lie_where_their_name_says(lon: float, lat: float) -> None:
    plane = LocalPlane(lon, lat)
    for line in graticule(plane, square(300.0)):
        places = line.places_km[np.isfinite(line.places_km[:, 0])] * 1e3
        found_lon, found_lat = plane.to_geographic(*places.T)
        number = float(line.label.rstrip("°EWNS").split("°")[0])
        signed = -number if line.label[-1] in "WS" else number
        if line.meridian:
            away = (found_lon - signed + 180) % 360 - 180
            assert np.abs(away[np.abs(found_lat) < 89.9]).max() < 1e-4
        else:
            assert np.abs(found_lat - signed).max() < 1e-6


def test_scale_bar_is_true_to_the_ellipsoid() -> None:
    # Checked with geographiclib (Karney 2013), which shares no code with PROJ's projection.
    plane, extent = LocalPlane(31.2, 38.4), square(200.0)
    with style.style_context():
        axes = projected_axes(style.Picture(100, 100, None), plane, extent, (12, 12, 76, 76))
        length = draw_scale_bar(axes, extent)
    line = axes.lines[0].get_xydata()
    ends = [plane.to_geographic(*line[k]) for k in (1, 2)]
    found = Geodesic.WGS84.Inverse(float(ends[0][1]), float(ends[0][0]), float(ends[1][1]), float(ends[1][0]))["s12"]
    assert length in (50.0, 100.0)
    assert found / 1e3 == pytest.approx(length, rel=1e-3)


@pytest.mark.parametrize(("target", "length"), [(1.0, 1.0), (0.99, 0.5), (4999.0, 2000.0), (73.0, 50.0)])
def test_scale_bar_lengths_are_round(target: float, length: float) -> None:
    assert basemap.round_length_km(target) == pytest.approx(length)


def test_axes_show_the_right_side_of_the_world_at_the_date_line() -> None:
    with style.style_context():
        plane, extent = LocalPlane(-179.9, 51.5), square(400.0)
        axes = projected_axes(style.Picture(100, 100, None), plane, extent, (12, 12, 76, 76))
    corners = plane.to_geographic(np.array(axes.get_xlim()), np.array(axes.get_ylim()))
    lengths = [
        Geodesic.WGS84.Inverse(51.5, -179.9, float(lat), float(lon))["s12"] for lon, lat in zip(*corners, strict=True)
    ]
    assert lengths == pytest.approx([400e3 * np.sqrt(2)] * 2, rel=1e-3)


def test_an_ocean_without_coast_still_tells_where_it_is() -> None:
    plane, extent = LocalPlane(-140.0, -30.0), square(150.0)
    with style.style_context():
        picture = style.Picture(100, 100, None)
        axes = projected_axes(picture, plane, extent, (12, 12, 76, 76))
        found = draw_land(axes, plane, extent)
        draw_graticule(axes, plane, extent)
        locator = basemap.draw_locator(picture, plane, extent, (60, 60, 20, 20))
    assert found.coast == []
    assert len(axes.texts) >= 4
    wide = locator.get_xlim()[1] - locator.get_xlim()[0]
    assert wide >= 6 * 300e3
    assert len(locator.lines) == 1


@pytest.fixture
def no_network(monkeypatch: pytest.MonkeyPatch) -> list[str]:
    """Every Cartopy downloader raises, and so does every socket."""
    tried: list[str] = []

    def refuse(*args: Any, **kwargs: Any) -> Any:
        tried.append(repr(args[1:2]))
        raise AssertionError("something tried to reach the network")

    import cartopy.io
    import cartopy.io.shapereader

    for cls in [cartopy.io.Downloader, *cartopy.io.Downloader.__subclasses__()]:
        for name in ("path", "acquire_resource", "url", "_urlopen"):
            if hasattr(cls, name):
                monkeypatch.setattr(cls, name, refuse)
    monkeypatch.setattr(cartopy.io.shapereader, "natural_earth", refuse)
    monkeypatch.setattr(socket, "socket", refuse)
    monkeypatch.setattr(socket, "create_connection", refuse)
    return tried


def test_nothing_opens_a_socket_or_asks_cartopy_for_data(no_network: list[str], build: Callable[..., Result]) -> None:
    from rupture.pictures import frames_figure, map_figure
    from rupture.pictures.movie import Animation

    result = build(longitude_deg=-178.5, latitude_deg=51.8, sites=4, cells=21)
    map_figure(result).canvas.draw()
    frames_figure(result, count=2).canvas.draw()
    next(Animation(result, "location", "4:3", None).frames())
    assert no_network == []


def test_pictures_leave_pyplot_alone_and_load_only_when_used() -> None:
    import subprocess

    code = (
        "import sys, rupture.pictures as p; assert 'matplotlib' not in sys.modules; p.map_figure; p.make_movie; p.write_report;"
        "assert 'matplotlib.pyplot' not in sys.modules; assert callable(p.direction_figure) and callable(p.map_figure)"
    )
    subprocess.run([sys.executable, "-c", code], check=True)
