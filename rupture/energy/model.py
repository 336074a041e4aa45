"""The linear model: energy over cells and source times to covariances of windows, and its adjoint."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import fft

from rupture.energy.kernels import gather_energy, spread_gradient
from rupture.energy.table import KernelTable, basis

Array = NDArray[np.float64]

CODA_TERMS = ((4.0, 0.6, 5 / 6), (10.0, None, 1 / 6))
"""Decay in s, angular spread in rad (None: from everywhere) and share of the scattered waves that every wave of a kernel
trails. Multiple forward scattering keeps early coda near the direct path (common practice); the split was the best of
those tried on complete synthetic seismograms with scattered waves (docs/energy.md)."""


def coda_kernels(
    harmonics: NDArray[np.float32], hop_s: float, decay_s: float, spread_rad: float | None
) -> NDArray[np.float32]:
    """Return the kernels of scattered waves: every wave of the direct kernel trails exp(-t / decay) / decay.

    A normal spread of azimuths multiplies the harmonics of order m by exp(-m^2 spread^2 / 2).

    Parameters
    ----------
    harmonics
        Direct kernels, shape (D, H, 21, L).
    """
    lags = harmonics.shape[-1]
    order = (np.arange(harmonics.shape[1]) + 1) // 2
    damp = (order == 0).astype(float) if spread_rad is None else np.exp(-0.5 * (order * spread_rad) ** 2)
    # The mean of the exponential over each hop keeps the scattered energy exact.
    edge = hop_s * np.arange(lags + 1)
    response = -np.diff(np.exp(-edge / decay_s))
    length = fft.next_fast_len(2 * lags, real=True)
    spectrum = fft.rfft(harmonics * damp[:, None, None].astype(np.float32), length, axis=-1) * fft.rfft(
        response, length
    )
    return np.asarray(fft.irfft(spectrum, length, axis=-1)[..., :lags], np.float32)


@dataclass
class EnergyModel:
    """Kernels of a grid and sites, ready for products by FFT.

    Attributes
    ----------
    source_time_s, time_s
        Source times (F,) and window centres (T,), steps of one hop; the first window sees the first source time.
    low, part, phi
        Distance node, weight of the next one (S, C) and azimuthal basis (S, C, H).
    spectra
        Kernels per band, shape (frequencies, D H, 21), complex64.
    backward
        Their conjugate transposes, for the adjoint.
    nodes, length
        Number of distance nodes D, and of samples of a transform in time.
    """

    source_time_s: Array
    time_s: Array
    low: NDArray[np.int64]
    part: NDArray[np.float32]
    phi: NDArray[np.float32]
    spectra: list[NDArray[np.complex64]]
    backward: list[NDArray[np.complex64]]
    nodes: int
    length: int

    def gathered(self, energy: NDArray[np.float32]) -> NDArray[np.complex64]:
        """Return the spectra of the energy on nodes and harmonics, shape (frequencies, S, D H)."""
        sites, _, harmonics = self.phi.shape
        out = np.empty((sites, self.nodes, harmonics, energy.shape[1]), np.float32)
        gather_energy(energy, self.low, self.part, self.phi, self.nodes, out)
        spectrum = fft.rfft(out.reshape(sites, self.nodes * harmonics, -1), self.length, axis=-1)
        return np.ascontiguousarray(spectrum.transpose(2, 0, 1))

    def forward(self, gathered: NDArray[np.complex64]) -> Array:
        """Return covariances, shape (S, B, T, 21), of gathered energy."""
        out = [
            fft.irfft(gathered @ kernel, self.length, axis=0)[: self.time_s.size].transpose(1, 0, 2)
            for kernel in self.spectra
        ]
        return np.stack(out, axis=1).astype(float)

    def adjoint(self, weights: Array) -> NDArray[np.float32]:
        """Return the adjoint of `forward` after `gathered`, shape (C, F); `weights` has shape (S, B, T, 21)."""
        sites, _, harmonics = self.phi.shape
        frames = self.source_time_s.size
        total = None
        for b, backward in enumerate(self.backward):
            spectrum = fft.rfft(weights[:, b].astype(np.float32), self.length, axis=1).transpose(1, 0, 2)
            product = np.ascontiguousarray(spectrum) @ backward
            total = product if total is None else total + product
        field = fft.irfft(total, self.length, axis=0)[:frames]
        field = np.ascontiguousarray(field.transpose(1, 2, 0)).reshape(sites, self.nodes, harmonics, frames)
        out = np.empty((self.low.shape[1], frames), np.float32)
        spread_gradient(field.astype(np.float32), self.low, self.part, self.phi, out)
        return out


def build_model(
    table: KernelTable,
    distance_m: Array,
    back_azimuth_rad: Array,
    source_time_s: Array,
    last_s: float,
    coda_share: float,
) -> EnergyModel:
    """Return the model of cells and sites.

    Parameters
    ----------
    table
        Kernels.
    distance_m, back_azimuth_rad
        Of cells at sites, shape (S, C).
    source_time_s
        Uniform, step of the table's hop, shape (F,).
    last_s
        Last window centre wanted, s after the origin time.
    coda_share
        Energy of the scattered waves that kernels trail, over that of the direct ones.

    Raises
    ------
    InputError
        When a cell lies beyond the table's distances.
    """
    low, part = table.place(distance_m)
    first_node = int(low.min())
    nodes = int(low.max()) + 2 - first_node
    count = max(8, int(np.floor((last_s - source_time_s[0] - table.lag_s[0]) / table.hop_s)) + 1)
    time = source_time_s[0] + table.lag_s[0] + table.hop_s * np.arange(count)
    length = int(fft.next_fast_len(count + source_time_s.size, real=True))
    cut = np.zeros((*table.harmonics.shape[:1], nodes, *table.harmonics.shape[2:4], count), np.float32)
    lags = min(count, table.lag_s.size)
    cut[..., :lags] = table.harmonics[:, first_node : first_node + nodes, ..., :lags]
    spectra = []
    for direct in cut:
        kernel = direct.copy()
        for decay, spread, share in CODA_TERMS if coda_share > 0 else ():
            kernel += np.float32(coda_share * share) * coda_kernels(direct, table.hop_s, decay, spread)
        spectra.append(_spectrum(kernel, length))
    backward = [np.ascontiguousarray(s.conj().swapaxes(1, 2)) for s in spectra]
    phi = basis(back_azimuth_rad, table.order).astype(np.float32)
    return EnergyModel(
        source_time_s, time, low - first_node, part.astype(np.float32), phi, spectra, backward, nodes, length
    )


def _spectrum(kernel: NDArray[np.float32], length: int) -> NDArray[np.complex64]:
    spectrum = fft.rfft(kernel, length, axis=-1)
    return np.ascontiguousarray(spectrum.transpose(3, 0, 1, 2).reshape(spectrum.shape[-1], -1, 21)).astype(np.complex64)
