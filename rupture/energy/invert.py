"""Non-negative inversion of covariances for energy over place and source time."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rupture.energy.model import EnergyModel, build_model
from rupture.energy.observe import Observed, observe
from rupture.energy.settings import EnergySettings
from rupture.energy.solver import Fit, solve
from rupture.energy.table import KernelTable
from rupture.errors import InputError
from rupture.event import Event
from rupture.mapping.grid import Grid
from rupture.site import Site

Array = NDArray[np.float64]

HELD_BLOCK_S = 8.0
"""Windows are held out in stretches: overlapping neighbours of a single window would give it away."""

RESAMPLE_UPDATES = 12
"""Resampled inversions start from the energy of the full one, so that few updates do."""


@dataclass(frozen=True)
class EnergyInversion:
    """Radiated energy over place and source time, and how well it explains the records.

    Attributes
    ----------
    energy
        Relative energy radiated in the bands, shape (C, F), not negative.
    source_time_s
        Shape (F,).
    objective
        Minus log-likelihood (and prior of the gains) after each update, shape (iterations,).
    held_out
        Minus log-likelihood of held-out windows after each update of the first run; empty when none were held out.
    gains
        Amplitude factor of each site and component group (horizontal, vertical translation; horizontal, vertical
        rotation), shape (S, 4).
    model_error_share
        Model error as a share of amplitude, shape (S, B).
    band_share
        Weight of each band: the source spectrum, mean one, shape (B,).
    observed_power, predicted_power
        Mean square ground acceleration, sum of bands and components, (m/s^2)^2, shape (S, T); NaN where it does not count.
    time_s
        Window centres, s after the origin time, shape (T,).
    grid
        The cells.
    """

    energy: Array
    source_time_s: Array
    objective: Array
    held_out: Array
    gains: Array
    model_error_share: Array
    band_share: Array
    observed_power: Array
    predicted_power: Array
    time_s: Array
    grid: Grid


@dataclass(frozen=True)
class Problem:
    """Everything that stays the same while energy is sought: the model, the windows, the settings."""

    model: EnergyModel
    observed: Observed
    settings: EnergySettings
    grid: Grid


def pose(
    sites: Sequence[Site], grid: Grid, kernels: KernelTable, settings: EnergySettings, noise_windows_s: Sequence[tuple[float, float]],
    until_s: float,
) -> Problem:  # fmt: skip
    """Return the problem of sites, cells and source times up to `until_s`; errors as `invert_energy`."""
    from rupture.geodesy import distance_azimuth

    if not sites:
        raise InputError("the energy inversion needs at least one site")
    if len(noise_windows_s) != len(sites):
        raise InputError(f"{len(sites)} sites but {len(noise_windows_s)} stretches of noise")
    lon, lat = (np.array([getattr(s, name) for s in sites])[:, None] for name in ("longitude_deg", "latitude_deg"))
    distance, _, back = distance_azimuth(grid.longitude_deg, grid.latitude_deg, lon, lat)
    hop = kernels.hop_s
    source_time = hop * np.arange(-np.ceil(3.0 / hop), np.ceil(until_s / hop) + 1)
    last = min(max(s.start_s + s.step_s * s.data.shape[1] for s in sites), until_s + kernels.lag_s[-1])
    model = build_model(kernels, distance, back, source_time, last, settings.coda_share)
    return Problem(model, observe(sites, noise_windows_s, kernels, model.time_s), settings, grid)


def invert_energy(
    sites: Sequence[Site],
    event: Event,
    grid: Grid,
    kernels: KernelTable,
    settings: EnergySettings,
    noise_windows_s: Sequence[tuple[float, float]],
    start: Array | None = None,
    progress: Callable[[int, int], None] | None = None,
    until_s: float | None = None,
    seed: int = 1,
) -> EnergyInversion:
    """Find the energy over place and source time that explains the covariances of all windows.

    Sigma = sum over cells and source times of e K + N + eps^2 floor, e >= 0, under a Wishart likelihood, by multiplicative
    updates of majorisation-minimisation type (cf. Sawada et al. 2013). The weight of each band, the model error of each site
    and band, and, where asked for, gains of sites and component groups are found along.

    Parameters
    ----------
    sites
        Corrected records.
    event
        Its magnitude tells how long to look where `until_s` is not given.
    grid
        Cells.
    kernels
        From `build_kernels`.
    settings
        How.
    noise_windows_s
        Of each site, the stretch that holds noise alone, s after the origin time.
    start
        Energy to start from, shape (C, F) or (C,); the same everywhere when not given.
    progress
        Called with (done, total).
    until_s
        Last source time, s.
    seed
        Of the choice of held-out windows.

    Raises
    ------
    InputError
        When a cell lies beyond the kernels' distances, or sites and noise stretches do not fit.
    DataError
        When no window can be used.
    """
    problem = pose(sites, grid, kernels, settings, noise_windows_s, until_s or default_until_s(event))
    return solve_problem(problem, start, progress, seed)


def default_until_s(event: Event) -> float:
    """Return how long to look for energy: what a rupture of the expected length takes at a slow 2.5 km/s and half as long again."""
    from rupture.mapping.grid import subsurface_length_km

    if event.magnitude is None:
        raise InputError(
            "the event has no magnitude, so the energy inversion does not know how long to look; give --magnitude"
        )
    return float(np.clip(1.6 * subsurface_length_km(event.magnitude) / 2.5, 20.0, 600.0))


def solve_problem(
    problem: Problem,
    start: Array | None = None,
    progress: Callable[[int, int], None] | None = None,
    seed: int = 1,
    weight: Array | None = None,
    updates: int | None = None,
) -> EnergyInversion:
    """Solve a problem; `weight` (S, T) resamples windows and sites, `updates` takes the place of held-out stopping."""
    settings, observed = problem.settings, problem.observed
    sites, _, times, _ = observed.present.shape
    everything = np.ones((sites, times)) if weight is None else weight
    held: Array = np.empty(0)
    count = settings.updates if updates is None else updates
    if updates is None and settings.held_out_share > 0:
        train = everything * ~_held_out(sites, times, observed, settings.held_out_share, seed)
        trial = solve(problem.model, observed, settings, train, count, start, _first_half(progress))
        held = trial.held_out
        count = int(np.argmin(held)) + 1
    fit = solve(problem.model, observed, settings, everything, count, start, _second_half(progress))
    return _finished(problem, fit, held)


def _first_half(progress: Callable[[int, int], None] | None) -> Callable[[int, int], None] | None:
    return None if progress is None else lambda done, total: progress(done, 2 * total)


def _second_half(progress: Callable[[int, int], None] | None) -> Callable[[int, int], None] | None:
    return None if progress is None else lambda done, total: progress(total + done, 2 * total)


def _held_out(sites: int, times: int, observed: Observed, share: float, seed: int) -> NDArray[np.bool_]:
    hop = observed.time_s[1] - observed.time_s[0]
    length = max(1, round(HELD_BLOCK_S / hop))
    rng = np.random.default_rng((seed, 77))
    blocks = rng.random((sites, times // length + 1)) < share
    if not blocks.any():
        blocks[rng.integers(sites), rng.integers(blocks.shape[1])] = True
    return np.repeat(blocks, length, axis=1)[:, :times]


def _finished(problem: Problem, fit: Fit, held: Array) -> EnergyInversion:
    observed = problem.observed
    rows = (observed.present[..., :3] * np.ones(3)).astype(bool)
    diagonal = [0, 6, 11]
    power = {}
    for name, covariance in (("seen", observed.covariance), ("told", fit.covariance)):
        total = (covariance[..., diagonal] * rows).sum(axis=(1, 3)) * observed.scale
        power[name] = np.where(rows.any(axis=(1, 3)), total, np.nan)
    return EnergyInversion(
        fit.energy.astype(float), problem.model.source_time_s, fit.objective, held, fit.gains, np.sqrt(fit.error_power),
        fit.share, power["seen"], power["told"], problem.model.time_s, problem.grid,
    )  # fmt: skip


def resampled_energies(
    problem: Problem,
    inversion: EnergyInversion,
    count: int,
    seed: int = 1,
    progress: Callable[[int, int], None] | None = None,
) -> list[Array]:
    """Return energies (C, F) inverted from resampled sites and stretches of windows.

    Weights are those of the Bayesian bootstrap (Rubin 1981), one for each site times one for each stretch of
    `HELD_BLOCK_S`: nothing is left out altogether, so that a single site can be resampled too.
    """
    sites, _, times, _ = problem.observed.present.shape
    length = max(1, round(HELD_BLOCK_S / (problem.model.time_s[1] - problem.model.time_s[0])))
    out = []
    for number in range(count):
        rng = np.random.default_rng((seed, number, 78))
        site = rng.exponential(size=(sites, 1)) if sites > 1 else np.ones((1, 1))
        stretch = np.repeat(rng.exponential(size=(sites, times // length + 1)), length, axis=1)[:, :times]
        weight = site / site.mean() * stretch
        out.append(solve_problem(problem, inversion.energy, None, seed, weight, RESAMPLE_UPDATES).energy)
        if progress is not None:
            progress(number + 1, count)
    return out


def independent_pieces(problem: Problem, inversion: EnergyInversion) -> float:
    """Return how many independent pieces of evidence an energy movie stands for: sites times windows that fit into it."""
    share = inversion.energy.sum(axis=0)
    order = np.sort(share)[::-1].cumsum() / share.sum()
    hop = inversion.source_time_s[1] - inversion.source_time_s[0]
    radiating = hop * (np.searchsorted(order, 0.9) + 1)
    return float(max(4.0, problem.observed.present.any(axis=(1, 2, 3)).sum() * radiating / problem.settings.window_s))
