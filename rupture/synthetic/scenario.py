"""Scenario files: one invented earthquake, its Earth, its sites and their faults, as TOML."""

from __future__ import annotations

import tomllib
from importlib import resources
from pathlib import Path
from typing import Any, Literal

import numpy as np
from pydantic import Field, ValidationError, model_validator

from rupture.earth.layers import LayeredModel
from rupture.errors import InputError
from rupture.event import Event
from rupture.geodesy import distance_azimuth
from rupture.synthetic.coda import CodaSettings
from rupture.synthetic.engine import Sampling
from rupture.synthetic.scaling import Scaling, rupture_size_km
from rupture.synthetic.scenario_errors import sentences
from rupture.synthetic.scenario_tables import (
    CodaTable,
    EventTable,
    LayerTable,
    NoiseTable,
    RecordTable,
    RuptureTable,
    SiteTable,
    Table,
)
from rupture.synthetic.source import Arm, KinematicSource

SLOWEST_KM_S = 2.5
"""Records last by default until waves of this speed have come from the end of the rupture."""


class Scenario(Table):
    """A whole scenario; see `rupture template simulate` for every key with its meaning."""

    name: str
    engine: Literal["ray", "wavefield"] = "ray"
    seed: int = Field(default=1, ge=0)
    network: str = Field(default="XX", pattern=r"^[A-Z0-9]{1,2}$")
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
            raise ValueError('give the Earth once: either earth = "..." or [[layer]] tables')
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
