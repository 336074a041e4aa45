"""Every figure draws on every kind of result, in one look, with its data beside it."""

import csv
import re
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
import xarray as xr
from matplotlib.figure import Figure

from rupture import pictures
from rupture.errors import InputError
from rupture.pictures import draw, style
from rupture.result import Result
from rupture.wording import SHORT_CAUTION

CASES = {
    "bilateral": {"second_km": 50.0, "sites": 4, "energy": False},
    "date line": {"longitude_deg": 179.9, "latitude_deg": -17.0, "sites": 3},
    "polar": {"longitude_deg": 30.0, "latitude_deg": 89.0, "sites": 3, "energy": False},
    "fault trace": {"trace": True},
    "one site": {"sites": 1, "site_radius_km": 60.0, "trace": True, "energy": False},
}


def small(build: Callable[..., Result], **changes: object) -> Result:
    return build(**({"cells": 25, "spacing_km": 8.0, "step_s": 2.0} | changes))


@pytest.mark.parametrize(
    ("case", "columns"),
    [("bilateral", 1), ("date line", 2), ("polar", 1), ("fault trace", 2), ("one site", 1)],
)
def test_all_figures_draw(build: Callable[..., Result], case: str, columns: int) -> None:
    result = small(build, **CASES[case])
    for sheet in draw.sheets(result):
        if sheet.name.startswith("direction_") and not sheet.name.endswith("R01"):
            continue
        picture = sheet.draw(columns=columns)
        picture.set_dpi(72)
        picture.canvas.draw()
        width_mm = picture.get_size_inches()[0] * 25.4
        assert width_mm == pytest.approx({1: 88.0, 2: 180.0}[columns])
        assert SHORT_CAUTION in [text.get_text() for text in picture.texts], sheet.name
        assert_text_inside(picture, sheet.name)


def assert_text_inside(picture: Figure, name: str) -> None:
    """Every text that is seen lies on the page; only names on maps may be cut by the map's frame."""
    from matplotlib.text import Text

    page = picture.bbox
    for text in picture.findobj(Text):
        words = text.get_text().strip()
        if not words or not text.get_visible() or text.get_clip_on():
            continue
        box = text.get_window_extent()
        if box.width == 0 or not np.isfinite(box.extents).all():
            continue
        inside = box.x0 >= -2 and box.y0 >= -2 and box.x1 <= page.width + 2 and box.y1 <= page.height + 2
        axes = text.axes
        off_axis = axes is not None and not (
            axes.bbox.padded(60).overlaps(box)
        )  # tick labels beyond the limits are made, but never drawn
        assert inside or off_axis or _hidden_tick(text), f"{name}: '{words}' at {box.extents} leaves the page"


def _hidden_tick(text: object) -> bool:
    axes = getattr(text, "axes", None)
    if axes is None or not hasattr(axes, "get_xlim"):
        return False
    x, y = text.get_position()  # type: ignore[attr-defined]
    for axis, value in ((axes.xaxis, x), (axes.yaxis, y)):
        if text in axis.get_ticklabels(which="both"):
            low, high = sorted(axis.get_view_interval())
            return not low <= value <= high
    return False


def test_a_run_of_directions_only_has_map_and_panels(unilateral: Result) -> None:
    summary = {**unilateral.summary, "rupture": None, "reliability": None, "agreement": None}
    result = Result(summary, unilateral.sites, unilateral.direction)
    names = [sheet.name for sheet in draw.sheets(result)]
    assert names[:2] == ["map", "directions"]
    assert all(name.startswith("direction") or name == "map" for name in names)
    pictures.map_figure(result).canvas.draw()
    for figure in (
        pictures.along_figure,
        pictures.posterior_figure,
        pictures.kinds_figure,
        pictures.energy_figure,
        pictures.frames_figure,
    ):
        with pytest.raises(InputError):
            figure(result)


def test_draw_all_writes_figures_and_tables(build: Callable[..., Result], tmp_path: Path) -> None:
    whole = small(build, sites=1)
    result = Result({**whole.summary, "rupture": None}, whole.sites, whole.direction)
    seen: list[tuple[int, int]] = []
    written = pictures.draw_all(
        result, tmp_path / "figures", progress=lambda done, total: seen.append((done, total)), formats=("png", "pdf")
    )
    names = {path.name for path in written}
    assert {
        "map.png",
        "map.pdf",
        "map_sites.csv",
        "map.kml",
        "direction_ZX.R01.png",
        "direction_ZX.R01_posterior.nc",
    } <= names
    assert all(path.stat().st_size > 0 for path in written)
    assert sorted(path.name for path in (tmp_path / "figures").iterdir()) == sorted(names)
    assert seen[0][0] == 1
    assert seen[-1][0] == seen[-1][1] == 3
    from PIL import Image

    with Image.open(tmp_path / "figures" / "map.png") as image:
        assert image.info["dpi"] == pytest.approx((300, 300), abs=0.1)
        assert image.width == pytest.approx(180 / 25.4 * 300, abs=1)
    # Text as text: a Type 42 (TrueType) font with its map to Unicode, as ISO 32000-1 section 9.10 wants for extraction.
    pdf = (tmp_path / "figures" / "map.pdf").read_bytes()
    assert b"/Type0" in pdf or b"/TrueType" in pdf
    assert b"/ToUnicode" in pdf
    assert b"/Type3" not in pdf


