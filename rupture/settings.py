"""The settings of a whole run: one dataclass per table of the job file."""

from __future__ import annotations

import dataclasses
from collections.abc import Mapping
from dataclasses import dataclass, field, fields, replace
from pathlib import Path
from typing import Any

from rupture.direction import DirectionSettings
from rupture.energy.settings import EnergySettings
from rupture.errors import InputError
from rupture.front import FitSettings, SmoothSettings
from rupture.job import nearest_key, read_toml, settings_from_table
from rupture.mapping import StackSettings
from rupture.records import RecordSettings
from rupture.resolution.settings import PlannedSite, StudySettings


@dataclass(frozen=True)
class InputSettings:
    """What goes in. Paths in a job file are relative to its folder.

    Attributes
    ----------
    records, inventory
        Record files, folders or globs; StationXML files.
    event
        QuakeML file.
    origin
        UTC time, longitude and latitude in degrees, depth in km, as four strings or numbers, in place of `event`.
    magnitude
        Moment magnitude, where the event has none.
    mechanism_deg
        Strike, dip, rake.
    trace
        GeoJSON of the fault trace.
    """

    records: tuple[str, ...] = ()
    inventory: tuple[str, ...] = ()
    event: str | None = None
    origin: tuple[str | float, str | float, str | float, str | float] | None = None
    magnitude: float | None = None
    mechanism_deg: tuple[float, float, float] | None = None
    trace: str | None = None


@dataclass(frozen=True)
class EarthSettings:
    """The Earth: `uniform:SPEED`, iasp91, ak135, prem, an .nd file, or a .csv file of travel times."""

    model: str = "ak135"


@dataclass(frozen=True)
class MapSettings:
    """The grid: half width and spacing in km (None: from the magnitude), frames from the origin time on in s."""

    half_width_km: float | None = None
    spacing_km: float | None = None
    frame_s: float = 1.0
    frames_until_s: float | None = None

    def __post_init__(self) -> None:
        if not self.frame_s > 0 or (self.frames_until_s is not None and not self.frames_until_s > 2 * self.frame_s):
            raise InputError("frame_s must be positive and frames_until_s hold at least two frames")


@dataclass(frozen=True)
class NullTestSettings:
    """How many synthetic ruptures answer "would these sites have told?"; 0 switches them off."""

    ruptures: int = 30

    def __post_init__(self) -> None:
        if self.ruptures < 0:
            raise InputError("ruptures of the null tests cannot be negative")


@dataclass(frozen=True)
class ResolveSettings:
    """A resolution study, and how much scattered energy its records have over the direct."""

    study: StudySettings = field(default_factory=StudySettings)
    coda_energy_ratio: float = 0.3

    def __post_init__(self) -> None:
        if not 0 <= self.coda_energy_ratio <= 3:
            raise InputError("coda_energy_ratio must lie between 0 and 3")


@dataclass(frozen=True)
class Job:
    """A whole run; every field but seed and planned sites is a table of the job file."""

    input: InputSettings = field(default_factory=InputSettings)
    records: RecordSettings = field(default_factory=RecordSettings)
    direction: DirectionSettings = field(default_factory=DirectionSettings)
    earth: EarthSettings = field(default_factory=EarthSettings)
    map: MapSettings = field(default_factory=MapSettings)
    stack: StackSettings = field(default_factory=StackSettings)
    smooth: SmoothSettings = field(default_factory=SmoothSettings)
    fit: FitSettings = field(default_factory=FitSettings)
    energy: EnergySettings = field(default_factory=EnergySettings)
    null_tests: NullTestSettings = field(default_factory=NullTestSettings)
    resolve: ResolveSettings = field(default_factory=ResolveSettings)
    planned: tuple[PlannedSite, ...] = ()
    seed: int = 1

    def as_table(self) -> dict[str, Any]:
        """Return plain values, keys without a value left out, as they go into job.toml."""
        table = _plain(dataclasses.asdict(self))
        if not self.planned:
            del table["planned"]
        return table


def _plain(value: Any) -> Any:
    if isinstance(value, Mapping):
        return {k: _plain(v) for k, v in value.items() if v is not None}
    return [_plain(v) for v in value] if isinstance(value, tuple | list) else value


def read_job(path: str | Path) -> Job:
    """Read a job file; every unknown key and wrong type is told at once.

    Raises
    ------
    InputError
        When the file cannot be read or taken.
    """
    path = Path(path)
    job = job_from_table(read_toml(path), str(path))
    return replace(job, input=_beside(job.input, path.parent), earth=_earth_beside(job.earth, path.parent))


def job_from_table(table: Mapping[str, Any], path: str) -> Job:
    """Return the job that a table holds; `path` names it in errors."""
    sections = {f.name: f for f in fields(Job)}
    wrong = [f"{path}: unknown table '{name}'{nearest_key(name, sections)}" for name in table if name not in sections]
    values: dict[str, Any] = {}
    default = Job()
    for name, content in table.items():
        if name not in sections:
            continue
        if name == "seed":
            if not isinstance(content, int) or isinstance(content, bool) or content < 0:
                wrong.append(f"{path}: 'seed' = {content!r}: a whole number from 0 up is needed")
            else:
                values[name] = content
        elif name == "planned":
            values[name] = _planned(content, path, wrong)
        elif not isinstance(content, Mapping):
            wrong.append(f"{path}: '{name}' must be a table, [{name}]")
        else:
            try:
                values[name] = settings_from_table(type(getattr(default, name)), content, f"{path} [{name}]")
            except InputError as error:
                wrong.append(str(error))
    if wrong:
        raise InputError("\n".join(wrong))
    return Job(**values)


def _planned(content: Any, path: str, wrong: list[str]) -> tuple[PlannedSite, ...]:
    if not isinstance(content, list | tuple) or not all(isinstance(site, Mapping) for site in content):
        wrong.append(f"{path}: planned sites are [[planned]] tables")
        return ()
    sites = []
    for number, site in enumerate(content, start=1):
        try:
            sites.append(settings_from_table(PlannedSite, site, f"{path} [[planned]] {number}"))
        except InputError as error:
            wrong.append(str(error))
    return tuple(sites)


def with_whole_paths(job: Job) -> Job:
    """Return the job with paths that hold from any folder, as its copy among the results needs them."""
    return replace(job, input=_beside(job.input, Path.cwd()), earth=_earth_beside(job.earth, Path.cwd()))


def _beside(given: InputSettings, folder: Path) -> InputSettings:
    def move(text: str) -> str:
        return text if Path(text).is_absolute() or ":" in text.split("/")[0] else str(folder / text)

    return replace(
        given,
        records=tuple(move(r) for r in given.records),
        inventory=tuple(move(r) for r in given.inventory),
        event=move(given.event) if given.event else None,
        trace=move(given.trace) if given.trace else None,
    )


def _earth_beside(given: EarthSettings, folder: Path) -> EarthSettings:
    return (
        EarthSettings(str(folder / given.model))
        if given.model.endswith((".nd", ".csv")) and not Path(given.model).is_absolute()
        else given
    )
