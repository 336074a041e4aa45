"""Multiplicative updates of energy, coda, model error and gains under the Wishart likelihood."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from rupture.direction.covariance import PAIRS
from rupture.energy.kernels import window_terms
from rupture.energy.model import EnergyModel
from rupture.energy.observe import GROUPS, Observed
from rupture.energy.settings import EnergySettings

Array = NDArray[np.float64]

_DIAGONAL = PAIRS[:, 0] == PAIRS[:, 1]
_FIRST_GROUP, _SECOND_GROUP = GROUPS[PAIRS[:, 0]], GROUPS[PAIRS[:, 1]]

OTHERS_EVERY = 6
"""Gains and band weights are updated after so many updates of the energy: they move little."""

BOLD = 0.95
"""Exponent of a bold update; where the objective rises, the update is taken again with the safe exponent 1/2."""

UNSEEN = 1e-4
"""Where the denominator is below this share of its median, no window sees the place and time: they hold no energy."""


@dataclass
class Fit:
    """State and outcome of the updates.

    Attributes
    ----------
    energy
        Shape (C, F).
    share
        Weight of each band: the source spectrum, mean one, shape (B,).
    error_power
        Squared model error share, shape (S, B).
    log_gains
        Shape (S, 4).
    objective, held_out
        After each update.
    covariance
        Predicted signal and noise, shape (S, B, T, 21).
    """

    energy: NDArray[np.float32]
    share: Array
    error_power: Array
    log_gains: Array
    objective: Array = field(default_factory=lambda: np.empty(0))
    held_out: Array = field(default_factory=lambda: np.empty(0))
    covariance: Array = field(default_factory=lambda: np.empty(0))

    @property
    def gains(self) -> Array:
        """Amplitude factors, shape (S, 4)."""
        return np.exp(self.log_gains)


class Wishart:
    """The likelihood of windows given predicted covariances."""

    def __init__(self, observed: Observed, settings: EnergySettings, weight: Array) -> None:
        self.observed = observed
        self.shape = observed.covariance.shape
        self.present = np.ascontiguousarray(observed.present.reshape(-1, 6))
        self.data = np.ascontiguousarray(observed.covariance.reshape(-1, 21))
        # weight (S, T): 0 for held-out windows; the share of independent samples per band comes on top.
        self.weight = weight[:, None, :] * observed.share[None, :, None]
        self.held = (weight == 0)[:, None, :] * observed.share[None, :, None]
        self.spread = settings.gain_spread
        self.floor = _floor(observed)

    def factor(self, fit: Fit) -> Array:
        """Return what gains and bands multiply the entries of a signal by, shape (S, B, 1, 21)."""
        gain = fit.gains
        both = gain[:, _FIRST_GROUP] * gain[:, _SECOND_GROUP]
        return np.asarray((both[:, None] * fit.share[:, None])[:, :, None])

    def total(self, signal: Array, fit: Fit) -> Array:
        """Return Sigma, shape (S, B, T, 21), of a signal without gains."""
        return (
            signal * self.factor(fit) + self.observed.noise[:, :, None] + fit.error_power[:, :, None, None] * self.floor
        )

    def terms(self, sigma: Array) -> tuple[Array, Array, Array]:
        """Return value (S, B, T) and the packed gradients Sigma^-1, Sigma^-1 C Sigma^-1 (S, B, T, 21)."""
        count = self.data.shape[0]
        inverse, sandwich, value = np.empty((count, 21)), np.empty((count, 21)), np.empty(count)
        window_terms(np.ascontiguousarray(sigma.reshape(-1, 21)), self.data, self.present, inverse, sandwich, value)
        return value.reshape(self.shape[:3]), inverse.reshape(self.shape), sandwich.reshape(self.shape)

    def objective(self, value: Array, fit: Fit) -> tuple[float, float]:
        """Return the objective of the windows that count, and the value of those held out."""
        prior = 0.5 * float(np.sum(fit.log_gains**2)) / self.spread**2
        return float(np.sum(self.weight * value)) + prior, float(np.sum(self.held * value))


def _floor(observed: Observed) -> Array:
    """Diagonal of the mean power of a window's translation and of its rotation, shape (S, B, T, 21)."""
    out = np.zeros_like(observed.covariance)
    diagonal = np.flatnonzero(_DIAGONAL)
    for part in (slice(0, 3), slice(3, 6)):
        here = observed.present[..., part]
        power = (observed.covariance[..., diagonal[part]] * here).sum(axis=-1) / np.maximum(here.sum(axis=-1), 1)
        out[..., diagonal[part]] = power[..., None]
    return out


def start_energy(model: EnergyModel, observed: Observed, start: Array | None) -> NDArray[np.float32]:
    """Return the first energy, scaled so that the predicted power is the observed."""
    shape = (model.low.shape[1], model.source_time_s.size)
    energy = np.ones(shape) if start is None else np.broadcast_to(start.reshape(shape[0], -1), shape).astype(float)
    # Nothing that starts at zero ever grows: everything keeps a small chance.
    energy = np.maximum(energy, 0.05 * energy.mean())
    energy = energy.astype(np.float32)
    told = model.forward(model.gathered(energy))[..., _DIAGONAL]
    return np.asarray(
        energy * (observed.covariance[..., _DIAGONAL].sum() / (told * observed.present).sum()), np.float32
    )


