"""Packed Natural Earth land: right places, whole rings anywhere on Earth, no false lines."""

import json
from pathlib import Path

import numpy as np
import pytest

from rupture.errors import InputError
from rupture.geodesy import LocalPlane
from rupture.pictures import coastlines
from rupture.pictures.coastlines import SCALES, choose_scale, load_world, local_land
from rupture.pictures.pack_coastlines import main, pack_topology


def winding(rings: list[np.ndarray], east: float, north: float) -> int:
    """Sum of windings of all rings around a point: not zero means land, the rule that fills them."""
    total = 0.0
    for ring in rings:
        away = np.vstack([ring, ring[:1]]) - np.array([east, north])
        turn = np.diff(np.arctan2(away[:, 1], away[:, 0]))
        total += ((turn + np.pi) % (2 * np.pi) - np.pi).sum() / (2 * np.pi)
    return round(total)


# Places from general geographical knowledge (atlas), well away from any coast.
PLACES = [
    ("Ankara", 32.85, 39.93, True),
    ("middle of Siberia", 100.0, 60.0, True),
    ("Chukotka on the date line", 180.0, 67.5, True),
    ("Kansas", -98.0, 39.0, True),
    ("Alice Springs", 133.88, -23.7, True),
    ("south pole", 0.0, -90.0, True),
    ("Vanua Levu", 179.2, -16.55, True),
    ("north pole", 0.0, 90.0, False),
    ("South Pacific", -140.0, -30.0, False),
    ("Caspian Sea", 51.0, 41.5, False),
    ("Gulf of Guinea", 0.0, 0.0, False),
    ("Bering Sea on the date line", 180.0, 58.0, False),
]


@pytest.mark.parametrize("radius_km", [200.0, 1500.0, 9000.0])
@pytest.mark.parametrize(
    ("name", "lon", "lat", "land", "scale"),
    # The smallest scale draws the island too coarsely for a point.
    [(*place, scale) for place in PLACES for scale in ("50m", "110m") if (place[0], scale) != ("Vanua Levu", "110m")],
)
def test_land_and_sea_where_they_are(
    name: str, lon: float, lat: float, land: bool, scale: str, radius_km: float
) -> None:
    found = local_land(LocalPlane(lon, lat), radius_km * 1e3, scale)
    assert (winding(found.land, 12.0, 7.0) != 0) == land, name


@pytest.mark.parametrize(("name", "lon", "lat", "land"), PLACES)
def test_the_finest_scale_agrees(name: str, lon: float, lat: float, land: bool) -> None:
    found = local_land(LocalPlane(lon, lat), 150e3, "10m")
    assert (winding(found.land, 12.0, 7.0) != 0) == land, name


@pytest.mark.parametrize("away_km", [300.0, 1200.0])
def test_a_place_stays_land_when_the_map_is_centred_elsewhere(away_km: float) -> None:
    for lon, lat in ((140.0, 36.0), (-70.0, -20.0), (15.0, 50.0)):
        plane = LocalPlane(lon, lat)
        found = local_land(plane, 2e6, "50m")
        rng = np.random.default_rng(3)
        for angle in rng.uniform(0, 2 * np.pi, 3):
            east, north = away_km * 1e3 * np.sin(angle), away_km * 1e3 * np.cos(angle)
            there = LocalPlane(*(float(v) for v in plane.to_geographic(east, north)))
            own = local_land(there, 2e6, "50m")
            assert (winding(found.land, east, north) != 0) == (winding(own.land, 0.3, 0.2) != 0)


@pytest.mark.parametrize("scale", SCALES)
def test_no_false_line_at_the_date_line(scale: str) -> None:
    plane = LocalPlane(179.0, 67.0)
    found = local_land(plane, 900e3, scale)
    for line in found.coast + found.borders:
        lon, _ = plane.to_geographic(*line.T)
        on_cut = np.abs(np.abs(lon) - 180) < 0.02
        assert not (on_cut[:-1] & on_cut[1:]).any()


def test_coordinates_survive_packing() -> None:
    # Cape Horn, 55 deg 58.8' S 67 deg 16.2' W (published sailing directions): the southernmost land around is within 10 km.
    found = local_land(LocalPlane(-67.27, -55.98), 60e3, "10m")
    assert min(np.hypot(*ring.T).min() for ring in found.coast) < 10e3


@pytest.mark.parametrize("scale", SCALES)
def test_whole_world_is_within_its_bounds(scale: str) -> None:
    world = load_world(scale)
    assert np.abs(world.longitude_deg).max() <= 180.0 + 1e-9
    assert world.latitude_deg.min() > -90.0 - 1e-9
    assert 83.0 < world.latitude_deg.max() < 84.0  # Greenland's north coast, 83.6 N
    assert len(world.borders) > 100


def test_scale_follows_the_extent() -> None:
    assert [choose_scale(r) for r in (1e3, 300e3, 2e6, 2e7)] == ["10m", "10m", "50m", "110m"]


def tiny_topology() -> dict:
    """Two square countries side by side, a lake in one of them, and the ring of 100 m around the pole."""
    arcs = [
        [[10, 0], [0, 10]],  # the border between them
        [[10, 10], [-10, 0], [0, -10], [10, 0]],  # around the western one, clockwise is wrong on purpose: kept as given
        [[10, 10], [10, 0], [0, -10], [-10, 0]],
        [[2, 2], [2, 0], [0, 2], [-2, 0], [0, -2]],
        [[0, -89], [5, 0], [-5, 0]],
    ]
    return {
        "type": "Topology",
        "transform": {"scale": [1.0, 1.0], "translate": [0.0, -0.99]},
        "arcs": arcs,
        "objects": {
            "land": {"type": "MultiPolygon", "arcs": [[[1, 2], [3]], [[4]]]},
            "countries": {
                "type": "GeometryCollection",
                "geometries": [
                    {"type": "Polygon", "arcs": [[0, 1], [3]]},
                    {"type": "MultiPolygon", "arcs": [[[~0, 2]]]},
                    {"type": None},
                ],
            },
        },
    }


def test_packing_keeps_rings_borders_and_drops_the_pole_ring(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    for scale in SCALES:
        (tmp_path / f"countries-{scale}.json").write_text(json.dumps(tiny_topology()))
    monkeypatch.setattr("rupture.pictures.pack_coastlines.DATA_FOLDER", tmp_path)
    monkeypatch.setattr(coastlines, "DATA_FOLDER", tmp_path)
    main([str(tmp_path)])
    load_world.cache_clear()
    try:
        world = load_world("50m")
    finally:
        load_world.cache_clear()
    assert [len(polygon) for polygon in world.polygons] == [2]
    assert len(world.borders) == 1
    start, stop = world.arc_start[world.borders[0] : world.borders[0] + 2]
    assert world.longitude_deg[start:stop].tolist() == [10.0, 10.0]
    assert world.latitude_deg[start:stop] == pytest.approx([-0.99, 9.01])
    lake = world.polygons[0][1]
    first, last = world.arc_start[lake[0]], world.arc_start[lake[0] + 1]
    assert world.longitude_deg[first:last].tolist() == [2.0, 4.0, 4.0, 2.0, 2.0]


def test_packing_refuses_what_is_no_quantised_topology(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="transform"):
        pack_topology({"type": "Topology", "objects": {}}, tmp_path / "x.npz")
