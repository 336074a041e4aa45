"""The files of a simulation in open formats: miniSEED, StationXML and QuakeML, written through ObsPy."""

from __future__ import annotations

from collections.abc import Sequence
from datetime import datetime
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rupture import __version__
from rupture.errors import InputError
from rupture.event import Event
from rupture.synthetic.faults import delay_s, gaps_s
from rupture.synthetic.scaling import moment_from_magnitude
from rupture.synthetic.stations import ChannelPlan, Station

LOCATION = "00"


def source_identifier(station: Station, channel: ChannelPlan) -> str:
    """Return the FDSN source identifier of a channel, FDSN:NET_STA_LOC_BAND_SOURCE_POSITION."""
    return f"FDSN:{station.network}_{station.code}_{LOCATION}_{'_'.join(channel.code)}"


def write_records(
    path: Path,
    station: Station,
    counts: Sequence[NDArray[np.int32]],
    origin_time: datetime,
    start_s: float,
    step_s: float,
) -> None:
    """Write one station's channels as miniSEED 2 with Steim-2 compressed integers.

    Parameters
    ----------
    path
        File to write.
    station
        The station.
    counts
        One array of counts for each of its channels, shape (samples,).
    origin_time, start_s, step_s
        Time of the first sample is start_s after the origin time; sampling interval in s.
    """
    from obspy import Stream, Trace, UTCDateTime

    stream = Stream()
    for channel, data in zip(station.channels, counts, strict=True):
        keep = np.ones(data.size, bool)
        times = start_s + step_s * np.arange(data.size)
        for start, end in gaps_s(station.faults, channel.component):
            keep &= ~((times >= start) & (times < end))
        for first, last in _runs(keep):
            begin = UTCDateTime(origin_time) + times[first] + delay_s(station.faults, channel.component)
            header = {
                "network": station.network,
                "station": station.code,
                "location": LOCATION,
                "channel": channel.code,
                "sampling_rate": 1 / step_s,
                "starttime": begin,
            }
            stream.append(Trace(np.ascontiguousarray(data[first:last]), header))
    stream.write(str(path), format="MSEED", encoding="STEIM2", reclen=512)


def write_inventory(path: Path, stations: Sequence[Station], rate_hz: float, start: datetime, end: datetime) -> None:
    """Write StationXML with full responses of all stations; valid from `start` to `end`."""
    from obspy import UTCDateTime
    from obspy.core.inventory import Channel, Equipment, Inventory, Network, Site
    from obspy.core.inventory import Station as XmlStation

    span = {"start_date": UTCDateTime(start), "end_date": UTCDateTime(end)}
    members = []
    for station in stations:
        place: dict[str, Any] = {
            "latitude": station.latitude_deg,
            "longitude": station.longitude_deg,
            "elevation": station.elevation_m,
        }
        channels = []
        for plan in station.channels:
            channel = Channel(
                plan.code,
                LOCATION,
                depth=0.0,
                azimuth=plan.azimuth_deg,
                dip=plan.dip_deg,
                sample_rate=rate_hz,
                sensor=Equipment(type=plan.response.description, description=plan.response.description),
                response=_response(plan),
                source_id=source_identifier(station, plan),
                **place,
                **span,
            )
            channels.append(channel)
        members.append(
            XmlStation(
                station.code,
                site=Site(name=station.name),
                channels=channels,
                creation_date=span["start_date"],
                **place,
                **span,
            )
        )
    network = Network(
        stations[0].network, stations=members, description="invented network of a synthetic earthquake", **span
    )
    inventory = Inventory([network], source=f"rupture-backtrack {__version__}", created=UTCDateTime(start))
    inventory.write(str(path), format="STATIONXML", validate=True)


