"""Simulated files: read back with ObsPy they hold what was simulated; faults do what they say."""

import json
import tomllib
from importlib import resources

import numpy as np
import pytest

from rupture.conventions import COMPONENTS, ROT_Z
from rupture.errors import InputError
from rupture.synthetic.scenario import scenario_from_table
from rupture.synthetic.simulate import ground_motion, noise_at, simulate, station_counts

FOLDER = resources.files("rupture.synthetic") / "scenarios"


def scenario(sites, name="unilateral", **changes):
    table = tomllib.loads((FOLDER / f"{name}.toml").read_text(encoding="utf-8"))
    table["event"]["magnitude"] = 6.0
    table["rupture"] = {"arm": [{"length_km": 15.0, "speed_km_s": 2.8}], "sub_events": 40}
    table |= {"site": sites, "record": {"before_s": 20.0, "length_s": 90.0, "rate_hz": 20.0}} | changes
    return scenario_from_table(table)


def site(code="AAA", **changes):
    return {"code": code, "distance_km": 60.0, "azimuth_deg": 120.0} | changes


QUIET = {"noise": {"on": False}, "coda": {"energy_ratio": 0.0}}


@pytest.fixture(scope="module")
def mixed(tmp_path_factory):
    folder = tmp_path_factory.mktemp("mixed")
    made = scenario(
        [
            site("AAA", sensor_azimuth_deg=40.0),
            site(
                "BBB",
                azimuth_deg=300.0,
                components="3C+rotZ",
                translation="low-gain-broadband",
                rotation="large-ring-laser",
            ),
            site("CCC", azimuth_deg=20.0, components="Z", array={"sensors": 3, "aperture_m": 200.0}),
        ]
    )
    return made, simulate(made, folder), ground_motion(made)


def read(files):
    import obspy

    stream = obspy.Stream()
    for path in files.records:
        stream += obspy.read(str(path))
    return stream, obspy.read_inventory(str(files.inventory)), obspy.read_events(str(files.event))[0]


def true_motion(made, ground, number):
    station = ground.stations[number]
    noise = noise_at(station, made, ground.sampling.samples, ground.sampling.step_s)
    return ground.records[number] + noise


def test_flat_channels_read_back_to_the_last_quantisation_step(mixed):
    made, files, ground = mixed
    stream, inventory, event = read(files)
    origin = event.preferred_origin().time
    checked = 0
    for number, station in enumerate(ground.stations):
        motion = true_motion(made, ground, number)
        turn = np.radians(station.sensor_azimuth_deg)
        for plan in station.channels:
            trace = stream.select(station=station.code, channel=plan.code)[0]
            response = inventory.get_response(trace.id, origin)
            if response.instrument_sensitivity.input_units == "M/S":
                continue
            values = trace.data / response.instrument_sensitivity.value
            angles = inventory.get_orientation(trace.id, origin)
            axis = [
                np.sin(np.radians(angles["azimuth"])) * np.cos(np.radians(angles["dip"])),
                np.cos(np.radians(angles["azimuth"])) * np.cos(np.radians(angles["dip"])),
                -np.sin(np.radians(angles["dip"])),
            ]
            first = 0 if plan.component < 3 else 3
            want = np.tensordot(axis, ground.records[number][first : first + 3], 1)
            noise = motion - ground.records[number]
            # Noise belongs to the sensor's own axes, ground motion to the metadata's.
            want += noise[plan.component]
            step = 1 / response.instrument_sensitivity.value
            assert np.abs(values - want).max() <= 0.5 * step * (1 + 1e-6)
            assert abs(trace.stats.starttime - origin - ground.sampling.start_s) < 1e-6
            checked += 1
        assert turn == pytest.approx(np.radians(40.0 if station.code == "AAA" else 0.0))
    assert checked == 6 + 1 + 3


def test_velocity_channels_give_acceleration_through_obspys_response_removal(mixed):
    made, files, ground = mixed
    stream, inventory, _ = read(files)
    trace = stream.select(station="BBB", channel="BLZ")[0]
    trace.remove_response(
        inventory, output="ACC", water_level=None, pre_filt=(0.05, 0.1, 6.0, 8.0), zero_mean=False, taper=False
    )
    want = true_motion(made, ground, 1)[2]
    frequency = np.fft.rfftfreq(want.size, ground.sampling.step_s)
    inside = (frequency > 0.2) & (frequency < 5.0)
    a, b = (np.fft.irfft(np.fft.rfft(v) * inside, want.size) for v in (trace.data, want))
    middle = slice(200, -200)
    assert np.abs(a - b)[middle].max() < 0.01 * np.abs(b).max()


