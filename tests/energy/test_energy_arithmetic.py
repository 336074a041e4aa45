"""The arithmetic of the inversion on small made-up kernels, against slow, obvious twins."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numpy.typing import NDArray

from rupture.direction.covariance import PAIRS
from rupture.energy import EnergySettings, KernelTable
from rupture.energy.kernels import window_terms
from rupture.energy.model import EnergyModel, build_model
from rupture.energy.observe import Observed
from rupture.energy.solver import Wishart, solve
from rupture.energy.table import averaged_harmonics, turn_matrix, unpack
from rupture.errors import InputError

SETTINGS = EnergySettings(coda_share=0.0, held_out_share=0.0, least_model_error=1e-4, most_model_error=1e-4)


def made_up_table(rng: np.random.Generator, nodes: int = 6, lags: int = 14) -> KernelTable:
    """Kernels that are covariances at every azimuth: powers and couplings of their own at each node and lag."""
    harmonics = np.empty((2, nodes, 5, 21, lags))
    for b in range(2):
        for d in range(nodes):
            factor = rng.normal(size=(lags, 6, 3)) * np.exp(-((np.arange(lags) - 3 - d) ** 2) / 4.0)[:, None, None]
            full = factor @ factor.transpose(0, 2, 1)
            harmonics[b, d] = averaged_harmonics(full[:, PAIRS[:, 0], PAIRS[:, 1]].T)
    band = np.array([[0.2, 0.5], [0.5, 1.0]])
    return KernelTable(
        10.0, 2e3 + 4e3 * np.arange(nodes), band, 4.0, 1.0, np.arange(-2.0, lags - 2), harmonics.astype(np.float32), 1.0
    )


def made_up_model(
    table: KernelTable, rng: np.random.Generator, sites: int = 4, cells: int = 9, turn: float = 0.0, coda: float = 0.0
) -> tuple[EnergyModel, NDArray[np.float64], NDArray[np.float64]]:
    distance = rng.uniform(3e3, 21e3, (sites, cells))
    angle = rng.uniform(0, 2 * np.pi, (sites, cells)) + turn
    return build_model(table, distance, angle, np.arange(0.0, 7.0), 22.0, coda), distance, angle


def observed_of(covariance: NDArray[np.float64], model: EnergyModel, noise: float = 1e-4) -> Observed:
    quiet = np.zeros((*covariance.shape[:2], 21))
    quiet[..., PAIRS[:, 0] == PAIRS[:, 1]] = noise
    present = np.ones((*covariance.shape[:3], 6), bool)
    return Observed(model.time_s, covariance + quiet[:, :, None], quiet, present, np.array([1.0, 2.0]), 1.0)


def true_energy(rng: np.random.Generator, cells: int = 9) -> NDArray[np.float32]:
    energy = np.zeros((cells, 7), np.float32)
    energy[rng.permutation(cells)[:4], rng.permutation(7)[:4]] = rng.uniform(0.5, 2.0, 4)
    return energy


def test_forward_is_the_plain_sum_over_cells_and_source_times() -> None:
    rng = np.random.default_rng(1)
    table = made_up_table(rng)
    model, distance, angle = made_up_model(table, rng)
    energy = rng.random((9, 7)).astype(np.float32)
    got = model.forward(model.gathered(energy))
    want = np.zeros_like(got)
    for s in range(4):
        for b in range(2):
            for c in range(9):
                kernel = table.at(b, distance[s, c], angle[s, c])
                for f in range(7):
                    last = min(f + kernel.shape[1], want.shape[2])
                    want[s, b, f:last] += energy[c, f] * kernel[:, : last - f].T
    assert np.abs(got - want).max() < 3e-5 * np.abs(want).max()


@pytest.mark.parametrize("coda", [0.0, 0.7])
def test_adjoint_agrees_with_forward(coda: float) -> None:
    rng = np.random.default_rng(2)
    model, _, _ = made_up_model(made_up_table(rng), rng, coda=coda)
    energy = rng.random((9, 7)).astype(np.float32)
    seen = model.forward(model.gathered(energy))
    weights = rng.normal(size=seen.shape)
    one, other = float(np.sum(seen * weights)), float(np.sum(energy * model.adjoint(weights)))
    assert one == pytest.approx(other, abs=1e-5 * np.linalg.norm(seen) * np.linalg.norm(weights))


def test_kernels_turn_with_the_world() -> None:
    """A kernel at back-azimuth theta is that at 0 turned by theta: E, N follow the source."""
    rng = np.random.default_rng(3)
    table = made_up_table(rng)
    for theta in (0.3, 2.0, 4.5):
        turn = turn_matrix(theta) @ turn_matrix(0.0).T
        full = unpack(table.at(0, 9e3, 0.0).T)
        assert np.allclose(turn @ full @ turn.T, unpack(table.at(0, 9e3, theta).T), atol=1e-4)


def test_window_terms_against_plain_linear_algebra_with_missing_components() -> None:
    rng = np.random.default_rng(4)
    present = np.array([[1, 1, 1, 1, 1, 1], [1, 1, 1, 0, 0, 1], [0, 0, 1, 1, 1, 0], [0, 0, 0, 0, 0, 0]], bool)
    root = rng.normal(size=(2, 4, 6, 9))
    sigma, data = root @ root.swapaxes(2, 3)
    pack = (slice(None), PAIRS[:, 0], PAIRS[:, 1])
    inverse, sandwich, value = np.empty((4, 21)), np.empty((4, 21)), np.empty(4)
    window_terms(sigma[pack], data[pack], present, inverse, sandwich, value)
    kernel = root[1, 0] @ root[1, 0].T
    for n, has in enumerate(present):
        part = np.ix_(has, has)
        inv = np.linalg.inv(sigma[n][part])
        assert value[n] == pytest.approx(np.linalg.slogdet(sigma[n][part])[1] + np.trace(inv @ data[n][part]))
        assert inverse[n] @ kernel[PAIRS[:, 0], PAIRS[:, 1]] == pytest.approx(np.trace(inv @ kernel[part]))
        told = np.trace(inv @ data[n][part] @ inv @ kernel[part])
        assert sandwich[n] @ kernel[PAIRS[:, 0], PAIRS[:, 1]] == pytest.approx(told)


def test_one_safe_update_against_the_plain_formula() -> None:
    """design: e <- e sqrt( sum tr(S^-1 C S^-1 K) / sum tr(S^-1 K) ), cf. Sawada et al. (2013), window by window."""
    rng = np.random.default_rng(5)
    table = made_up_table(rng)
    model, distance, angle = made_up_model(table, rng, sites=2, cells=4)
    observed = observed_of(model.forward(model.gathered(rng.random((4, 7)).astype(np.float32))), model, 0.05)
    start = rng.uniform(0.5, 1.5, (4, 7))
    weight = np.ones((2, model.time_s.size))
    zero = solve(model, observed, SETTINGS, weight, 0, start, bold=False).energy.astype(float)
    got = solve(model, observed, SETTINGS, weight, 1, start, bold=False).energy
    error = 1e-8 * Wishart(observed, SETTINGS, weight).floor
    sigma = unpack(model.forward(model.gathered(zero.astype(np.float32))) + observed.noise[:, :, None] + error)
    data = unpack(observed.covariance)
    for c in range(4):
        for f in range(7):
            top = bottom = 0.0
            for s in range(2):
                for b in range(2):
                    kernel = unpack(table.at(b, distance[s, c], angle[s, c]).T)
                    for lag in range(min(kernel.shape[0], model.time_s.size - f)):
                        inv = np.linalg.inv(sigma[s, b, f + lag])
                        bottom += observed.share[b] * np.trace(inv @ kernel[lag])
                        top += observed.share[b] * np.trace(inv @ data[s, b, f + lag] @ inv @ kernel[lag])
            assert got[c, f] == pytest.approx(zero[c, f] * np.sqrt(top / bottom), rel=2e-3)


def test_exact_kernels_without_noise_give_the_energy_back() -> None:
    rng = np.random.default_rng(6)
    model, _, _ = made_up_model(made_up_table(rng), rng)
    energy = true_energy(rng)
    observed = observed_of(model.forward(model.gathered(energy)), model)
    fit = solve(model, observed, SETTINGS, np.ones((4, model.time_s.size)), 200)
    assert np.abs(fit.energy * fit.share.mean() - energy).max() < 0.03 * energy.max()
    assert fit.share == pytest.approx([1.0, 1.0], abs=0.03)


def test_the_objective_falls_at_every_update_and_bold_steps_reach_the_same_minimum_sooner() -> None:
    rng = np.random.default_rng(7)
    model, _, _ = made_up_model(made_up_table(rng), rng)
    seen = model.forward(model.gathered(true_energy(rng)))
    seen *= rng.uniform(0.5, 1.5, (4, 1, seen.shape[2], 1))
    observed = observed_of(seen, model, 0.02)
    settings = replace(SETTINGS, gains=True, least_model_error=0.05, most_model_error=0.4)
    weight = np.ones((4, model.time_s.size))
    bold = solve(model, observed, settings, weight, 60)
    safe = solve(model, observed, settings, weight, 150, bold=False)
    for history in (bold.objective, safe.objective):
        assert (np.diff(history) <= 1e-4 * np.abs(history[:-1])).all()
    fall = bold.objective[0] - bold.objective[-1]
    assert bold.objective[-1] < safe.objective[59]
    assert abs(bold.objective[-1] - safe.objective[-1]) < 0.05 * fall


def test_site_order_does_not_matter() -> None:
    rng = np.random.default_rng(8)
    table = made_up_table(rng)
    model, distance, angle = made_up_model(table, rng)
    observed = observed_of(model.forward(model.gathered(true_energy(rng))), model, 0.01)
    order = [2, 0, 3, 1]
    other = build_model(table, distance[order], angle[order], np.arange(0.0, 7.0), 22.0, 0.0)
    turned = replace(observed, covariance=observed.covariance[order], noise=observed.noise[order])
    weight = np.ones((4, model.time_s.size))
    one, two = solve(model, observed, SETTINGS, weight, 20), solve(other, turned, SETTINGS, weight, 20)
    assert np.allclose(one.energy, two.energy, rtol=2e-2, atol=2e-3)


def test_world_rotation_does_not_matter() -> None:
    """Sites, cells and sensors turned together leave the energy where it was."""
    table = made_up_table(np.random.default_rng(9))
    fits = []
    for turn in (0.0, 1.1):
        rng = np.random.default_rng(10)
        model, _, _ = made_up_model(table, rng, turn=turn)
        observed = observed_of(model.forward(model.gathered(true_energy(rng))), model, 0.01)
        fits.append(solve(model, observed, SETTINGS, np.ones((4, model.time_s.size)), 20).energy)
    assert np.allclose(*fits, rtol=2e-2, atol=2e-3)


def test_masked_windows_do_not_count() -> None:
    rng = np.random.default_rng(11)
    model, _, _ = made_up_model(made_up_table(rng), rng)
    observed = observed_of(model.forward(model.gathered(true_energy(rng))), model, 0.01)
    observed.present[1, :, 5:9] = False
    spoilt = replace(observed, covariance=observed.covariance.copy())
    spoilt.covariance[1, :, 5:9] *= 50.0
    start = np.ones((9, 7))
    weight = np.ones((4, model.time_s.size))
    # The first scale is taken from present windows; everything after it must not see the masked ones.
    one, two = (solve(model, o, SETTINGS, weight, 60, start) for o in (observed, spoilt))
    assert np.allclose(one.energy, two.energy, rtol=0.05, atol=5e-3)


def test_gains_of_a_component_group_are_found() -> None:
    rng = np.random.default_rng(12)
    model, _, _ = made_up_model(made_up_table(rng), rng)
    seen = model.forward(model.gathered(true_energy(rng)))
    rows = np.array([1.0, 1.0, 1.0, 3.0, 3.0, 1.0])
    seen[2] *= rows[PAIRS[:, 0]] * rows[PAIRS[:, 1]]
    fit = solve(
        model,
        observed_of(seen, model),
        replace(SETTINGS, gains=True, gain_spread=1.0),
        np.ones((4, model.time_s.size)),
        200,
    )
    assert fit.gains[2, 2] / fit.gains[2, 0] == pytest.approx(3.0, rel=0.15)
    assert fit.gains[0, 2] / fit.gains[0, 0] == pytest.approx(1.0, rel=0.15)


def test_cells_beyond_the_kernels_are_refused_in_a_sentence() -> None:
    rng = np.random.default_rng(13)
    table = made_up_table(rng)
    with pytest.raises(InputError, match=r"a cell lies 90 km from a site, but the kernels end at 22 km"):
        build_model(table, np.array([[5e3, 90e3]]), np.zeros((1, 2)), np.arange(5.0), 20.0, 0.0)


@pytest.mark.parametrize(
    ("change", "sentence"),
    [
        ({"bands_hz": ()}, "bands_hz"),
        ({"bands_hz": ((0.5, 0.2),)}, "corners must rise"),
        ({"hop_s": 4.0}, "hop_s"),
        ({"cells": 2}, "cells"),
        ({"held_out_share": 0.9}, "held_out_share"),
        ({"most_model_error": 0.05}, "most_model_error"),
        ({"coda_share": -1.0}, "coda_share"),
        ({"most_distant_km": 1.0}, "most_distant_km"),
    ],
)
def test_settings_are_refused_in_a_sentence(change: dict[str, object], sentence: str) -> None:
    with pytest.raises(InputError, match=sentence):
        replace(EnergySettings(), **change)
