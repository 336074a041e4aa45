"""Mistakes of users: a sentence that names the place, the right exit status, nothing half-written."""

import json

import numpy as np
import obspy
import pytest

from rupture.records import event_from_origin
from rupture.synthetic.simulate import simulate
from tests.pipeline.conftest import Given, scenario

QUICK = "[fit]\nparticles = 60\nmoves = 1\nresamples = 0\n[null_tests]\nruptures = 0\n[energy]\non = false\n"


def refused(run, out, arguments, status=2):
    code, _, err = run("track", *arguments, "--no-null-tests", "--quiet", "--out", out)
    assert code == status, err
    assert not out.exists()
    return err


def every_trace(given, change, pattern="*.mseed"):
    for path in sorted((given.folder / "records").glob(pattern)):
        stream = obspy.read(str(path))
        stream = obspy.Stream([t for t in (change(trace) for trace in stream) if t is not None])
        path.unlink()
        if len(stream):
            floating = any(trace.data.dtype.kind == "f" for trace in stream)
            for trace in stream:
                trace.stats.pop("mseed", None)
                if floating:
                    trace.data = trace.data.astype(np.float32)
            stream.write(str(path), format="MSEED")


def edit_inventory(given, change):
    path = given.folder / "inventory.xml"
    inventory = obspy.read_inventory(str(path))
    for network in inventory:
        for station in network:
            for channel in station:
                change(station, channel)
    inventory.write(str(path), format="STATIONXML")


def test_no_rotation_anywhere(given, run, tmp_path):
    every_trace(given, lambda trace: None if trace.stats.channel[1] == "J" else trace)
    assert "rotation" in refused(run, tmp_path / "out", given.arguments, status=1)


def test_only_one_site_needs_a_trace(given, run, tmp_path):
    for path in sorted((given.folder / "records").glob("*.mseed"))[1:]:
        path.unlink()
    err = refused(run, tmp_path / "out", given.arguments, status=1)
    assert "only one site" in err
    assert "--trace" in err
    trace = tmp_path / "fault.geojson"
    trace.write_text(json.dumps({"type": "LineString", "coordinates": [[11.6, 39.8], [12.5, 40.25]]}))
    job = tmp_path / "job.toml"
    job.write_text(QUICK)
    code, out, _ = run("track", job, *given.arguments, "--trace", trace, "--quiet", "--out", tmp_path / "one")
    assert code == 0
    assert "1 site" in out


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("[map]\nspacng_km = 3\n", "did you mean 'spacing_km'"),
        ("[mapp]\n", "did you mean 'map'"),
        ("[map]\nspacing_km = 'three'\n", "spacing_km"),
        ("seed = -1\n", "seed"),
        ("[map\n", "not valid TOML"),
    ],
)
def test_job_file(given, run, tmp_path, text, words):
    job = tmp_path / "job.toml"
    job.write_text(text)
    err = refused(run, tmp_path / "out", [job, *given.arguments])
    assert words in err
    assert "job.toml" in err


def test_missing_inputs(given, run, tmp_path):
    assert "--records" in refused(run, tmp_path / "out", given.arguments[2:])
    assert "--event" in refused(run, tmp_path / "out", given.arguments[:-2])
    assert "none.xml" in refused(run, tmp_path / "out", [*given.arguments[:-1], given.folder / "none.xml"])
    assert "mars" in refused(run, tmp_path / "out", [*given.arguments, "--earth", "mars"])


