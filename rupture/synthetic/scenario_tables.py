"""Tables of a scenario file and what they accept."""

from __future__ import annotations

from datetime import UTC, datetime
from typing import Literal

from pydantic import BaseModel, ConfigDict, Field, field_validator, model_validator

from rupture.synthetic.faults import Fault
from rupture.synthetic.noise import RotationSensor, TranslationSensor


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


class Table(BaseModel):
    """A table that knows its keys and converts nothing silently."""

    model_config = ConfigDict(extra="forbid", strict=True, frozen=True)


class EventTable(Table):
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


class ArmTable(Table):
    """One arm of the rupture; what is left out follows from strike and magnitude."""

    azimuth_deg: float | None = None
    length_km: float | None = Field(default=None, gt=0)
    speed_km_s: float | tuple[tuple[float, float], ...] = 2.8
    share: float | None = Field(default=None, gt=0, le=1)


class RuptureTable(Table):
    """How the rupture runs; without arms it stays in one place."""

    arm: tuple[ArmTable, ...] = Field(default=(), max_length=2)
    shape: Literal["line", "plane"] = "line"
    width_km: float | None = Field(default=None, gt=0)
    scaling: Literal["wells-coppersmith-1994", "leonard-2010"] = "wells-coppersmith-1994"
    duration_s: float = Field(default=20.0, gt=0)
    sub_events: int | None = Field(default=None, ge=20)
    shortest_rise_s: float = Field(default=0.4, gt=0)
    longest_rise_s: float | None = Field(default=None, gt=0)
    stress_drop_mpa: float = Field(default=8.0, gt=0)
    slip_spread: float = Field(default=0.4, ge=0)
    front_spread_s: float = Field(default=0.2, ge=0)


class LayerTable(Table):
    """One layer of the Earth."""

    top_km: float = Field(ge=0)
    vp_km_s: float = Field(gt=0)
    vs_km_s: float = Field(gt=0)
    density_kg_m3: float = Field(gt=0)
    qp: float = Field(gt=0)
    qs: float = Field(gt=0)


class RecordTable(Table):
    """The time axis of the records."""

    before_s: float = Field(default=90.0, ge=0)
    length_s: float | None = Field(default=None, gt=0)
    rate_hz: float = Field(default=20.0, gt=1, lt=1000)
    high_hz: float | None = Field(default=None, gt=0)


class CodaTable(Table):
    """Scattered waves; an energy ratio of 0 switches them off."""

    energy_ratio: float = Field(default=0.3, ge=0)
    decay_s: float = Field(default=8.0, gt=0)
    forward_share: float = Field(default=0.5, ge=0, le=1)
    forward_spread_deg: float = Field(default=25.0, gt=0)
    waves: int = Field(default=80, ge=10)
    group_s: float = Field(default=4.0, gt=0)


class NoiseTable(Table):
    """Noise of the ground: 0 is Peterson's (1993) low model, 1 the high one; false for no noise at all."""

    on: bool = True
    ground_level: float = Field(default=0.6, ge=0, le=1)


class ArrayTable(Table):
    """A small array in place of a rotation sensor."""

    sensors: int = Field(ge=3, le=30)
    aperture_m: float = Field(gt=0)


class SiteTable(Table):
    """One site; its place as longitude and latitude, or as distance and azimuth from the epicentre."""

    code: str = Field(pattern=r"^[A-Z0-9]{1,5}$")
    name: str = ""
    longitude_deg: float | None = Field(default=None, ge=-360, le=360)
    latitude_deg: float | None = Field(default=None, ge=-90, le=90)
    distance_km: float | None = Field(default=None, gt=0)
    azimuth_deg: float | None = None
    elevation_m: float = 0.0
    components: str = "6C"
    translation: Literal["accelerometer", "broadband", "low-gain-broadband"] = "accelerometer"
    rotation: Literal["portable-fibre-optic", "portable-fibre-optic-early", "large-ring-laser", "array-derived"] = (
        "portable-fibre-optic"
    )
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
