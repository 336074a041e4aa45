"""Kernel tables from Green's functions."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from rupture.direction.covariance import PAIRS
from rupture.earth.layers import LayeredModel
from rupture.energy import EnergySettings, KernelTable, build_kernels
from rupture.energy.model import coda_kernels
from rupture.energy.table import ROTATION_SCALE_M_S, covariances, turn_matrix, unpack
from rupture.errors import InputError

ROCK = LayeredModel("rock", [0.0, 15.0], [5.8, 6.6], [3.35, 3.8], [2700.0, 2900.0], [500.0, 700.0], [250.0, 350.0])
SETTINGS = EnergySettings(bands_hz=((0.2, 0.6),))
SH = [1, 3, 5]


@pytest.fixture(scope="module")
def cache(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return tmp_path_factory.mktemp("cache")


@pytest.fixture
def stored(cache: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("XDG_CACHE_HOME", str(cache))


@pytest.fixture
def averaged(stored: None) -> KernelTable:
    return build_kernels(ROCK, 8.0, 40.0, SETTINGS)


def radial(table: KernelTable, distance_m: float) -> np.ndarray:
    turn = turn_matrix(0.0)
    return turn.T @ unpack(table.at(0, distance_m, 0.0).T) @ turn


def test_average_is_that_of_many_random_double_couples(averaged: KernelTable) -> None:
    """The closed form against plain Monte Carlo over uniform orientations, from single-mechanism tables."""
    rng = np.random.default_rng(3)
    total = 0.0
    turns = np.linspace(0, 2 * np.pi, 6, endpoint=False)
    for _ in range(60):
        mechanism = (rng.uniform(0, 360), np.degrees(np.arccos(rng.uniform(0, 1))), rng.uniform(-180, 180))
        table = build_kernels(ROCK, 8.0, 40.0, SETTINGS, mechanism)
        for theta in turns:
            turn = turn_matrix(theta)
            total = total + table.scale * turn.T @ unpack(table.at(0, 26e3, theta).T) @ turn / 60 / turns.size
    want = averaged.scale * radial(averaged, 26e3)
    size = np.sqrt(np.einsum("tii->ti", want).max(axis=0))
    assert (np.abs(total - want) / np.outer(size, size)).max() < 0.2


def test_sh_and_p_sv_do_not_mix_in_the_average(averaged: KernelTable) -> None:
    full = np.abs(radial(averaged, 26e3))
    other = [0, 2, 4]
    assert full[:, SH][:, :, other].max() < 1e-5 * full.max()


def test_kernels_are_covariances(averaged: KernelTable) -> None:
    """Positive semidefinite at every distance, between nodes too, azimuth and lag."""
    for distance, theta in ((7e3, 0.4), (15.3e3, 2.9), (38e3, 5.5)):
        values = np.linalg.eigvalsh(unpack(averaged.at(0, distance, theta).T))
        assert values.min() > -1e-4 * values.max()


def test_rays_carry_the_body_waves_of_the_complete_field(averaged: KernelTable) -> None:
    """Loudest lag within a hop, power within a factor of two, where surface waves are still weak."""
    rays = build_kernels(ROCK, 8.0, 40.0, EnergySettings(bands_hz=((0.2, 0.6),), waves="ray"))
    one, two = (t.scale * np.einsum("tii->t", radial(t, 26e3)) for t in (averaged, rays))
    assert abs(int(one.argmax()) - int(two.argmax())) <= 1
    assert 0.5 < one.max() / two.max() < 2.0


def test_mechanism_radiates_where_it_should(stored: None) -> None:
    """Strike slip on a vertical plane: SH is loud along strike, silent at 45 degrees from it (Aki & Richards 2002, ch. 4)."""
    table = build_kernels(ROCK, 8.0, 40.0, SETTINGS, (30.0, 90.0, 0.0))
    power = {}
    for name, azimuth_deg in (("along", 30.0), ("between", 75.0)):
        theta = np.radians(azimuth_deg + 180.0)
        turn = turn_matrix(theta)
        power[name] = (turn.T @ unpack(table.at(0, 34e3, theta).T) @ turn)[:, 1, 1].max()
    assert power["between"] < 1e-3 * power["along"]


def test_coda_keeps_energy_and_forgets_azimuth() -> None:
    rng = np.random.default_rng(1)
    direct = np.zeros((2, 5, 21, 400), np.float32)
    direct[..., :5] = rng.random((2, 5, 21, 5))
    late = coda_kernels(direct, 1.0, 8.0, None)
    assert np.allclose(late[:, 0].sum(axis=-1), direct[:, 0].sum(axis=-1), rtol=1e-4)
    assert np.abs(late[:, 1:]).max() < 1e-6
    near = coda_kernels(direct, 1.0, 8.0, 0.5)
    assert np.allclose(near[:, 3].sum(axis=-1), direct[:, 3].sum(axis=-1) * np.exp(-0.5), rtol=1e-3)


def test_covariances_scale_rotation_to_the_size_of_acceleration() -> None:
    series = np.zeros((6, 400))
    series[2] = np.sin(2 * np.pi * 0.4 * 0.2 * np.arange(400))
    series[3] = series[2] / ROTATION_SCALE_M_S
    packed = covariances(series, 0.2, (0.2, 0.6), 5.0, np.array([40.0]))[:, 0]
    assert packed[PAIRS.tolist().index([2, 2])] == pytest.approx(0.5, rel=0.02)
    assert packed[PAIRS.tolist().index([3, 3])] == pytest.approx(0.5, rel=0.02)


@pytest.mark.parametrize(
    "mechanism", [(0.0, 95.0, 0.0), (0.0, 0.0, 0.0), (500.0, 45.0, 0.0), (0.0, 45.0, 190.0), (np.nan, 45.0, 0.0)]
)
def test_mechanism_out_of_range_is_refused_in_a_sentence(mechanism: tuple[float, float, float]) -> None:
    with pytest.raises(
        InputError, match="strike must lie in -360 to 360, dip in 0 to 90, rake in -180 to 180"
    ) as caught:
        build_kernels(ROCK, 8.0, 40.0, SETTINGS, mechanism)
    assert caught.value.exit_code == 2


@pytest.mark.parametrize("longest_km", [0.0, -3.0, 4000.0])
def test_distances_out_of_range_are_refused_in_a_sentence(longest_km: float) -> None:
    with pytest.raises(InputError, match="between 0 and 1000 km") as caught:
        build_kernels(ROCK, 8.0, longest_km, SETTINGS)
    assert caught.value.exit_code == 2


def test_cells_outside_the_distances_of_the_table_are_refused_in_a_sentence(averaged: KernelTable) -> None:
    with pytest.raises(InputError, match=r"a cell lies 90 km from a site, but the kernels end at 42 km") as caught:
        averaged.place(np.array([5e3, 90e3]))
    assert caught.value.exit_code == 2


def test_a_store_filled_for_another_model_is_not_taken(
    averaged: KernelTable, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """The store names files by what they depend on: one that holds another Earth changes nothing."""
    soft = replace(ROCK, vs_km_s=0.8 * np.asarray(ROCK.vs_km_s))
    after_rock = build_kernels(soft, 8.0, 40.0, SETTINGS)
    monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path))
    alone = build_kernels(soft, 8.0, 40.0, SETTINGS)
    np.testing.assert_allclose(after_rock.harmonics, alone.harmonics, rtol=1e-5, atol=1e-7)
    assert np.abs(after_rock.harmonics - averaged.harmonics).max() > 0.1
