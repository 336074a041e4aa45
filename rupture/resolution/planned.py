"""Sites that do not exist yet: places, components and sensor classes in place of records."""

from __future__ import annotations

import zlib
from collections.abc import Sequence

import numpy as np

from rupture.conventions import COMPONENTS, KM, ROT_E
from rupture.resolution.settings import PlannedSite
from rupture.site import Site
from rupture.synthetic.noise import (
    RotationSensor,
    TranslationSensor,
    coloured_noise,
    ground_acceleration,
    ground_rotation,
    rotation_self_noise,
    translation_self_noise,
)

STEP_S = 0.1
BEFORE_S = 60.0


_HAS = {
    "6C": np.ones(6, bool),
    "3C+rotZ": np.array([1, 1, 1, 0, 0, 1], bool),
    "Z+rotH": np.array([0, 0, 1, 1, 1, 0], bool),
    "3C": np.array([1, 1, 1, 0, 0, 0], bool),
}


def planned_sites(planned: Sequence[PlannedSite], longest_km: float, seed: int) -> tuple[Site, ...]:
    """Return sites whose records are noise of their sensor classes, long enough for waves of 2 km/s from `longest_km`."""
    samples = int((BEFORE_S + longest_km * KM / 2000.0 + 60.0) / STEP_S)
    out = []
    for site in planned:
        rng = np.random.default_rng((seed, zlib.crc32(site.code.encode())))
        data = np.empty((len(COMPONENTS), samples))
        for row in range(len(COMPONENTS)):
            if row < ROT_E:
                spectra = (
                    ground_acceleration(site.ground_level),
                    translation_self_noise(TranslationSensor(site.translation)),
                )
            else:
                spectra = (ground_rotation(site.ground_level), rotation_self_noise(RotationSensor(site.rotation)))
            data[row] = sum(coloured_noise(spectrum, samples, STEP_S, rng) for spectrum in spectra)
        valid = np.broadcast_to(_HAS[site.components][:, None], data.shape).copy()
        out.append(
            Site(
                site.code,
                site.longitude_deg,
                site.latitude_deg,
                0.0,
                -BEFORE_S,
                STEP_S,
                np.where(valid, data, 0.0),
                valid,
                (0.02, 0.3 / STEP_S),
            )
        )
    return tuple(out)
