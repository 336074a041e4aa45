"""From the equations of a plane wave to the posterior of its slowness, window by window."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import special

from rupture.conventions import ACC_E, ACC_N, ACC_Z
from rupture.direction.covariance import PAIRS, entry
from rupture.direction.kernels import BLOCK, posterior_log_ratio
from rupture.direction.likelihood import radial_form

Array = NDArray[np.float64]

MOST_NOISE = 4.0
"""The noise's power in a window may grow to so many times its mean, which is 6 dB, and still be noise."""

_TINY = np.finfo(float).tiny ** 0.25
"""Power that is as good as none; its fourth power still is a number."""


@dataclass(frozen=True)
class Equation:
    """A relation that a plane wave fulfils, as powers of its residual.

    The error of the relation has an unknown scale of at least one with a Jeffreys prior, taken at its most likely
    value: above the expected errors the result is that of a Student distribution, below them nothing more is gained
    than a Gaussian of the expected width would, so that no trial is rewarded without bound for fitting noise.

    Attributes
    ----------
    form
        Coefficients of the residual power, shape (trials, 21).
    covariance
        Shape (21, T).
    noise, floor
        Expected residual power of each trial, shape (trials,), and on top of it of each window, shape (T,).
    unit
        Power that the residual is compared with, shape (T,).
    null
        Log-likelihood for one independent sample, times -2, when there is no wave, shape (T,).
    """

    form: Array
    covariance: Array
    noise: Array
    floor: Array
    unit: Array
    null: Array


def as_before(rows: tuple[int, ...], given: tuple[int, ...], covariance: Array, noise: Array) -> Array:
    """Return the log-likelihood, times -2, for one independent sample, that nothing but the noise before goes on.

    Noise holds waves too (microseisms): its rotation follows its translation as its own covariance says, by linear
    regression. What is left has the power that it had before, up to four times that: noise comes and goes.

    Parameters
    ----------
    rows, given
        Rotation components and the translation components that they follow.
    covariance, noise
        Shapes (21, T) and (21,).

    Returns
    -------
    value
        Shape (T,), against the same unit as the `plane_wave_equation` of these rows has.
    """
    matrix = np.empty((6, 6))
    matrix[PAIRS[:, 0], PAIRS[:, 1]] = matrix[PAIRS[:, 1], PAIRS[:, 0]] = noise
    follows = matrix[np.ix_(rows, given)] @ np.linalg.pinv(matrix[np.ix_(given, given)], hermitian=True)
    power, axes = np.linalg.eigh(matrix[np.ix_(rows, rows)] - follows @ matrix[np.ix_(given, rows)])
    unit = np.maximum(np.mean([covariance[entry(k, k)] for k in rows], axis=0), _TINY)
    total = np.zeros(covariance.shape[1])
    members = (*rows, *given)
    for expected, axis in zip(np.maximum(power, _TINY), axes.T, strict=True):
        share = np.concatenate([axis, -axis @ follows])
        left = np.zeros_like(total)
        for i, a in enumerate(members):
            for j, b in enumerate(members):
                left += share[i] * share[j] * covariance[entry(a, b)]
        scale = np.clip(left / expected, 1.0, MOST_NOISE)
        total += np.log(scale * expected / unit) + left / (scale * expected) - 1.0
    return total


def plane_wave_equation(form: Array, rows: tuple[int, ...], covariance: Array, noise: Array, error: float) -> Equation:
    """Return a rotation equation; without a wave, rotation is left as no translation explains it.

    Parameters
    ----------
    form
        Coefficients of the residual power, shape (trials, 21).
    rows
        Rotation components among which the residual's axis lies: their mean power is what it is compared with.
    covariance, noise
        Shapes (21, T) and (21,).
    error
        Model error as a share of the rotation's amplitude.
    """
    total = np.mean([covariance[entry(k, k)] for k in rows], axis=0)
    unit = np.maximum(total, _TINY)
    floor = np.maximum(error**2 * total, _TINY)
    alone = float(np.mean([noise[entry(k, k)] for k in rows])) + floor
    null = np.log(np.maximum(total, alone) / unit) + np.minimum(total / alone, 1.0) - 1.0
    return Equation(form, covariance, np.maximum(form @ noise, 0.0), floor, unit, null)


