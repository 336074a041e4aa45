"""From a scenario to files: records, metadata, event and the truth, written beside and moved into place when whole."""

from __future__ import annotations

import json
import zlib
from collections.abc import Callable
from dataclasses import asdict, dataclass
from datetime import timedelta
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rupture import __version__
from rupture.conventions import COMPONENTS, ROT_E
from rupture.folder import output_folder
from rupture.progress import Progress
from rupture.synthetic.coda import ScatteringEngine
from rupture.synthetic.engine import Engine, Receivers, Sampling, SubEvents
from rupture.synthetic.faults import spoil_motion, turn_horizontals
from rupture.synthetic.moment_rate import moment_tensor
from rupture.synthetic.noise import (
    coloured_noise,
    ground_acceleration,
    ground_rotation,
    rotation_self_noise,
    translation_self_noise,
)
from rupture.synthetic.ray import check_sampling, ray_records
from rupture.synthetic.scaling import brune_stress_drop_pa
from rupture.synthetic.scenario import Scenario
from rupture.synthetic.sensors import to_counts
from rupture.synthetic.source import KinematicSource
from rupture.synthetic.station_files import source_identifier, write_event, write_inventory, write_records
from rupture.synthetic.stations import Station, make_stations
from rupture.synthetic.sub_events import SHEAR_SPEED_M_S, level_corner_hz, make_sub_events

TRUTH_NAME = "truth.json"


@dataclass(frozen=True)
class SimulatedFiles:
    """Where the files of a simulation are.

    Attributes
    ----------
    records
        miniSEED, one file for each station.
    inventory, event, truth
        StationXML, QuakeML, and what really happened as JSON.
    """

    records: tuple[Path, ...]
    inventory: Path
    event: Path
    truth: Path


@dataclass(frozen=True)
class GroundMotion:
    """What a scenario does at its stations, before noise, faults and recorders.

    Attributes
    ----------
    stations
        The stations.
    sources
        The sub-events.
    sampling
        The time axis.
    records
        Shape (stations, 6, samples): acceleration in m/s^2 and rotation rate in rad/s, East, North, Up.
    """

    stations: tuple[Station, ...]
    sources: SubEvents
    sampling: Sampling
    records: NDArray[np.float64]


def ground_motion(scenario: Scenario, progress: Progress | None = None) -> GroundMotion:
    """Run a scenario's engine (and coda) for all its stations.

    Raises
    ------
    InputError
        When source, Earth, sites or band cannot be taken; the sentence says which.
    """
    progress = progress or Progress(quiet=True)
    stations = make_stations(scenario)
    longitude = np.array([s.longitude_deg for s in stations])
    latitude = np.array([s.latitude_deg for s in stations])
    sampling = scenario.sampling(longitude, latitude)
    check_sampling(sampling)
    sources = make_sub_events(scenario.source(), scenario.seed)
    with progress.stage(f"synthetic records ({scenario.engine} engine)") as report:
        engine = _engine(scenario, sources, report)
        if scenario.coda.energy_ratio > 0:
            tell = report if scenario.engine == "ray" else None
            engine = ScatteringEngine(engine, scenario.coda_settings(), scenario.seed, tell)
        records = engine(sources, Receivers(longitude, latitude), scenario.model(), sampling)
    return GroundMotion(stations, sources, sampling, records)


def noise_at(station: Station, scenario: Scenario, samples: int, step_s: float) -> NDArray[np.float64]:
    """Return noise of ground and sensors of one station, shape (6, samples); zero when the scenario's noise is off.

    Parameters
    ----------
    station, scenario
        Where, and how much.
    samples, step_s
        Length and sampling interval.
    """
    out = np.zeros((len(COMPONENTS), samples))
    if not scenario.noise.on:
        return out
    level = scenario.noise.ground_level
    site = station.site
    for row in range(len(COMPONENTS)):
        ground = ground_acceleration(level) if row < ROT_E else ground_rotation(level)
        own = (
            translation_self_noise(site.translation_sensor)
            if row < ROT_E
            else rotation_self_noise(site.rotation_sensor)
        )
        # Ambient noise has wavelengths far beyond an array's aperture: its sensors share it, self-noise is each one's own.
        place, vault = (zlib.crc32(text.encode()) for text in (site.code, station.code))
        out[row] = coloured_noise(ground, samples, step_s, np.random.default_rng((scenario.seed, 1, place, row)))
        out[row] += coloured_noise(own, samples, step_s, np.random.default_rng((scenario.seed, 2, vault, row)))
    return out


def station_counts(
    station: Station, motion: NDArray[np.float64], noise: NDArray[np.float64], step_s: float
) -> list[NDArray[np.int32]]:
    """Return what each channel of a station writes, in counts, in the order of its channels.

    Parameters
    ----------
    station
        The station with its orientation and faults.
    motion, noise
        True ground motion and noise, shape (6, samples), East, North, Up.
    step_s
        Sampling interval in s.
    """
    felt = motion.copy()
    for east in (0, ROT_E):
        turn_horizontals(felt, east, np.radians(station.sensor_azimuth_deg))
    felt = spoil_motion(felt + noise, station.faults)
    return [to_counts(felt[c.component], step_s, c.response) for c in station.channels]


