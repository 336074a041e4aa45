"""Scenario files: one invented earthquake, its Earth, its sites and their faults, as TOML."""

from __future__ import annotations

import tomllib
from datetime import UTC, datetime
from importlib import resources
from pathlib import Path
from typing import Any, Literal

import numpy as np
from pydantic import BaseModel, ConfigDict, Field, ValidationError, field_validator, model_validator

from rupture.earth.layers import LayeredModel
from rupture.errors import InputError
from rupture.event import Event
from rupture.geodesy import distance_azimuth
from rupture.synthetic.coda import CodaSettings
from rupture.synthetic.engine import Sampling
from rupture.synthetic.faults import Fault
from rupture.synthetic.noise import RotationSensor, TranslationSensor
from rupture.synthetic.scaling import Scaling, rupture_size_km
from rupture.synthetic.scenario_errors import sentences
from rupture.synthetic.source import Arm, KinematicSource

SLOWEST_KM_S = 2.5
"""Records last by default until waves of this speed have come from the end of the rupture."""


class _Table(BaseModel):
    model_config = ConfigDict(extra="forbid", strict=True, frozen=True)


class EventTable(_Table):
    """The earthquake."""

    origin_time: datetime
    longitude_deg: float = Field(ge=-360, le=360)
    latitude_deg: float = Field(ge=-90, le=90)
    depth_km: float = Field(gt=0, le=100)
    magnitude: float = Field(ge=4, le=9.6)
    strike_deg: float
    dip_deg: float = Field(gt=0, le=90)
    rake_deg: float = Field(ge=-180, le=180)

    @field_validator("origin_time")
    @classmethod
    def _utc(cls, value: datetime) -> datetime:
        # A TOML time without offset is taken as UTC, as times of earthquakes are.
        return value.replace(tzinfo=UTC) if value.tzinfo is None else value.astimezone(UTC)


class ArmTable(_Table):
    """One arm of the rupture; what is left out follows from strike and magnitude."""

    azimuth_deg: float | None = None
    length_km: float | None = Field(None, gt=0)
    speed_km_s: float | tuple[tuple[float, float], ...] = 2.8
    share: float | None = Field(None, gt=0, le=1)


class RuptureTable(_Table):
    """How the rupture runs; without arms it stays in one place."""

    arm: tuple[ArmTable, ...] = Field((), max_length=2)
    shape: Literal["line", "plane"] = "line"
    width_km: float | None = Field(None, gt=0)
    scaling: Literal["wells-coppersmith-1994", "leonard-2010"] = "wells-coppersmith-1994"
    duration_s: float = Field(20.0, gt=0)
    sub_events: int | None = Field(None, ge=20)
    shortest_rise_s: float = Field(0.4, gt=0)
    longest_rise_s: float | None = Field(None, gt=0)
    stress_drop_mpa: float = Field(5.0, gt=0)
    slip_spread: float = Field(0.4, ge=0)
    front_spread_s: float = Field(0.2, ge=0)


class LayerTable(_Table):
    """One layer of the Earth."""

    top_km: float = Field(ge=0)
    vp_km_s: float = Field(gt=0)
    vs_km_s: float = Field(gt=0)
    density_kg_m3: float = Field(gt=0)
    qp: float = Field(gt=0)
    qs: float = Field(gt=0)


class RecordTable(_Table):
    """The time axis of the records."""

    before_s: float = Field(90.0, ge=0)
    length_s: float | None = Field(None, gt=0)
    rate_hz: float = Field(20.0, gt=1, lt=1000)
    high_hz: float | None = Field(None, gt=0)


class CodaTable(_Table):
    """Scattered waves; an energy ratio of 0 switches them off."""

    energy_ratio: float = Field(0.3, ge=0)
    decay_s: float = Field(8.0, gt=0)
    forward_share: float = Field(0.5, ge=0, le=1)
    forward_spread_deg: float = Field(25.0, gt=0)
    waves: int = Field(80, ge=10)
    group_s: float = Field(4.0, gt=0)


class NoiseTable(_Table):
    """Noise of the ground: 0 is Peterson's (1993) low model, 1 the high one; false for no noise at all."""

    on: bool = True
    ground_level: float = Field(0.6, ge=0, le=1)


class ArrayTable(_Table):
    """A small array in place of a rotation sensor."""

    sensors: int = Field(ge=3, le=30)
    aperture_m: float = Field(gt=0)


