"""Where records come from: SDS archives and FDSN web services; what is fetched is kept with its request."""

from __future__ import annotations

import hashlib
import json
import time
import warnings
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, field
from datetime import UTC, datetime, timedelta
from pathlib import Path
from typing import Any

from rupture.errors import DataError, InputError
from rupture.event import Event
from rupture.geodesy import distance_azimuth
from rupture.progress import Report
from rupture.records.arrivals import reading_end_s
from rupture.records.metadata import quantity_of

SDS = "sds:"
FDSN = "fdsn:"

_CHANNELS = "?H?,?L?,?N?,?P?,?J?"
"""Translation and rotation by their FDSN instrument codes."""
_MIDNIGHT = timedelta(minutes=30)
"""Day files of an archive may begin and end this far from midnight."""
_KM_PER_DEGREE = 111.195
_LEDGER = "requests.json"


def sds_files(folder: str | Path, inventory: Any, event: Event, before_s: float, after_s: float) -> list[Path]:
    """Return the day files of an SDS archive that can hold the wanted stretch.

    Parameters
    ----------
    folder
        Root of the archive: YEAR/NET/STA/CHAN.D/NET.STA.LOC.CHAN.D.YEAR.DAY (SeisComP Data Structure).
    inventory
        ObsPy inventory: its translation and rotation channels are looked for.
    event
        Its origin time is the zero.
    before_s, after_s
        Stretch around it.

    Raises
    ------
    InputError
        When the folder is no archive.
    DataError
        When it holds none of the channels at that time.
    """
    root = Path(folder)
    if not root.is_dir():
        raise InputError(f"{root}: no such folder; an SDS archive has folders YEAR/NET/STA/CHAN.D")
    start = event.origin_time.astimezone(UTC) - timedelta(seconds=before_s) - _MIDNIGHT
    end = event.origin_time.astimezone(UTC) + timedelta(seconds=after_s) + _MIDNIGHT
    days = [start.date() + timedelta(days=k) for k in range((end.date() - start.date()).days + 1)]
    names = sorted({name for name in channel_names(inventory) if quantity_of(name) is not None})
    found = []
    for name in names:
        network, station, _, channel = name.split(".")
        for day in days:
            part = f"{day.year}/{network}/{station}/{channel}.D/{name}.D.{day.year}.{day.timetuple().tm_yday:03d}"
            if (root / part).is_file():
                found.append(root / part)
    if not found:
        raise DataError(
            f"{root}: the archive holds none of the {len(names)} channels of the metadata between {start:%Y-%m-%d %H:%M}"
            f" and {end:%Y-%m-%d %H:%M} UTC (looked for files like YEAR/NET/STA/CHAN.D/NET.STA.LOC.CHAN.D.YEAR.DAY)"
        )
    return found


def channel_names(inventory: Any) -> Iterable[str]:
    """Yield NET.STA.LOC.CHA of every channel of an inventory."""
    for network in inventory:
        for station in network:
            for channel in station:
                yield f"{network.code}.{station.code}.{(channel.location_code or '').strip()}.{channel.code}"


@dataclass(frozen=True)
class FetchSettings:
    """How a web service is asked.

    Attributes
    ----------
    retries
        Further tries after one that failed for a passing reason.
    wait_s
        Pause before the first of them; doubled each time.
    timeout_s
        Longest silence of the service.
    radius_km
        Stations up to this distance from the epicentre.
    networks
        Comma-separated network codes; wildcards allowed.
    """

    retries: int = 4
    wait_s: float = 2.0
    timeout_s: float = 120.0
    radius_km: float = 300.0
    networks: str = "*"


@dataclass(frozen=True)
class Fetched:
    """Files of one event, ready for `read_event` and `read_sites`.

    Attributes
    ----------
    event, inventory
        QuakeML and StationXML.
    records
        miniSEED, one file a station.
    """

    event: Path
    inventory: Path
    records: tuple[Path, ...]


