"""How far the answer depends on which sites and which windows there happened to be."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rupture.direction import SiteDirection
from rupture.earth.responses import Responses
from rupture.errors import InputError
from rupture.event import Event
from rupture.front.fit import CIRCULAR, FitSettings, RuptureFit, prior_for, windows_of
from rupture.front.intervals import interval
from rupture.front.lines import PARAMETERS, LinePrior, same_first_arm, to_parameters
from rupture.front.sampler import bridge
from rupture.front.target import Target
from rupture.front.windows import Windows

Array = NDArray[np.float64]

BLOCK_S = 10.0
"""Windows are drawn in blocks of this length: about two windows, so that what overlaps stays together (Kuensch 1989)."""

DRAWS = 120
"""Draws of the posterior that are carried over to each resample."""


@dataclass(frozen=True)
class Resampling:
    """Answers to resampled sites and windows.

    Attributes
    ----------
    kind
        The kind of rupture that was fitted.
    parameters
        Names of the columns, as in `RuptureFit`.
    bootstrap
        Medians for sites drawn with replacement and blocks of windows drawn with replacement within each, shape (resamples, columns).
    left_out
        Medians without each site in turn, shape (sites, columns); empty for one site.
    sites
        Names of the sites.
    """

    kind: str
    bootstrap: Array
    left_out: Array
    sites: tuple[str, ...]
    parameters: tuple[str, ...] = PARAMETERS

    def interval(self, name: str) -> tuple[float, float, float]:
        """Return median, p05 and p95 of the bootstrap's answers; angles in [0, 2 pi)."""
        return interval(self.bootstrap[:, self.parameters.index(name)], circular=name in CIRCULAR)

    def bootstrap_error(self, name: str) -> float:
        """Return the standard deviation of the bootstrap's answers (Efron 1979)."""
        away = self._away(self.bootstrap, name)
        return float(np.sqrt(np.mean(away**2)))

    def jackknife_error(self, name: str) -> float:
        """Return the standard error from leaving out each site (Tukey 1958; Efron & Stein 1981); NaN for one site."""
        count = self.left_out.shape[0]
        if count < 2:
            return np.nan
        away = self._away(self.left_out, name)
        return float(np.sqrt((count - 1) / count * np.sum(away**2)))

    def most_decisive(self, name: str) -> tuple[str, float]:
        """Return the site without which the answer moves most, and by how much (signed, in the parameter's unit)."""
        if self.left_out.shape[0] < 2:
            return "", np.nan
        away = self._away(self.left_out, name)
        k = int(np.argmax(np.abs(away)))
        return self.sites[k], float(away[k])

    def _away(self, values: Array, name: str) -> Array:
        column = values[:, self.parameters.index(name)]
        if name in CIRCULAR:
            middle = np.angle(np.mean(np.exp(1j * column)))
            away: Array = (column - middle + np.pi) % (2 * np.pi) - np.pi
            return away
        return np.asarray(column - column.mean())


def resample_fit(
    directions: Sequence[SiteDirection],
    site_longitude_deg: Sequence[float],
    site_latitude_deg: Sequence[float],
    event: Event,
    responses: Responses,
    settings: FitSettings,
    fit: RuptureFit,
    seed: int,
    resamples: int = 20,
    progress: Callable[[int, int], None] | None = None,
    prior: LinePrior | None = None,
) -> Resampling:
    """Fit resampled sites and windows, starting from the posterior of all of them.

    Draws of the posterior are carried over to the likelihood of each resample through temperatures between the two, which costs a
    few per cent of a new fit.

    Parameters
    ----------
    directions, site_longitude_deg, site_latitude_deg, event, responses, settings, prior
        As they were given to `rupture.front.fit_rupture`.
    fit
        What it returned; the likeliest kind is resampled.
    seed, resamples
        Random numbers; how many bootstrap samples.
    progress
        Called with (resamples done, all).

    Raises
    ------
    InputError
        For fewer than two resamples.
    """
    prior = prior or prior_for(event)
    windows = windows_of(directions, site_longitude_deg, site_latitude_deg, event, responses, settings, prior)
    return resample_windows(windows, prior, settings, fit, seed, resamples, progress)


def resample_windows(
    windows: Windows,
    prior: LinePrior,
    settings: FitSettings,
    fit: RuptureFit,
    seed: int,
    resamples: int = 20,
    progress: Callable[[int, int], None] | None = None,
) -> Resampling:
    """Resample windows that are laid out already; see `resample_fit`."""
    if resamples < 2:
        raise InputError(f"{resamples} resamples have no spread; give at least 2")
    kind = fit.likeliest
    draws = fit.sampled[kind]
    rng = np.random.default_rng((seed, 17))
    start = draws[np.sort(rng.permutation(draws.shape[0])[:DRAWS])]
    sites = len(windows.code)
    plans = [_drawn(windows, rng) for _ in range(resamples)]
    if sites > 1:
        plans += [_without(windows, site) for site in range(sites)]
    rows = []
    for number, multiple in enumerate(plans):
        rows.append(
            _carried(start, kind, windows, prior, settings, multiple, np.random.default_rng((seed, 18, number)))
        )
        if progress is not None:
            progress(number + 1, len(plans))
    table = np.array(rows)
    return Resampling(kind, table[:resamples], table[resamples:], windows.code)


def _carried(
    start: Array, kind: str, windows: Windows, prior: LinePrior, settings: FitSettings, multiple: Array, rng: np.random.Generator
) -> Array:  # fmt: skip
    """Medians of the posterior when windows count as often as told."""
    target = Target(kind, windows, prior, settings.trust)
    countings = np.stack([np.ones_like(multiple), multiple])
    population = bridge(
        start, lambda draws: target.counted(draws, countings), target.log_prior, 1, 3, rng, target.angles, target.rename
    )
    found = to_parameters(kind, same_first_arm(kind, population.draws, longer_first=True))
    return np.array([interval(found[:, k], name in CIRCULAR)[0] for k, name in enumerate(PARAMETERS)])


def _without(windows: Windows, site: int) -> Array:
    multiple = np.ones(windows.first[-1])
    multiple[windows.first[site] : windows.first[site + 1]] = 0.0
    return multiple


def _drawn(windows: Windows, rng: np.random.Generator) -> Array:
    """Sites drawn with replacement, and for each of them blocks of windows drawn with replacement."""
    sites = len(windows.code)
    size = max(1, round(BLOCK_S / (windows.stride * windows.bin_s)))
    multiple = np.zeros(windows.first[-1])
    # A single site is kept: there is nothing to put in its place.
    chosen = rng.integers(sites, size=sites) if sites > 1 else np.array([0])
    for site in chosen:
        first, count = int(windows.first[site]), int(windows.first[site + 1] - windows.first[site])
        if count == 0:
            continue
        begins = rng.integers(count, size=int(np.ceil(count / size)))
        # Blocks go round the end, so that all windows are drawn equally often.
        taken = (begins[:, None] + np.arange(size)).ravel()[:count] % count
        np.add.at(multiple, first + taken, 1.0)
    return multiple
