"""The pictures of the energy inversion show where its energy is, and nothing where none was inverted."""

from collections.abc import Callable

import numpy as np
import pytest

from rupture import pictures
from rupture.errors import InputError
from rupture.pictures import draw
from rupture.pictures.distance import energy_along, strike_deg
from rupture.pictures.scene import Scene
from rupture.result import Result


@pytest.mark.parametrize("trace", [False, True])
@pytest.mark.parametrize("longitude_deg", [31.0, 179.9])
def test_energy_along_strike_is_all_energy_and_follows_the_front(
    build: Callable[..., Result], trace: bool, longitude_deg: float
) -> None:
    result = build(
        step_s=2.0, cells=61, sites=3, spacing_km=4.0, trace=trace, longitude_deg=longitude_deg, latitude_deg=-17.0
    )
    scene = Scene.of(result, "energy")
    time, along, density = energy_along(scene)
    step = (time[1] - time[0]) * (along[1] - along[0])
    assert density.sum() * step == pytest.approx(1.0, rel=1e-6)
    share = density / density.sum(axis=1, keepdims=True)
    mean = share @ along
    active = np.flatnonzero(scene.active & np.isfinite(scene.front_km[0, :, 0]))
    # What the front's place projects to, found by hand.
    angle = np.radians(strike_deg(scene))
    expected = scene.front_km[0, active] @ np.array([np.sin(angle), np.cos(angle)])
    assert len(active) > 5
    # The made-up energy is scattered about the front with a standard deviation of 1.5 km: three of them.
    assert mean[active] == pytest.approx(expected, abs=4.5)


def test_strike_of_energy_without_a_fitted_direction_is_its_long_axis(unilateral: Result) -> None:
    whole = strike_deg(Scene.of(unilateral, "energy"))
    summary = {**unilateral.summary, "rupture": None, "agreement": None}
    bare = Result(summary, unilateral.sites, unilateral.direction, unilateral.map, unilateral.energy)
    away = (strike_deg(Scene.of(bare, "energy")) - whole + 90) % 180 - 90
    assert abs(away) < 10


def test_fit_shows_every_site_and_the_course(unilateral: Result) -> None:
    picture = pictures.energy_fit_figure(unilateral)
    assert unilateral.energy is not None
    sites = [str(code) for code in unilateral.energy["site"].values]
    titles = [axes.get_title(loc="left") for axes in picture.axes]
    assert all(any(title.startswith(code) for title in titles) for code in sites)
    assert sum("Convergence" in title for title in titles) == 1
    observed, predicted = picture.axes[0].lines[:2]
    assert observed.get_ydata() == pytest.approx(unilateral.energy["observed_power"].values[0], nan_ok=True)
    assert predicted.get_ydata() == pytest.approx(unilateral.energy["predicted_power"].values[0], nan_ok=True)
    course = picture.axes[-1].lines[0].get_ydata()
    assert course[-1] == 0
    assert course[0] == pytest.approx(float(np.ptp(unilateral.energy["objective"].values)))


def test_gains_are_told_where_there_are_any(unilateral: Result) -> None:
    assert unilateral.energy is not None
    gains = np.ones((unilateral.energy.sizes["site"], 4))
    gains[1] = 0.5, 1.0, 2.0, 1.0
    energy = unilateral.energy.assign(gain=(("site", "component_group"), gains))
    result = Result(unilateral.summary, unilateral.sites, unilateral.direction, unilateral.map, energy)
    titles = [axes.get_title(loc="left") for axes in pictures.energy_fit_figure(result).axes]
    assert "gain 0.50 1.00 2.00 1.00" in titles[1]
    assert "gain" not in titles[0]


def test_without_an_inversion_there_is_nothing_to_draw(build: Callable[..., Result]) -> None:
    result = build(step_s=4.0, cells=21, sites=2, spacing_km=9.0, energy=False)
    names = {sheet.name for sheet in draw.sheets(result)}
    assert not {name for name in names if name.startswith("energy_")}
    for figure in (pictures.energy_fit_figure, pictures.energy_along_figure):
        with pytest.raises(InputError, match="no energy inversion"):
            figure(result)


def test_histograms_show_the_interval_that_the_summary_states(unilateral: Result) -> None:
    from rupture.pictures.page_data import page_data
    from rupture.pictures.posteriors import stated_interval

    stated = unilateral.summary["rupture"]["speed_km_s"]
    assert stated_interval(unilateral, "speed_km_s") == (stated["p05"], stated["best"], stated["p95"])
    items = {item["name"]: item["interval"] for item in page_data(Scene.of(unilateral))["posterior"]}
    assert items["speed_km_s"] == pytest.approx([stated["p05"], stated["best"], stated["p95"]], abs=6e-4)
    # Where the summary states none, the draws do: 5, 50 and 95 % of a normal distribution of 80 and 5 km.
    bare = Result(
        {**unilateral.summary, "rupture": None}, unilateral.sites, unilateral.direction, track=unilateral.track
    )
    assert stated_interval(bare, "length_km") == pytest.approx((80 - 8.2, 80, 80 + 8.2), abs=1.5)
