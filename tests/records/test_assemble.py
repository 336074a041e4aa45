"""Files in, sites out: what a user's folder may hold."""

import json
from dataclasses import asdict, replace

import numpy as np
import obspy
import pytest
from obspy.core.inventory.response import InstrumentSensitivity

from rupture.errors import DataError, InputError
from rupture.records import RecordSettings, read_sites


def truth_at(world, site, east=0.0, north=0.0):
    t = site.times_s
    return np.vstack(
        [
            sum(w.translation(t, 2, east, north) for w in world.waves),
            sum(w.rotation(t, 1, east, north) for w in world.waves),
        ]
    )


def assert_matches(world, site, share=0.01, rows=range(6), **offset):
    truth = truth_at(world, site, **offset)
    for group in (slice(0, 3), slice(3, 6)):
        scale = np.abs(truth[group]).max()
        for row in set(range(*group.indices(6))) & set(rows):
            wrong = np.abs(site.data[row] - truth[row])[site.valid[row]]
            assert wrong.max() < share * scale, f"row {row}: {wrong.max() / scale:.3f}"


def row_of(found, channel):
    (row,) = [r for r in found.quality if r.channel == channel]
    return row


def test_six_components_come_back(world, six, event):
    data, metadata = world.write(six)
    found = read_sites([data], [metadata], event)
    (site,) = found.sites
    assert site.code == "XX.AAA"
    assert site.kind == "6C"
    assert site.step_s == 0.05
    assert site.start_s / site.step_s == pytest.approx(round(site.start_s / site.step_s), abs=1e-9)
    assert site.rotation_error_share == 0.0
    assert_matches(world, site)
    row = row_of(found, "XX.AAA..HJZ")
    assert row.used
    assert row.found.unit == "rad/s"
    assert row.found.rate_hz == 50.0
    assert row.done[0] == "full response removed from rad/s to rotation rate, water level 60 dB"
    assert row.snr > 100
    (verdict,) = found.verdicts
    assert verdict.used
    assert verdict.components == "6C"
    json.dumps([asdict(r) for r in found.quality] + [asdict(v) for v in found.verdicts], allow_nan=True)


@pytest.mark.parametrize(
    ("translation", "rotation"),
    [
        ({"unit": "m/s**2", "order": 2, "gain": 1e8}, {"unit": "rad", "order": 0, "gain": 1e12}),
        ({"unit": "m", "order": 0, "gain": 1e9}, {"unit": "rad/s**2", "order": 2, "gain": 1e11}),
        ({"unit": "nm/s", "scale": 1e-9, "gain": 1.0}, {"unit": "nrad/s", "scale": 1e-9, "gain": 1e3}),
    ],
    ids=["acceleration and angle", "displacement and rotational acceleration", "nano units"],
)
def test_any_unit_and_sensitivity_only(world, six, event, translation, rotation):
    instruments = [replace(six[0], **translation), replace(six[1], **rotation)]
    data, metadata = world.write(instruments)
    for response in ("full", "sensitivity"):
        (site,) = read_sites([data], [metadata], event, RecordSettings(response=response)).sites
        assert_matches(world, site, share=0.03)


@pytest.mark.parametrize(
    "angles",
    [
        ((40.0, 0.0), (130.0, 0.0), (0.0, 90.0)),  # turned, vertical flipped
        ((130.0, 0.0), (40.0, 0.0), (0.0, -90.0)),  # left-handed
        ((10.0, 5.0), (95.0, -3.0), (200.0, -80.0)),  # neither level nor square
    ],
    ids=["turned and flipped", "left-handed", "slanted"],
)
@pytest.mark.parametrize("codes", [("1", "2", "3"), ("N", "E", "Z")])
def test_orientation_comes_from_the_metadata(world, six, event, angles, codes):
    instruments = [
        replace(six[0], angles=angles, codes=tuple("HH" + c for c in codes)),
        replace(six[1], angles=angles, codes=tuple("HJ" + c for c in codes)),
    ]
    data, metadata = world.write(instruments)
    (site,) = read_sites([data], [metadata], event).sites
    assert_matches(world, site)


def test_sampling_rates_that_differ(world, six, event):
    instruments = [replace(six[0], rate=62.5, delay=0.0037), replace(six[1], rate=200.0)]
    data, metadata = world.write(instruments)
    (site,) = read_sites([data], [metadata], event).sites
    assert site.kind == "6C"
    assert_matches(world, site)


def test_wanted_sampling_rate(world, six, event):
    data, metadata = world.write(six)
    (site,) = read_sites([data], [metadata], event, RecordSettings(rate_hz=10.0)).sites
    assert site.step_s == 0.1
    assert site.band_hz[1] < 5.0


