"""Clock and digitiser notes against ObsPy's own reading of its test files."""

from pathlib import Path

import obspy
import pytest
from obspy.io.mseed.util import get_flags

from rupture.records import RecordSettings, read_sites
from rupture.records.headers import read_headers

FOLDER = Path(obspy.__file__).parent / "io/mseed/tests/data"


@pytest.mark.parametrize("name", ["timingquality.mseed", "qualityflags.mseed", "test.mseed"])
def test_against_obspy(name):
    path = FOLDER / name
    trace = obspy.read(str(path), headonly=True)[0]
    stats = trace.stats.mseed
    found = read_headers(path, stats.record_length, stats.byteorder == ">", 0.0, 4e9)[trace.id]
    flags = get_flags(str(path))
    assert found.records == flags["record_count"]
    assert found.timing_quality_percent == (flags["timing_quality"] or {"min": None})["min"]
    counts = flags["data_quality_flags_counts"]
    assert found.unsure_time == counts["suspect_time_tag"]
    most = counts["amplifier_saturation"] + counts["digitizer_clipping"]
    assert max(counts["amplifier_saturation"], counts["digitizer_clipping"]) <= found.clipped <= most


def test_stretch_of_interest():
    path = FOLDER / "timingquality.mseed"
    trace = obspy.read(str(path), headonly=True)[0]
    start = trace.stats.starttime.timestamp
    few = read_headers(path, 512, True, start, start + 5)
    assert few[trace.id].records < 101
    assert read_headers(path, 512, True, 0.0, 1.0) == {}


def test_table_names_a_poor_clock(world, six, event):
    stream = world.records(six)
    data, metadata = world.write(six, stream)
    raw = bytearray(data.read_bytes())
    length = obspy.read(str(data), headonly=True)[0].stats.mseed.record_length
    for start in range(0, len(raw), length):
        # A blockette 1001 behind the 1000: type, next, timing quality 35 %.
        raw[start + 50 : start + 52] = (56).to_bytes(2, "big")
        raw[start + 56 : start + 64] = (1001).to_bytes(2, "big") + (0).to_bytes(2, "big") + bytes([35, 0, 0, 0])
        raw[start + 39] = 2
    data.write_bytes(raw)
    found = read_sites([data], [metadata], event, RecordSettings())
    row = next(r for r in found.quality if r.channel.endswith("HHZ"))
    assert row.found.timing_quality_percent == 35.0
    assert "timing quality falls to 35 %" in row.missing