def test_svg_keeps_text(unilateral: Result, tmp_path: Path) -> None:
    pictures.along_figure(unilateral).savefig(tmp_path / "a.svg")
    assert ">source time after origin (s)</text>" in (tmp_path / "a.svg").read_text(encoding="utf-8")


def read(path: Path) -> dict[str, list[str]]:
    with path.open(newline="", encoding="utf-8") as stream:
        rows = list(csv.DictReader(stream))
    return {key: [row[key] for row in rows] for key in rows[0]}


def test_tables_hold_what_is_drawn(build: Callable[..., Result], tmp_path: Path) -> None:
    result = small(build, sites=3, longitude_deg=179.9, latitude_deg=-17.0)
    pictures.draw_all(result, tmp_path, formats=())
    track = read(tmp_path / "map_track.csv")
    assert result.track is not None
    assert np.array(track["source_time_s"], float) == pytest.approx(result.track["source_time"].values)
    known = [i for i, text in enumerate(track["longitude_deg"]) if text]
    assert known
    for i in known:
        assert -180 <= float(track["longitude_deg"][i]) < 180
        assert float(track["longitude_deg"][i]) == pytest.approx(float(result.track["longitude"][i]), abs=1e-4)
    cells = read(tmp_path / "map_cells.csv")
    assert sum(map(float, cells["share"])) == pytest.approx(1.0, rel=1e-4)
    areas = read(tmp_path / "map_areas.csv")
    assert set(areas["share"]) == {"0.68", "0.95"}
    curve = read(tmp_path / "direction_ZX.R01.csv")
    assert len(curve["seconds_after_origin"]) == result.direction.sizes["time"]
    # NetCDF classic as GMT and GIS programs open it; xarray reads it as it is.
    with xr.open_dataset(tmp_path / "direction_ZX.R01_posterior.nc") as grid:
        assert grid["probability"].dims == ("seconds_after_origin", "back_azimuth")
        np.testing.assert_allclose(grid["probability"], result.direction["probability"][0], rtol=1e-6)
        np.testing.assert_array_equal(grid["back_azimuth"], result.direction["back_azimuth"])
        assert grid["back_azimuth"].attrs["units"] == "degree"
    energy = read(tmp_path / "energy_ray_stack.csv")
    step = float(energy["source_time_s"][1]) - float(energy["source_time_s"][0])
    assert sum(map(float, energy["energy_share_per_s"])) * step == pytest.approx(1.0, rel=1e-4)
    assert len(read(tmp_path / "posterior.csv")["azimuth_deg"]) == result.track.sizes["draw"]


def test_two_sites_with_like_names_do_not_share_a_file(build: Callable[..., Result], tmp_path: Path) -> None:
    result = small(build, sites=2, names=["A/B", "A B"])
    written = pictures.draw_all(result, tmp_path, formats=())
    assert len(written) == len(set(written))


def test_names_with_mathematics_and_odd_signs_are_drawn_as_they_are(build: Callable[..., Result]) -> None:
    result = small(build, sites=2, names=["ZX.$R_1$", "ZX.<b>É{"])
    picture = pictures.directions_figure(result)
    picture.canvas.draw()
    assert any("$R_1$" in axes.get_title(loc="left") for axes in picture.axes)
    pictures.map_figure(result).canvas.draw()


def test_style_file_wins_and_a_bad_one_is_refused(unilateral: Result, tmp_path: Path) -> None:
    good = tmp_path / "mine.mplstyle"
    good.write_text("axes.labelsize: 11\naxes.linewidth: 2\n")
    axes = pictures.along_figure(unilateral, style=good).axes[0]
    assert axes.xaxis.label.get_size() == 11
    assert pictures.along_figure(unilateral).axes[0].xaxis.label.get_size() == 7
    bad = tmp_path / "bad.mplstyle"
    for text, message in (
        ("font.size: 8\naxes.no_such_thing: 3\n", r"bad\.mplstyle, line 2.*no_such_thing"),
        ("font.size: big\n", "big"),
    ):
        bad.write_text(text)
        with pytest.raises(InputError, match=message):
            pictures.along_figure(unilateral, style=bad)
    with pytest.raises(InputError, match="no such"):
        pictures.along_figure(unilateral, style=tmp_path / "none.mplstyle")
    with pytest.raises(InputError, match="columns"):
        pictures.along_figure(unilateral, columns=3)


