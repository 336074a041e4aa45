"""An invented earthquake seen by invented sensors: exact plane waves written as real files.

The waves are Gaussian pulses, so that displacement, velocity, acceleration and what a rotation sensor of any kind
records are known in closed form; nothing here shares code with the reader.
"""

from dataclasses import dataclass, field
from datetime import UTC, datetime

import numpy as np
import obspy
import pytest
from obspy.core.inventory import Channel, Inventory, Network, Response, Site, Station
from obspy.core.inventory.response import InstrumentSensitivity, PolesZerosResponseStage

from rupture.event import Event

EVENT = Event(datetime(2031, 4, 5, 6, 7, 8, tzinfo=UTC), 20.0, 35.0, 12.0, 6.4, name="invented earthquake")
ORIGIN = obspy.UTCDateTime(EVENT.origin_time)


def gaussian(times, centre, width, order):
    """Derivatives of exp(-x^2/2), x = (t - centre)/width, in closed form."""
    x = (times - centre) / width
    hermite = {0: 1.0, 1: -x, 2: x**2 - 1, 3: -(x**3) + 3 * x}[order]
    return hermite * np.exp(-0.5 * x**2) / width**order


@dataclass
class Wave:
    """One plane wave: when, from where, how fast along the ground, which way the ground moves."""

    time: float
    back_azimuth: float  # rad
    slowness: float  # s/m
    radial: float = 0.0
    transverse: float = 0.0
    vertical: float = 0.0
    width: float = 0.25
    amplitude: float = 1e-3  # m

    def direction(self):
        theta = self.back_azimuth
        radial = -np.array([np.sin(theta), np.cos(theta)])
        transverse = np.array([-radial[1], radial[0]])
        return np.append(self.radial * radial + self.transverse * transverse, self.vertical)

    def vector(self):
        return -self.slowness * np.array([np.sin(self.back_azimuth), np.cos(self.back_azimuth)])

    def translation(self, times, order, east=0.0, north=0.0):
        late = self.time + self.vector() @ [east, north]
        return self.amplitude * self.direction()[:, None] * gaussian(times, late, self.width, order)

    def rotation(self, times, order, east=0.0, north=0.0):
        """Rotation (order 0), its rate (1), its acceleration (2): half the curl at a free surface."""
        e, n, z = self.translation(times, order + 1, east, north)
        p_e, p_n = self.vector()
        return np.stack([-p_n * z, p_e * z, -(p_e * n - p_n * e) / 2])


@dataclass
class Instrument:
    """A sensor triple: channel codes, orientations, unit and gain."""

    codes: tuple = ("HHE", "HHN", "HHZ")
    angles: tuple = ((90.0, 0.0), (0.0, 0.0), (0.0, -90.0))
    unit: str = "m/s"
    order: int = 1
    gain: float = 1e9
    rate: float = 50.0
    location: str = ""
    station: str = "AAA"
    scale: float = 1.0  # size of the unit in SI
    offset: float = 0.0  # clock error, s
    delay: float = 0.0
    azimuth_error: float = 0.0  # deg, the sensor really stands so much clockwise of what its metadata say

    @property
    def rotation(self):
        return self.codes[0][1] == "J"


def axes(angles):
    azimuth, dip = np.radians(np.array(angles, float)).T
    return np.stack([np.sin(azimuth) * np.cos(dip), np.cos(azimuth) * np.cos(dip), -np.sin(dip)], axis=1)


def response(unit, gain):
    stage = PolesZerosResponseStage(
        1, gain, 1.0, unit, "counts", "LAPLACE (RADIANS/SECOND)", 1.0, [], [], normalization_factor=1.0
    )
    return Response(instrument_sensitivity=InstrumentSensitivity(gain, 1.0, unit, "counts"), response_stages=[stage])


