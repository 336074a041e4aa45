"""Where the energy of a point source goes: its strong waves at the surface against distance."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rupture.earth.model import Earth

Array = NDArray[np.float64]

STEP_M = 1000.0


@dataclass(frozen=True)
class Responses:
    """Waves of a source at one depth, at distances 0, 1, 2, ... km.

    Attributes
    ----------
    wave
        'P' or 'S': how each wave left its source, shape (W,).
    time_s, slowness_s_m
        Shape (W, D).
    energy
        Share of the source's energy, mean over all double couples, relative to the strongest S at 100 km; 0 where a wave does
        not exist. Shape (W, D).
    """

    wave: tuple[str, ...]
    time_s: Array
    slowness_s_m: Array
    energy: Array

    def strongest(self, wave: str) -> tuple[Array, Array]:
        """Return time and slowness of the strongest wave of a kind at each distance, shapes (D,).

        The first arrival may be a weak refracted one; what a window shows is the strongest.
        """
        rows = np.flatnonzero(np.array(self.wave) == wave)
        best = rows[self.energy[rows].argmax(axis=0)]
        columns = np.arange(self.energy.shape[1])
        return self.time_s[best, columns], self.slowness_s_m[best, columns]

    def at(self, values: Array, distance_m: Array) -> Array:
        """Interpolate a (D,) row to distances in m."""
        return np.interp(distance_m, STEP_M * np.arange(values.size), values)


def first_arrival_responses(earth: Earth, depth_km: float, longest_km: float) -> Responses:
    """Return first-arriving P and S alone, with geometric spreading, for Earth models that know no more."""
    distance = STEP_M * np.arange(min(int(longest_km) + 2, int(earth.reach_km) + 1))
    path = np.hypot(distance, 1e3 * depth_km)
    times, slownesses, energies = [], [], []
    for phase, share in (("P", 0.05), ("S", 1.0)):
        table = earth.table(phase, depth_km, distance[-1] / 1e3)
        times.append(table.time(distance))
        slownesses.append(np.maximum(table.slowness(distance), 1e-6))
        energies.append(share * (1e5 / np.maximum(path, 1e3)) ** 2)
    return Responses(("P", "S"), np.array(times), np.array(slownesses), np.array(energies))
