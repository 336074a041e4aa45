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
from rupture.front.kernels import LONGEST_RISE_S, P_WAVE, POWER_FLOOR, S_WAVE, SURFACE_WAVE, log_likelihoods
from rupture.geodesy import LocalPlane, distance_azimuth

Array = NDArray[np.float64]

LEAST_ENERGY = 0.02
"""Waves weaker than this share of the strongest at a distance are left out: no window shows them."""

HALF_CELLS = 24
"""Cells from zero to the largest slowness in the tables: 2.4 degrees at that slowness, less than any spread."""

SURFACE_SLOWER = 1.1
"""Slowness of the surface wave over that of S waves far away: 1/0.92 for a Rayleigh wave in a Poisson solid (Rayleigh 1885), a
little more in a crust whose top is slow."""

SURFACE_FROM_M, SURFACE_DISTANCE_M = 20e3, 100e3
"""Nearer than this there is no surface wave yet; where its energy is compared with that of S."""

FLAT = 0.02
"""A window whose ratios differ by less than this says nothing of direction."""

LONGEST_BIN_S = 1.0
"""Arrivals are gathered in bins no longer than this: a quarter of the shortest window that is in use."""


@dataclass(frozen=True)
class Windows:
    """What `rupture.front.kernels.log_likelihoods` needs, under the names that it uses; windows of a site are contiguous."""

    code: tuple[str, ...]
    first: NDArray[np.int64]
    view_first: NDArray[np.int64]
    table_first: NDArray[np.int64]
    window_s: Array
    overlap: Array
    codes: NDArray[np.uint8]
    value: NDArray[np.float64]
    telling: NDArray[np.bool_]
    cells: int
    cell_s_m: float
    level: Array
    start_s: Array
    stride: int
    bin_s: float
    pad: int
    places: Array
    tables: Array
    sort: NDArray[np.int64]
    power_sigma: float
    power_share: float

    @property
    def time_s(self) -> Array:
        """Window centres, shape (windows,)."""
        hop = self.stride * self.bin_s
        return np.concatenate([s + hop * np.arange(n) for s, n in zip(self.start_s, np.diff(self.first), strict=True)])

    def log_likelihood(self, parameters: Array) -> Array:
        """Return log-likelihoods per site, shape (count, sites).

        Parameters
        ----------
        parameters
            SI parameters in the order of `rupture.front.PARAMETERS`, shape (count, columns).
        """
        each: Array = self.counted(parameters, np.ones((1, self.first[-1])))[..., 0]
        return each

    def counted(self, parameters: Array, multiple: Array) -> Array:
        """Return log-likelihoods per site for several countings of windows, shape (count, sites, countings).

        Parameters
        ----------
        parameters
            As `log_likelihood`.
        multiple
            How many times each window counts, shape (countings, windows).
        """
        counted: Array = log_likelihoods(
            np.ascontiguousarray(parameters), self.first, self.view_first, self.table_first, self.window_s, self.overlap, self.codes,
            self.value, self.telling, self.cells, self.cell_s_m, self.level, multiple, self.start_s, self.stride, self.bin_s, self.pad,
            self.places, self.tables, self.sort, STEP_M, self.power_sigma, self.power_share,
        )  # fmt: skip
        return counted