def write_event(path: Path, event: Event, tensor: NDArray[np.float64]) -> None:
    """Write QuakeML with origin, moment magnitude and focal mechanism.

    Parameters
    ----------
    path
        File to write.
    event
        The earthquake, with magnitude and mechanism.
    tensor
        Moment tensor of unit moment, axes north, east, down, shape (3, 3).
    """
    from obspy import UTCDateTime
    from obspy.core.event import (
        Catalog,
        EventDescription,
        FocalMechanism,
        Magnitude,
        MomentTensor,
        NodalPlane,
        NodalPlanes,
        Origin,
        ResourceIdentifier,
        Tensor,
    )
    from obspy.core.event import Event as XmlEvent

    if event.magnitude is None or event.mechanism_deg is None:
        raise InputError("an event without magnitude or mechanism cannot be written as a synthetic one")
    moment = moment_from_magnitude(event.magnitude)
    stamp = f"{event.origin_time:%Y%m%dT%H%M%S}"
    origin = Origin(
        resource_id=_resource("origin", stamp), time=UTCDateTime(event.origin_time),
        longitude=event.longitude_deg, latitude=event.latitude_deg, depth=event.depth_km * 1000,
    )  # fmt: skip
    magnitude = Magnitude(
        resource_id=_resource("magnitude", stamp),
        mag=event.magnitude,
        magnitude_type="Mw",
        origin_id=origin.resource_id,
    )
    strike, dip, rake = event.mechanism_deg
    (nn, ne, nd), (_, ee, ed), (_, _, dd) = moment * tensor
    mechanism = FocalMechanism(
        resource_id=_resource("mechanism", stamp),
        triggering_origin_id=origin.resource_id,
        nodal_planes=NodalPlanes(nodal_plane_1=NodalPlane(strike=strike, dip=dip, rake=rake), preferred_plane=1),
        moment_tensor=MomentTensor(
            resource_id=_resource("tensor", stamp), derived_origin_id=origin.resource_id, scalar_moment=moment,
            # Up, south, east of QuakeML against north, east, down.
            tensor=Tensor(m_rr=dd, m_tt=nn, m_pp=ee, m_rt=nd, m_rp=-ed, m_tp=-ne),
        ),
    )  # fmt: skip
    item = XmlEvent(
        resource_id=ResourceIdentifier(f"smi:local/event/{stamp}"),
        event_descriptions=[EventDescription(text=event.name)],
        origins=[origin],
        magnitudes=[magnitude],
        focal_mechanisms=[mechanism],
    )
    item.preferred_origin_id = origin.resource_id
    item.preferred_magnitude_id = magnitude.resource_id
    item.preferred_focal_mechanism_id = mechanism.resource_id
    Catalog([item], resource_id=_resource("catalog", stamp)).write(str(path), format="QUAKEML", validate=True)


def _resource(kind: str, stamp: str) -> Any:
    from obspy.core.event import ResourceIdentifier

    return ResourceIdentifier(f"smi:local/{kind}/{stamp}")


def _runs(keep: NDArray[np.bool_]) -> list[tuple[int, int]]:
    edges = np.flatnonzero(np.diff(np.concatenate([[0], keep.astype(np.int8), [0]])))
    return [(int(a), int(b)) for a, b in zip(edges[::2], edges[1::2], strict=True)]


def _response(plan: ChannelPlan) -> Any:
    """Return the response as a sensor stage in volt and a digitiser stage in counts."""
    from obspy.core.inventory import InstrumentSensitivity, PolesZerosResponseStage, Response
    from obspy.core.inventory.response import CoefficientsTypeResponseStage

    r = plan.response
    volts = 20.0 / r.full_scale  # a recorder of 20 V full scale
    names = {"M/S**2": "acceleration", "M/S": "velocity", "RAD/S": "rotation rate"}
    sensor = PolesZerosResponseStage(
        1, r.sensitivity * volts, r.frequency_hz, r.unit, "V", "LAPLACE (RADIANS/SECOND)", r.frequency_hz,
        list(r.zeros), list(r.poles), normalization_factor=r.normalisation,
        input_units_description=names[r.unit], output_units_description="volt",
    )  # fmt: skip
    digitiser = CoefficientsTypeResponseStage(
        2, 1 / volts, r.frequency_hz, "V", "COUNTS", "DIGITAL", numerator=[1.0], denominator=[],
        decimation_input_sample_rate=1.0, decimation_factor=1, decimation_offset=0, decimation_delay=0.0,
        decimation_correction=0.0, input_units_description="volt", output_units_description="counts",
    )  # fmt: skip
    total = InstrumentSensitivity(
        r.sensitivity, r.frequency_hz, r.unit, "COUNTS", input_units_description=names[r.unit]
    )
    return Response(instrument_sensitivity=total, response_stages=[sensor, digitiser])