def test_figures_leave_the_users_settings_alone(unilateral: Result) -> None:
    import matplotlib as mpl

    with mpl.rc_context({"font.size": 23.0, "axes.facecolor": "red"}):
        picture = pictures.energy_figure(unilateral)
        assert mpl.rcParams["font.size"] == 23.0
        assert mpl.colors.to_hex(picture.axes[0].get_facecolor()) == "#ffffff"


def test_figures_show_themselves_in_a_notebook(unilateral: Result) -> None:
    assert pictures.energy_figure(unilateral)._repr_png_().startswith(b"\x89PNG")


def test_an_unknown_site_or_field_is_named(unilateral: Result) -> None:
    with pytest.raises(InputError, match=r"no site 'XX'.*ZX\.R01"):
        pictures.direction_figure(unilateral, "XX")
    with pytest.raises(InputError, match="'depth'"):
        pictures.frames_figure(unilateral, field="depth")


@pytest.mark.parametrize("colours", [style.probability_colours(), style.time_colours()])
def test_colours_are_even_in_lightness_and_legible_in_grey(colours: object) -> None:
    # Relative luminance by WCAG 2 (sRGB, IEC 61966-2-1) and CIE 1976 lightness: published formulas, not the module's own.
    rgb = colours(np.linspace(0, 1, 64))[:, :3]  # type: ignore[operator]
    linear = np.where(rgb <= 0.04045, rgb / 12.92, ((rgb + 0.055) / 1.055) ** 2.4)
    luminance = linear @ [0.2126, 0.7152, 0.0722]
    lightness = np.where(luminance > 0.008856, 116 * np.cbrt(luminance) - 16, 903.3 * luminance)
    steps = np.diff(lightness)
    assert (np.sign(steps) == np.sign(steps[0])).all()
    assert np.abs(steps).max() < 1.6 * np.abs(steps).mean()
    assert abs(lightness[-1] - lightness[0]) > 45


def test_back_azimuth_axis_is_centred_on_the_epicentre_and_the_curve_is_whole(unilateral: Result) -> None:
    from rupture.pictures.scene import Scene

    scene = Scene.of(unilateral)
    for code in scene.codes:
        axes = pictures.direction_figure(unilateral, code).axes[0]
        low, high = axes.get_ylim()
        home = float(scene.home_back_azimuth[scene.codes.index(code)])
        assert high - low == pytest.approx(360.0)
        assert abs((low + high) / 2 - home) <= 3.0
        curve = next(line for line in axes.lines if line.get_color() == style.ACCENT).get_ydata()
        known = np.isfinite(curve)
        assert np.abs(np.diff(curve[known])).max() < 20
        assert ((curve[known] >= low) & (curve[known] <= high)).all()


def test_posterior_image_shows_each_bin_at_its_own_angle(unilateral: Result) -> None:
    axes = pictures.direction_figure(unilateral, "ZX.R03").axes[0]
    image = axes.images[0]
    west, east, south, north = image.get_extent()
    values = np.asarray(image.get_array())
    direction = unilateral.direction.sel(site="ZX.R03")
    time = direction["time"].values
    column = int(np.argmin(np.abs(time - 60.0)))
    at = west + (column + 0.5) * (east - west) / values.shape[1]
    assert at == pytest.approx(time[column])
    row = int(np.argmax(values[:, column]))
    angle = south + (row + 0.5) * (north - south) / values.shape[0]
    best = float(direction["back_azimuth"][int(np.argmax(direction["probability"].values[column]))])
    assert (angle - best) % 360 == pytest.approx(0.0, abs=1e-6)