def solve(
    model: EnergyModel,
    observed: Observed,
    settings: EnergySettings,
    weight: Array,
    updates: int,
    start: Array | None = None,
    progress: Callable[[int, int], None] | None = None,
    bold: bool = True,
) -> Fit:
    """Run the updates.

    Parameters
    ----------
    model, observed, settings
        The problem.
    weight
        What each window counts, shape (S, T); 0 holds it out.
    updates
        How many.
    start
        First energy, shape (C, F) or (C,).
    progress
        Called with (done, total).
    bold
        Whether larger steps than the proven ones are tried first.
    """
    wishart = Wishart(observed, settings, weight)
    sites, bands = observed.covariance.shape[:2]
    error = np.full((sites, bands), settings.most_model_error**2)
    fit = Fit(start_energy(model, observed, start), np.ones(bands), error, np.zeros((sites, 4)))
    signal = model.forward(model.gathered(fit.energy))
    value, inverse, sandwich = wishart.terms(wishart.total(signal, fit))
    best, _ = wishart.objective(value, fit)
    history, held = [], []
    for update in range(updates):
        factor, error_factor = _factors(model, wishart, fit, inverse, sandwich)
        for exponent in (BOLD, 0.5) if bold else (0.5,):
            trial = Fit(
                fit.energy * factor ** np.float32(exponent),
                fit.share,
                np.clip(
                    fit.error_power * error_factor**exponent,
                    settings.least_model_error**2,
                    settings.most_model_error**2,
                ),
                fit.log_gains,
            )
            signal = model.forward(model.gathered(trial.energy))
            terms = wishart.terms(wishart.total(signal, trial))
            now, left_out = wishart.objective(terms[0], trial)
            if now <= best:
                break
        fit, best = trial, now
        value, inverse, sandwich = terms
        if update % OTHERS_EVERY == OTHERS_EVERY - 1:
            if bands > 1:
                signal *= _update_share(wishart, fit, signal, inverse, sandwich)
            if settings.gains:
                _update_gains(wishart, fit, signal)
            value, inverse, sandwich = wishart.terms(wishart.total(signal, fit))
            best, left_out = wishart.objective(value, fit)
        history.append(best)
        held.append(left_out)
        if progress is not None:
            progress(update + 1, updates)
    fit.objective, fit.held_out = np.array(history), np.array(held)
    fit.covariance = wishart.total(signal, Fit(fit.energy, fit.share, 0 * fit.error_power, fit.log_gains))
    return fit


def _factors(
    model: EnergyModel, wishart: Wishart, fit: Fit, inverse: Array, sandwich: Array
) -> tuple[NDArray[np.float32], Array]:
    """Ratio of both sums of the update for every energy and for the model errors."""
    weight = wishart.weight[..., None] * wishart.factor(fit)
    top, bottom = model.adjoint(weight * sandwich), model.adjoint(weight * inverse)
    seen = bottom > UNSEEN * np.median(np.abs(bottom))
    factor = np.where(seen, np.maximum(top, 0) / np.where(seen, bottom, 1), 0).astype(np.float32)
    both = [(wishart.weight[..., None] * part * wishart.floor).sum(axis=(2, 3)) for part in (sandwich, inverse)]
    error = np.where(both[1] > 0, both[0] / np.maximum(both[1], 1e-300), 1.0)
    return factor, error


def _update_share(wishart: Wishart, fit: Fit, signal: Array, inverse: Array, sandwich: Array) -> float:
    """One safe update of the weights of the bands, the energy standing still; returns what the energy is multiplied by.

    Only products of energy and weight matter: the weights keep a mean of one.
    """
    weight = wishart.weight[..., None] * wishart.factor(fit) * signal
    top, bottom = ((weight * part).sum(axis=(0, 2, 3)) for part in (sandwich, inverse))
    fit.share *= np.sqrt(np.maximum(top, 0) / np.maximum(bottom, 1e-300))
    mean = float(fit.share.mean())
    fit.share /= mean
    fit.energy *= np.float32(mean)
    return mean


def _update_gains(wishart: Wishart, fit: Fit, signal: Array) -> None:
    """One parabolic step for each site and component group, kept where it helps."""

    def cost(log_gains: Array) -> Array:
        trial = Fit(fit.energy, fit.share, fit.error_power, log_gains)
        value, _, _ = wishart.terms(wishart.total(signal, trial))
        return (wishart.weight * value).sum(axis=(1, 2)) + 0.5 * np.sum(log_gains**2, axis=1) / wishart.spread**2

    step = 0.1
    now = cost(fit.log_gains)
    for group in range(fit.log_gains.shape[1]):
        unit = np.zeros_like(fit.log_gains)
        unit[:, group] = 1.0
        up, down = cost(fit.log_gains + step * unit), cost(fit.log_gains - step * unit)
        bend = (up - 2 * now + down) / step**2
        slope = (up - down) / (2 * step)
        move = np.where(bend > 0, -slope / np.maximum(bend, 1e-12), -np.sign(slope) * 0.2)
        trial = fit.log_gains + np.clip(move, -0.3, 0.3)[:, None] * unit
        then = cost(trial)
        better = then < now
        fit.log_gains = np.where(better[:, None], trial, fit.log_gains)
        now = np.where(better, then, now)
