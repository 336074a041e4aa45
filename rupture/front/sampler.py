"""Posterior and evidence by tempering a population of particles from prior to posterior."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

FREEDOM = 5.0
"""Degrees of freedom of the Student distribution about which a cloud of particles is turned."""


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

    def both(x: Array) -> Array:
        found = log_likelihood(x)
        return np.stack([np.zeros_like(found), found])

    return bridge(prior_draw(rng, particles), both, log_prior, moves, 3 * moves, rng, angles, rename)


def bridge(
    start: Array,
    log_likelihoods: Callable[[Array], Array],
    log_prior: Callable[[Array], Array],
    moves: int,
    last_moves: int,
    rng: np.random.Generator,
    angles: Sequence[int] = (),
    rename: Callable[[Array], Array] = lambda draws: draws,
) -> Population:
    """Carry draws of one likelihood over to another through temperatures between them.

    Two kinds of moves take turns: about the cloud of particles as a whole, which serve many coordinates well, and along differences of
    two particles, which serve several separate maxima.

    Parameters
    ----------
    start
        Draws of prior times the first likelihood, shape (count, D).
    log_likelihoods
        The first and the second likelihood, shape (count, D) to (2, count).
    log_prior
        The prior.
    moves, last_moves
        Moves at each temperature, and at the last one, where the answer is read off.
    rng, angles, rename
        As `temper`.

    Returns
    -------
    Population
        Its evidence is that of the second likelihood over that of the first.
    """
    x = start.copy()
    origin, to = log_likelihoods(x)
    prior = log_prior(x)
    beta, evidence, stride = 0.0, 0.0, 0.5
    circular = list(angles)
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
            along = move % 3 == 2
            proposal, correction = _differences(x, circular, rng) if along else _cloud(x, circular, stride, rng)
            new_prior = log_prior(proposal)
            possible = np.isfinite(new_prior) & np.isfinite(correction)
            new_origin, new_to = np.full((2, x.shape[0]), -np.inf)
            if possible.any():
                new_origin[possible], new_to[possible] = log_likelihoods(proposal[possible])
            with np.errstate(invalid="ignore"):
                ratio = new_prior - prior + beta * (new_to - to) + (1.0 - beta) * (new_origin - origin) + correction
            accept = possible & (np.log(rng.uniform(size=x.shape[0])) < ratio)
            x[accept], prior[accept] = proposal[accept], new_prior[accept]
            to[accept], origin[accept] = new_to[accept], new_origin[accept]
            if not along:
                stride = float(np.clip(stride * np.exp(accept.mean() - 0.3), 0.05, 0.99))
    return Population(rename(x), to, float(evidence))


def _differences(x: Array, circular: list[int], rng: np.random.Generator) -> tuple[Array, Array]:
    """Move each particle along the difference of two others, in some of its coordinates or in all (ter Braak 2006; Vrugt et al. 2009)."""
    count, dimension = x.shape
    first, second = rng.integers(count, size=(2, count))
    difference = x[first] - x[second]
    difference[:, circular] = _wrapped(difference[:, circular])
    # A full-length difference in all coordinates now and then jumps between separate maxima.
    jump = rng.uniform(size=(count, 1)) < 0.2
    use = jump | (rng.uniform(size=(count, dimension)) < rng.choice([0.3, 0.6, 1.0], size=(count, 1)))
    use[np.arange(count), rng.integers(dimension, size=count)] = True
    scale = 2.38 / np.sqrt(2.0 * use.sum(axis=1, keepdims=True)) * rng.uniform(0.4, 1.1, (count, 1))
    noise = 1e-3 * rng.normal(size=x.shape)
    return x + use * (np.where(jump, 1.0, scale) * difference + noise), np.zeros(count)


def _cloud(x: Array, circular: list[int], stride: float, rng: np.random.Generator) -> tuple[Array, Array]:
    """Turn each particle about the middle of the cloud (preconditioned Crank-Nicolson moves about a Student distribution, Grumitt et al. 2023).

    Returns the proposals and what must be added to the log of the acceptance ratio: the moves alone would leave the cloud's
    Student distribution as it is.
    """
    count, dimension = x.shape
    middle = x.mean(axis=0)
    middle[circular] = np.angle(np.mean(np.exp(1j * x[:, circular]), axis=0))
    away = x - middle
    away[:, circular] = _wrapped(away[:, circular])
    covariance = away.T @ away / count
    covariance += 0.02 * np.diag(np.diag(covariance)) + 1e-12 * np.eye(dimension)
    root = np.linalg.cholesky(covariance)
    before = np.sum(np.linalg.solve(root, away.T) ** 2, axis=0)
    scale = 0.5 * (FREEDOM + before) / rng.gamma(0.5 * (FREEDOM + dimension), size=count)
    moved = np.sqrt(1.0 - stride**2) * away + stride * np.sqrt(scale)[:, None] * (rng.normal(size=x.shape) @ root.T)
    after = np.sum(np.linalg.solve(root, moved.T) ** 2, axis=0)
    correction = 0.5 * (FREEDOM + dimension) * (np.log1p(after / FREEDOM) - np.log1p(before / FREEDOM))
    # Beyond half a circle from the middle a place would have two names.
    correction[(np.abs(moved[:, circular]) > np.pi).any(axis=1)] = -np.inf
    return middle + moved, correction


def _wrapped(angle: Array) -> Array:
    wrapped: Array = (angle + np.pi) % (2 * np.pi) - np.pi
    return wrapped


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
