"""Overlays, outlines for GIS, record section."""

import json
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from xml.etree import ElementTree as ET

import numpy as np
import pytest
import shapely
import xarray as xr

from rupture.errors import InputError
from rupture.pictures import draw, map_figure, section_figure, style
from rupture.pictures.layers import SHARES
from rupture.pictures.movie import Animation
from rupture.pictures.outlines import area_polygons, write_areas_geojson, write_kml
from rupture.pictures.overlays import read_overlay
from rupture.pictures.page_data import page_data
from rupture.pictures.scene import Scene, credible_level
from rupture.result import Result
from rupture.site import Site


def geojson(path: Path, **content: object) -> Path:
    path.write_text(json.dumps(content), encoding="utf-8")
    return path


def test_overlays_reach_map_movie_and_page(unilateral: Result, tmp_path: Path) -> None:
    line = {"type": "LineString", "coordinates": [[31.0, 38.3], [31.9, 38.6, 5.0]]}
    points = {"type": "MultiPoint", "coordinates": [[31.5, 38.5], [31.6, 38.4]]}
    features = [{"type": "Feature", "geometry": g, "properties": {}} for g in (line, points, None)]
    path = geojson(tmp_path / "fault.geojson", type="FeatureCollection", name="North fault", features=features)
    picture = map_figure(unilateral, overlays=[path])
    green = [a for a in picture.axes[0].lines if style.OVERLAY in (a.get_color(), a.get_markeredgecolor())]
    assert len(green) == 2
    scene = Scene.of(unilateral)
    assert green[0].get_xydata() / 1e3 == pytest.approx(scene.to_km([31.0, 31.9], [38.3, 38.6]))
    assert any(text.get_text() == "North fault" for axes in picture.axes if axes.legend_ for text in axes.legend_.texts)
    with style.style_context():
        moving = Animation(unilateral, "location", "4:3", None, overlays=[path])
    assert any(a.get_color() == style.OVERLAY for a in moving.axes.lines)
    drawn = page_data(scene, [read_overlay(path)])["map"]["overlays"]
    assert drawn[0]["name"] == "North fault"
    assert len(drawn[0]["x"]) == 2


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("no json", "not a GeoJSON file"),
        ("[1, 2]", "not valid GeoJSON"),
        ('{"type": "FeatureCollection", "features": []}', "no line"),
        ('{"type": "Point", "coordinates": [40.0, 95.0]}', "beyond 90"),
        ('{"type": "LineString", "coordinates": [["a", 1], [2, 3]]}', "not valid GeoJSON"),
        ('{"type": "Feature"}', "no line"),
    ],
)
def test_bad_overlays_are_named(tmp_path: Path, text: str, message: str) -> None:
    path = tmp_path / "bad.geojson"
    path.write_text(text)
    with pytest.raises(InputError, match=rf"bad\.geojson.*{message}"):
        read_overlay(path)
    with pytest.raises(InputError, match="no such overlay"):
        read_overlay(tmp_path / "none.geojson")


@pytest.mark.parametrize(("lon", "lat"), [(31.2, 38.4), (179.9, -17.0), (-179.7, 51.0), (30.0, 89.6), (10.0, -89.7)])
def test_areas_hold_their_cells_anywhere_on_earth(
    build: Callable[..., Result], tmp_path: Path, lon: float, lat: float
) -> None:
    result = build(longitude_deg=lon, latitude_deg=lat, sites=3, cells=31, spacing_km=6.0, step_s=2.0, energy=False)
    scene = Scene.of(result)
    found = json.loads(write_areas_geojson(scene, tmp_path / "a.geojson").read_text())
    assert [f["properties"]["share"] for f in found["features"]] == list(SHARES)
    cell_lon, cell_lat = (v.ravel() for v in scene.to_degrees(scene.cells.places_km))
    for feature in found["features"]:
        geometry = shapely.geometry.shape(feature["geometry"])
        assert geometry.is_valid
        west, south, east, north = geometry.bounds
        assert -180 <= west <= east <= 180
        assert -90 <= south <= north <= 90
        for part in geometry.geoms:
            assert part.exterior.is_ccw  # RFC 7946 section 3.1.6
        level = credible_level(scene.total, feature["properties"]["share"])
        wanted = scene.total.ravel() >= level * 1.02
        barred = scene.total.ravel() < level * 0.98
        inside = shapely.contains_xy(geometry, cell_lon, cell_lat)
        # Straight lines in degrees and on the map differ a little next to the poles.
        assert (inside[wanted]).mean() > 0.97
        assert (inside[barred]).mean() < 0.03


