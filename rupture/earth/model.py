"""Earth models by name or file: travel-time tables and layers for the synthetic engines."""

from __future__ import annotations

import hashlib
from collections.abc import Callable
from dataclasses import dataclass, field
from functools import lru_cache
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from rupture.conventions import KM
from rupture.earth.first_arrivals import first_arrivals
from rupture.earth.layers import LayeredModel
from rupture.earth.named import BUILT_IN, continued_below, layers_from_profile, profile_of_built_in, read_nd
from rupture.earth.tables import TravelTimeTable, table_distances_m, uniform_table
from rupture.earth.timefile import read_times
from rupture.errors import InputError

VP_OVER_VS = 1.73
"""Ratio of a Poisson solid, for the uniform Earth."""

PHASES = ("P", "S")

FARTHEST_KM = 11_000.0
"""Beyond about 99 degrees the core takes the direct waves."""

_TABULATE = Callable[[str, float, float], TravelTimeTable]


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
    reach_km
        Greatest distance for which there are times.
    """

    name: str
    layers: LayeredModel
    content: str
    _tabulate: _TABULATE = field(repr=False)
    reach_km: float = FARTHEST_KM

    def table(self, phase: str, depth_km: float, longest_km: float = 1000.0) -> TravelTimeTable:
        """Return first-arrival times of 'P' or 'S' from a depth out to a distance at least.

        Raises
        ------
        InputError
            For an unknown phase, or a depth or distance that the model does not reach.
        """
        if phase not in PHASES:
            raise InputError(f"unknown phase '{phase}' (known: {', '.join(PHASES)})")
        if not longest_km <= self.reach_km:
            raise InputError(
                f"Earth model {self.name} has no direct {phase} at {longest_km:.0f} km (it reaches {self.reach_km:.0f} km)"
                "; leave out what lies farther away"
            )
        longest = min(250.0 * np.ceil(longest_km / 250.0), self.reach_km)
        return self._tabulate(phase, round(float(depth_km), 2), float(longest))

    def s_speed_km_s(self, depth_km: float) -> float:
        """Return the S speed at a depth in km/s."""
        return float(self.layers.vs_km_s[self.layers.layer_at(depth_km)])


def build_earth(spec: str) -> Earth:
    """Build an Earth model.

    Parameters
    ----------
    spec
        `uniform:SPEED` (S speed in km/s; P speed is 1.73 times that), `iasp91`, `ak135`, `prem`; the path of a
        layered model in the `.nd` form (lines of depth, vp, vs, density and optionally Qp, Qs; km, km/s, g/cm^3;
        ak135 goes on below its last line); or the path of a `.csv` file of travel times with the columns phase,
        depth_km, distance_km, time_s.

    Raises
    ------
    InputError
        When the name or the file cannot be taken.
    """
    if spec.startswith("uniform:"):
        return _uniform(spec)
    name = spec.lower()
    if name in BUILT_IN:
        profile = profile_of_built_in(name)
        return Earth(name, layers_from_profile(name, profile), _digest(name), _profile_tables(profile))
    path = Path(spec)
    if not path.is_file():
        raise InputError(
            f"unknown Earth model '{spec}': give uniform:SPEED, {', '.join(BUILT_IN)}, or the path of an .nd or .csv file"
        )
    if path.suffix.lower() == ".csv":
        times = read_times(path)
        layers = _one_layer(path.stem, times.p_speed_km_s, times.s_speed_km_s)
        return Earth(spec, layers, _digest(path.read_text(encoding="utf-8")), times.table, times.reach_km)
    profile = read_nd(path)
    layers = layers_from_profile(path.stem, profile)
    return Earth(spec, layers, _digest(path.read_text(encoding="utf-8")), _profile_tables(continued_below(profile)))


def _profile_tables(profile: NDArray[np.float64]) -> _TABULATE:
    @lru_cache(maxsize=32)
    def tabulate(phase: str, depth_km: float, longest_km: float) -> TravelTimeTable:
        distance = table_distances_m(longest_km)
        speed = profile[:, 1 + PHASES.index(phase)]
        time, slowness = first_arrivals(profile[:, 0], speed, depth_km, distance / KM)
        return TravelTimeTable(phase, depth_km, distance, time, slowness / KM)

    return tabulate


def _uniform(spec: str) -> Earth:
    try:
        speed = float(spec.removeprefix("uniform:"))
    except ValueError:
        raise InputError(
            f"Earth model '{spec}': the S speed must be a number in km/s, for example uniform:3.5"
        ) from None
    if not 0.1 <= speed <= 10:
        raise InputError(f"Earth model '{spec}': an S speed of {speed:g} km/s is not one of rock (0.1 to 10 km/s)")
    speeds = {"P": VP_OVER_VS * speed, "S": speed}
    layers = _one_layer(spec, speeds["P"], speed)
    return Earth(spec, layers, _digest(spec), lambda p, z, d: uniform_table(p, speeds[p], z, table_distances_m(d)))


def _one_layer(name: str, vp_km_s: float, vs_km_s: float) -> LayeredModel:
    # Gardner's relation stands in for a density nobody gave; travel times do not use it.
    density, lossless = 310.0 * (KM * vp_km_s) ** 0.25, np.inf
    return LayeredModel(name, *(np.array([v]) for v in (0.0, vp_km_s, vs_km_s, density, lossless, lossless)))


def _digest(text: str) -> str:
    return hashlib.sha256(text.encode()).hexdigest()[:16]
