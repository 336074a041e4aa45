"""Rays of all sites laid on the map and moved to source time: where was energy, and when."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from rupture.conventions import KM
from rupture.direction import SiteDirection
from rupture.errors import InputError
from rupture.mapping.geometry import Geometry
from rupture.mapping.grid import Grid
from rupture.mapping.kernels import add_shifted_rows, middle_mean_power
from rupture.mapping.lookup import look_up_rows

Array = NDArray[np.float64]
Table = NDArray[np.float32]

MOST_VALUES = 80_000_000
"""Cells times frames: three results of four bytes each are then 1 GB."""

_BLOCK_VALUES = 2_000_000
"""Work arrays hold no more values than this, whatever the grid."""

_FLOOR = 1e-3
"""Power below this share of a site's largest is noise that is left."""


@dataclass(frozen=True)
class StackSettings:
    """How rays are stacked.

    Attributes
    ----------
    phases
        'P', 'S' or both. P counts only until S from the hypocentre arrives: after that S covers it.
    slowness_spread
        Standard deviation of the natural log of true over predicted apparent slowness (structure below a site,
        other branches and surface waves).
    time_spread
        Standard deviation of travel times as a share of themselves.
    source_share
        Probability, before any record is looked at, that a frame has a source at all.
    """

    phases: tuple[str, ...] = ("P", "S")
    slowness_spread: float = 0.25
    time_spread: float = 0.02
    source_share: float = 0.5

    def __post_init__(self) -> None:
        if not self.phases or any(p not in ("P", "S") for p in self.phases):
            raise InputError("phases must be 'P', 'S' or both")
        if not self.slowness_spread > 0 or not 0 < self.source_share < 1:
            raise InputError("slowness_spread must be positive and source_share between 0 and 1")
        if not 0 <= self.time_spread < 1:
            raise InputError("time_spread must lie from 0 to 1")


@dataclass(frozen=True)
class Stack:
    """The stack over cells and frames.

    Attributes
    ----------
    log_ratio
        Sum over sites and phases of log posterior ratios, shape (C, F), float32.
    location_probability
        Shape (C, F), float32; with `no_source` it sums to one in each frame.
    no_source
        Probability that a frame has no coherent source on the grid, shape (F,).
    energy
        Location probability times spreading- and site-corrected power, relative units, shape (C, F), float32.
    source_time_s
        Shape (F,).
    """

    log_ratio: Table
    location_probability: Table
    no_source: Array
    energy: Table
    source_time_s: Array


def stack_rays(
    directions: Sequence[SiteDirection],
    grid: Grid,
    geometry: Geometry,
    hypocentre_s_time: Sequence[float],
    source_time_s: Array,
    settings: StackSettings,
    progress: Callable[[int, int], None] | None = None,
    time_error_s: ArrayLike = 0.0,
) -> Stack:
    """Stack the rays of all sites.

    Memory: the three results, 12 bytes for each cell and frame, the rows of one site and phase, and blocks of a fixed
    size.

    Parameters
    ----------
    directions
        One per site, in the geometry's order, all with the same hop.
    grid, geometry
        Cells and what lies between them and the sites.
    hypocentre_s_time
        Arrival of S from the hypocentre at each site, s after the origin time.
    source_time_s
        Frames, equally spaced by a whole multiple of the directions' hop, shape (F,).
    settings
        How.
    progress
        Called with (sites done, sites).
    time_error_s
        Standard deviation of the clock of each site, in s, shape (S,), or one for all.

    Raises
    ------
    InputError
        When shapes, hops or frames do not fit, or cells times frames are too many.
    """
    start, hop, stride = _checked(directions, grid, geometry, hypocentre_s_time, source_time_s)
    cells, frames = grid.longitude_deg.size, source_time_s.size
    errors = np.broadcast_to(np.asarray(time_error_s, float), (len(directions),))
    total = np.zeros((cells, frames), np.float32)
    for k, direction in enumerate(directions):
        back_azimuth = geometry.back_azimuth_rad[k]
        for phase in settings.phases:
            travel = geometry.travel_time_s[phase][k]
            until = hypocentre_s_time[k] - 0.5 * float(direction.window_s.min()) if phase == "P" else np.inf
            error = float(np.hypot(settings.time_spread * np.median(travel), errors[k]))
            slowness = geometry.slowness_s_m[phase][k]
            table, row = look_up_rows(direction, back_azimuth, slowness, settings.slowness_spread, error, until)
            add_shifted_rows(total, table, row, (start + travel - direction.time_s[0]) / hop, stride)
        if progress is not None:
            progress(k + 1, len(directions))
    probability, nothing = location_probability(total, settings.source_share)
    phase = "S" if "S" in settings.phases else "P"
    energy = np.empty_like(probability)
    path = np.maximum(np.hypot(geometry.distance_m, KM * grid.depth_km), KM)
    _radiated(energy, directions, path, geometry.travel_time_s[phase], start, hop, stride)
    for block in _blocks(energy.shape):
        energy[block] *= probability[block]
    return Stack(total, probability, nothing, energy, np.asarray(source_time_s, float))


