"""SDS archives, and a small server of the FDSN web-service specification 1.2 on the loopback interface."""

import io
import json
import threading
from http.server import BaseHTTPRequestHandler, ThreadingHTTPServer
from urllib.parse import parse_qs, urlparse

import obspy
import pytest
from obspy.clients.filesystem.sds import Client as ArchiveClient

from rupture.errors import DataError, InputError
from rupture.records import FdsnSource, FetchSettings, read_event, read_sites, sds_files
from rupture.records.sources import resolve

WADL = """<?xml version="1.0"?><application xmlns="http://wadl.dev.java.net/2009/02"
 xmlns:xs="http://www.w3.org/2001/XMLSchema"><resources base="BASE/fdsnws/SERVICE/1/"><resource path="query">
<method id="query" name="GET"><request>PARAMETERS</request></method><method id="postQuery" name="POST"/>
</resource></resources></application>"""
PARAMETERS = {
    "station": "starttime endtime network station location channel minlatitude maxlatitude minlongitude maxlongitude"
    " latitude longitude minradius maxradius level format",
    "dataselect": "starttime endtime network station location channel quality minimumlength longestonly",
    "event": "starttime endtime eventid minlatitude maxlatitude minlongitude maxlongitude mindepth maxdepth"
    " minmagnitude maxmagnitude orderby latitude longitude maxradius format",
}


class Service:
    """What the server answers and what it was asked."""

    def __init__(self, event, inventory, stream):
        self.event, self.inventory, self.stream = event, inventory, stream
        self.asked, self.failures = [], 0
        self.url = ""


@pytest.fixture
def service(world, six, event, tmp_path):
    world.places["BBB"] = (20.9, 35.1, 50.0)
    from dataclasses import replace

    instruments = [*six, *(replace(s, station="BBB") for s in six)]
    quake = obspy.core.event.Event(
        resource_id="smi:invented/quake7",
        origins=[
            obspy.core.event.Origin(
                time=obspy.UTCDateTime(event.origin_time), longitude=20.0, latitude=35.0, depth=12000.0
            )
        ],
    )
    made = Service(obspy.core.event.Catalog([quake]), world.inventory(instruments), world.records(instruments))

    class Handler(BaseHTTPRequestHandler):
        def do_GET(self):
            parts = urlparse(self.path)
            _, _, name, _, what = parts.path.split("/")
            query = {key: values[0] for key, values in parse_qs(parts.query).items()}
            if what == "application.wadl":
                listed = "".join(
                    f'<param name="{p}" style="query" type="xs:string"/>' for p in PARAMETERS[name].split()
                )
                text = WADL.replace("BASE", made.url).replace("SERVICE", name).replace("PARAMETERS", listed)
                return self.answer(200, text.encode(), "application/xml")
            if what == "version":
                return self.answer(200, b"1.2.0", "text/plain")
            if what != "query":
                return self.answer(404, b"")
            return self.query(name, query, b"")

        def do_POST(self):
            body = self.rfile.read(int(self.headers["Content-Length"]))
            self.query(urlparse(self.path).path.split("/")[2], {}, body)

        def query(self, name, query, body):
            made.asked.append((name, query or body.decode()))
            if made.failures > 0:
                made.failures -= 1
                return self.answer(503, b"busy")
            buffer = io.BytesIO()
            if name == "event":
                if query.get("eventid") == "refuse":
                    return self.answer(400, b"no such parameter")
                if query.get("eventid") != "quake7":
                    return self.answer(204, b"")
                made.event.write(buffer, format="QUAKEML")
            elif name == "station":
                if float(query["maxradius"]) < 0.1:
                    return self.answer(204, b"")
                made.inventory.write(buffer, format="STATIONXML")
            else:
                wanted = obspy.Stream()
                for line in body.decode().splitlines():
                    fields = line.split()
                    if len(fields) == 6:
                        network, station, location, channel, start, end = fields
                        wanted += made.stream.select(network, station, location.replace("--", ""), channel).slice(
                            obspy.UTCDateTime(start), obspy.UTCDateTime(end)
                        )
                if not wanted:
                    return self.answer(204, b"")
                wanted.write(buffer, format="MSEED")
            return self.answer(200, buffer.getvalue())

        def answer(self, code, data, kind="application/octet-stream"):
            self.send_response(code)
            if code != 204:
                self.send_header("Content-Type", kind)
                self.send_header("Content-Length", str(len(data)))
            self.end_headers()
            if code != 204:
                self.wfile.write(data)

        def log_message(self, *_):
            pass

    server = ThreadingHTTPServer(("127.0.0.1", 0), Handler)
    made.url = f"http://127.0.0.1:{server.server_port}"
    thread = threading.Thread(target=server.serve_forever, daemon=True)
    thread.start()
    yield made
    server.shutdown()
    thread.join()
    server.server_close()


def source(service, folder, **settings):
    waits = []
    made = FdsnSource(f"fdsn:{service.url}", folder, FetchSettings(wait_s=0.25, **settings), sleep=waits.append)
    return made, waits


def test_fetched_files_become_sites(service, tmp_path):
    steps = []
    made, _ = source(service, tmp_path / "cache")
    found = made.fetch("quake7", 60.0, lambda done, total: steps.append((done, total)))
    event = read_event(found.event)
    assert event.depth_km == 12.0
    sites = read_sites(found.records, [found.inventory], event).sites
    assert [s.kind for s in sites] == ["6C", "6C"]
    assert steps == [(1, 2), (2, 2)]
    asked = dict(service.asked)
    assert asked["station"]["channel"] == "?H?,?L?,?N?,?P?,?J?"
    assert asked["station"]["level"] == "response"
    ledger = json.loads((tmp_path / "cache" / "requests.json").read_text())
    assert set(ledger) == {"event_quake7.xml", "stations.xml", "records/XX.AAA.mseed", "records/XX.BBB.mseed"}
    assert ledger["event_quake7.xml"]["request"] == {"eventid": "quake7"}
    assert len(ledger["stations.xml"]["sha256"]) == 64


