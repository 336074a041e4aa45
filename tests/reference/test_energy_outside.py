"""Kernels against relations from outside the project."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from rupture.earth.layers import LayeredModel
from rupture.energy import EnergySettings, build_kernels
from rupture.energy.table import ROTATION_SCALE_M_S, turn_matrix, unpack


@pytest.fixture
def stored(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path))


def test_love_waves_of_the_kernels_obey_the_rotation_rate_relation(stored: None) -> None:
    """a_T = -2 c rot_Z for transverse waves (Igel et al. 2005; Cochard et al. 2006), c between both S speeds of the Love waves.

    Whole-space and half-space SH at far distance: c is the speed of the surface layer and that of the half-space at most.
    """
    crust = LayeredModel(
        "crust", [0.0, 20.0], [5.2, 7.8], [3.0, 4.5], [2600.0, 3200.0], [800.0, 1000.0], [400.0, 500.0]
    )
    table = build_kernels(crust, 6.0, 120.0, EnergySettings(bands_hz=((0.1, 0.3),), window_s=10.0, hop_s=2.0))
    turn = turn_matrix(0.0)
    full = turn.T @ unpack(table.at(0, 118e3, 0.0).T) @ turn
    loudest = int(full[:, 1, 1].argmax())
    kernel = full[loudest]
    speed = ROTATION_SCALE_M_S / 2 * np.sqrt(kernel[1, 1] / kernel[5, 5])
    assert 2900.0 < speed < 4500.0
    coherence = kernel[1, 5] / np.sqrt(kernel[1, 1] * kernel[5, 5])
    # T grows with azimuth (clockwise), Up turns counter-clockwise: the sign of -2 c rot_Z in these axes.
    assert abs(coherence) > 0.98
