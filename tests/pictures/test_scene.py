"""What the pictures show is what the result holds."""

from collections.abc import Callable

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rupture.errors import InputError
from rupture.geodesy import distance_azimuth
from rupture.pictures import layers
from rupture.pictures.scene import Scene, circular_interval, credible_level
from rupture.result import Result

AXIS = np.arange(0.0, 360.0, 3.0)


def bump(centre: float, width: float) -> np.ndarray:
    away = (AXIS - centre + 180) % 360 - 180
    share = np.exp(-0.5 * (away / width) ** 2)
    return share / share.sum()


def test_interval_of_a_normal_posterior_is_the_normal_interval() -> None:
    best, low, high = circular_interval(AXIS, bump(120.0, 10.0), 0.9)  # type: ignore[misc]
    assert best == 120.0
    # 1.645 standard deviations hold the middle 90 % of a normal distribution (standard tables).
    assert (high - low) / 2 == pytest.approx(16.45, abs=0.3)


@given(centre=st.integers(0, 119), width=st.floats(3.0, 40.0), turn=st.integers(0, 119))
@settings(max_examples=60, deadline=None)
def test_turning_the_world_turns_the_interval(centre: int, width: float, turn: int) -> None:
    one = np.array(circular_interval(AXIS, bump(3.0 * centre, width)))
    other = np.array(circular_interval(AXIS, np.roll(bump(3.0 * centre, width), turn)))
    assert (other - one - 3.0 * turn) % 360 == pytest.approx([0, 0, 0], abs=1e-6) or np.allclose(
        (other - one - 3.0 * turn + 180) % 360, 180, atol=1e-6
    )


def test_no_posterior_gives_no_interval() -> None:
    assert circular_interval(AXIS, np.full(AXIS.size, np.nan)) is None
    assert circular_interval(AXIS, np.zeros(AXIS.size)) is None


@given(st.lists(st.floats(0.0, 1.0), min_size=3, max_size=60), st.floats(0.05, 0.99))
@settings(max_examples=80, deadline=None)
def test_credible_cells_hold_the_share_and_no_cell_too_many(values: list[float], share: float) -> None:
    probability = np.array(values)
    total = probability.sum()
    if total < 1e-6:
        return
    level = credible_level(probability, share)
    inside = probability[probability >= level]
    assert inside.sum() >= share * total * (1 - 1e-9)
    assert inside.sum() - inside.min() * (inside == inside.min()).sum() < share * total


def test_nothing_probable_has_no_area() -> None:
    assert credible_level(np.zeros((3, 3)), 0.68) == np.inf


def test_area_rings_enclose_exactly_the_cells_above_the_level(unilateral: Result) -> None:
    from matplotlib.path import Path

    scene = Scene.of(unilateral)
    level = credible_level(scene.total, 0.68)
    rings = layers.area_rings(scene, scene.total, level)
    cells = scene.cells.places_km.reshape(-1, 2)
    inside = np.zeros(len(cells), int)
    for ring in rings:
        inside += Path(ring).contains_points(cells, radius=1e-9) | Path(ring).contains_points(cells, radius=-1e-9)
    wanted = scene.total.ravel() >= level
    assert (inside % 2 == 1).tolist() == wanted.tolist()


def test_an_area_that_touches_the_edge_of_the_map_is_closed(build: Callable[..., Result]) -> None:
    scene = Scene.of(build(cells=15, spacing_km=4.0))
    for ring in layers.area_rings(scene, scene.total, credible_level(scene.total, 0.95)):
        assert ring[0] == pytest.approx(ring[-1])


def test_rays_point_at_the_front(unilateral: Result) -> None:
    scene = Scene.of(unilateral)
    frame = scene.ray_frames(3)[1]
    lon, lat = (float(v) for v in scene.to_degrees(scene.front_km[0, frame]))
    found = 0
    for s in np.flatnonzero(scene.used):
        best, low, high, coherent = scene.rays[s, frame]
        if np.isnan(best) or coherent < 0.5:
            continue
        site = unilateral.sites.isel(site=int(s))
        _, _, back = distance_azimuth(lon, lat, float(site["longitude"]), float(site["latitude"]))
        assert abs((best - np.degrees(float(back)) + 180) % 360 - 180) < 15
        assert low <= best <= high
        found += 1
    assert found >= 5


@pytest.mark.parametrize("latitude", [0.0, 38.4, 80.0, -75.0])
def test_a_ray_toward_the_epicentre_meets_the_centre_of_the_map(build: Callable[..., Result], latitude: float) -> None:
    scene = Scene.of(build(latitude_deg=latitude, longitude_deg=179.0, sites=5, cells=11))
    for s in range(5):
        home = scene.home_back_azimuth[s]
        scene.rays[s, 6] = (home, home - 5, home + 5, 1.0)
        if not scene.used[s]:
            continue
        away = float(np.hypot(*scene.site_km[s]))
        assert layers.ray_end(scene, s, 6, away) == pytest.approx([0.0, 0.0], abs=1e-6 * away + 1e-3)


def test_sites_not_used_and_windows_without_a_wave_send_no_ray(unilateral: Result) -> None:
    scene = Scene.of(unilateral)
    unused = int(np.flatnonzero(~scene.used)[0])
    frame = scene.ray_frames(3)[1]
    assert layers.ray_polygon(scene, unused, frame, 100.0) is None
    before = 0  # four seconds before the origin nothing has been sent
    assert all(layers.ray_end(scene, s, before, 100.0) is None for s in range(len(scene.codes)))