def _checked(
    directions: Sequence[SiteDirection], grid: Grid, geometry: Geometry, arrivals: Sequence[float], source_time_s: Array
) -> tuple[float, float, int]:
    """Return time of the first frame, hop, and hops from frame to frame."""
    shape = (len(directions), grid.longitude_deg.size)
    if not directions or geometry.distance_m.shape != shape or len(arrivals) != len(directions):
        raise InputError(
            f"{len(directions)} directions, {len(arrivals)} arrivals and a geometry of {geometry.distance_m.shape[0]} sites by "
            f"{geometry.distance_m.shape[1]} cells do not fit a grid of {shape[1]} cells"
        )
    if source_time_s.size < 2:
        raise InputError("a stack needs two frames at least")
    if shape[1] * source_time_s.size > MOST_VALUES:
        raise InputError(
            f"{shape[1]} cells by {source_time_s.size} frames are more than {MOST_VALUES} values; give a larger spacing, "
            "a smaller map or frames further apart"
        )
    for direction in directions:
        if direction.time_s.size < 2:
            raise InputError(f"site {direction.code}: fewer than two windows; the record is too short to be stacked")
    hops = [float(d.time_s[1] - d.time_s[0]) for d in directions]
    if not np.allclose(hops, hops[0], rtol=1e-6):
        raise InputError("all sites' directions must have the same hop to be stacked")
    step = float(source_time_s[1] - source_time_s[0])
    stride = round(step / hops[0])
    if stride < 1 or abs(stride * hops[0] - step) > 1e-6:
        raise InputError(
            f"frames every {step:g} s do not fit directions every {hops[0]:g} s; a whole multiple is needed"
        )
    return float(source_time_s[0]), hops[0], stride


def _blocks(shape: tuple[int, int]) -> list[slice]:
    rows = max(1, _BLOCK_VALUES // shape[1])
    return [slice(start, start + rows) for start in range(0, shape[0], rows)]


def location_probability(log_ratio: Table, source_share: float) -> tuple[Table, Array]:
    """Return the probability of each cell, shape (C, F), and of no source, shape (F,), frame by frame."""
    largest = np.maximum(log_ratio.max(axis=0), 0.0)
    probability = np.empty_like(log_ratio)
    total = np.zeros(log_ratio.shape[1])
    for block in _blocks(log_ratio.shape):
        np.exp(log_ratio[block] - largest, out=probability[block])
        total += probability[block].sum(axis=0, dtype=float)
    source = source_share * total / log_ratio.shape[0]
    none = (1.0 - source_share) * np.exp(-largest.astype(float))
    factor = (source_share / log_ratio.shape[0] / (source + none)).astype(np.float32)
    for block in _blocks(log_ratio.shape):
        probability[block] *= factor
    return probability, none / (source + none)


def _radiated(
    out: Table,
    directions: Sequence[SiteDirection],
    path_m: Array,
    travel_s: Array,
    start_s: float,
    hop_s: float,
    stride: int,
) -> None:
    """Fill in the power that each cell would have radiated, from every site relative to its own mean.

    Body-wave power falls with the square of the path. Relative to its means over time and over the cells, what a site's
    ground amplifies drops out.
    """
    alive = [k for k, d in enumerate(directions) if (d.power > 0).any()]
    if not alive:
        out[:] = 0.0
        return
    length = np.array([directions[k].time_s.size for k in alive])
    level = np.zeros((len(alive), int(length.max())))
    for row, k in enumerate(alive):
        power = directions[k].power
        floor = _FLOOR * power.max()
        level[row, : power.size] = np.log(np.maximum(power, floor)) - np.log(power[power > floor].mean())
    begin = np.array([directions[k].time_s[0] for k in alive])[:, None]
    usual = np.array([2 * np.log(path_m[k]).mean() for k in alive])[:, None]
    for block in _blocks(out.shape):
        shift = (start_s + travel_s[alive, block] - begin) / hop_s
        middle_mean_power(out[block], level, length, 2 * np.log(path_m[alive, block]) - usual, shift, stride)
