"""Posterior and evidence by tempering a population of particles from prior to posterior."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Population:
    """Equally weighted draws of a posterior.

    Attributes
    ----------
    draws
        Shape (N, D), in the coordinates that the prior uses.
    log_likelihood
        Shape (N,).
    log_evidence
        Natural log of the marginal likelihood.
    """

    draws: Array
    log_likelihood: Array
    log_evidence: float


def temper(
    prior_draw: Callable[[np.random.Generator, int], Array],
    log_prior: Callable[[Array], Array],
    log_likelihood: Callable[[Array], Array],
    particles: int,
    moves: int,
    rng: np.random.Generator,
) -> Population:
    """Run sequential Monte Carlo with adaptive tempering (Del Moral, Doucet & Jasra 2006).

    Moves are differences of two other particles (ter Braak 2006), so that step lengths and several separate
    maxima look after themselves.

    Parameters
    ----------
    prior_draw
        Gives (count, D) draws of the prior.
    log_prior, log_likelihood
        Shape (count, D) to (count,); minus infinity outside the prior.
    particles, moves
        Size of the population; Metropolis moves of each at each temperature.
    rng
        Random numbers.
    """
    x = prior_draw(rng, particles)
    lp, ll = log_prior(x), log_likelihood(x)
    beta, evidence = 0.0, 0.0
    dimension = x.shape[1]
    while beta < 1.0:
        step = _next_step(ll, beta)
        weight = step * ll
        largest = weight.max()
        evidence += largest + np.log(np.mean(np.exp(weight - largest)))
        beta += step
        chosen = _resample(np.exp(weight - largest), rng)
        x, lp, ll = x[chosen], lp[chosen], ll[chosen]
        # More moves at the end, where the answer is read off, than on the way.
        for move in range(moves if beta < 1.0 else 3 * moves):
            first, second = rng.integers(particles, size=(2, particles))
            # A full-length difference now and then jumps between separate maxima.
            gamma = 1.0 if move % 4 == 3 else 2.38 / np.sqrt(2 * dimension)
            scale = gamma * rng.uniform(0.5, 1.1, (particles, 1)) if gamma != 1.0 else 1.0
            spread = x.std(axis=0)
            proposal = x + scale * (x[first] - x[second]) + 0.01 * spread * rng.normal(size=x.shape)
            new_lp = log_prior(proposal)
            possible = np.isfinite(new_lp)
            new_ll = np.full(particles, -np.inf)
            if possible.any():
                new_ll[possible] = log_likelihood(proposal[possible])
            with np.errstate(invalid="ignore"):
                ratio = new_lp - lp + beta * (new_ll - ll)
            accept = possible & (np.log(rng.uniform(size=particles)) < ratio)
            x[accept], lp[accept], ll[accept] = proposal[accept], new_lp[accept], new_ll[accept]
    return Population(x, ll, float(evidence))


def _next_step(log_likelihood: Array, beta: float) -> float:
    """Largest temperature step that leaves half of the particles effective."""
    low, high = 0.0, 1.0 - beta
    if _effective_share(high * log_likelihood) >= 0.5:
        return high
    for _ in range(40):
        middle = 0.5 * (low + high)
        if _effective_share(middle * log_likelihood) >= 0.5:
            low = middle
        else:
            high = middle
    return max(low, 1e-9)


def _effective_share(log_weight: Array) -> float:
    weight = np.exp(log_weight - log_weight.max())
    return float(weight.sum() ** 2 / np.sum(weight**2) / weight.size)


def _resample(weight: Array, rng: np.random.Generator) -> NDArray[np.int64]:
    """Systematic resampling."""
    total = np.cumsum(weight) / weight.sum()
    points = (rng.uniform() + np.arange(weight.size)) / weight.size
    return np.minimum(np.searchsorted(total, points), weight.size - 1)