@dataclass
class World:
    """Stations, waves, and the files that they leave."""

    folder: object
    waves: list
    start: float = -60.0
    length: float = 240.0
    noise: float = 0.2  # counts
    seed: int = 7
    places: dict = field(default_factory=lambda: {"AAA": (20.5, 35.3, 100.0)})
    offsets: dict = field(default_factory=dict)  # east, north in m of sensors in an array

    def records(self, instruments):
        rng = np.random.default_rng(self.seed)
        stream = obspy.Stream()
        for inst in instruments:
            times = self.start + inst.delay + np.arange(round(self.length * inst.rate)) / inst.rate
            east, north = self.offsets.get(inst.station, (0.0, 0.0))
            motion = sum(
                (w.rotation if inst.rotation else w.translation)(times + inst.offset, inst.order, east, north)
                for w in self.waves
            )
            turned = [(a + inst.azimuth_error, d) for a, d in inst.angles]
            counts = axes(turned) @ motion * inst.gain / inst.scale
            counts += self.noise * rng.standard_normal(counts.shape)
            for code, row in zip(inst.codes, counts, strict=True):
                trace = obspy.Trace(row.astype(np.float64))
                trace.stats.update(
                    {
                        "network": "XX",
                        "station": inst.station,
                        "location": inst.location,
                        "channel": code,
                        "sampling_rate": inst.rate,
                        "starttime": ORIGIN + times[0],
                    }
                )
                stream += trace
        return stream

    def inventory(self, instruments, start="2030-01-01", end=None):
        stations = {}
        for inst in instruments:
            lon, lat, up = self.places[inst.station]
            station = stations.setdefault(
                inst.station, Station(inst.station, lat, lon, up, site=Site("invented"), channels=[])
            )
            for code, (azimuth, dip) in zip(inst.codes, inst.angles, strict=True):
                station.channels.append(
                    Channel(
                        code,
                        inst.location,
                        lat,
                        lon,
                        up,
                        0.0,
                        azimuth,
                        dip,
                        sample_rate=inst.rate,
                        start_date=obspy.UTCDateTime(start),
                        end_date=obspy.UTCDateTime(end) if end else None,
                        response=response(inst.unit, inst.gain),
                    )
                )
        return Inventory([Network("XX", list(stations.values()))], source="invented")

    def write(self, instruments, stream=None, inventory=None):
        stream = self.records(instruments) if stream is None else stream
        inventory = self.inventory(instruments) if inventory is None else inventory
        data, metadata = self.folder / "records.mseed", self.folder / "stations.xml"
        stream.write(str(data), format="MSEED")
        inventory.write(str(metadata), format="STATIONXML")
        return data, metadata


TRANSLATION = Instrument()
ROTATION = Instrument(("HJE", "HJN", "HJZ"), unit="rad/s", order=1, gain=1e12)


@pytest.fixture
def event():
    return EVENT


@pytest.fixture
def waves():
    """P, SV, SH and a slower wave from somewhat different directions; times suit a site 57 km away."""
    return [
        Wave(10.5, np.radians(235.0), 1 / 6500.0, radial=0.4, vertical=1.0),
        Wave(18.0, np.radians(233.0), 1 / 3700.0, radial=1.0, transverse=1.2, vertical=-0.6),
        Wave(26.0, np.radians(238.0), 1 / 3000.0, transverse=0.8, vertical=0.9, radial=0.3, width=0.5),
    ]


@pytest.fixture
def world(tmp_path, waves):
    return World(tmp_path, waves)


@pytest.fixture
def kit():
    """Names for the tests that build their own data (test folders are no packages)."""

    class Kit:
        pass

    for name, value in globals().items():
        if name in {
            "EVENT", "ORIGIN", "Instrument", "Wave", "World", "TRANSLATION", "ROTATION", "gaussian", "axes", "response", "rough_waves",
        }:  # fmt: skip
            setattr(Kit, name, staticmethod(value) if callable(value) and not isinstance(value, type) else value)
    return Kit


@pytest.fixture
def six():
    """One translation and one rotation sensor of a site."""
    return [TRANSLATION, ROTATION]


def rough_waves(seed, back_azimuth=235.0, p_time=10.5, s_time=18.0, scatter=3.0):
    """P, S and surface waves of an earthquake that lasts some seconds, with scattered directions and slownesses."""
    rng = np.random.default_rng(seed)
    waves = []

    def add(number, start, length, velocity, radial, transverse, vertical, amplitude, widen):
        for i in range(number):
            late = 0.0 if i == 0 else rng.uniform(0.0, length)
            spread = 0.3 * scatter if i == 0 else scatter * (1.0 + late / length)
            waves.append(
                Wave(
                    start + late + (0.3 if i == 0 else 0.6),
                    np.radians(back_azimuth + spread * rng.standard_normal()),
                    1.0 / (velocity * np.exp(0.05 * rng.standard_normal())),
                    radial,
                    transverse * rng.choice([-1, 1]),
                    vertical,
                    width=0.12 if i == 0 else rng.uniform(0.08, 0.5),
                    amplitude=amplitude * (1.0 if i == 0 else rng.lognormal(-0.5, 0.4)),
                )
            )

    sign = rng.choice([-1.0, 1.0])
    add(14, p_time, 4.0, 6500.0, 0.45, 0.0, 1.0, sign * 1e-3, 1)
    add(10, s_time, 4.0, 3700.0, 1.0, 0.0, -0.5, 2e-3, 1)
    add(10, s_time, 4.0, 3700.0, 0.0, 1.0, 0.0, 2e-3, 1)
    add(8, s_time + 3.0, 12.0, 3100.0, 0.5, 1.0, 0.7, 1.5e-3, 2)
    return waves