class SiteTable(_Table):
    """One site; its place as longitude and latitude, or as distance and azimuth from the epicentre."""

    code: str = Field(pattern=r"^[A-Z0-9]{1,5}$")
    name: str = ""
    longitude_deg: float | None = Field(None, ge=-360, le=360)
    latitude_deg: float | None = Field(None, ge=-90, le=90)
    distance_km: float | None = Field(None, gt=0)
    azimuth_deg: float | None = None
    elevation_m: float = 0.0
    components: str = "6C"
    translation: Literal["accelerometer", "broadband", "low-gain-broadband"] = "accelerometer"
    rotation: Literal[
        "portable-fibre-optic", "portable-fibre-optic-early", "large-ring-laser", "array-derived"
    ] = "portable-fibre-optic"
    sensor_azimuth_deg: float = 0.0
    array: ArrayTable | None = None
    fault: tuple[Fault, ...] = ()

    @field_validator("components")
    @classmethod
    def _known(cls, value: str) -> str:
        parse_components(value)
        return value

    @model_validator(mode="after")
    def _placed(self) -> SiteTable:
        by_degrees = self.longitude_deg is not None and self.latitude_deg is not None
        by_distance = self.distance_km is not None and self.azimuth_deg is not None
        if by_degrees == by_distance:
            raise ValueError("give either longitude_deg and latitude_deg, or distance_km and azimuth_deg")
        if self.array is not None and not parse_components(self.components) <= {"acc_E", "acc_N", "acc_Z"}:
            raise ValueError("the sensors of an array are translation sensors: components 3C or Z")
        return self

    @property
    def translation_sensor(self) -> TranslationSensor:
        """Class of the translation sensor."""
        return TranslationSensor(self.translation)

    @property
    def rotation_sensor(self) -> RotationSensor:
        """Class of the rotation sensor."""
        return RotationSensor(self.rotation)


class Scenario(_Table):
    """A whole scenario; see `rupture template simulate` for every key with its meaning."""

    name: str
    engine: Literal["ray", "wavefield"] = "ray"
    seed: int = Field(1, ge=0)
    network: str = Field("XX", pattern=r"^[A-Z0-9]{1,2}$")
    earth: str | None = None
    event: EventTable
    rupture: RuptureTable = RuptureTable()
    layer: tuple[LayerTable, ...] = ()
    record: RecordTable = RecordTable()
    coda: CodaTable = CodaTable()
    noise: NoiseTable = NoiseTable()
    site: tuple[SiteTable, ...] = Field(min_length=1)

    @model_validator(mode="after")
    def _whole(self) -> Scenario:
        if (self.earth is None) == (not self.layer):
            raise ValueError("give the Earth once: either earth = \"...\" or [[layer]] tables")
        codes = [s.code for s in self.site]
        twice = sorted({c for c in codes if codes.count(c) > 1})
        if twice:
            raise ValueError(f"site code used twice: {', '.join(twice)}")
        return self

    def model(self) -> LayeredModel:
        """Return the layered Earth."""
        if self.layer:
            columns = {f: np.array([getattr(row, f) for row in self.layer]) for f in LayerTable.model_fields}
            return LayeredModel(self.name, **columns)
        from rupture.earth import build_earth

        return build_earth(str(self.earth)).layers

    def source(self) -> KinematicSource:
        """Return the rupture."""
        e, r = self.event, self.rupture
        mechanism = (e.strike_deg, e.dip_deg, e.rake_deg)
        length, width = rupture_size_km(e.magnitude, e.rake_deg, Scaling(r.scaling))
        arms = tuple(
            Arm(
                (a.azimuth_deg if a.azimuth_deg is not None else e.strike_deg + 180 * n) % 360,
                a.length_km or length / len(r.arm),
                a.speed_km_s,
                a.share,
            )
            for n, a in enumerate(r.arm)
        )
        return KinematicSource(
            e.longitude_deg, e.latitude_deg, e.depth_km, e.magnitude, mechanism, arms,
            (r.width_km or width) if r.shape == "plane" else 0.0, r.duration_s, r.sub_events,
            r.shortest_rise_s, r.longest_rise_s, r.stress_drop_mpa, r.slip_spread, r.front_spread_s,
        )  # fmt: skip

    def as_event(self) -> Event:
        """Return the earthquake as the rest of the program knows it."""
        e = self.event
        return Event(
            e.origin_time, e.longitude_deg, e.latitude_deg, e.depth_km, e.magnitude,
            (e.strike_deg, e.dip_deg, e.rake_deg), self.name,
        )  # fmt: skip

    def coda_settings(self) -> CodaSettings:
        """Return the coda's settings."""
        return CodaSettings(**self.coda.model_dump())

    def sampling(self, longitude_deg: np.ndarray, latitude_deg: np.ndarray) -> Sampling:
        """Return the time axis: long enough for the farthest of the places given."""
        source, record = self.source(), self.record
        distance, _, _ = distance_azimuth(source.longitude_deg, source.latitude_deg, longitude_deg, latitude_deg)
        reach = distance.max() / 1000 + max((a.length_km for a in source.arms), default=0.0)
        length = record.length_s or 30 * np.ceil((source.radiated_s + reach / SLOWEST_KM_S + 60) / 30)
        samples = int(np.ceil((record.before_s + length) * record.rate_hz))
        return Sampling(-record.before_s, 1 / record.rate_hz, samples, record.high_hz or 0.3 * record.rate_hz)


