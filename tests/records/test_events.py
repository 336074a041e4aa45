from datetime import UTC, datetime

import obspy
import pytest
from obspy.core.event import (
    Catalog,
    Event,
    EventDescription,
    FocalMechanism,
    Magnitude,
    NodalPlane,
    NodalPlanes,
    Origin,
)

from rupture.errors import InputError, RecordWarning
from rupture.records import event_from_origin, read_event


@pytest.fixture
def quakeml(tmp_path):
    def write(*events):
        path = tmp_path / "event.xml"
        Catalog(list(events)).write(str(path), format="QUAKEML")
        return path

    return write


def origin(**changes):
    values = {
        "time": obspy.UTCDateTime(2031, 4, 5, 6, 7, 8.25),
        "longitude": 179.9,
        "latitude": -12.0,
        "depth": 15500.0,
    }
    return Origin(**(values | changes))


def test_all_of_an_event(quakeml):
    first, second = origin(depth=1000.0), origin()
    planes = NodalPlanes(NodalPlane(10.0, 20.0, 30.0), NodalPlane(200.0, 70.0, -100.0), preferred_plane=2)
    event = Event(
        origins=[first, second], magnitudes=[Magnitude(mag=6.1, magnitude_type="mb"), Magnitude(mag=6.6, magnitude_type="Mww")],
        focal_mechanisms=[FocalMechanism(nodal_planes=planes)], event_descriptions=[EventDescription("invented")],
    )  # fmt: skip
    event.preferred_origin_id = second.resource_id
    found = read_event(quakeml(event))
    assert found.origin_time == datetime(2031, 4, 5, 6, 7, 8, 250000, tzinfo=UTC)
    assert (found.longitude_deg, found.latitude_deg, found.depth_km) == (179.9, -12.0, 15.5)
    assert found.magnitude == 6.6
    assert found.mechanism_deg == (200.0, 70.0, -100.0)
    assert found.name == "invented"


def test_preferred_magnitude_wins(quakeml):
    chosen = Magnitude(mag=6.1, magnitude_type="mb")
    event = Event(origins=[origin()], magnitudes=[Magnitude(mag=6.6, magnitude_type="Mw"), chosen])
    event.preferred_magnitude_id = chosen.resource_id
    assert read_event(quakeml(event)).magnitude == 6.1


@pytest.mark.parametrize("name", ["depth"])
def test_origin_that_lacks_something(quakeml, name):
    with pytest.raises(InputError, match=rf"event\.xml: the origin has no {name}; add it .*--origin"):
        read_event(quakeml(Event(origins=[origin(**{name: None})])))


def test_no_origin_no_event_several_events(quakeml):
    with pytest.raises(InputError, match="no origin"):
        read_event(quakeml(Event()))
    with pytest.raises(InputError, match="holds no event"):
        read_event(quakeml())
    path = quakeml(
        Event(resource_id="smi:local/one", origins=[origin()]),
        Event(resource_id="smi:local/two", origins=[origin(depth=3000.0)]),
    )
    with pytest.raises(InputError, match="holds 2 events"):
        read_event(path)
    assert read_event(path, "two").depth_km == 3.0


def test_above_sea_level(quakeml):
    with pytest.warns(RecordWarning, match=r"0\.40 km above sea level"):
        assert read_event(quakeml(Event(origins=[origin(depth=-400.0)]))).depth_km == 0.0


def test_not_an_event_file(tmp_path):
    path = tmp_path / "event.xml"
    path.write_text("nothing", encoding="utf-8")
    with pytest.raises(InputError, match=r"event\.xml: ObsPy cannot read this"):
        read_event(path)
    with pytest.raises(InputError, match="no such event file"):
        read_event(tmp_path / "absent.xml")


def test_origin_by_hand():
    found = event_from_origin("2031-04-05T08:07:08+02:00", "-170", "5.5", "33")
    assert found.origin_time == datetime(2031, 4, 5, 6, 7, 8, tzinfo=UTC)
    assert found.longitude_deg == -170.0


@pytest.mark.parametrize(
    ("values", "said"),
    [
        (("yesterday", 1, 2, 3), "origin time 'yesterday'"),
        (("2031-04-05", "east", 2, 3), "longitude 'east'"),
        (("2031-04-05", 1, "nan", 3), "latitude 'nan'"),
        (("2031-04-05", 1, 2, "deep"), "depth 'deep'"),
        (("2031-04-05", 1, 95, 3), "latitude 95"),
    ],
)
def test_origin_by_hand_that_is_wrong(values, said):
    with pytest.raises(InputError, match=said):
        event_from_origin(*values)