def simulate(
    scenario: Scenario, out_dir: str | Path, progress: Progress | None = None, overwrite: bool = False
) -> SimulatedFiles:
    """Simulate an earthquake and write its records as real files.

    Parameters
    ----------
    scenario
        What happens.
    out_dir
        Folder for records/NET.STA.mseed, inventory.xml, event.xml and truth.json.
    progress
        Shows the stages.
    overwrite
        Whether an earlier simulation in that folder may be replaced.

    Returns
    -------
    SimulatedFiles
        The files.

    Raises
    ------
    InputError
        As `ground_motion`, and when the folder cannot be taken; then nothing is left half-written.
    """
    progress = progress or Progress(quiet=True)
    out = Path(out_dir)
    with output_folder(out, overwrite, TRUTH_NAME) as scratch:
        ground = ground_motion(scenario, progress)
        sampling, event = ground.sampling, scenario.as_event()
        (scratch / "records").mkdir()
        names = []
        with progress.stage("miniSEED, StationXML, QuakeML") as report:
            for number, (station, motion) in enumerate(zip(ground.stations, ground.records, strict=True)):
                noise = noise_at(station, scenario, sampling.samples, sampling.step_s)
                counts = station_counts(station, motion, noise, sampling.step_s)
                names.append(f"{station.network}.{station.code}.mseed")
                write_records(
                    scratch / "records" / names[-1],
                    station,
                    counts,
                    event.origin_time,
                    sampling.start_s,
                    sampling.step_s,
                )
                report(number + 1, len(ground.stations))
            day = timedelta(days=1)
            write_inventory(
                scratch / "inventory.xml", ground.stations, scenario.record.rate_hz,
                event.origin_time - 365 * day, event.origin_time + 365 * day,
            )  # fmt: skip
            sources = ground.sources
            tensor = moment_tensor(sources.strike_rad[:1], sources.dip_rad[:1], sources.rake_rad[:1])[0]
            write_event(scratch / "event.xml", event, tensor)
            text = json.dumps(truth(scenario, ground), indent=1, allow_nan=False)
            (scratch / TRUTH_NAME).write_text(text + "\n", encoding="utf-8")
    return SimulatedFiles(
        tuple(out / "records" / name for name in names), out / "inventory.xml", out / "event.xml", out / TRUTH_NAME
    )


def truth(scenario: Scenario, ground: GroundMotion) -> dict[str, Any]:
    """Return what really happened, ready for JSON: rupture in the words of summary.json, sub-events, sites and faults."""
    source, event = scenario.source(), scenario.as_event()
    corner = level_corner_hz(ground.sources)
    return {
        "program": f"rupture-backtrack {__version__}",
        "scenario": scenario.model_dump(mode="json"),
        "event": {
            "origin_time": event.origin_time.isoformat(),
            "longitude_deg": event.longitude_deg,
            "latitude_deg": event.latitude_deg,
            "depth_km": event.depth_km,
            "magnitude": event.magnitude,
            "mechanism_deg": list(event.mechanism_deg or ()),
            "moment_nm": source.moment_nm,
            "corner_frequency_hz": corner,
            "stress_drop_mpa": brune_stress_drop_pa(source.moment_nm, corner, SHEAR_SPEED_M_S) / 1e6,
        },
        "rupture": rupture_truth(source),
        "sub_events": {name: values.tolist() for name, values in asdict(ground.sources).items()},
        "sites": [_site_truth(station) for station in ground.stations],
    }


def rupture_truth(source: KinematicSource) -> dict[str, Any]:
    """Return kind, direction, mean speed, length and duration of a rupture in the words of summary.json."""
    arms = sorted(source.arms, key=lambda arm: arm.length_km, reverse=True)
    kind = ("stationary", "unilateral", "bilateral")[len(arms)]
    described = [
        {
            "direction_deg": arm.azimuth_deg,
            "speed_km_s": arm.length_km / arm.duration_s,
            "speed_steps": [list(step) for step in arm.steps],
            "length_km": arm.length_km,
            "duration_s": arm.duration_s,
        }
        for arm in arms
    ]
    first: dict[str, Any] = described[0] if described else {"duration_s": source.duration_s}
    return {"kind": kind, **first, "width_km": source.width_km, "second_arm": described[1] if len(arms) == 2 else None}


def _site_truth(station: Station) -> dict[str, Any]:
    return {
        "code": f"{station.network}.{station.code}",
        "site": f"{station.network}.{station.site.code}",
        "name": station.name,
        "longitude_deg": station.longitude_deg,
        "latitude_deg": station.latitude_deg,
        "elevation_m": station.elevation_m,
        "sensor_azimuth_deg": station.sensor_azimuth_deg,
        "channels": [
            {
                "code": c.code,
                "source_identifier": source_identifier(station, c),
                "component": COMPONENTS[c.component],
                "unit": c.response.unit,
                "counts_per_unit": c.response.sensitivity,
            }
            for c in station.channels
        ],
        "faults": [fault.model_dump(exclude_none=True) for fault in station.faults],
    }


def _engine(scenario: Scenario, sources: SubEvents, report: Callable[[int, int], None]) -> Engine:
    if scenario.engine == "ray":
        return ray_records
    from rupture.synthetic.wavefield import GreensStore, stored_wavefield

    # The same sites and Earth are asked for again and again, with other ruptures, noise and faults.
    return stored_wavefield(GreensStore(), report, sources)
