"""Rays of all sites laid on the map and moved to source time: where was energy, and when."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rupture.direction import SiteDirection
from rupture.errors import InputError
from rupture.mapping.geometry import Geometry
from rupture.mapping.grid import Grid
from rupture.mapping.kernels import add_shifted_rows

Array = NDArray[np.float64]
Table = NDArray[np.float32]


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
    source_share
        Probability, before any record is looked at, that a frame has a source at all.
    """

    phases: tuple[str, ...] = ("P", "S")
    slowness_spread: float = 0.25
    source_share: float = 0.5

    def __post_init__(self) -> None:
        if not self.phases or any(p not in ("P", "S") for p in self.phases):
            raise InputError("phases must be 'P', 'S' or both")
        if not self.slowness_spread > 0 or not 0 < self.source_share < 1:
            raise InputError("slowness_spread must be positive and source_share between 0 and 1")


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


def phase_table(direction: SiteDirection, spread: float, from_s: float = -np.inf, to_s: float = np.inf) -> Table:
    """Return a site's log posterior ratios with the slowness known only to a spread, shape (A, P, T).

    The ratio at (back-azimuth, predicted slowness) is the mean of the true ratio under a lognormal around the
    prediction; windows outside `from_s` to `to_s` are 0 (they say nothing).
    """
    node = np.log(direction.slowness_s_m)
    kernel = np.exp(-0.5 * ((node[:, None] - node[None, :]) / spread) ** 2)
    kernel /= kernel.sum(axis=1, keepdims=True)
    mean = np.einsum("qp,apt->aqt", kernel.astype(np.float32), np.exp(direction.log_ratio), optimize=True)
    table = np.log(np.maximum(mean, np.float32(1e-30)))
    table[..., (direction.time_s < from_s) | (direction.time_s > to_s)] = 0.0
    return np.ascontiguousarray(table, np.float32)


def table_rows(direction: SiteDirection, back_azimuth_rad: Array, slowness_s_m: Array) -> NDArray[np.int64]:
    """Return the row of a (A x P, T) table nearest to a direction and slowness; -1 where there is no back-azimuth."""
    angles, nodes = direction.back_azimuth_rad.size, np.log(direction.slowness_s_m)
    known = np.isfinite(back_azimuth_rad)
    angle = np.rint(np.where(known, back_azimuth_rad, 0.0) * angles / (2 * np.pi)).astype(np.int64) % angles
    step = nodes[1] - nodes[0]
    with np.errstate(divide="ignore"):
        place = np.rint((np.log(slowness_s_m) - nodes[0]) / step)
    node = np.clip(place, 0, nodes.size - 1).astype(np.int64)
    return np.where(known, angle * nodes.size + node, -1)


def stack_rays(
    directions: Sequence[SiteDirection],
    grid: Grid,
    geometry: Geometry,
    hypocentre_s_time: Sequence[float],
    source_time_s: Array,
    settings: StackSettings,
    progress: Callable[[int, int], None] | None = None,
) -> Stack:
    """Stack the rays of all sites.

    Memory: some seven float32 arrays of cells x frames at the most (sums, results, one at work), 30 bytes for
    each cell and frame as measured: 0.9 GB for 100,000 cells and 300 frames, 2.3 GB for the most cells a map may have.

    Parameters
    ----------
    directions
        One per site, in the geometry's order.
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
    """
    cells, frames = grid.longitude_deg.size, source_time_s.size
    total = np.zeros((cells, frames), np.float32)
    level = np.zeros((cells, frames), np.float32)
    heard = np.zeros((cells, frames), np.float32)
    for k, direction in enumerate(directions):
        hop = float(direction.time_s[1] - direction.time_s[0])
        stride = _stride(source_time_s, hop)
        for phase in settings.phases:
            until = hypocentre_s_time[k] - 0.5 * float(direction.window_s.min()) if phase == "P" else np.inf
            table = phase_table(direction, settings.slowness_spread, to_s=until)
            rows = table_rows(direction, geometry.back_azimuth_rad[k], geometry.slowness_s_m[phase][k])
            shift = (source_time_s[0] + geometry.travel_time_s[phase][k] - direction.time_s[0]) / hop
            add_shifted_rows(total, table.reshape(-1, table.shape[-1]), rows, shift, stride)
        _add_power(level, heard, direction, geometry, k, source_time_s[0], hop, stride, settings.phases)
        if progress is not None:
            progress(k + 1, len(directions))
    probability, nothing = location_probability(total, settings.source_share)
    with np.errstate(invalid="ignore"):
        power = np.where(heard > 0, np.exp(level / np.maximum(heard, 1.0)), 0.0)
    return Stack(
        total, probability, nothing, (probability * power).astype(np.float32), np.asarray(source_time_s, float)
    )


def _stride(source_time_s: Array, hop_s: float) -> int:
    step = float(source_time_s[1] - source_time_s[0])
    stride = round(step / hop_s)
    if stride < 1 or abs(stride * hop_s - step) > 1e-6:
        raise InputError(f"frames every {step:g} s do not fit directions every {hop_s:g} s; a whole multiple is needed")
    return stride


def location_probability(log_ratio: Table, source_share: float) -> tuple[Table, Array]:
    """Return the probability of each cell, shape (C, F), and of no source, shape (F,), frame by frame."""
    largest = np.maximum(log_ratio.max(axis=0), 0.0)
    weight = np.exp(log_ratio - largest)
    source = source_share * weight.mean(axis=0, dtype=float)
    none = (1.0 - source_share) * np.exp(-largest.astype(float))
    probability = weight * (source_share / log_ratio.shape[0] / (source + none)).astype(np.float32)
    return probability, none / (source + none)


def _add_power(
    level: Table,
    heard: Table,
    direction: SiteDirection,
    geometry: Geometry,
    site: int,
    start_s: float,
    hop: float,
    stride: int,
    phases: tuple[str, ...],
) -> None:
    """Add the log of spreading-corrected power; every site counts relative to its own mean, so that amplification drops out."""
    phase = "S" if "S" in phases else "P"
    power = direction.power
    if not (power > 0).any():
        return
    floor = 1e-3 * power.max()
    row = np.log(np.maximum(power, floor))
    row -= np.log(power[power > floor].mean())
    table = np.ascontiguousarray(np.stack([row, np.ones_like(row)]), np.float32)
    cells = level.shape[0]
    shift = (start_s + geometry.travel_time_s[phase][site] - direction.time_s[0]) / hop
    spreading = np.log(np.maximum(geometry.distance_m[site], 1e3) ** 2)
    heard_before = heard.copy()
    add_shifted_rows(level, table, np.zeros(cells, np.int64), shift, stride)
    add_shifted_rows(heard, table, np.ones(cells, np.int64), shift, stride)
    # Body-wave energy falls with the square of distance; relative to the mean over cells only the pattern counts.
    level += (spreading - spreading.mean()).astype(np.float32)[:, None] * (heard - heard_before)
