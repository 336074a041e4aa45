"""The strong waves of a layered Earth, from the ray engine, as the estimator's picture of how energy arrives."""

from __future__ import annotations

import numpy as np

from rupture.earth.layers import LayeredModel
from rupture.earth.responses import STEP_M, Responses
from rupture.geodesy import destination
from rupture.synthetic.engine import Receivers, SubEvents
from rupture.synthetic.ray import RayEngine, six_components

MECHANISMS = 40


def ray_responses(model: LayeredModel, depth_km: float, longest_km: float, frequency_hz: float = 0.5) -> Responses:
    """Return direct and reflected P and S with their energies, averaged over double couples.

    Parameters
    ----------
    model
        Layers.
    depth_km
        Source depth; a source on an interface is taken 10 m below it.
    longest_km
        Distances run from 0 to here.
    frequency_hz
        Where attenuation is taken.
    """
    if np.isclose(model.top_km, depth_km, atol=0.005).any() or depth_km <= 0:
        depth_km += 0.01
    distance = STEP_M * np.arange(int(longest_km) + 2)
    # A ray straight up has no azimuth; half a kilometre stands for the epicentre itself.
    longitude, latitude = destination(0.0, 0.0, np.pi / 2, np.maximum(distance, 500.0))
    rng = np.random.default_rng(0)
    one = np.ones(MECHANISMS)
    # Uniform over rotations: strike and rake uniform, the cosine of dip uniform (Kagan 1991 has the full treatment).
    sources = SubEvents(
        0 * one, 0 * one, depth_km * one, 0 * one, one, one,
        rng.uniform(0, 2 * np.pi, MECHANISMS), np.arccos(rng.uniform(0, 1, MECHANISMS)), rng.uniform(0, 2 * np.pi, MECHANISMS),
    )  # fmt: skip
    rays = RayEngine(head_waves=False).trace(sources, Receivers(longitude, latitude), model)
    exists = rays.exists & ~rays.head
    amplitude = np.abs(six_components(rays)[..., :3]) * np.exp(-np.pi * frequency_hz * rays.loss_s)[..., None]
    energy = np.where(exists, (amplitude**2).sum(axis=-1), 0.0).mean(axis=1).T
    time = np.where(exists, rays.time_s, 0.0).max(axis=1).T
    slowness = np.where(exists, rays.slowness_s_m, 0.0).max(axis=1).T
    wave = tuple(name[0] for name in rays.name)
    keep = energy.max(axis=1) > 0
    shear = np.array([w == "S" for w in wave])
    reference = energy[shear][:, min(100, energy.shape[1] - 1)].max()
    # Waves beyond a limit of their own keep the last values, with no energy, so that tables interpolate.
    for row in np.flatnonzero(keep):
        alive = np.flatnonzero(energy[row] > 0)
        time[row] = np.interp(np.arange(time.shape[1]), alive, time[row, alive])
        slowness[row] = np.interp(np.arange(time.shape[1]), alive, slowness[row, alive])
    return Responses(
        tuple(w for w, k in zip(wave, keep, strict=True) if k),
        time[keep], np.maximum(slowness[keep], 1e-6), energy[keep] / reference,
    )  # fmt: skip