def test_metadata_say_what_stands_there(mixed):
    _, files, ground = mixed
    stream, inventory, event = read(files)
    assert {t.stats.channel for t in stream.select(station="AAA")} == {"BN1", "BN2", "BNZ", "BJ1", "BJ2", "BJZ"}
    assert {t.stats.channel for t in stream.select(station="BBB")} == {"BLE", "BLN", "BLZ", "BJZ"}
    assert {t.stats.station for t in stream if t.stats.station.startswith("CCC")} == {"CCC01", "CCC02", "CCC03"}
    assert all(t.data.dtype == np.int32 for t in stream)
    units = {
        c.code: c.response.instrument_sensitivity.input_units for n in inventory for s in n for c in s
    }  # fmt: skip
    assert units["BNZ"] == "M/S**2"
    assert units["BLZ"] == "M/S"
    assert units["BJZ"] == "RAD/S"
    identifiers = {c.source_id for n in inventory for s in n for c in s}
    assert "FDSN:QQ_AAA_00_B_J_Z" in identifiers
    assert event.preferred_magnitude().mag == 6.0
    plane = event.focal_mechanisms[0].nodal_planes.nodal_plane_1
    assert (plane.strike, plane.dip, plane.rake) == (65.0, 90.0, 0.0)
    assert event.preferred_origin().depth == 10e3
    for station in ground.stations:
        xml = inventory.select(station=station.code)[0][0]
        assert xml.longitude == pytest.approx(station.longitude_deg, abs=1e-9)


def test_response_of_the_metadata_is_that_of_the_recorder(mixed):
    """evalresp, as ObsPy calls it, on the written StationXML against the response the counts were made with."""
    _, files, ground = mixed
    _, inventory, _ = read(files)
    frequency = np.array([0.005, 0.02, 0.1, 1.0, 5.0])
    plan = next(c for c in ground.stations[1].channels if c.code == "BLZ")
    response = inventory.select(station="BBB", channel="BLZ")[0][0][0].response
    got = response.get_evalresp_response_for_frequencies(frequency, output="VEL")
    np.testing.assert_allclose(got, plan.response.sensitivity * plan.response.shape(frequency), rtol=1e-4)


def test_quakeml_tensor_is_the_double_couple(mixed):
    """Strike, dip and rake turned to a tensor by ObsPy's moment tensor code, against the tensor that was written."""
    from obspy.imaging.scripts.mopad import MomentTensor

    _, files, _ = mixed
    _, _, event = read(files)
    tensor = event.focal_mechanisms[0].moment_tensor
    t = tensor.tensor
    got = np.array([t.m_rr, t.m_tt, t.m_pp, t.m_rt, t.m_rp, t.m_tp]) / tensor.scalar_moment
    want = MomentTensor((65.0, 90.0, 0.0), system="NED").get_M("USE")
    np.testing.assert_allclose(got, [want[0, 0], want[1, 1], want[2, 2], want[0, 1], want[0, 2], want[1, 2]], atol=1e-6)


def test_truth(mixed):
    made, files, ground = mixed
    truth = json.loads(files.truth.read_text(encoding="utf-8"))
    rupture = truth["rupture"]
    assert (rupture["kind"], rupture["direction_deg"], rupture["length_km"]) == ("unilateral", 65.0, 15.0)
    assert rupture["speed_km_s"] == pytest.approx(2.8)
    assert sum(truth["sub_events"]["moment_nm"]) == pytest.approx(truth["event"]["moment_nm"])
    assert len(truth["sites"]) == len(ground.stations)
    assert truth["scenario"]["seed"] == made.seed


def test_same_seed_same_files(tmp_path):
    made = scenario([site()])
    a, b = simulate(made, tmp_path / "a"), simulate(made, tmp_path / "b")
    assert a.records[0].read_bytes() == b.records[0].read_bytes()
    assert a.truth.read_text() == b.truth.read_text()
    c = simulate(scenario([site()], seed=5), tmp_path / "c")
    assert a.records[0].read_bytes() != c.records[0].read_bytes()


def counts(faults, **changes):
    made = scenario([site(fault=faults, **changes)], **QUIET)
    ground = ground_motion(made)
    station = ground.stations[0]
    data = station_counts(station, ground.records[0], np.zeros_like(ground.records[0]), ground.sampling.step_s)
    return {COMPONENTS[c.component]: d.astype(float) for c, d in zip(station.channels, data, strict=True)}


@pytest.fixture(scope="module")
def sound():
    return counts([])


def test_turned_sensor(sound):
    """A sensor turned clockwise by 90 deg: its north axis points east."""
    got = counts([{"kind": "turned", "sensor": "translation", "angle_deg": 90.0}])
    np.testing.assert_allclose(got["acc_N"], sound["acc_E"], atol=1)
    np.testing.assert_allclose(got["acc_E"], -sound["acc_N"], atol=1)
    np.testing.assert_array_equal(got["rot_N"], sound["rot_N"])


def test_reversed_swapped_gain_and_dead(sound):
    got = counts(
        [
            {"kind": "swapped", "channels": ["rot_E", "rot_N"]},
            {"kind": "reversed", "channels": ["acc_Z"]},
            {"kind": "gain", "channels": ["acc_E"], "factor": 2.0},
            {"kind": "dead", "channels": ["acc_N"]},
        ]
    )
    np.testing.assert_array_equal(got["rot_E"], sound["rot_N"])
    np.testing.assert_array_equal(got["rot_N"], sound["rot_E"])
    np.testing.assert_array_equal(got["acc_Z"], -sound["acc_Z"])
    np.testing.assert_allclose(got["acc_E"], 2 * sound["acc_E"], atol=1)
    assert not got["acc_N"].any()


