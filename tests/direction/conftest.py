"""Exact plane waves at a free surface, made without the estimator's relations.

A velocity v(t - p.x) is known at every place, so its rotation rate follows from its values at neighbouring places:
the horizontal rotation from the slope of the vertical motion (the free surface doubles half of it: no shear traction,
so dv_N/dz = -dv_Z/dN), the vertical one from half the curl. Nothing here uses a formula of rupture.direction.
"""

from types import SimpleNamespace

import numpy as np
import pytest

from rupture.site import Site

STEP_S = 0.1
NEAR_M = 1.0

# Share of the motion and of its quarter-period-turned twin along propagation, to the left of it, and up.
WAVES = {
    "P": ((0.4, 0.0, 1.0), (0.0, 0.0, 0.0)),
    "SV": ((1.0, 0.0, -0.6), (0.0, 0.0, 0.0)),
    "SH": ((0.0, 1.0, 0.0), (0.0, 0.0, 0.0)),
    "S": ((0.8, 1.0, -0.5), (0.0, 0.0, 0.0)),
    "Rayleigh": ((0.0, 0.0, 1.0), (0.68, 0.0, 0.0)),
    "Love": ((0.0, 1.0, 0.0), (0.0, 0.0, 0.0)),
}


class Lines:
    """A sum of cosines in a band: a random motion that can be asked at any time, and its derivative."""

    def __init__(self, seed, low_hz=0.1, high_hz=1.6, count=200):
        rng = np.random.default_rng(seed)
        self.omega = 2 * np.pi * rng.uniform(low_hz, high_hz, count)
        self.phase = rng.uniform(0, 2 * np.pi, count)

    def velocity(self, time_s, turned=0.0):
        return np.cos(np.outer(time_s, self.omega) + self.phase - turned) @ (1 / self.omega)

    def acceleration(self, time_s, turned=0.0):
        return -np.sin(np.outer(time_s, self.omega) + self.phase - turned).sum(axis=1)


def plane_wave(kind, back_azimuth_deg, speed_m_s, time_s, seed=0):
    """Return acceleration and rotation rate, East, North, Up each, shape (6, samples)."""
    heading = np.radians(back_azimuth_deg + 180.0)
    ahead = np.array([np.sin(heading), np.cos(heading)])
    left = np.array([-ahead[1], ahead[0]])
    first, second = WAVES[kind]
    # The two parts of an S wave that hold P-SV and SH have histories of their own.
    motion, side = Lines(seed), Lines(seed + 1000 * (kind == "S"))

    def moved(name, east_m=0.0, north_m=0.0):
        t = time_s - (ahead[0] * east_m + ahead[1] * north_m) / speed_m_s
        plain, turned = getattr(motion, name)(t), getattr(motion, name)(t, np.pi / 2)
        along, up = (first[k] * plain + second[k] * turned for k in (0, 2))
        across = first[1] * getattr(side, name)(t)
        return np.array([along * ahead[0] + across * left[0], along * ahead[1] + across * left[1], up])

    by_east = (moved("velocity", NEAR_M) - moved("velocity", -NEAR_M)) / (2 * NEAR_M)
    by_north = (moved("velocity", 0, NEAR_M) - moved("velocity", 0, -NEAR_M)) / (2 * NEAR_M)
    rotation = np.array([by_north[2], -by_east[2], 0.5 * (by_east[1] - by_north[0])])
    return np.vstack([moved("acceleration"), rotation])


def make_site(data, absent=(), start_s=-40.0, valid=None, **changes):
    """Return a site; `absent` are rows that it does not have."""
    valid = np.ones(data.shape, bool) if valid is None else valid.copy()
    valid[list(absent)] = False
    values = {"band_hz": (0.05, 3.0)} | changes
    return Site("QQ.TEST", 10.0, 20.0, 0.0, start_s, STEP_S, np.where(valid, data, 0.0), valid, **values)


def record(kind, back_azimuth_deg=200.0, speed_m_s=3500.0, noise=0.0, length_s=80.0, quiet_s=40.0, seed=0, absent=()):
    """Return a site: `quiet_s` of noise, then a wave to the end; noise is a share of each component's amplitude."""
    time = np.arange(round(length_s / STEP_S)) * STEP_S - quiet_s
    data = plane_wave(kind, back_azimuth_deg, speed_m_s, time, seed)
    scale = np.array([np.sqrt((data[:3] ** 2).mean())] * 3 + [np.sqrt((data[3:] ** 2).mean())] * 3)
    data *= 1.0 / (1.0 + np.exp(-time / 0.3))
    rng = np.random.default_rng(seed + 77)
    data += max(noise, 1e-4) * scale[:, None] * rng.standard_normal(data.shape)
    return make_site(data, absent, start_s=-quiet_s)


@pytest.fixture(scope="session")
def waves():
    return SimpleNamespace(plane_wave=plane_wave, make_site=make_site, record=record, kinds=tuple(WAVES), step_s=STEP_S)
