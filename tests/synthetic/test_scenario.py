"""Scenario files: ready ones, defaults, all faults of a file at once."""

import tomllib
from importlib import resources

import numpy as np
import pytest
from pydantic import BaseModel

from rupture.errors import InputError
from rupture.geodesy import distance_azimuth
from rupture.synthetic.faults import Clipped, Dead, Gain, Gappy, Late, Reversed, Swapped, Turned
from rupture.synthetic.scenario import Scenario, demo_scenario, read_scenario, ready_scenarios, scenario_from_table
from rupture.synthetic.scenario_errors import _models
from rupture.synthetic.scenario_tables import parse_components
from rupture.synthetic.stations import make_stations

TEMPLATE = resources.files("rupture") / "templates" / "simulate.toml"


def table(**changes):
    return tomllib.loads(TEMPLATE.read_text(encoding="utf-8")) | changes


def test_ready_scenarios():
    assert set(ready_scenarios()) == {"bilateral", "demo", "stationary", "supershear", "unilateral"}
    arms = {name: len(read_scenario(name).source().arms) for name in ready_scenarios()}
    assert arms == {"bilateral": 2, "demo": 1, "stationary": 0, "supershear": 1, "unilateral": 1}
    speeds = [v for _, v in read_scenario("supershear").source().arms[0].steps]
    assert max(speeds) > read_scenario("supershear").model().vs_km_s[1]


def test_demo_is_what_it_says():
    scenario = demo_scenario()
    source, stations = scenario.source(), make_stations(scenario)
    assert len(scenario.site) == 8
    assert 7.2 <= source.magnitude <= 7.4
    assert source.arms[0].length_km == 90
    assert source.arms[0].speed_km_s == 2.8
    distance, _, _ = distance_azimuth(
        source.longitude_deg, source.latitude_deg,
        [s.longitude_deg for s in stations], [s.latitude_deg for s in stations],
    )  # fmt: skip
    assert distance.min() > 60e3
    assert distance.max() < 270e3
    kinds = {s.components for s in scenario.site}
    assert kinds == {"6C", "3C+rotZ", "Z"}
    assert sum(s.array is not None for s in scenario.site) == 1


def test_the_template_shows_every_key():
    text = TEMPLATE.read_text(encoding="utf-8")

    def names(model: type[BaseModel]):
        for name, field in model.model_fields.items():
            yield name
            for nested in _models(field.annotation):
                if nested not in (Turned, Reversed, Swapped, Late, Gain, Clipped, Gappy, Dead):
                    yield from names(nested)

    missing = sorted({name for name in names(Scenario) if name not in text})
    assert not missing


def test_the_templates_defaults_are_the_programs():
    """Lines that are commented out with a value give the default, or an example where the text says so."""
    text = TEMPLATE.read_text(encoding="utf-8")
    open_coda = {}
    for line in text.splitlines():
        for name, field in (*Scenario.model_fields["coda"].annotation.model_fields.items(),):
            if line.startswith(f"# {name} = "):
                open_coda[name] = field.default == tomllib.loads(line[2:])[name]
    assert open_coda
    assert all(open_coda.values())


def test_defaults_by_scaling():
    scenario = scenario_from_table(table(rupture={"arm": [{"speed_km_s": 2.8}, {"speed_km_s": 2.5}], "shape": "plane"}))
    source = scenario.source()
    assert [a.azimuth_deg for a in source.arms] == [65.0, 245.0]
    assert source.arms[0].length_km == pytest.approx(10 ** (-2.57 + 0.62 * 7) / 2)
    assert source.width_km == pytest.approx(10 ** (-3.42 + 0.90 * 7) / 10 ** (-2.57 + 0.62 * 7))


def test_components():
    assert parse_components("6C") == {"acc_E", "acc_N", "acc_Z", "rot_E", "rot_N", "rot_Z"}
    assert parse_components("3C+rotZ") == {"acc_E", "acc_N", "acc_Z", "rot_Z"}