def test_text_and_truncated_files(given, run, tmp_path):
    bad = given.folder / "records" / "notes.mseed"
    bad.write_text("these are notes, not records")
    code, _, err = run("check", *given.arguments, "--quiet")
    assert code in (0, 2)
    if code == 2:
        assert "notes.mseed" in err
    bad.unlink()
    first = sorted((given.folder / "records").glob("*.mseed"))[0]
    content = first.read_bytes()
    first.write_bytes(content[: len(content) // 2 + 100])
    code, out, err = run("check", *given.arguments, "--quiet", "--json")
    assert code in (0, 2)
    assert "S1" in out + err


def test_event_without_depth(given, run, tmp_path):
    path = given.folder / "event.xml"
    catalog = obspy.read_events(str(path))
    catalog[0].origins[0].depth = None
    catalog.write(str(path), format="QUAKEML")
    err = refused(run, tmp_path / "out", given.arguments)
    assert "depth" in err
    assert "event.xml" in err


@pytest.mark.parametrize("fault", ["unit", "sensitivity", "nan", "missing", "late", "epoch"])
def test_one_bad_channel_is_told_and_does_not_stop_the_run(given, run, fault):
    def metadata(station, channel):
        if station.code == "S1" and channel.code.endswith("N") and channel.code[1] == "J":
            if fault == "unit":
                channel.response.instrument_sensitivity.input_units = "furlong"
                for stage in channel.response.response_stages[:1]:
                    stage.input_units = "furlong"
            if fault == "sensitivity":
                channel.response.instrument_sensitivity.value = 0.0
            if fault == "epoch":
                channel.end_date = obspy.UTCDateTime(2000, 1, 1)
                channel.start_date = obspy.UTCDateTime(1999, 1, 1)

    def record(trace):
        if trace.stats.station != "S1":
            return trace
        if fault == "nan" and trace.stats.channel.endswith("N") and trace.stats.channel[1] == "J":
            trace.data = trace.data.astype(np.float32)
            trace.data[500:600] = np.nan
        if fault == "late":
            trace.trim(obspy.UTCDateTime(2031, 5, 14, 3, 22, 7))
        return trace

    edit_inventory(given, metadata)
    if fault in ("nan", "late"):
        every_trace(given, record)
    if fault == "missing":
        inventory = obspy.read_inventory(str(given.folder / "inventory.xml"))
        inventory.remove(station="S1").write(str(given.folder / "inventory.xml"), format="STATIONXML")
    code, out, err = run("check", *given.arguments, "--quiet", "--json")
    assert code == 0, err
    found = json.loads(out)
    channels = [c for c in found["channels"] if "S1" in (c["channel"] + c["site"])]
    told = " ".join(c["reason"] + c["missing"] for c in channels) + " ".join(s["reason"] for s in found["sites"])
    assert told.strip()


def test_an_earlier_run_is_kept(given, run, tmp_path):
    out = tmp_path / "out"
    out.mkdir()
    (out / "result.nc").write_text("earlier")
    code, _, err = run("track", *given.arguments, "--quiet", "--out", out)
    assert code == 2
    assert "--overwrite" in err
    assert (out / "result.nc").read_text() == "earlier"


@pytest.mark.parametrize(("longitude", "latitude"), [(179.95, -17.0), (20.0, 89.0)])
def test_date_line_and_pole(run, tmp_path, longitude, latitude):
    simulate(scenario(longitude, latitude), tmp_path / "input")
    job = tmp_path / "job.toml"
    job.write_text(QUICK)
    given = Given(tmp_path / "input")
    code, out, err = run("track", job, *given.arguments, "--quiet", "--json", "--out", tmp_path / "out")
    assert code == 0, err
    found = json.loads(out)["rupture"]
    turned = (found["direction_deg"]["best"] - 60.0 + 180.0) % 360.0 - 180.0
    assert abs(turned) < 25.0


def test_site_on_the_epicentre(run, tmp_path):
    simulate(scenario(sites=((0.5, 0), (80, 140), (75, 250))), tmp_path / "input")
    given = Given(tmp_path / "input")
    job = tmp_path / "job.toml"
    job.write_text(QUICK)
    where = json.loads((tmp_path / "input" / "truth.json").read_text())
    assert where
    inventory = obspy.read_inventory(str(tmp_path / "input" / "inventory.xml"))
    on_top = inventory.select(station="S1")[0][0]
    given_origin = ["--origin", "2031-05-14T03:21:07", on_top.longitude, on_top.latitude, 10.0, "--magnitude", 6.5]
    assert event_from_origin(*map(str, given_origin[1:5])).depth_km == 10.0
    code, _, err = run("track", job, *given.arguments[:-2], *given_origin, "--quiet", "--out", tmp_path / "out")
    assert code == 0, err