def test_kml_is_well_formed_and_times_its_points(build: Callable[..., Result], tmp_path: Path) -> None:
    result = build(second_km=30.0, sites=2, names=["A&<B>", "ZX.B"], cells=31)
    scene = Scene.of(result)
    root = ET.parse(write_kml(scene, tmp_path / "map.kml")).getroot()
    space = {"k": "http://www.opengis.net/kml/2.2"}
    names = [e.text for e in root.findall(".//k:Placemark/k:name", space)]
    assert "A&<B>" in names
    assert {"fitted arm 1", "fitted arm 2", "68% area", "95% area", "epicentre"} <= set(names)
    stamps = [e.text for e in root.findall(".//k:when", space)]
    assert len(stamps) == int(np.isfinite(scene.track_km[:, 0]).sum())
    assert stamps[0] == "2031-04-05T10:20:30.000Z"


def test_an_area_without_cells_is_empty(unilateral: Result) -> None:
    scene = Scene.of(unilateral)
    scene.__dict__["total"] = np.zeros_like(scene.total)
    assert area_polygons(scene, 0.68).is_empty


def records(result: Result) -> list[Site]:
    rng = np.random.default_rng(2)
    out = []
    for code in result.sites["site"].values[:3]:
        at = float(result.sites["s_arrival"].sel(site=code))
        time = np.arange(-20.0, 160.0, 0.02)
        data = (
            rng.normal(size=(6, time.size))
            * (0.02 + np.exp(-(((time - at) / 6) ** 2)))
            * np.array([[0.1]] * 3 + [[1e-4]] * 3)
        )
        valid = np.ones(data.shape, bool)
        valid[5, time > 60] = False
        valid[4] = False
        row = result.sites.sel(site=code)
        out.append(
            Site(
                str(code),
                float(row["longitude"]),
                float(row["latitude"]),
                0.0,
                -20.0,
                0.02,
                np.where(valid, data, 0.0),
                valid,
                (0.1, 5.0),
            )
        )
    return out


def test_record_section_shows_components_and_arrivals(unilateral: Result) -> None:
    sites = records(unilateral)
    picture = section_figure(unilateral, sites)
    picture.canvas.draw()
    panels = picture.axes[:6]
    assert [a.get_title(loc="left") for a in panels] == ["acc. E", "acc. N", "acc. Up", "rot. E", "rot. N", "rot. Up"]
    distances = [float(text.get_text().split("\n")[1].split()[0]) for text in panels[0].get_yticklabels()]
    assert distances == sorted(distances)
    traces = [[line for line in axes.lines if len(line.get_xdata()) > 10] for axes in panels]
    assert [len(t) for t in traces] == [3, 3, 3, 3, 0, 3]
    # The envelope of extremes keeps the largest value of the record.
    site = next(s for s in sites if s.code == "ZX.R01")
    window = panels[0].get_xlim()
    inside = (site.times_s >= window[0]) & (site.times_s <= window[1])
    written = [t.get_text() for t in panels[0].texts]
    assert f"{np.abs(site.data[0, inside]).max():.1e}" in written
    with pytest.raises(InputError, match="none of the records"):
        section_figure(unilateral, [])


def test_a_run_draws_its_records_and_leaves_their_data(unilateral: Result, tmp_path: Path) -> None:
    sites = records(unilateral)
    assert "section" not in {sheet.name for sheet in draw.sheets(unilateral)}
    result = replace(unilateral, records=tuple(sites))
    (sheet,) = [sheet for sheet in draw.sheets(result) if sheet.name == "section"]
    for grid in sheet.tables():
        grid.write(tmp_path / "section.nc")
        site = next(site for site in sites if site.code == grid.name)
        with xr.open_dataset(tmp_path / "section.nc") as data:
            assert data["motion"].dims == ("component", "seconds_after_origin")
            np.testing.assert_allclose(data["motion"], np.where(site.valid, site.data, np.nan), rtol=1e-6)
            np.testing.assert_array_equal(data["seconds_after_origin"], site.times_s)
    # Records are not part of what is stored.
    assert Result.load(result.save(tmp_path / "result.nc")).records == ()
