"""The windows of all sites, laid out for the likelihood of line sources."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rupture.conventions import KM
from rupture.direction import SiteDirection
from rupture.earth import Earth
from rupture.errors import DataError
from rupture.event import Event
from rupture.front.kernels import log_likelihoods
from rupture.geodesy import LocalPlane, distance_azimuth
from rupture.mapping.stack import phase_table

Array = NDArray[np.float64]

TABLE_STEP_M = 1000.0


@dataclass(frozen=True)
class Windows:
    """What `rupture.front.kernels.log_likelihoods` needs, under the names that it uses; windows of a site are contiguous."""

    code: tuple[str, ...]
    first: NDArray[np.int64]
    ratio: NDArray[np.float32]
    log_power: Array
    window_time: Array
    window_s: Array
    share: Array
    places: Array
    tables: Array
    grid: tuple[float, float, float]
    power_sigma: float
    power_share: float

    def log_likelihood(self, parameters: Array) -> Array:
        """Return log-likelihoods per site, shape (count, sites)."""
        return log_likelihoods(
            np.ascontiguousarray(parameters), self.first, self.ratio, self.log_power, self.window_time, self.window_s,
            self.share, self.places, self.tables, self.grid, self.power_sigma, self.power_share,
        )  # fmt: skip


def lay_out(
    directions: Sequence[SiteDirection],
    site_longitude_deg: Sequence[float],
    site_latitude_deg: Sequence[float],
    event: Event,
    earth: Earth,
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
    event, earth
        Hypocentre and travel times.
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
    longest = float(distance.max()) / KM + 500.0
    step = TABLE_STEP_M * np.arange(int(longest) + 1)
    p, s = (earth.table(phase, event.depth_km, longest) for phase in ("P", "S"))
    # At zero distance slowness is zero; its logarithm is held at the fastest trial.
    tables = np.stack([np.stack([t.time(step), np.log(np.maximum(t.slowness(step), 1e-6))]) for t in (p, s)])
    # The plane is centred on the epicentre: its north differs from a site's by the convergence of the meridians.
    turn = back - np.arctan2(-east, -north)
    turn = np.where(np.hypot(east, north) > 1.0, turn, 0.0)
    nodes = np.log(directions[0].slowness_s_m)
    ratios, powers, times, first = [], [], [], [0]
    share, length = [], []
    for k, d in enumerate(directions):
        stride = max(1, round(hop_s / float(d.time_s[1] - d.time_s[0])))
        begin, end = float(p.time(distance[k])) - 1.0, float(s.time(distance[k])) + longest_s
        chosen = np.flatnonzero((d.time_s >= begin) & (d.time_s <= end))[::stride]
        masked = np.isnan(d.coherent).all(axis=0)[chosen]
        table = np.exp(phase_table(d, slowness_spread)[:, :, chosen])
        ratios.append(np.ascontiguousarray(np.moveaxis(table, 2, 0), np.float32))
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
    places = np.stack([east, north, turn, np.maximum(distance, 5e3)], axis=1)
    return Windows(
        tuple(d.code for d in directions), np.array(first), np.concatenate(ratios), np.concatenate(powers),
        np.concatenate(times), np.array(length), np.array(share), places, tables,
        (TABLE_STEP_M, float(nodes[0]), float(nodes[1] - nodes[0])), power_sigma, power_share,
    )  # fmt: skip