def test_clipped(sound):
    got = counts([{"kind": "clipped", "channels": ["rot_Z"], "share_of_peak": 0.4}])["rot_Z"]
    limit = np.abs(got).max()
    assert limit == pytest.approx(0.4 * np.abs(sound["rot_Z"]).max(), rel=1e-3)
    assert (np.abs(got) >= limit - 1).sum() > 5


def test_full_scale_clips_too():
    """A high-gain broadband sensor 15 km from a magnitude 7: beyond 13 mm/s it can only write full scale."""
    made = scenario([site(distance_km=15.0, translation="broadband", components="3C")], **QUIET)
    ground = ground_motion(made)
    data = station_counts(
        ground.stations[0], 20 * ground.records[0], np.zeros_like(ground.records[0]), ground.sampling.step_s
    )
    assert max(np.abs(d).max() for d in data) == 2**23 - 1


def test_late_and_gappy_channels(tmp_path):
    import obspy

    faults = [
        {"kind": "late", "sensor": "rotation", "seconds": 0.35},
        {"kind": "gappy", "channels": ["acc_N"], "start_s": 30.0, "length_s": 4.0},
    ]
    made = scenario([site(fault=faults)], **QUIET)
    files = simulate(made, tmp_path / "out")
    stream = obspy.read(str(files.records[0]))
    start = {t.stats.channel: t.stats.starttime for t in stream.sort(["starttime"], reverse=True)}
    assert start["BJZ"] - start["BNZ"] == pytest.approx(0.35)
    pieces = stream.select(channel="BNN").sort(["starttime"])
    assert len(pieces) == 2
    gap = pieces[1].stats.starttime - pieces[0].stats.endtime
    assert gap == pytest.approx(4.0 + 0.05, abs=0.051)
    origin = obspy.UTCDateTime(made.event.origin_time)
    assert pieces[1].stats.starttime - origin == pytest.approx(34.0, abs=0.05)
    truth = json.loads(files.truth.read_text(encoding="utf-8"))
    assert [f["kind"] for f in truth["sites"][0]["faults"]] == ["late", "gappy"]


def test_fault_of_one_sensor_of_an_array(tmp_path):
    made = scenario(
        [
            site(
                components="Z",
                array={"sensors": 3, "aperture_m": 200.0},
                fault=[{"kind": "dead", "channels": ["acc_Z"], "element": 2}],
            )
        ]
    )
    import obspy

    files = simulate(made, tmp_path / "out")
    flat = [not np.diff(obspy.read(str(p))[0].data).any() for p in files.records]
    assert flat == [False, True, False]


def test_noise_before_the_waves_has_the_sensors_level():
    made = scenario([site()], record={"before_s": 600.0, "length_s": 60.0, "rate_hz": 20.0})
    ground = ground_motion(made)
    noise = noise_at(ground.stations[0], made, ground.sampling.samples, ground.sampling.step_s)
    # 30 nrad/s/sqrt(Hz) up to 10 Hz, and an ambient rotation far below.
    assert noise[ROT_Z].std() == pytest.approx(30e-9 * np.sqrt(10.0), rel=0.03)


def test_sensors_of_an_array_share_the_ground_but_not_the_self_noise():
    made = scenario([site(components="Z", array={"sensors": 3, "aperture_m": 200.0})], noise={"ground_level": 1.0})
    ground = ground_motion(made)
    one, two = (noise_at(s, made, 4000, 0.05)[2] for s in ground.stations[:2])
    # Two self-noises of 1e-6 m/s^2/sqrt(Hz) up to 10 Hz; the shared ground noise is larger and drops out.
    assert np.std(one - two) == pytest.approx(np.sqrt(2 * 1e-12 * 10), rel=0.05)
    assert one.std() > 2 * np.std(one - two)


def test_second_simulation_into_one_folder(tmp_path):
    made = scenario([site()])
    simulate(made, tmp_path)
    with pytest.raises(InputError, match=r"already holds truth\.json"):
        simulate(made, tmp_path)
    simulate(made, tmp_path, overwrite=True)


def test_nothing_is_left_when_it_fails(tmp_path):
    made = scenario([site()], record={"high_hz": 12.0, "rate_hz": 20.0})
    with pytest.raises(InputError, match="half the sampling rate, 10 Hz"):
        simulate(made, tmp_path / "out")
    assert not (tmp_path / "out").exists()


def test_both_engines_simulate_the_same_earthquake(tmp_path):
    """Peak ground motion of the two engines agrees within a factor of two (the full one has surface waves besides)."""
    record = {"before_s": 10.0, "length_s": 60.0, "rate_hz": 5.0, "high_hz": 1.0}
    peaks = {}
    for engine in ("ray", "wavefield"):
        made = scenario([site()], engine=engine, record=record, **QUIET)
        peaks[engine] = np.abs(ground_motion(made).records[0]).max(axis=1)
    ratio = peaks["ray"] / peaks["wavefield"]
    assert (ratio > 0.3).all()
    assert (ratio < 2.0).all()
