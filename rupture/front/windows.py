"""The windows of all sites, laid out for the likelihood of line sources."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rupture.direction import SiteDirection
from rupture.earth.responses import STEP_M, Responses
from rupture.errors import DataError
from rupture.event import Event
from rupture.front.kernels import log_likelihoods
from rupture.geodesy import LocalPlane, distance_azimuth
from rupture.mapping.stack import phase_table

Array = NDArray[np.float64]

LEAST_ENERGY = 0.02
"""Waves weaker than this share of the strongest at a distance are left out: no window shows them."""


@dataclass(frozen=True)
class Windows:
    """What `rupture.front.kernels.log_likelihoods` needs, under the names that it uses; windows of a site are contiguous."""

    code: tuple[str, ...]
    first: NDArray[np.int64]
    ratio: NDArray[np.float32]
    angles: int
    nodes: int
    log_power: Array
    window_time: Array
    window_s: Array
    share: Array
    places: Array
    tables: Array
    primary: NDArray[np.bool_]
    grid: tuple[float, float, float]
    power_sigma: float
    power_share: float

    def log_likelihood(self, parameters: Array) -> Array:
        """Return log-likelihoods per site, shape (count, sites)."""
        return log_likelihoods(
            np.ascontiguousarray(parameters), self.first, self.ratio, self.angles, self.nodes, self.log_power, self.window_time, self.window_s,
            self.share, self.places, self.tables, self.primary, self.grid, self.power_sigma, self.power_share,
        )  # fmt: skip


def lay_out(
    directions: Sequence[SiteDirection],
    site_longitude_deg: Sequence[float],
    site_latitude_deg: Sequence[float],
    event: Event,
    responses: Responses,
    longest_s: float,
    slowness_spread: float,
    hop_s: float,
    power_sigma: float,
    power_share: float,
) -> Windows:
    """Choose and lay out windows: from the P onset to the end of the slowest arrivals, at about `hop_s`.

    Parameters
    ----------
    directions, site_longitude_deg, site_latitude_deg
        Per site.
    event, responses
        Hypocentre, and the waves that a point source sends to the surface.
    longest_s
        How long after the S onset windows are looked at.
    slowness_spread
        As `rupture.mapping.StackSettings`.
    hop_s
        Distance between the windows used, rounded to a multiple of the directions' hop.
    power_sigma, power_share
        Log-scatter of window power about the model, and the weight of that term.

    Raises
    ------
    DataError
        When no site has a window there.
    """
    plane = LocalPlane(event.longitude_deg, event.latitude_deg)
    east, north = plane.to_plane(site_longitude_deg, site_latitude_deg)
    distance, _, back = distance_azimuth(event.longitude_deg, event.latitude_deg, site_longitude_deg, site_latitude_deg)
    tables = np.stack([responses.time_s, np.log(responses.slowness_s_m), responses.energy], axis=1)
    primary = np.array([wave == "P" for wave in responses.wave])
    for group in (primary, ~primary):
        strongest = tables[group, 2].max(axis=0)
        tables[group, 2] = np.where(tables[group, 2] >= LEAST_ENERGY * strongest, tables[group, 2], 0.0)
    onset = {wave: responses.at(responses.strongest(wave)[0], distance) for wave in "PS"}
    # The plane is centred on the epicentre: its north differs from a site's by the convergence of the meridians.
    turn = back - np.arctan2(-east, -north)
    turn = np.where(np.hypot(east, north) > 1.0, turn, 0.0)
    nodes = np.log(directions[0].slowness_s_m)
    ratios, powers, times, first = [], [], [], [0]
    share, length = [], []
    for k, d in enumerate(directions):
        stride = max(1, round(hop_s / float(d.time_s[1] - d.time_s[0])))
        begin, end = onset["P"][k] - 1.0, onset["S"][k] + longest_s
        chosen = np.flatnonzero((d.time_s >= begin) & (d.time_s <= end))[::stride]
        masked = np.isnan(d.coherent[:, chosen]).all(axis=0)
        table = np.exp(phase_table(d, slowness_spread)[:, :, chosen])
        ratios.append(np.ascontiguousarray(table, np.float32).ravel())
        power = d.power[chosen]
        positive = power > 0
        with np.errstate(divide="ignore"):
            powers.append(np.where(positive & ~masked, np.log(np.where(positive, power, 1.0)), np.nan))
        times.append(d.time_s[chosen])
        first.append(first[-1] + chosen.size)
        share.append(min(1.0, float(d.weight.mean()) * stride))
        length.append(float(np.mean(d.window_s)))
    if first[-1] == 0 or all(np.isnan(p).all() for p in powers):
        raise DataError("no site has a usable window between its P arrival and the end of the rupture")
    places = np.stack([east, north, turn], axis=1)
    return Windows(
        tuple(d.code for d in directions), np.array(first), np.concatenate(ratios),
        directions[0].back_azimuth_rad.size, nodes.size, np.concatenate(powers),
        np.concatenate(times), np.array(length), np.array(share), places, tables, primary,
        (STEP_M, float(nodes[0]), float(nodes[1] - nodes[0])), power_sigma, power_share,
    )  # fmt: skip