def lay_out(
    directions: Sequence[SiteDirection],
    site_longitude_deg: Sequence[float],
    site_latitude_deg: Sequence[float],
    event: Event,
    responses: Responses,
    longest_s: float,
    slowness_spread: float,
    azimuth_spread_rad: float,
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
    slowness_spread, azimuth_spread_rad
        Standard deviations of the log of true over predicted apparent slowness, and of true less predicted back-azimuth.
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
    # The plane is centred on the epicentre: its north differs from a site's by the convergence of the meridians.
    turn = np.where(np.hypot(east, north) > 1.0, back - np.arctan2(-east, -north), 0.0)
    tables, sort = _strong_waves(responses)
    largest = float(tables[..., 1][tables[..., 2] > 0].max())
    onset = {wave: responses.at(responses.strongest(wave)[0], distance) for wave in "PS"}
    step = float(directions[0].time_s[1] - directions[0].time_s[0])
    hop = step * max(1, round(hop_s / step))
    stride = int(np.ceil(hop / LONGEST_BIN_S - 1e-9))
    rows: list[NDArray[np.float32]] = []
    telling: list[NDArray[np.bool_]] = []
    levels, starts, first, view_first, lengths, overlaps = [], [], [0], [0], [], []
    for k, d in enumerate(directions):
        begin, end = onset["P"][k] - 1.0, onset["S"][k] + longest_s
        chosen = np.flatnonzero((d.time_s >= begin) & (d.time_s <= end))[:: round(hop / step)]
        levels.append(_level(d.power[chosen], np.asarray(np.isnan(d.coherent[:, chosen]).all(axis=0))))
        starts.append(float(d.time_s[chosen[0]]) if chosen.size else 0.0)
        first.append(first[-1] + chosen.size)
        order = np.argsort(d.window_s, kind="stable")
        view_first.append(view_first[-1] + order.size)
        for band in order:
            table = slowness_table(d, int(band), chosen, largest / HALF_CELLS, slowness_spread, azimuth_spread_rad)
            rows.append(np.log(table).ravel())
            telling.append((np.ptp(table, axis=(0, 1)) > FLAT) & ~np.isnan(levels[-1]))
            lengths.append(float(d.window_s[band]))
            # A Hann window counts for two thirds of its length.
            overlaps.append(min(1.0, hop / (2.0 / 3.0 * float(d.window_s[band]))))
    if first[-1] == 0 or all(np.isnan(level).all() for level in levels):
        raise DataError("no site has a usable window between its P arrival and the end of the rupture")
    codes, value = _coded(np.concatenate(rows))
    pad = int(np.ceil(0.5 * (max(lengths) + LONGEST_RISE_S) / (hop / stride))) + 1
    return Windows(
        tuple(d.code for d in directions), np.array(first), np.array(view_first),
        np.concatenate([[0], np.cumsum([row.size for row in rows])])[:-1], np.array(lengths), np.array(overlaps), codes, value, np.concatenate(telling),
        2 * HALF_CELLS + 1, largest / HALF_CELLS, np.concatenate(levels), np.array(starts), stride, hop / stride,
        pad, np.stack([east, north, np.cos(turn), np.sin(turn)], axis=1), tables, sort, power_sigma, power_share,
    )  # fmt: skip


def slowness_table(
    direction: SiteDirection,
    band: int,
    windows: NDArray[np.int64],
    cell_s_m: float,
    slowness_spread: float,
    azimuth_spread_rad: float,
) -> NDArray[np.float32]:
    """Return a band's posterior over prior on a square grid of slowness vectors, as a model that errs must see it.

    Parameters
    ----------
    direction, band, windows
        Site, band, and which windows.
    cell_s_m
        Size of a cell; the middle one is zero slowness.
    slowness_spread, azimuth_spread_rad
        Errors of the prediction: the ratio is the mean under a lognormal and a normal about it.

    Returns
    -------
    ndarray
        Shape (cells, cells, windows): east and north slowness toward the source, float32.
    """
    node = np.log(direction.slowness_s_m)
    angles = direction.back_azimuth_rad.size
    kernel = np.exp(-0.5 * ((node[:, None] - node[None, :]) / slowness_spread) ** 2)
    ratio = np.exp(np.asarray(direction.band_log_ratio[band])[:, :, windows])
    blurred = np.einsum(
        "qp,apt->aqt", (kernel / kernel.sum(axis=1, keepdims=True)).astype(np.float32), ratio, optimize=True
    )
    order = np.arange(angles // 2 + 1)
    damping = np.exp(-0.5 * (order * azimuth_spread_rad) ** 2).astype(np.float32)
    blurred = np.fft.irfft(np.fft.rfft(blurred, axis=0) * damping[:, None, None], angles, axis=0).astype(np.float32)
    axis = cell_s_m * np.arange(-HALF_CELLS, HALF_CELLS + 1)
    east, north = np.meshgrid(axis, axis, indexing="ij")
    slow = np.maximum(np.hypot(east, north), 1e-12)
    a = np.arctan2(east, north) / (2 * np.pi) * angles
    p = np.clip((np.log(slow) - node[0]) / (node[1] - node[0]), 0.0, node.size - 1.001)
    low_a, low_p = np.floor(a).astype(int), np.floor(p).astype(int)
    part_a, part_p = (a - low_a)[..., None].astype(np.float32), (p - low_p)[..., None].astype(np.float32)
    table = sum(
        (part_a if i else 1 - part_a) * (part_p if j else 1 - part_p) * blurred[(low_a + i) % angles, low_p + j]
        for i in (0, 1)
        for j in (0, 1)
    )
    # Below the slowest trial slowness a wave comes from below, and so from no direction.
    inside = np.clip(slow / direction.slowness_s_m[0], 0.0, 1.0)[..., None].astype(np.float32)
    table = inside * table + (1 - inside) * blurred[:, 0].mean(axis=0)
    return np.ascontiguousarray(np.maximum(table, 1e-6), np.float32)


def _strong_waves(responses: Responses) -> tuple[Array, NDArray[np.int64]]:
    """Tables (D, waves, 3) of time, slowness and energy, and the sort of each wave.

    Weak waves have no energy, and waves that are nowhere strong are left out. A surface wave follows S, a little slower than
    the S waves far away; it spreads along the surface alone, and at 100 km has the energy of all S: how much it really has
    is for the fit to find.
    """
    sort = np.array([P_WAVE if wave == "P" else S_WAVE for wave in responses.wave])
    energy = responses.energy.copy()
    for group in (sort == P_WAVE, sort == S_WAVE):
        energy[group] = np.where(energy[group] >= LEAST_ENERGY * energy[group].max(axis=0), energy[group], 0.0)
    keep = energy.max(axis=1) > 0
    tables = np.stack([responses.time_s[keep], responses.slowness_s_m[keep], energy[keep]], axis=-1)
    distance = STEP_M * np.arange(energy.shape[1])
    far = min(round(SURFACE_DISTANCE_M / STEP_M), distance.size - 1)
    slowness = SURFACE_SLOWER * responses.slowness_s_m[sort == S_WAVE][:, far].max()
    level = energy[sort == S_WAVE][:, far].sum() * distance[far]
    surface = np.stack(
        [
            slowness * distance,
            np.full(distance.size, slowness),
            np.where(distance >= SURFACE_FROM_M, level / np.maximum(distance, STEP_M), 0.0),
        ],
        axis=-1,
    )
    tables = np.concatenate([tables, surface[None]])
    return np.ascontiguousarray(tables.transpose(1, 0, 2)), np.append(sort[keep], SURFACE_WAVE)


def _level(power: Array, masked: NDArray[np.bool_]) -> Array:
    """Log of window power over the site's largest plus the floor; NaN where there is no power."""
    usable = (power > 0) & ~masked
    largest = power[usable].max() if usable.any() else 1.0
    return np.where(usable, np.log(np.where(usable, power, 0.0) / largest + POWER_FLOOR), np.nan)


def _coded(log_ratio: NDArray[np.float32]) -> tuple[NDArray[np.uint8], Array]:
    """One byte for each ratio: a quarter of the memory, so that look-ups stay in the cache; steps are a few hundredths."""
    low, high = float(log_ratio.min(initial=0.0)), float(log_ratio.max(initial=0.0))
    step = max(high - low, 1e-3) / 255.0
    return np.rint((log_ratio - low) / step).astype(np.uint8), np.exp(low + step * np.arange(256))