def test_second_run_needs_no_network(service, tmp_path):
    first = source(service, tmp_path)[0].fetch("quake7", 60.0)
    service.asked.clear()
    second, _ = source(service, tmp_path)
    assert second.fetch("quake7", 60.0) == first
    assert service.asked == []
    assert second._client is None


def test_damaged_or_missing_files_and_other_requests_are_fetched_again(service, tmp_path):
    first = source(service, tmp_path)[0].fetch("quake7", 60.0)
    first.records[0].write_bytes(b"damaged")
    service.asked.clear()
    source(service, tmp_path)[0].fetch("quake7", 60.0)
    assert [name for name, _ in service.asked] == ["dataselect"]
    service.asked.clear()
    source(service, tmp_path)[0].fetch("quake7", 30.0)
    assert [name for name, _ in service.asked] == ["dataselect", "dataselect"]


def test_retries_with_growing_pauses(service, tmp_path):
    service.failures = 3
    made, waits = source(service, tmp_path)
    made.event("quake7")
    assert waits == [0.25, 0.5, 1.0]


def test_gives_up_and_resumes(service, tmp_path):
    made, _ = source(service, tmp_path, retries=1)
    inventory = made.stations(read_event(made.event("quake7")))
    service.failures = 2
    with pytest.raises(DataError, match=r"no answer after 2 tries .* start again to resume"):
        made.records(inventory, read_event(tmp_path / "event_quake7.xml"), 60.0)
    assert not list(tmp_path.rglob("*.mseed"))
    again, _ = source(service, tmp_path)
    assert len(again.records(inventory, read_event(tmp_path / "event_quake7.xml"), 60.0)) == 2


def test_no_data_is_remembered(service, tmp_path):
    service.stream = service.stream.select(station="AAA")
    made, _ = source(service, tmp_path)
    assert len(made.fetch("quake7", 60.0).records) == 1
    service.asked.clear()
    assert len(source(service, tmp_path)[0].fetch("quake7", 60.0).records) == 1
    assert service.asked == []


def test_what_the_service_does_not_know_or_refuses(service, tmp_path):
    made, waits = source(service, tmp_path)
    with pytest.raises(InputError, match="knows no event quake8"):
        made.event("quake8")
    with pytest.raises(InputError, match="refuses the request"):
        made.event("refuse")
    assert waits == []
    far, _ = source(service, tmp_path, radius_km=5.0)
    with pytest.raises(DataError, match="no stations within 5 km"):
        far.stations(read_event(made.event("quake7")))


def test_names_that_are_no_service(tmp_path):
    with pytest.raises(InputError, match="names no service"):
        FdsnSource("fdsn:", tmp_path)
    with pytest.raises(InputError, match="'NOSUCH' is no web service that ObsPy knows"):
        FdsnSource("fdsn:NOSUCH", tmp_path).event("1")


@pytest.fixture
def archive(world, six, tmp_path):
    """Two days of an SDS archive: the record runs past midnight."""
    root = tmp_path / "archive"
    stream = world.records(six)
    for trace in stream:
        trace.stats.starttime -= 6 * 3600 + 7 * 60 + 8
        half = trace.stats.starttime + 60
        for piece in (trace.slice(endtime=half - 0.02), trace.slice(starttime=half)):
            day = piece.stats.starttime
            folder = root / f"{day.year}/XX/AAA/{trace.stats.channel}.D"
            folder.mkdir(parents=True, exist_ok=True)
            piece.write(str(folder / f"{trace.id}.D.{day.year}.{day.julday:03d}"), format="MSEED")
    return root


def test_archive_across_midnight(archive, world, six, event, tmp_path):
    from dataclasses import replace
    from datetime import UTC, datetime

    midnight = replace(event, origin_time=datetime(2031, 4, 5, 0, 0, 0, tzinfo=UTC))
    metadata = tmp_path / "stations.xml"
    world.inventory(six).write(str(metadata), format="STATIONXML")
    files = sds_files(archive, world.inventory(six), midnight, 60.0, 170.0)
    assert len(files) == 12
    (site,) = read_sites([f"sds:{archive}"], [metadata], midnight).sites
    assert site.kind == "6C"
    assert site.start_s < -50.0
    # ObsPy's own archive client sees the same record.
    start = obspy.UTCDateTime(midnight.origin_time) - 60
    theirs = ArchiveClient(str(archive)).get_waveforms("XX", "AAA", "", "HHZ", start, start + 240)
    assert len(theirs) == 1
    assert theirs[0].stats.npts * 0.02 == pytest.approx(240.0, abs=0.1)


def test_archive_that_is_none_or_holds_nothing(archive, world, six, event, tmp_path):
    with pytest.raises(InputError, match="no such folder"):
        sds_files(tmp_path / "nowhere", world.inventory(six), event, 60.0, 60.0)
    from dataclasses import replace
    from datetime import timedelta

    late = replace(event, origin_time=event.origin_time + timedelta(days=9))
    with pytest.raises(DataError, match="holds none of the 6 channels"):
        sds_files(archive, world.inventory(six), late, 60.0, 60.0)


def test_web_service_among_the_records(event):
    with pytest.raises(InputError, match="--source"):
        resolve(["fdsn:NAME"], None, event, 60.0, 60.0)
