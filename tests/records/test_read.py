import numpy as np
import obspy
import pytest

from rupture.errors import DataError, InputError, RecordWarning
from rupture.records.read import read_channels, read_inventories, record_files


def read(path, event, before=60.0, after=120.0):
    return read_channels(record_files([path]), event, before, after)


@pytest.fixture
def written(world, six):
    data, metadata = world.write(six, world.records(six))
    return data, metadata


def test_times_count_from_the_origin(written, event):
    found = read(written[0], event)
    assert list(found) == [f"XX.AAA..{c}" for c in ("HHE", "HHN", "HHZ", "HJE", "HJN", "HJZ")]
    segment = found["XX.AAA..HHZ"].segments[0]
    assert segment.start_s == pytest.approx(-60.0)
    assert segment.end_s == pytest.approx(120.0, abs=0.03)


def test_text_in_place_of_records(tmp_path, event):
    path = tmp_path / "records.mseed"
    path.write_text("time,amplitude\n0,1\n", encoding="utf-8")
    with pytest.raises(InputError, match=r"records\.mseed: this is a text file, not miniSEED"):
        read(path, event)


def test_xml_in_place_of_records(written, event):
    with pytest.raises(InputError, match="belong to --inventory"):
        read(written[1], event)


def test_miniseed_3(tmp_path, event):
    """Header of the FDSN miniSEED 3 definition: 'MS', then the version as one byte."""
    path = tmp_path / "new.mseed3"
    path.write_bytes(b"MS\x03" + bytes(200))
    with pytest.raises(InputError, match=r"new\.mseed3: this is miniSEED version 3"):
        read(path, event)


def test_empty_file(tmp_path, event):
    path = tmp_path / "none.mseed"
    path.touch()
    with pytest.raises(InputError, match=r"none\.mseed: the file is empty"):
        read(path, event)


def test_truncated_in_a_later_record_keeps_the_whole_ones(written, event):
    whole = written[0].read_bytes()
    written[0].write_bytes(whole[: len(whole) // 6 + 100])
    found = read(written[0], event)
    assert any("cut off" in note for channel in found.values() for note in channel.notes)
    assert sum(s.samples.size for c in found.values() for s in c.segments) > 1000


def test_truncated_in_the_first_record(written, event):
    written[0].write_bytes(written[0].read_bytes()[:100])
    with pytest.raises(InputError, match=r"records\.mseed: the miniSEED data are damaged or cut off"):
        read(written[0], event)


def test_missing_file_and_empty_folder(tmp_path):
    with pytest.raises(InputError, match="no such record file"):
        record_files([tmp_path / "nothing*.mseed"])
    with pytest.raises(InputError, match="no record files"):
        record_files([tmp_path])


def test_folder_skips_what_is_no_record_and_says_so(written, event):
    (written[0].parent / "notes").write_text("a note", encoding="utf-8")
    with pytest.warns(RecordWarning, match=r"1 files of the folder were left out.*notes"):
        found = read(written[0].parent, event)
    assert len(found) == 6


def test_glob(written, event):
    assert len(read(str(written[0].parent / "*.mseed"), event)) == 6


def test_records_of_another_day(written, event):
    stream = obspy.read(str(written[0]))
    for trace in stream:
        trace.stats.starttime += 86400
    stream.write(str(written[0]), format="MSEED")
    with pytest.raises(DataError, match="the records cover 2031-04-06"):
        read(written[0], event)


def test_nan_and_masked_samples_split(world, six, event):
    stream = world.records(six)
    stream[0].data[5000:5003] = np.nan
    data, _ = world.write(six, stream)
    channel = read(data, event)["XX.AAA..HHE"]
    assert [s.samples.size for s in channel.segments] == [5000, 9001 - 5003]
    assert channel.notes == ("3 samples that are not numbers masked",)


def test_overlaps_that_agree_join_and_those_that_do_not_are_masked(world, six, event):
    trace = world.records(six)[0]
    a, b = trace.slice(endtime=trace.stats.starttime + 100), trace.slice(starttime=trace.stats.starttime + 90)
    same = read(world.write(six, obspy.Stream([a, b]))[0], event)["XX.AAA..HHE"]
    assert len(same.segments) == 1
    assert same.notes == ()
    b.data = b.data + 5.0
    differ = read(world.write(six, obspy.Stream([a, b]))[0], event)["XX.AAA..HHE"]
    assert len(differ.segments) == 2
    assert "10.02 s of overlapping records that contradict each other masked" in differ.notes
    first, second = differ.segments
    assert second.start_s - first.end_s == pytest.approx(10.04, abs=0.03)


def test_a_rate_that_changes(world, six, event):
    trace = world.records(six)[0]
    a, b = trace.slice(endtime=trace.stats.starttime + 30), trace.slice(starttime=trace.stats.starttime + 40)
    a.decimate(2, no_filter=True)
    found = read(world.write(six, obspy.Stream([a, b]))[0], event)["XX.AAA..HHE"]
    assert found.segments[0].rate_hz == 50.0
    assert "only the part at 50 Hz" in found.notes[0]


def test_sac_is_read_too(world, six, event, tmp_path):
    path = tmp_path / "one.sac"
    world.records(six)[2].write(str(path), format="SAC")
    assert list(read(path, event)) == ["XX.AAA..HHZ"]


def test_inventory_that_is_none(tmp_path):
    path = tmp_path / "stations.xml"
    path.write_text("<html/>", encoding="utf-8")
    with pytest.raises(InputError, match=r"stations\.xml: ObsPy cannot read this as station metadata"):
        read_inventories([path])
    with pytest.raises(InputError, match="no such station metadata"):
        read_inventories([tmp_path / "absent.xml"])
    with pytest.raises(InputError, match="no station metadata"):
        read_inventories([])
