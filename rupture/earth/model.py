"""Earth models by name or file: travel-time tables and layers for the synthetic engines."""

from __future__ import annotations

import hashlib
import os
import tempfile
import zipfile
from collections.abc import Callable
from dataclasses import dataclass, field
from functools import lru_cache
from pathlib import Path

import numpy as np

from rupture.earth.layers import LayeredModel
from rupture.earth.named import BUILT_IN, layers_from_profile, profile_of_built_in, read_nd
from rupture.earth.tables import TravelTimeTable, table_distances_m, uniform_table
from rupture.errors import InputError

VP_OVER_VS = 1.73
"""Ratio of a Poisson solid, for the uniform Earth."""

PHASES = {"P": ("p", "P", "Pn"), "S": ("s", "S", "Sn")}
_DIFFRACTED_FROM_KM = 9000.0
_VERSION = "2"


@dataclass(frozen=True)
class Earth:
    """An Earth model.

    Attributes
    ----------
    name
        As it was asked for.
    layers
        Homogeneous layers for the synthetic engines.
    content
        Hash of what the model holds, for caches and provenance.
    """

    name: str
    layers: LayeredModel
    content: str
    _tabulate: Callable[[str, float, float], TravelTimeTable] = field(repr=False)

    def table(self, phase: str, depth_km: float, longest_km: float = 1000.0) -> TravelTimeTable:
        """Return first-arrival times of 'P' or 'S' from a depth out to a distance at least.

        Raises
        ------
        InputError
            For an unknown phase, or when the model has no arrival somewhere in the range.
        """
        if phase not in PHASES:
            raise InputError(f"unknown phase '{phase}' (known: {', '.join(PHASES)})")
        return self._tabulate(phase, round(float(depth_km), 2), float(250.0 * np.ceil(longest_km / 250.0)))

    def s_speed_km_s(self, depth_km: float) -> float:
        """Return the S speed at a depth in km/s."""
        return float(self.layers.vs_km_s[self.layers.layer_at(depth_km)])


def build_earth(spec: str) -> Earth:
    """Build an Earth model.

    Parameters
    ----------
    spec
        `uniform:SPEED` (S speed in km/s; P speed is 1.73 times that), `iasp91`, `ak135`, `prem`, or the path of a
        layered model in the `.nd` form (lines of depth, vp, vs, density and optionally Qp, Qs; km, km/s, g/cm^3).

    Raises
    ------
    InputError
        When the name or the file cannot be taken.
    """
    if spec.startswith("uniform:"):
        return _uniform(spec)
    if spec.lower() in BUILT_IN:
        name = spec.lower()
        layers = layers_from_profile(name, profile_of_built_in(name))
        return Earth(name, layers, _digest(name), lambda p, z, d: _taup_table(name, name, p, z, d))
    path = Path(spec)
    if not path.is_file():
        raise InputError(
            f"unknown Earth model '{spec}': give uniform:SPEED, {', '.join(BUILT_IN)}, or the path of an .nd file"
        )
    profile = read_nd(path)
    layers = layers_from_profile(path.stem, profile)
    content = _digest(path.read_text(encoding="utf-8"))

    def tabulate(phase: str, depth_km: float, longest_km: float) -> TravelTimeTable:
        from rupture.earth.named import taup_file

        return _taup_table(content, str(taup_file(profile, content, cache_folder())), phase, depth_km, longest_km)

    return Earth(spec, layers, content, tabulate)


def _uniform(spec: str) -> Earth:
    try:
        speed = float(spec.removeprefix("uniform:"))
    except ValueError:
        raise InputError(
            f"Earth model '{spec}': the S speed must be a number in km/s, for example uniform:3.5"
        ) from None
    if not 0.1 <= speed <= 10:
        raise InputError(f"Earth model '{spec}': an S speed of {speed:g} km/s is not one of rock (0.1 to 10 km/s)")
    vp = VP_OVER_VS * speed
    one = np.ones(1)
    # Gardner's relation stands in for a density nobody gave; travel times do not use it.
    layers = LayeredModel(
        spec, 0 * one, vp * one, speed * one, 310.0 * (1e3 * vp) ** 0.25 * one, np.inf * one, np.inf * one
    )
    speeds = {"P": vp, "S": speed}
    return Earth(spec, layers, _digest(spec), lambda p, z, d: uniform_table(p, speeds[p], z, table_distances_m(d)))


def cache_folder() -> Path:
    """Return the user's cache folder of this program (XDG base directory specification; RUPTURE_CACHE wins)."""
    base = os.environ.get("RUPTURE_CACHE")
    if base:
        return Path(base)
    return Path(os.environ.get("XDG_CACHE_HOME") or Path.home() / ".cache") / "rupture-backtrack"


def _digest(text: str) -> str:
    return hashlib.sha256(text.encode()).hexdigest()[:16]


@lru_cache(maxsize=64)
def _taup_table(content: str, model: str, phase: str, depth_km: float, longest_km: float) -> TravelTimeTable:
    """Ask TauP once per model, depth and phase; keep the answer on disk, since it takes seconds."""
    key = _digest(f"{_VERSION} {content} {phase} {depth_km:.2f} {longest_km:.0f}")
    path = cache_folder() / "tables" / f"{key}.npz"
    try:
        with path.open("rb") as file, np.load(file) as kept:
            return TravelTimeTable(phase, depth_km, kept["distance_m"], kept["time_s"], kept["slowness_s_m"])
    except (OSError, KeyError, ValueError, EOFError, zipfile.BadZipFile):
        pass  # no such table yet, or a damaged one: it is made again
    from obspy.taup import TauPyModel

    radius_km = 6371.0
    taup = TauPyModel(model)
    distance = table_distances_m(longest_km)
    # Only what can come first: a shorter list takes TauP half the time.
    phases = [*PHASES[phase], *([f"{phase}diff"] if longest_km > _DIFFRACTED_FROM_KM else [])]
    time, slowness = np.full((2, distance.size), np.nan)
    for k, d in enumerate(distance):
        arrivals = taup.get_travel_times(depth_km, np.degrees(d / 1e3 / radius_km), phases)
        if arrivals:
            time[k], slowness[k] = arrivals[0].time, arrivals[0].ray_param / (1e3 * radius_km)
    table = TravelTimeTable(phase, depth_km, distance, time, slowness)
    _keep(path, table)
    return table


def _keep(path: Path, table: TravelTimeTable) -> None:
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        with tempfile.NamedTemporaryFile(dir=path.parent, suffix=".part", delete=False) as part:
            np.savez(part, distance_m=table.distance_m, time_s=table.time_s, slowness_s_m=table.slowness_s_m)
        Path(part.name).replace(path)
    except OSError:
        return  # a read-only home costs time, not the run
