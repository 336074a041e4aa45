"""Small events from all around say what one large event cannot."""

from dataclasses import replace
from datetime import timedelta

import numpy as np
import obspy
import pytest
from obspy.core.event import Catalog, Origin
from obspy.core.event import Event as QuakeEvent

from rupture.errors import DataError, InputError, RecordWarning
from rupture.geodesy import destination, distance_azimuth
from rupture.records import CorrectionSettings, RecordSettings, calibrate, read_events, read_sites
from rupture.records.arrivals import first_arrivals

SETTINGS = RecordSettings(before_s=60.0, after_s=110.0)
TURN = 9.0


@pytest.fixture
def small(kit, tmp_path, six, event):
    """Five small events around a site whose rotation sensor stands 9 deg off, and the large one."""
    lon, lat, _ = kit.World(tmp_path, []).places["AAA"]
    events, stream = [], obspy.Stream()
    for number, azimuth in enumerate([20.0, 95.0, 160.0, 230.0, 300.0]):
        there = destination(lon, lat, np.radians(azimuth), 55e3)
        quake = replace(
            event, longitude_deg=float(there[0]), latitude_deg=float(there[1]),
            origin_time=event.origin_time - timedelta(hours=number + 1),
        )  # fmt: skip
        times = first_arrivals(55e3, quake.depth_km)
        _, _, back = distance_azimuth(*there, lon, lat)
        waves = kit.rough_waves(40 + number, float(np.degrees(back)), times.p_s, times.s_s)
        world = kit.World(tmp_path, waves, length=180.0, seed=number)
        tilted = [replace(six[0], rate=25.0), replace(six[1], rate=25.0, azimuth_error=TURN)]
        part = world.records(tilted)
        for trace in part:
            trace.stats.starttime -= 3600.0 * (number + 1)
        stream += part
        events.append(quake)
    data, metadata = world.write([replace(s, rate=25.0) for s in six], stream)
    return events, data, metadata


def test_turn_is_measured_better_than_by_one_event(small):
    events, data, metadata = small
    steps = []
    found = calibrate(events, [data], [metadata], SETTINGS, lambda done, total: steps.append((done, total)))
    turn, error = found["XX.AAA"].turn_deg
    assert turn == pytest.approx(TURN, abs=3.0)
    single = read_sites([data], [metadata], events[0], replace(SETTINGS, corrections=CorrectionSettings(*(False,) * 6)))
    (alone,) = [c for c in single.verdicts[0].corrections if c.kind == "relative turn"]
    assert error < 0.7 * alone.uncertainty
    assert found["XX.AAA"].events == 5
    assert steps[-1] == (5, 5)
    # One event alone leaves this turn uncorrected; with the others it is sure.
    with_others = read_sites([data], [metadata], events[0], SETTINGS, calibration=found)
    (sure,) = [c for c in with_others.verdicts[0].corrections if c.kind == "relative turn"]
    assert sure.applied
    assert sure.uncertainty < alone.uncertainty


def test_event_without_records_is_left_out(small):
    events, data, metadata = small
    later = replace(events[0], origin_time=events[0].origin_time + timedelta(days=3))
    with pytest.warns(RecordWarning, match="event of 2031-04-08 .* left out"):
        found = calibrate([later, events[1]], [data], [metadata], SETTINGS)
    assert found["XX.AAA"].events == 1
    with pytest.warns(RecordWarning), pytest.raises(DataError, match="none of the 1 events"):
        calibrate([later], [data], [metadata], SETTINGS)


def test_list_of_events(tmp_path):
    path = tmp_path / "small.xml"
    origins = [Origin(time=obspy.UTCDateTime(2031, 1, d), longitude=1.0, latitude=2.0, depth=3e3) for d in (1, 2)]
    Catalog([QuakeEvent(origins=[o]) for o in origins]).write(str(path), format="QUAKEML")
    assert [e.origin_time.day for e in read_events(path)] == [1, 2]
    Catalog([]).write(str(path), format="QUAKEML")
    with pytest.raises(InputError, match="holds no event"):
        read_events(path)