@pytest.mark.parametrize("case", ["stationary", "undetermined", "stack only", "bare event"])
def test_answers_of_every_sort_are_drawn(build: Callable[..., Result], tmp_path: Path, case: str) -> None:
    result = small(build, sites=2, energy=False)
    assert result.track is not None
    assert result.map is not None
    track, rupture = result.track.copy(), dict(result.summary["rupture"])
    summary = {**result.summary, "rupture": rupture}
    grid = result.map
    nothing = {"direction_deg": None, "speed_km_s": None, "length_km": None, "second_arm": None}
    if case == "stationary":
        rupture |= nothing | {"kind": "stationary", "kind_probability": {"stationary": 0.97, "unilateral": 0.03}}
        track["kind"] = ("draw", np.full(track.sizes["draw"], "stationary"))
        for name in ("front_longitude", "front_latitude", "front_distance", "predicted_back_azimuth"):
            track[name] = track[name] * np.nan
        track = track.drop_vars("along_probability")
    elif case == "undetermined":
        rupture |= nothing | {"kind": "undetermined", "reason": "two kinds are as likely"}
        summary["reliability"] = None
    elif case == "stack only":
        track = track.drop_dims(["arm", "draw"]).drop_vars("along_probability")
        grid = grid.drop_vars("smoothed_probability")
        summary["rupture"] = None
    else:
        event = {
            k: v
            for k, v in summary["event"].items()
            if k in ("origin_time", "longitude_deg", "latitude_deg", "depth_km")
        }
        summary["event"] = event
        result.sites["p_arrival"].values[0] = np.nan
        result.sites["s_arrival"].values[0] = np.nan
    changed = Result(summary, result.sites, result.direction, grid, None, track, [], {})
    names = []
    for sheet in draw.sheets(changed):
        picture = sheet.draw()
        picture.set_dpi(40)
        picture.canvas.draw()
        sheet.tables()
        names.append(sheet.name)
    assert ("posterior" in names) == (case in ("undetermined", "bare event"))
    assert ("kinds" in names) == (case != "stack only")
    pictures.write_report(changed, tmp_path / "report.html")
    if case in ("stationary", "bare event"):
        pictures.make_movie(changed, tmp_path / "movie.mp4")


def test_two_processes_draw_the_same_files(build: Callable[..., Result], tmp_path: Path) -> None:
    whole = small(build, sites=3)
    result = Result({**whole.summary, "rupture": None}, whole.sites, whole.direction)
    one = pictures.draw_all(result, tmp_path / "one", formats=("png",))
    two = pictures.draw_all(result, tmp_path / "two", formats=("png",), workers=2)
    assert [p.name for p in two] == [p.name for p in one]
    for a, b in zip(one, two, strict=True):
        assert a.read_bytes() == b.read_bytes()


def test_everything_is_left_in_one_folder(build: Callable[..., Result], tmp_path: Path) -> None:
    result = small(build, sites=1, step_s=8.0, cells=15, spacing_km=12.0)
    seen: list[tuple[int, int]] = []
    written = pictures.draw_everything(result, tmp_path / "run", workers=2, progress=lambda *step: seen.append(step))
    assert {path.name for path in (tmp_path / "run").iterdir()} == {
        "figures",
        "report.html",
        "movie.mp4",
        "movie_energy.mp4",
    }
    assert sorted(written) == sorted(path for path in (tmp_path / "run").rglob("*") if path.is_file())
    assert [done for done, _ in seen] == list(range(1, seen[-1][1] + 1))
    slides = tmp_path / "slides"
    pictures.draw_everything(result, slides, formats=("svg",), columns=1, movie_shape="16:9", movie_format="gif")
    assert {path.name for path in slides.iterdir()} == {"figures", "report.html", "movie.gif", "movie_energy.gif"}
    width = re.search(r'width="([\d.]+)pt"', (slides / "figures" / "map.svg").read_text(encoding="utf-8"))
    assert width is not None
    assert float(width[1]) == pytest.approx(88 / 25.4 * 72, abs=0.5)
    from PIL import Image

    with Image.open(slides / "movie.gif") as image:
        assert image.size == (1280, 720)
    # Directions alone: nothing moves, nothing was inverted.
    bare = Result({**result.summary, "rupture": None}, result.sites, result.direction)
    pictures.draw_everything(bare, tmp_path / "bare")
    assert {path.name for path in (tmp_path / "bare").iterdir()} == {"figures", "report.html"}


@pytest.mark.parametrize("columns", [1, 2])
def test_a_long_null_test_sentence_stays_clear_of_the_axes(unilateral: Result, columns: int) -> None:
    sentence = "Of 20 synthetic ruptures that never moved, these sites called 2 a moving one. " * 3
    reliability = {**unilateral.summary["reliability"], "sentence": sentence}
    result = Result({**unilateral.summary, "reliability": reliability}, unilateral.sites, unilateral.direction)
    picture = pictures.kinds_figure(result, columns=columns)
    picture.canvas.draw()
    assert_text_inside(picture, "kinds")
    (written,) = [text for text in picture.texts if "never moved" in text.get_text()]
    box = written.get_window_extent()
    for axes in picture.axes:
        assert not box.overlaps(axes.get_tightbbox())
    (caution,) = [text for text in picture.texts if text.get_text() == SHORT_CAUTION]
    assert not box.overlaps(caution.get_window_extent())
