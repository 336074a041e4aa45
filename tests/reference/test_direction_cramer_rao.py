"""Errors of back-azimuth against the Cramer-Rao bound (Stoica & Nehorai 1990, unconditional), see cramer_rao.py."""

import importlib.util
from pathlib import Path

import numpy as np
import pytest

_spec = importlib.util.spec_from_file_location(
    "cramer_rao", Path(__file__).resolve().parents[1] / "direction" / "cramer_rao.py"
)
cramer_rao = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(cramer_rao)


@pytest.mark.parametrize("snr", [3, 10, 30, 100])
@pytest.mark.parametrize("kind", ["6C", "3C+rotZ"])
def test_errors_are_near_the_bound(kind, snr):
    """Slowness known; 600 windows leave the ratio itself a standard deviation of 6 %."""
    errors = np.concatenate([cramer_rao.errors_rad(kind, snr, True, seed=seed) for seed in range(3)])
    efficiency = cramer_rao.bound_rad(kind, snr, True, cramer_rao.samples()) ** 2 / np.mean(errors**2)
    assert 0.8 < efficiency < 1.25
    assert abs(errors.mean()) < 4 * errors.std() / np.sqrt(errors.size)


@pytest.mark.parametrize("snr", [3, 30])
def test_not_knowing_the_slowness_costs_nothing_more_than_it_must(snr):
    errors = np.concatenate([cramer_rao.errors_rad("6C", snr, False, seed=seed) for seed in range(2)])
    efficiency = cramer_rao.bound_rad("6C", snr, False, cramer_rao.samples()) ** 2 / np.mean(errors**2)
    assert 0.8 < efficiency < 1.3


def test_bound_falls_with_signal_and_samples_and_components():
    """At high signal-to-noise the bound is proportional to noise amplitude and to one over the root of N."""
    bound = cramer_rao.bound_rad
    assert bound("6C", 100, False, 20) / bound("6C", 50, False, 20) == pytest.approx(0.5, rel=0.01)
    assert bound("6C", 100, False, 80) / bound("6C", 100, False, 20) == pytest.approx(0.5, rel=1e-6)
    assert bound("6C", 10, False, 20) < bound("3C+rotZ", 10, False, 20)
    assert bound("3C+rotZ", 10, True, 20) <= bound("3C+rotZ", 10, False, 20) * (1 + 1e-9)


def test_bound_in_closed_form_for_a_vertical_wave_seen_by_horizontal_rotation():
    """rot = p a_Z t: sigma_theta = sigma_rot / (p rms(a_Z) sqrt N) as the noise falls (arithmetic)."""
    slowness, count, snr = 1 / cramer_rao.SPEED_M_S, 25.0, 1000.0
    noise = cramer_rao.noise_power(snr)
    expected = np.sqrt(noise[3] / count) / (slowness * 0.5)
    # The vertical equation adds what it knows: rot_Z answers to both horizontal motions.
    vertical = np.sqrt((noise[5] + slowness**2 / 4 * noise[0]) / count) / (slowness / 2 * 0.8)
    assert cramer_rao.bound_rad("6C", snr, True, count) == pytest.approx(
        (expected**-2 + vertical**-2) ** -0.5, rel=0.05
    )