def test_rotation_sensor_of_another_station_close_by_joins(world, six, event):
    world.places["ROT"] = (20.5005, 35.3003, 100.0)  # about 55 m
    data, metadata = world.write([six[0], replace(six[1], station="ROT")])
    (site,) = read_sites([data], [metadata], event).sites
    assert (site.code, site.kind) == ("XX.AAA", "6C")
    with pytest.raises(DataError, match=r"no rotation channel anywhere: 1 sites.*nearest is XX.AAA at 0\.05"):
        read_sites([data], [metadata], event, RecordSettings(site_distance_m=20.0))


def test_vertical_rotation_alone(world, six, event):
    stream = world.records(six)
    for code in ("HJE", "HJN"):
        stream.remove(stream.select(channel=code)[0])
    data, metadata = world.write(six, stream)
    (site,) = read_sites([data], [metadata], event).sites
    assert site.kind == "3C+rotZ"
    assert_matches(world, site, rows=[0, 1, 2, 5])
    assert not site.data[3:5].any()


def test_no_rotation_channel_anywhere(world, six, event):
    data, metadata = world.write(six[:1])
    with pytest.raises(DataError, match="no rotation channel anywhere: 1 sites have translation alone"):
        read_sites([data], [metadata], event)
    found = read_sites([data], [metadata], event, RecordSettings(need_rotation=False))
    assert found.sites[0].kind == "3C"


def test_channel_without_metadata(world, six, event):
    data, metadata = world.write(six)
    inventory = world.inventory(six)
    inventory = inventory.remove(channel="HJE")
    inventory.write(str(metadata), format="STATIONXML")
    found = read_sites([data], [metadata], event)
    row = row_of(found, "XX.AAA..HJE")
    assert not row.used
    assert "no metadata for this channel" in row.reason
    assert found.sites[0].kind == "3C+rotNZ"


def test_metadata_that_do_not_cover_the_time(world, six, event):
    data, metadata = world.write(six, inventory=world.inventory(six, "2020-01-01", "2029-12-31"))
    with pytest.raises(DataError, match="the metadata cover 2020-01-01 to 2029-12-31, but not 2031-04-05"):
        read_sites([data], [metadata], event)


def test_epoch_of_the_event_is_used(world, six, event, tmp_path):
    data, metadata = world.write(six)
    old = world.inventory([replace(i, gain=7.0, angles=((0.0, 0.0),) * 3) for i in six], "2020-01-01", "2029-12-31")
    old.write(str(tmp_path / "old.xml"), format="STATIONXML")
    (site,) = read_sites([data], [tmp_path / "old.xml", metadata], event).sites
    assert_matches(world, site)


def broken_response(world, six, channel, **changes):
    inventory = world.inventory(six)
    for c in inventory[0][0]:
        if c.code == channel:
            for name, value in changes.items():
                setattr(c.response.instrument_sensitivity, name, value)
                if name == "input_units":
                    c.response.response_stages[0].input_units = value
    return inventory


def test_unknown_unit_and_zero_sensitivity(world, six, event):
    data, metadata = world.write(six, inventory=broken_response(world, six, "HJN", input_units="V"))
    found = read_sites([data], [metadata], event)
    assert "the input unit 'V' is not known" in row_of(found, "XX.AAA..HJN").reason
    broken_response(world, six, "HJN", value=0.0).write(str(metadata), format="STATIONXML")
    found = read_sites([data], [metadata], event)
    assert "the sensitivity is 0; correct it in the StationXML" in row_of(found, "XX.AAA..HJN").reason
    assert found.sites[0].kind == "3C+rotEZ"


def test_code_and_unit_that_contradict(world, six, event):
    data, metadata = world.write(six, inventory=broken_response(world, six, "HJN", input_units="m/s"))
    reason = row_of(read_sites([data], [metadata], event), "XX.AAA..HJN").reason
    assert "the channel code says rotation, the input unit 'm/s' is one of translation" in reason


@pytest.mark.parametrize(
    ("spoil", "said"),
    [
        (lambda x: np.full_like(x, 3.0), "dead channel"),
        (lambda x: np.where(np.arange(x.size) > 700, x[700], x), "flat channel"),
        (lambda x: np.full_like(x, np.nan), "no sample that is a number"),
        (lambda x: np.clip(x, -0.1, 0.1), "clipped"),
    ],
    ids=["dead", "flat", "NaN", "clipped"],
)
def test_bad_channel_narrows_the_site(world, six, event, spoil, said):
    stream = world.records(six)
    trace = stream.select(channel="HHN")[0]
    trace.data = spoil(trace.data)
    data, metadata = world.write(six, stream)
    found = read_sites([data], [metadata], event)
    assert said in row_of(found, "XX.AAA..HHN").reason
    assert found.sites[0].kind == "EZ+rot3"
    assert_matches(world, found.sites[0], rows=[0, 2, 3, 4, 5])


