"""What the inversion looks at: covariances of all windows of all sites, their noise, and which of them count."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rupture.direction.covariance import (
    PAIRS,
    band_signal,
    independent_samples,
    mean_covariance,
    sliding_covariances,
)
from rupture.energy.table import COMPONENT_SCALE, KernelTable
from rupture.errors import DataError
from rupture.site import Site

Array = NDArray[np.float64]

_DIAGONAL = PAIRS[:, 0] == PAIRS[:, 1]
GROUPS = np.array([0, 0, 1, 2, 2, 3])
"""Component group of each component: horizontal and vertical translation, horizontal and vertical rotation."""


DYNAMIC_SHARE = 1e-3
"""No Earth model tells the quiet parts of a record to better than this share of its loudest window's power."""


@dataclass(frozen=True)
class Observed:
    """Windows of all sites on one time axis; rotation rate is scaled to the size of acceleration, all divided by `scale`.

    Attributes
    ----------
    time_s
        Centres of the windows, s after the origin time, multiples of the hop, shape (T,).
    covariance
        Shape (S, B, T, 21); zero where nothing counts.
    noise
        Pre-event covariance, shape (S, B, 21), positive definite among present components.
    present
        Which components count in a window, shape (S, B, T, 6).
    share
        How many independent samples a window stands for, halved: its weight in the likelihood, shape (B,).
    scale
        Of the records' power, (m/s^2)^2.
    """

    time_s: Array
    covariance: Array
    noise: Array
    present: NDArray[np.bool_]
    share: Array
    scale: float


def observe(
    sites: Sequence[Site], noise_windows_s: Sequence[tuple[float, float]], table: KernelTable, time_s: Array
) -> Observed:
    """Return the covariances of the windows of a time axis.

    Raises
    ------
    DataError
        When a site has too little noise before the event, or no component that counts.
    """
    bands, times = table.band_hz, time_s.size
    covariance = np.zeros((len(sites), len(bands), times, 21))
    present = np.zeros((len(sites), len(bands), times, 6), bool)
    noise = np.zeros((len(sites), len(bands), 21))
    for s, (site, quiet) in enumerate(zip(sites, noise_windows_s, strict=True)):
        for b, (low, high) in enumerate(bands):
            covariance[s, b], present[s, b], noise[s, b] = _one(
                site, quiet, (float(low), float(high)), table.window_s, time_s
            )
    if not present.any():
        raise DataError(
            "no window of any site can be used for the energy inversion: the records end before the waves arrive"
        )
    power = covariance[..., _DIAGONAL].sum(axis=-1)
    scale = float(np.max(power)) / 6
    if not scale > 0:
        raise DataError("the records are zero in the bands of the energy inversion")
    share = np.array(
        [
            independent_samples((float(a), float(b)), table.window_s) * min(1.0, table.hop_s / table.window_s) / 2
            for a, b in bands
        ]
    )
    return Observed(time_s, covariance / scale, noise / scale, present, share, scale)


def _one(
    site: Site, quiet_s: tuple[float, float], band: tuple[float, float], window_s: float, time_s: Array
) -> tuple[Array, NDArray[np.bool_], Array]:
    if site.band_hz[0] > band[0] * 1.001 or site.band_hz[1] < band[1] * 0.999:
        return np.zeros((time_s.size, 21)), np.zeros((time_s.size, 6), bool), np.eye(6)[PAIRS[:, 0], PAIRS[:, 1]]
    # A day of 200 Hz records needs no such rate below 1 Hz.
    analytic = band_signal(site.data * COMPONENT_SCALE[:, None], site.step_s, band)
    window = 2 * max(1, round(window_s / site.step_s / 2))
    centre = np.round((time_s - site.start_s) / site.step_s).astype(np.int64)
    half = window // 2
    inside = (centre >= half) & (centre + half < site.data.shape[1])
    out = np.zeros((time_s.size, 21))
    present = np.zeros((time_s.size, 6), bool)
    first, last = (int(np.clip((v - site.start_s) / site.step_s, 0, site.data.shape[1])) for v in quiet_s)
    if (last - first) * site.step_s < 2.0 * window_s:
        raise DataError(
            f"site {site.code}: {max(0, last - first) * site.step_s:.0f} s of noise before the P wave; the energy inversion needs {2 * window_s:.0f} s"
        )
    noise = mean_covariance(analytic, first, last)
    if inside.any():
        out[inside] = sliding_covariances(analytic, window, centre[inside]).T
        bad = np.concatenate([np.zeros((6, 1)), np.cumsum(~site.valid, axis=1)], axis=1)
        present[inside] = (bad[:, centre[inside] + half] == bad[:, centre[inside] - half]).T
    present &= site.present
    for part in (slice(0, 3), slice(3, 6)):
        diagonal = np.flatnonzero(_DIAGONAL)[part]
        noise[diagonal] += DYNAMIC_SHARE * out[:, diagonal].mean(axis=1).max() + 1e-300
    absent = ~(present[:, PAIRS[:, 0]] & present[:, PAIRS[:, 1]])
    out[absent] = 0.0
    return out, present, noise