def test_all_faults_of_a_file_are_told_at_once(tmp_path):
    path = tmp_path / "bad.toml"
    path.write_text(
        """
name = 3
engin = "ray"
[event]
origin_time = "yesterday"
longitude_deg = 10
latitude = 3
depth_km = -4
magnitude = 7.0
strike_deg = 65.0
dip_deg = 90.0
rake_deg = "left"
[[rupture.arm]]
sped_km_s = 2.8
[[site]]
code = "AAA"
distance_km = 50
azimuth_deg = 3
components = "7C"
[[site]]
code = "BBB"
distance_km = 50
azimuth_deg = 30
fault = [{kind = "turnd"}, {kind = "reversed", channels = ["acc_Q"]}]
"""
    )
    with pytest.raises(InputError) as caught:
        read_scenario(path)
    text = str(caught.value)
    for words in (
        "'name' = 3 must be a text in quotes",
        "unknown key 'engin' (did you mean 'engine'?)",
        "'event.origin_time' = 'yesterday' must be a time",
        "the key 'event.latitude_deg' is missing",
        "unknown key 'event.latitude' (did you mean 'latitude_deg'?)",
        "'event.depth_km' = -4 should be greater than 0",
        "'event.rake_deg' = 'left' must be a number",
        "unknown key 'rupture.arm[1].sped_km_s' (did you mean 'speed_km_s'?)",
        "site[1].components: unknown components '7C'",
        "'site[2].fault[1].kind' = 'turnd' is no kind of fault (did you mean 'turned'?)",
        "'site[2].fault[2].channels[1]' = 'acc_Q'",
    ):
        assert words in text
    assert all(line.startswith(str(path)) for line in text.splitlines())
    assert len(text.splitlines()) == 11


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        ({"earth": "ak135"}, "give the Earth once"),
        ({"layer": []}, "give the Earth once"),
        ({"site": []}, "site"),
        ({"site": [{"code": "AAA", "distance_km": 50.0}]}, "give either longitude_deg and latitude_deg"),
        ({"site": [{"code": "AAA", "distance_km": 50.0, "azimuth_deg": 2.0}] * 2}, "site code used twice: AAA"),
        ({"rupture": {"arm": [{"speed_km_s": 2800.0}]}}, "km/s, not m/s"),
        ({"rupture": {"arm": [{}], "shape": "plane", "width_km": 40.0}}, "reaches above the surface"),
        (
            {"layer": [{"top_km": 0, "vp_km_s": 6.0, "vs_km_s": 6.5, "density_kg_m3": 2700, "qp": 1, "qs": 1}]},
            "vs not below vp",
        ),
        ({"seed": 1.5}, "whole number"),
    ],
)
def test_bad_values(changes, words):
    with pytest.raises(InputError, match=words):
        scenario_from_table(table(**changes))


def test_missing_file_names_the_ready_ones():
    with pytest.raises(InputError, match=r"no ready scenario of this name.*unilateral"):
        read_scenario("nothing.toml")


def test_file_that_is_no_toml(tmp_path):
    path = tmp_path / "x.toml"
    path.write_text("a = [1,")
    with pytest.raises(InputError, match="not valid TOML"):
        read_scenario(path)


def test_keys_given_beside_the_file_win():
    assert read_scenario("unilateral", seed=99).seed == 99
    assert read_scenario("unilateral", seed=None).seed == 11
    assert read_scenario("unilateral", engine="wavefield").engine == "wavefield"


def test_site_on_the_epicentre():
    site = {"code": "AAA", "longitude_deg": -8.0, "latitude_deg": 21.0}
    with pytest.raises(InputError, match="site AAA: stands on the epicentre"):
        make_stations(scenario_from_table(table(site=[site])))


def test_array_stands_around_its_place():
    site = {
        "code": "ARR",
        "distance_km": 70.0,
        "azimuth_deg": 10.0,
        "components": "Z",
        "array": {"sensors": 7, "aperture_m": 300.0},
    }
    stations = make_stations(scenario_from_table(table(site=[site])))
    assert [s.code for s in stations] == [f"ARR{k:02d}" for k in range(1, 8)]
    lon, lat = ([getattr(s, n) for s in stations] for n in ("longitude_deg", "latitude_deg"))
    distance, _, _ = distance_azimuth(lon[0], lat[0], lon[1:], lat[1:])
    np.testing.assert_allclose(distance, 150.0, atol=0.01)
    with pytest.raises(InputError, match="at most three letters"):
        make_stations(scenario_from_table(table(site=[site | {"code": "ARRAY"}])))


def test_public_names_are_what_they_say():
    import types

    import rupture.synthetic as face

    for name in face.__all__:
        assert not isinstance(getattr(face, name), types.ModuleType), name
    with pytest.raises(AttributeError, match="no attribute 'nothing'"):
        _ = face.nothing