def test_bad_stretches_are_masked_and_the_rest_is_right(world, six, event):
    stream = world.records(six)
    (north,) = stream.select(channel="HHN")
    north.data[2000:2050] = np.nan  # before P: 20 s before the origin time
    (vertical,) = stream.select(channel="HJZ")
    vertical.data[1500] += 1e9
    gap = stream.select(channel="HHE")[0]
    stream.remove(gap)
    stream += obspy.Stream(
        [gap.slice(endtime=gap.stats.starttime + 150), gap.slice(starttime=gap.stats.starttime + 190)]
    )
    data, metadata = world.write(six, stream)
    found = read_sites([data], [metadata], event)
    (site,) = found.sites
    assert_matches(world, site, share=0.02)
    t = site.times_s
    assert not site.valid[1, (t > -20) & (t < -19)].any()
    assert not site.valid[5, (t > -30.5) & (t < -29.5)].any()
    assert not site.valid[0, (t > 90) & (t < 130)].any()
    assert "50 samples that are not numbers masked" in row_of(found, "XX.AAA..HHN").missing
    assert "1 gaps of 39.98 s in all masked" in row_of(found, "XX.AAA..HHE").missing


def test_record_that_starts_after_s(world, six, event):
    world.start = 60.0
    data, metadata = world.write(six)
    with pytest.raises(DataError, match=r"the record starts 60\.0 s after the origin, after S \(about 1\d\.\d s\)"):
        read_sites([data], [metadata], event)


def test_strong_motion_serves_where_the_broadband_clips(world, six, event):
    strong = replace(six[0], codes=("HNE", "HNN", "HNZ"), unit="m/s**2", order=2, gain=1e7)
    stream = world.records([*six, strong])
    found = read_sites(*([path] for path in world.write([*six, strong], stream)), event)
    assert "another sensor of the station is used: XX.AAA..HH" in row_of(found, "XX.AAA..HNZ").reason
    for trace in stream.select(channel="HH?"):
        top = 0.4 * np.abs(trace.data).max()
        trace.data = np.clip(trace.data, -top, top)
    found = read_sites(*([path] for path in world.write([*six, strong], stream)), event)
    assert row_of(found, "XX.AAA..HHZ").reason.endswith("XX.AAA..HN (it clips)")
    assert_matches(world, found.sites[0])


def test_array_becomes_a_site(world, six, event):
    rng = np.random.default_rng(11)
    spots = {f"S{i}": tuple(rng.uniform(-150, 150, 2)) for i in range(7)}
    plane = obspy.geodetics.kilometers2degrees(0.001)
    for name, (east, north) in spots.items():
        lat = 35.3 + north * plane
        world.places[name] = (20.5 + east * plane / np.cos(np.radians(35.3)), lat, 100.0)
        world.offsets[name] = (east, north)
    sensors = [replace(six[0], station=name, rate=25.0) for name in spots]
    data, metadata = world.write(sensors)
    for settings in (RecordSettings(), RecordSettings(arrays=(tuple(spots),), automatic_arrays=False)):
        found = read_sites([data], [metadata], event, settings)
        (site,) = found.sites
        assert site.kind == "6C"
        assert 0.01 < site.rotation_error_share <= 0.101
        assert 0.5 < site.band_hz[1] < 10.0
        east, north = np.mean(list(spots.values()), axis=0)
        assert_matches(world, site, share=0.06, east=east, north=north)
        assert "aperture" in found.verdicts[0].summary


def test_array_outside_its_range_is_refused_with_the_range(world, six, event):
    for i, (lon, lat) in enumerate([(20.5, 35.3), (20.9, 35.3), (20.7, 35.6), (20.6, 35.4)]):
        world.places[f"S{i}"] = (lon, lat, 100.0)
    data, metadata = world.write([replace(six[0], station=f"S{i}") for i in range(4)])
    settings = RecordSettings(arrays=(("S0", "S1", "S2", "S3"),), need_rotation=False)
    found = read_sites([data], [metadata], event, settings)
    (verdict,) = found.verdicts
    assert not verdict.used
    assert "km: its rotation is within 10 % up to 0.0" in verdict.reason
    with pytest.raises(InputError, match="station NONE has no usable translation record"):
        read_sites([data], [metadata], event, RecordSettings(arrays=(("S0", "S1", "NONE"),)))


def test_settings_that_make_no_sense():
    with pytest.raises(InputError, match="an array needs three stations"):
        RecordSettings(arrays=(("A", "B"),))
    with pytest.raises(InputError, match="'full' or 'sensitivity'"):
        RecordSettings(response="some")
    with pytest.raises(InputError, match="before_s"):
        RecordSettings(before_s=-1.0)


def test_overall_sensitivity_alone_is_enough(world, six, event):
    inventory = world.inventory(six)
    for channel in inventory[0][0]:
        channel.response.response_stages = []
        old = channel.response.instrument_sensitivity
        channel.response.instrument_sensitivity = InstrumentSensitivity(old.value, 1.0, old.input_units, "counts")
    data, metadata = world.write(six, inventory=inventory)
    found = read_sites([data], [metadata], event)
    assert_matches(world, found.sites[0])
    assert "no response stages: sensitivity only" in row_of(found, "XX.AAA..HHZ").missing