@dataclass
class FdsnSource:
    """An FDSN web service whose answers are kept in a folder.

    Parameters
    ----------
    name
        Name of a service that ObsPy knows, or a base URL; a leading `fdsn:` is taken off.
    folder
        Cache: answers and, in requests.json, the request of each. What is there is not asked for again, so that
        an interrupted fetch resumes and a finished one repeats without a network.
    settings
        Retries, radius, networks.
    """

    name: str
    folder: Path
    settings: FetchSettings = field(default_factory=FetchSettings)
    sleep: Callable[[float], None] = time.sleep
    _client: Any = None

    def __post_init__(self) -> None:
        self.name = self.name.removeprefix(FDSN)
        if not self.name:
            raise InputError("the source 'fdsn:' names no service; write fdsn:NAME or fdsn:URL")
        self.folder = Path(self.folder)

    def fetch(self, event_id: str, before_s: float, report: Report | None = None) -> Fetched:
        """Fetch an event, the stations around it and their records.

        Parameters
        ----------
        event_id
            Identifier in the service's catalogue.
        before_s
            Record before the origin time; after it, until surface waves have passed each station.
        report
            Called with (done, total) stations.

        Raises
        ------
        InputError
            Unknown service or event, or a request that the service refuses.
        DataError
            No stations or no records.
        """
        from rupture.records.events import read_event

        path = self.event(event_id)
        event = read_event(path)
        inventory = self.stations(event)
        return Fetched(path, inventory, tuple(self.records(inventory, event, before_s, report)))

    def event(self, event_id: str) -> Path:
        """Fetch one event as QuakeML."""
        safe = "".join(c if c.isalnum() or c in "-_." else "_" for c in event_id)
        path = self._ask(f"event_{safe}.xml", "get_events", {"eventid": event_id})
        if path is None:
            raise InputError(f"{self.name}: the service knows no event {event_id}")
        return path

    def stations(self, event: Event) -> Path:
        """Fetch the metadata of translation and rotation channels around an event."""
        day = timedelta(days=1)
        request = {
            "latitude": round(event.latitude_deg, 4),
            "longitude": round(event.longitude_deg, 4),
            "maxradius": round(self.settings.radius_km / _KM_PER_DEGREE, 4),
            "starttime": (event.origin_time - day).isoformat(),
            "endtime": (event.origin_time + day).isoformat(),
            "network": self.settings.networks,
            "channel": _CHANNELS,
            "level": "response",
        }
        path = self._ask("stations.xml", "get_stations", request)
        if path is None:
            raise DataError(f"{self.name}: no stations within {self.settings.radius_km:g} km of the epicentre")
        return path

    def records(self, inventory: Path, event: Event, before_s: float, report: Report | None = None) -> list[Path]:
        """Fetch the records of all stations of a StationXML file, one file a station."""
        from rupture.records.read import read_inventories

        stations = [(n.code, s) for n in read_inventories([inventory]) for s in n]
        found = []
        for number, (network, station) in enumerate(stations):
            distance, _, _ = distance_azimuth(
                event.longitude_deg, event.latitude_deg, station.longitude, station.latitude
            )
            start = event.origin_time - timedelta(seconds=before_s)
            end = event.origin_time + timedelta(seconds=reading_end_s(float(distance)))
            codes = sorted({((c.location_code or "").strip(), c.code) for c in station})
            bulk = [
                [network, station.code, location or "--", code, start.isoformat(), end.isoformat()]
                for location, code in codes
                if quantity_of(f"{network}.{station.code}.{location}.{code}") is not None
            ]
            path = self._ask(f"records/{network}.{station.code}.mseed", "get_waveforms_bulk", {"bulk": bulk})
            found += [path] if path is not None else []
            if report is not None:
                report(number + 1, len(stations))
        if not found:
            raise DataError(f"{self.name}: none of the {len(stations)} stations has records of the event")
        return found

    def _ask(self, file: str, method: str, request: dict[str, Any]) -> Path | None:
        """Return the answer's file, from the cache or from the service; None where the service has no data."""
        ledger = self._ledger()
        known = ledger.get(file)
        wanted = {"service": self.name, "method": method, "request": request}
        path = self.folder / file
        if known is not None and all(known[key] == value for key, value in wanted.items()):
            if known["empty"]:
                return None
            if path.is_file() and _sha256(path) == known["sha256"]:
                return path
        path.parent.mkdir(parents=True, exist_ok=True)
        part = path.with_name(path.name + ".part")
        empty = not self._try(method, request, part)
        entry = wanted | {"fetched": datetime.now(UTC).isoformat(timespec="seconds"), "empty": empty}
        if not empty:
            part.replace(path)
            entry |= {"bytes": path.stat().st_size, "sha256": _sha256(path)}
        ledger[file] = entry
        text = json.dumps(ledger, indent=1)
        draft = self.folder / f"{_LEDGER}.part"
        draft.write_text(text, encoding="utf-8")
        draft.replace(self.folder / _LEDGER)
        return None if empty else path

    def _ledger(self) -> dict[str, Any]:
        path = self.folder / _LEDGER
        if not path.is_file():
            return {}
        try:
            return dict(json.loads(path.read_text(encoding="utf-8")))
        except ValueError:
            raise InputError(f"{path}: damaged; remove it to fetch everything again") from None

    def _try(self, method: str, request: dict[str, Any], part: Path) -> bool:
        from obspy.clients.fdsn.header import (
            FDSNBadRequestException,
            FDSNForbiddenException,
            FDSNNoDataException,
            FDSNUnauthorizedException,
        )

        final = (FDSNBadRequestException, FDSNForbiddenException, FDSNUnauthorizedException)
        wait = self.settings.wait_s
        for left in range(self.settings.retries, -1, -1):
            try:
                self._call(method, request, part)
            except FDSNNoDataException:
                return False
            except final as error:
                raise InputError(f"{self.name}: the service refuses the request: {_short(error)}") from error
            except InputError:
                raise
            except Exception as error:
                if left == 0:
                    raise DataError(
                        f"{self.name}: no answer after {self.settings.retries + 1} tries ({_short(error)}); what has been"
                        f" fetched is kept in {self.folder}, start again to resume"
                    ) from error
                self.sleep(wait)
                wait *= 2.0
            else:
                return part.is_file() and part.stat().st_size > 0
        return False

    def _call(self, method: str, request: dict[str, Any], part: Path) -> None:
        from obspy import UTCDateTime

        arguments = dict(request)
        bulk = arguments.pop("bulk", None)
        for key in ("starttime", "endtime"):
            if key in arguments:
                arguments[key] = UTCDateTime(arguments[key])
        ask = getattr(self._connect(), method)
        if bulk is not None:
            ask([(*row[:4], UTCDateTime(row[4]), UTCDateTime(row[5])) for row in bulk], filename=str(part))
        else:
            ask(filename=str(part), **arguments)

    def _connect(self) -> Any:
        if self._client is None:
            from obspy.clients.fdsn import Client
            from obspy.clients.fdsn.header import URL_MAPPINGS

            if "://" not in self.name and self.name.upper() not in URL_MAPPINGS:
                raise InputError(
                    f"'{self.name}' is no web service that ObsPy knows by name (known: {', '.join(sorted(URL_MAPPINGS))});"
                    " give its base URL"
                )
            with warnings.catch_warnings():
                # Services differ in optional parameters that are not used here; ObsPy tells of each.
                warnings.simplefilter("ignore")
                self._client = Client(self.name, timeout=self.settings.timeout_s)
        return self._client


def _short(error: Exception) -> str:
    return " ".join(str(error).split())[:200]


def _sha256(path: Path) -> str:
    digest = hashlib.sha256()
    with path.open("rb") as file:
        for block in iter(lambda: file.read(1 << 20), b""):
            digest.update(block)
    return digest.hexdigest()


def resolve(records: Sequence[str | Path], inventory: Any, event: Event, before_s: float, after_s: float) -> list[Any]:
    """Replace `sds:FOLDER` entries of a list of records by the archive's files.

    Raises
    ------
    InputError
        For `fdsn:` entries, which have to be fetched first.
    """
    resolved: list[Any] = []
    for entry in records:
        text = str(entry)
        if text.startswith(SDS):
            resolved += sds_files(text.removeprefix(SDS), inventory, event, before_s, after_s)
        elif text.startswith(FDSN):
            raise InputError(f"{text}: a web service is named with --source and --event-id, not among the records")
        else:
            resolved.append(entry)
    return resolved