def parse_components(text: str) -> set[str]:
    """Return the components that a short form stands for: 6C, 3C, Z, rot3, rotH, rotZ, joined by +.

    Examples
    --------
    >>> sorted(parse_components("Z+rotH"))
    ['acc_Z', 'rot_E', 'rot_N']
    """
    known = {
        "6C": {"acc_E", "acc_N", "acc_Z", "rot_E", "rot_N", "rot_Z"},
        "3C": {"acc_E", "acc_N", "acc_Z"},
        "Z": {"acc_Z"},
        "rot3": {"rot_E", "rot_N", "rot_Z"},
        "rotH": {"rot_E", "rot_N"},
        "rotZ": {"rot_Z"},
    }
    parts = text.split("+")
    if unknown := [p for p in parts if p not in known]:
        raise ValueError(f"unknown components '{unknown[0]}' (known: {', '.join(known)}, joined by +)")
    return set().union(*(known[p] for p in parts))


def read_scenario(path: str | Path, **changes: Any) -> Scenario:
    """Read a scenario file, or a ready one by its name.

    Parameters
    ----------
    path
        Path of a TOML file, or one of `ready_scenarios()`.
    changes
        Top-level keys that win over the file, for example seed=7; those that are None change nothing.

    Raises
    ------
    InputError
        When the file cannot be read or anything in it is wrong; all faults are listed, unknown keys with the nearest known.
    """
    if str(path) in ready_scenarios():
        text, where = _ready(str(path)).read_text(encoding="utf-8"), f"scenario {path}"
    else:
        where = str(path)
        try:
            text = Path(path).read_text(encoding="utf-8")
        except FileNotFoundError:
            raise InputError(
                f"{path}: no such scenario file, and no ready scenario of this name ({', '.join(ready_scenarios())})"
            ) from None
        except (OSError, UnicodeDecodeError) as error:
            raise InputError(f"{path}: cannot be read as a text file ({error})") from error
    try:
        table = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise InputError(f"{where}: not valid TOML: {error}") from error
    return scenario_from_table(table | {k: v for k, v in changes.items() if v is not None}, where)


def scenario_from_table(table: dict[str, Any], where: str = "scenario") -> Scenario:
    """Build a scenario from a table as TOML gives it; errors as `read_scenario`."""
    try:
        scenario = Scenario.model_validate(_tuples(table))
    except ValidationError as error:
        raise InputError("\n".join(sentences(error, Scenario, where))) from None
    try:
        scenario.source()
        if scenario.layer:
            scenario.model()
    except InputError as error:
        raise InputError(f"{where}: {error}") from None
    return scenario


def ready_scenarios() -> tuple[str, ...]:
    """Return the names of the scenarios that come with the program."""
    folder = resources.files("rupture.synthetic") / "scenarios"
    return tuple(sorted(f.name.removesuffix(".toml") for f in folder.iterdir() if f.name.endswith(".toml")))


def demo_scenario() -> Scenario:
    """Return the invented earthquake of `rupture demo`."""
    return read_scenario("demo")


def _ready(name: str) -> Any:
    return resources.files("rupture.synthetic") / "scenarios" / f"{name}.toml"


def _tuples(value: Any) -> Any:
    """TOML has lists only; strict models want tuples."""
    if isinstance(value, list):
        return tuple(_tuples(v) for v in value)
    return {k: _tuples(v) for k, v in value.items()} if isinstance(value, dict) else value