def polarisation_equation(
    back_azimuth_rad: Array, speeds: int, covariance: Array, ratio: float, degrees: float
) -> Equation:
    """Return the soft rule that horizontal motion along the ray stays below `ratio` times the vertical motion.

    A preference among directions is no evidence for a wave: its likelihood is one in the mean over directions.

    Parameters
    ----------
    back_azimuth_rad
        Trial directions, shape (A,).
    speeds
        How many trial slownesses there are for each.
    covariance
        Shape (21, T).
    ratio
        Horizontal over vertical amplitude.
    degrees
        Independent samples in a window.
    """
    form = radial_form(back_azimuth_rad)
    shake = covariance[entry(ACC_E, ACC_E)] + covariance[entry(ACC_N, ACC_N)]
    limit = np.maximum(ratio**2 * covariance[entry(ACC_Z, ACC_Z)] + 0.05 * shake, _TINY)
    misfit = form @ covariance / limit
    gain = -0.5 * degrees * (np.log(np.maximum(misfit, 1.0)) + np.minimum(misfit, 1.0) - 1.0)
    largest = gain.max(axis=0)
    null = -2.0 / degrees * (largest + np.log(np.exp(gain - largest).mean(axis=0)))
    form = np.repeat(form, speeds, axis=0)
    return Equation(form, covariance, np.zeros(len(form)), limit, limit, null)


def fill_posterior(
    log_ratio: NDArray[np.float32],
    coherent: Array,
    equations: Sequence[Equation],
    unchanged: Array,
    degrees: float,
    stray_share: float,
    blur: Array,
) -> None:
    """Fill the log of posterior over prior, shape (A, P, T), and the probability of a coherent wave, shape (T,).

    Parameters
    ----------
    log_ratio, coherent
        Filled.
    equations
        What the wave fulfils.
    unchanged
        Log-likelihood for one independent sample, times -2, that the noise before goes on, shape (T,).
    degrees
        Independent samples in a window.
    stray_share
        Share of coherent windows whose wave comes from elsewhere.
    blur
        As `turn_weights` gives it.
    """
    angles, speeds, windows = log_ratio.shape
    entries = [np.flatnonzero(e.form.any(axis=0)) for e in equations]
    most = max(k.size for k in entries)
    form = np.zeros((len(equations), angles * speeds, most))
    whole = -(-windows // BLOCK) * BLOCK
    covariance = np.zeros((len(equations), most, whole))
    floor, unit = np.ones((2, len(equations), whole))
    for n, (equation, used) in enumerate(zip(equations, entries, strict=True)):
        form[n, :, : used.size] = equation.form[:, used]
        covariance[n, : used.size, :windows] = equation.covariance[used]
        floor[n, :windows], unit[n, :windows] = equation.floor, equation.unit
    noise = np.stack([e.noise for e in equations])
    offset = np.zeros(whole)
    unexplained = np.sum([e.null for e in equations], axis=0)
    offset[:windows] = np.logaddexp(-0.5 * degrees * unexplained, -0.5 * degrees * unchanged) - np.log(2.0)
    posterior_log_ratio(
        log_ratio, coherent, form.reshape(-1, angles, speeds, most), covariance, noise.reshape(-1, angles, speeds),
        floor, unit, degrees, offset, stray_share, blur,
    )  # fmt: skip


def turn_weights(sigma_rad: float, angles: int) -> Array:
    """Return a blur over back-azimuth for a site turned by an unknown angle, shape (2 reach + 1,), sum one.

    The discrete Gaussian (Lindeberg 1990): its variance is right however narrow it is against the step.
    """
    variance = (sigma_rad * angles / (2 * np.pi)) ** 2
    half = special.ive(np.arange((angles - 1) // 2 + 1), variance)
    half = half[half > 1e-9 * half[0]]
    weights = np.concatenate([half[:0:-1], half])
    return np.asarray(weights / weights.sum())
