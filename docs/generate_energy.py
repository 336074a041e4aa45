"""Write docs/energy.md: how far inverted energy lies from where it was radiated, on complete synthetic seismograms.

    python docs/generate_energy.py --folder DIR

Records come from the wavefield engine with the layers of the ready scenarios, noise and scattered waves on; kernels from
ak135, mechanism unknown. DIR keeps the records of an earlier run.
"""

from __future__ import annotations

import argparse
import pickle
import time
from dataclasses import replace
from pathlib import Path

import numpy as np

from rupture.earth import build_earth
from rupture.energy import EnergySettings, build_kernels
from rupture.energy.invert import independent_pieces, pose, solve_problem
from rupture.energy.lines import line_answer, line_summary
from rupture.geodesy import LocalPlane, distance_azimuth
from rupture.mapping import map_grid
from rupture.site import Site
from rupture.synthetic.scenario import read_scenario
from rupture.synthetic.simulate import GroundMotion, ground_motion, noise_at

HALF_WIDTH_KM, SPACING_KM, UNTIL_S, NOISE_GUARD_S = 100.0, 8.0, 50.0, 3.0
ALL = tuple(range(8))
RUNS = [
    ("unilateral", ALL, "6C", {}),
    ("unilateral", ALL, "6C", {"coda_share": 0.0}),
    ("unilateral", ALL, "6C", {"gains": True}),
    ("unilateral", ALL, "3C", {}),
    ("unilateral", (0, 2, 4, 6), "6C", {}),
    ("unilateral", (0, 2, 4, 6), "3C", {}),
    ("unilateral", (1,), "6C", {}),
    ("unilateral", (1,), "3C", {}),
    ("bilateral", ALL, "6C", {}),
    ("bilateral", ALL, "3C", {}),
    ("supershear", ALL, "6C", {}),
    ("supershear", ALL, "3C", {}),
    ("stationary", ALL, "6C", {}),
    ("stationary", ALL, "3C", {}),
]


def ground(name: str, folder: Path) -> GroundMotion:
    """Return the ground motion of a ready scenario by complete seismograms, kept in the folder."""
    path = folder / f"{name}.pkl"
    if path.exists():
        return pickle.loads(path.read_bytes())
    motion = ground_motion(read_scenario(name, engine="wavefield"))
    path.write_bytes(pickle.dumps(motion))
    return motion


def sites_of(name: str, motion: GroundMotion, pick: tuple[int, ...], components: str) -> list[Site]:
    """Return the sites as the program would read them, with noise."""
    scenario, out = read_scenario(name), []
    for k in pick:
        station, sampling = motion.stations[k], motion.sampling
        data = motion.records[k] + noise_at(station, scenario, sampling.samples, sampling.step_s)
        valid = np.ones(data.shape, bool)
        valid[3:] = components == "6C"
        place = (station.code, station.longitude_deg, station.latitude_deg, 0.0)
        out.append(Site(*place, sampling.start_s, sampling.step_s, np.where(valid, data, 0.0), valid, (0.05, 6.0)))
    return out


def distance_to_truth(inversion, motion: GroundMotion, plane: LocalPlane) -> tuple[float, float]:
    """Return median and 80 % of the energy-weighted distance (km) to the nearest sub-event that radiated within a second."""
    source = motion.sources
    east, north = plane.to_plane(source.longitude_deg, source.latitude_deg)
    end = source.time_s + source.rise_time_s
    distance, weight = [], []
    for f, tau in enumerate(inversion.source_time_s):
        off = np.maximum(0, np.maximum(source.time_s - tau, tau - end))
        alive = off <= max(1.0, off.min())
        separation = np.hypot(
            inversion.grid.east_m[:, None] - east[alive], inversion.grid.north_m[:, None] - north[alive]
        )
        distance.append(separation.min(axis=1) / 1e3)
        weight.append(inversion.energy[:, f])
    d, w = np.concatenate(distance), np.concatenate(weight)
    order = np.argsort(d)
    share = np.cumsum(w[order]) / w.sum()
    return tuple(float(d[order][np.searchsorted(share, q)]) for q in (0.5, 0.8))


def row(name: str, pick: tuple[int, ...], components: str, change: dict, kernels, folder: Path) -> str:
    """Return one line of the table."""
    scenario, motion = read_scenario(name), ground(name, folder)
    event, sites = scenario.as_event(), sites_of(name, motion, pick, components)
    grid = map_grid(event, HALF_WIDTH_KM, SPACING_KM)
    first = build_earth("ak135").table("P", event.depth_km, 400.0)
    quiet = []
    for site in sites:
        far, _, _ = distance_azimuth(event.longitude_deg, event.latitude_deg, site.longitude_deg, site.latitude_deg)
        quiet.append((site.start_s, float(first.time(far)) - NOISE_GUARD_S))
    start = time.perf_counter()
    problem = pose(sites, grid, kernels, replace(EnergySettings(), **change), quiet, UNTIL_S)
    found = solve_problem(problem)
    seconds = time.perf_counter() - start
    median, wide = distance_to_truth(found, motion, LocalPlane(event.longitude_deg, event.latitude_deg))
    pieces = independent_pieces(problem, found)
    told = line_summary(line_answer(found.energy, grid.east_m, grid.north_m, found.source_time_s, pieces))
    truth = sorted(scenario.source().arms, key=lambda arm: -arm.length_km)
    real = (
        f"{truth[0].azimuth_deg:.0f}, {truth[0].length_km / truth[0].duration_s:.1f}, {truth[0].length_km:.0f}"
        if truth
        else "-"
    )
    parts = [told[key] for key in ("direction_deg", "speed_km_s", "length_km")]
    line = (
        ", ".join(f"{part['best']:.{digits}f}" for part, digits in zip(parts, (0, 1, 0), strict=True))
        if parts[0]
        else "-"
    )
    what = ", ".join(f"{key} = {value}" for key, value in change.items()) or "default"
    return (
        f"| {name} | {len(pick)} | {components} | {what} | {median:.1f} / {wide:.1f} | {told['kind']}: {line} | {real} "
        f"| {found.objective.size} | {seconds:.0f} |"
    )


def write_page(lines: list[str]) -> None:
    """Write the page with the rows that are there, and say how many are not."""
    here = Path(__file__).parent
    text = (here / "energy_head.txt").read_text(encoding="utf-8") + "\n".join(lines) + "\n"
    if len(lines) < len(RUNS):
        missing = ", ".join(sorted({f"{name} ({len(pick)} sites)" for name, pick, *_ in RUNS[len(lines) :]}))
        text += f"\n**Unfinished:** {len(lines)} of {len(RUNS)} rows; not measured yet: {missing}.\n"
    (here / "energy.md").write_text(text, encoding="utf-8")


def main() -> None:
    """Write the table beside this script."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--folder", type=Path, required=True, help="where records are kept")
    folder = parser.parse_args().folder
    folder.mkdir(parents=True, exist_ok=True)
    event = read_scenario("unilateral").as_event()
    kernels = build_kernels(build_earth("ak135").layers, event.depth_km, 300.0, EnergySettings())
    lines = []
    for run in RUNS:
        lines.append(row(*run, kernels, folder))
        print(lines[-1], flush=True)
        write_page(lines)


if __name__ == "__main__":
    main()
