"""Forward-backward smoothing of the frames under a bound on how fast a front can run."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

from rupture.errors import InputError
from rupture.mapping.grid import Grid

Array = NDArray[np.float64]


@dataclass(frozen=True)
class SmoothSettings:
    """How frames are smoothed.

    Attributes
    ----------
    fastest_km_s
        No front runs faster: the P speed of the crust bounds what shear rupture can do.
    hypocentre_km
        Standard deviation of where the rupture starts, about the epicentre.
    mean_duration_s
        Expected duration of the rupture, for the chance that it ends in a frame.
    trust
        Share of the frames' log-likelihood that counts, as in the line fit.
    """

    fastest_km_s: float = 6.0
    hypocentre_km: float = 6.0
    mean_duration_s: float = 60.0
    trust: float = 0.5

    def __post_init__(self) -> None:
        if not self.fastest_km_s > 0 or not self.hypocentre_km > 0 or not self.mean_duration_s > 0:
            raise InputError("fastest_km_s, hypocentre_km and mean_duration_s must be positive")
        if not 0 < self.trust <= 1:
            raise InputError("trust must lie in (0, 1]")


@dataclass(frozen=True)
class FrontTrack:
    """The smoothed front.

    Attributes
    ----------
    source_time_s
        Shape (F,).
    probability
        Of each cell given all frames; sums over cells to `active`, shape (C, F).
    active
        Probability that the rupture still radiates, shape (F,).
    east_m, north_m
        Mean place while active, shape (F,).
    covariance_m2
        Shape (F, 2, 2).
    """

    source_time_s: Array
    probability: Array
    active: Array
    east_m: Array
    north_m: Array
    covariance_m2: Array


def smooth_front(
    log_ratio: NDArray[np.float32], source_time_s: Array, grid: Grid, overlap_share: float, settings: SmoothSettings
) -> FrontTrack:
    """Smooth the stack's frames with a hidden Markov model: active at a cell, or over.

    Parameters
    ----------
    log_ratio
        Stack, shape (C, F).
    source_time_s
        Equally spaced frames, shape (F,); the rupture is active in the first one at or after time 0.
    grid
        Map or trace.
    overlap_share
        Share of an independent observation that a frame stands for (windows overlap).
    settings
        How.
    """
    step = float(source_time_s[1] - source_time_s[0])
    kernel = _reach_kernel(grid, settings.fastest_km_s * 1e3 * step)
    ends = step / settings.mean_duration_s
    weight = np.float32(settings.trust * overlap_share)
    first = int(np.searchsorted(source_time_s, -0.5 * step))
    frames = source_time_s.size - first
    distance = np.hypot(grid.east_m, grid.north_m)
    start = np.exp(-0.5 * (distance / (1e3 * settings.hypocentre_km)) ** 2) + 1e-12
    state = start / start.sum()
    over = 0.0
    forward = np.empty((frames, grid.east_m.size))
    forward_over = np.empty(frames)
    emission = np.exp(weight * (log_ratio[:, first:] - np.maximum(log_ratio[:, first:].max(axis=0), 0.0))).T.astype(
        float
    )
    nothing = np.exp(-weight * np.maximum(log_ratio[:, first:].max(axis=0), 0.0)).astype(float)
    for f in range(frames):
        if f:
            over = over + ends * state.sum()
            state = (1.0 - ends) * _spread(state, kernel, grid)
        state = state * emission[f]
        over = over * nothing[f]
        total = state.sum() + over
        state, over = state / total, over / total
        forward[f], forward_over[f] = state, over
    probability = np.zeros((grid.east_m.size, source_time_s.size))
    active = np.zeros(source_time_s.size)
    back, back_over = np.ones(grid.east_m.size), 1.0
    for f in range(frames - 1, -1, -1):
        joint, joint_over = forward[f] * back, forward_over[f] * back_over
        total = joint.sum() + joint_over
        probability[:, first + f] = joint / total
        active[first + f] = joint.sum() / total
        carried = _spread(back * emission[f], kernel, grid)
        back = (1.0 - ends) * carried + ends * back_over * nothing[f]
        back_over = back_over * nothing[f]
        largest = max(back.max(), back_over)
        back, back_over = back / largest, back_over / largest
    return _moments(source_time_s, probability, active, grid)


def _moments(source_time_s: Array, probability: Array, active: Array, grid: Grid) -> FrontTrack:
    share = probability / np.maximum(probability.sum(axis=0), 1e-300)
    east, north = grid.east_m @ share, grid.north_m @ share
    de, dn = grid.east_m[:, None] - east, grid.north_m[:, None] - north
    see, snn, sen = ((share * a * b).sum(axis=0) for a, b in ((de, de), (dn, dn), (de, dn)))
    # A cell is as uncertain as it is large.
    cell = grid.spacing_m**2 / 12.0
    covariance = np.moveaxis(np.array([[see + cell, sen], [sen, snn + cell]]), 2, 0)
    return FrontTrack(source_time_s, probability, active, east, north, covariance)


def _reach_kernel(grid: Grid, reach_m: float) -> Array:
    """Cells that a front can reach in one frame: those within the bound, and their neighbours by the share that lies within."""
    cells = reach_m / grid.spacing_m
    half = int(np.ceil(cells + 0.5))
    axis = np.arange(-half, half + 1)
    distance = np.abs(axis).astype(float) if grid.kind == "trace" else np.hypot(axis[:, None], axis[None, :])
    kernel = np.clip(cells + 0.5 - distance, 0.0, 1.0)
    result: Array = kernel / kernel.sum()
    return result


def _spread(state: Array, kernel: Array, grid: Grid) -> Array:
    """Move a state by one frame, forward or backward: the kernel is symmetric."""
    moved: Array = ndimage.convolve(state.reshape(grid.shape), kernel, mode="constant").ravel()
    return moved