def test_a_wedge_is_as_wide_as_the_posterior(unilateral: Result) -> None:
    scene = Scene.of(unilateral)
    frame = scene.ray_frames(3)[1]
    wedge = layers.ray_polygon(scene, 0, frame, 100.0)
    assert wedge is not None
    edges = np.degrees(np.arctan2(*(wedge[[1, -1]] - wedge[0]).T))
    _, low, high, _ = scene.rays[0, frame]
    assert (edges[1] - edges[0]) % 360 == pytest.approx(high - low, abs=1e-6)


def test_total_location_is_a_probability_that_leaves_quiet_frames_out(unilateral: Result) -> None:
    scene = Scene.of(unilateral)
    assert scene.total.sum() == pytest.approx(1.0)
    # The quiet frames of the invented result are five times as wide; with them the area would be far larger.
    inside = (scene.total >= credible_level(scene.total, 0.95)).sum() * 25.0
    assert inside < 8000.0


def test_clock_is_utc_after_the_origin(unilateral: Result) -> None:
    scene = Scene.of(unilateral)
    assert scene.utc(-30.04) == "2031-04-05 10:20:00.0"
    assert scene.utc(29.96) == "2031-04-05 10:21:00.0"


def test_a_result_without_event_or_map_says_so(unilateral: Result) -> None:
    with pytest.raises(InputError, match="no event"):
        Scene.of(Result({}, unilateral.sites, unilateral.direction))
    with pytest.raises(InputError, match="only directions"):
        _ = Scene.of(Result(unilateral.summary, unilateral.sites, unilateral.direction)).cells


@pytest.mark.parametrize("strike", [0.0, 37.0])
def test_beachball_of_a_vertical_strike_slip_fault(strike: float) -> None:
    # Aki & Richards (2002), chapter 4: left-lateral slip on a vertical fault pushes toward strike + 45 deg and away along
    # strike - 45 deg; along both nodal planes there is nothing.
    def at(azimuth: float) -> float:
        angle = np.radians(azimuth)
        return float(layers.p_radiation(strike, 90.0, 0.0, np.sin(angle), np.cos(angle)))

    assert at(strike + 45) == pytest.approx(1.0)
    assert at(strike - 45) == pytest.approx(-1.0)
    assert at(strike) == pytest.approx(0.0, abs=1e-9)
    assert at(strike + 90) == pytest.approx(0.0, abs=1e-9)


def test_beachball_of_thrust_and_normal_faults() -> None:
    # Centre of the ball: straight down. A 45 deg thrust pushes up and down, a normal fault pulls.
    assert layers.p_radiation(20.0, 45.0, 90.0, np.array(0.0), np.array(0.0)) == pytest.approx(1.0)
    assert layers.p_radiation(20.0, 45.0, -90.0, np.array(0.0), np.array(0.0)) == pytest.approx(-1.0)


def test_directions_of_fewer_sites_in_another_order_find_their_site(unilateral: Result) -> None:
    from rupture.pictures.panels import coherence, predicted_curves

    whole = Scene.of(unilateral)
    picked = ["ZX.R07", "ZX.R02", "ZX.R03"]
    assert unilateral.track is not None
    fewer = Result(
        unilateral.summary,
        unilateral.sites,
        unilateral.direction.sel(site=picked),
        unilateral.map,
        None,
        unilateral.track.sel(site=picked),
    )
    scene = Scene.of(fewer)
    frame = scene.ray_frames(3)[1]
    for s, code in enumerate(scene.codes):
        if code in picked:
            assert scene.rays[s, frame] == pytest.approx(whole.rays[s, frame], nan_ok=True)
            assert coherence(scene, s) == pytest.approx(coherence(whole, s), nan_ok=True)
            assert predicted_curves(scene)[0, s] == pytest.approx(predicted_curves(whole)[0, s], nan_ok=True)
        else:
            assert np.isnan(scene.rays[s]).all()
            assert np.isnan(predicted_curves(scene)[:, s]).all()


def test_without_a_map_rays_are_chosen_by_time_after_s(unilateral: Result) -> None:
    scene = Scene.of(Result(unilateral.summary, unilateral.sites, unilateral.direction))
    assert scene.lagged
    frames = scene.ray_frames(3)
    assert len(frames) == 3
    s = int(np.flatnonzero(scene.used)[0])
    at = float(unilateral.sites["s_arrival"][s]) + scene.source_time[frames[0]]
    share = unilateral.direction["probability"].isel(site=s).sel(time=at, method="nearest").values
    assert scene.rays[s, frames[0], 0] == unilateral.direction["back_azimuth"].values[np.argmax(share)]


@pytest.mark.parametrize("columns", [1, 2])
def test_names_of_sites_stay_within_the_frame(build: Callable[..., Result], columns: int) -> None:
    from rupture.pictures import map_figure

    result = build(sites=8, names=[f"QQ.LONG{n}" for n in range(8)], cells=21, energy=False)
    picture = map_figure(result, columns=columns)
    picture.canvas.draw()
    axes = picture.axes[0]
    names = [text for text in axes.texts if text.get_text().startswith("LONG")]
    assert len(names) == 8
    for text in names:
        box, frame = text.get_window_extent(), axes.bbox
        assert frame.x0 - 1 <= box.x0 <= box.x1 <= frame.x1 + 1
        assert frame.y0 - 1 <= box.y0 <= box.y1 <= frame.y1 + 1
