"""Posterior and evidence by tempering a population of particles from prior to posterior."""

from __future__ import annotations

from collections.abc import Callable, Sequence
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
    angles: Sequence[int] = (),
    rename: Callable[[Array], Array] = lambda draws: draws,
) -> Population:
    """Run sequential Monte Carlo with adaptive tempering from prior to posterior (Del Moral, Doucet & Jasra 2006).

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
    angles
        Columns that go round a circle, in rad.
    rename
        Gives draws other names for the same model, so that all are named alike.
    """
    x = prior_draw(rng, particles)
    start = Population(x, log_likelihood(x), 0.0)
    return bridge(
        start, lambda x: np.zeros(x.shape[0]), log_likelihood, log_prior, moves, 3 * moves, rng, angles, rename
    )


def bridge(
    start: Population,
    log_from: Callable[[Array], Array],
    log_to: Callable[[Array], Array],
    log_prior: Callable[[Array], Array],
    moves: int,
    last_moves: int,
    rng: np.random.Generator,
    angles: Sequence[int] = (),
    rename: Callable[[Array], Array] = lambda draws: draws,
) -> Population:
    """Carry draws of one likelihood over to another through temperatures between them.

    Moves are differences of two other particles in some of the coordinates (ter Braak 2006; Vrugt et al. 2009), so that step
    lengths and several separate maxima look after themselves.

    Parameters
    ----------
    start
        Draws of prior times the first likelihood; their `log_likelihood` is that of the second one.
    log_from, log_to, log_prior
        The two likelihoods and the prior.
    moves, last_moves
        Moves at each temperature, and at the last one, where the answer is read off.
    rng, angles, rename
        As `temper`.
    """
    x, to = start.draws.copy(), start.log_likelihood.copy()
    prior, origin = log_prior(x), log_from(x)
    beta, evidence = 0.0, start.log_evidence
    round_ = list(angles)
    while beta < 1.0:
        gain = to - origin
        step = _next_step(gain, beta)
        weight = step * gain
        largest = weight.max()
        evidence += largest + np.log(np.mean(np.exp(weight - largest)))
        beta += step
        chosen = _resample(np.exp(weight - largest), rng)
        x, prior, origin, to = rename(x[chosen]), prior[chosen], origin[chosen], to[chosen]
        for move in range(moves if beta < 1.0 else last_moves):
            proposal = _propose(x, move, round_, rng)
            new_prior = log_prior(proposal)
            possible = np.isfinite(new_prior)
            new_to, new_origin = np.full((2, x.shape[0]), -np.inf)
            if possible.any():
                new_to[possible] = log_to(proposal[possible])
                new_origin[possible] = log_from(proposal[possible])
            with np.errstate(invalid="ignore"):
                ratio = new_prior - prior + beta * (new_to - to) + (1.0 - beta) * (new_origin - origin)
            accept = possible & (np.log(rng.uniform(size=x.shape[0])) < ratio)
            x[accept], prior[accept] = proposal[accept], new_prior[accept]
            to[accept], origin[accept] = new_to[accept], new_origin[accept]
    return Population(rename(x), to, float(evidence))


def _propose(x: Array, move: int, angles: list[int], rng: np.random.Generator) -> Array:
    """Move each particle along the difference of two others, in a random half of its coordinates or in all."""
    count, dimension = x.shape
    first, second = rng.integers(count, size=(2, count))
    difference = x[first] - x[second]
    spread = x.std(axis=0)
    difference[:, angles] = (difference[:, angles] + np.pi) % (2 * np.pi) - np.pi
    for column in angles:
        length = np.abs(np.mean(np.exp(1j * x[:, column])))
        spread[column] = np.sqrt(-2.0 * np.log(np.clip(length, 0.05, 1.0)))
    if move % 5 == 4:
        # A full-length difference now and then jumps between separate maxima.
        scale = np.ones((count, 1))
        use = np.ones((count, dimension), bool)
    else:
        share = rng.choice([0.3, 0.6, 1.0], size=(count, 1))
        use = rng.uniform(size=(count, dimension)) < share
        use[np.arange(count), rng.integers(dimension, size=count)] = True
        scale = 2.38 / np.sqrt(2.0 * use.sum(axis=1, keepdims=True)) * rng.uniform(0.4, 1.1, (count, 1))
    proposal: Array = x + use * (scale * difference + 0.01 * spread * rng.normal(size=x.shape))
    return proposal


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
