"""Compiled sum of elementary spectra over sub-events, with interpolation over distance."""

from __future__ import annotations

import numpy as np
from numba import njit, prange
from numpy.typing import NDArray

NODES = 8
"""Neighbouring distances of the table that one interpolated value is made from."""


def lagrange(position: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return Lagrange weights of nodes 0..NODES-1 at positions in units of the node step, shape (positions, NODES).

    Examples
    --------
    >>> lagrange(np.array([3.0])).round(12) + 0.0
    array([[0., 0., 0., 1., 0., 0., 0., 0.]])
    """
    node = np.arange(NODES)
    weights = np.ones((position.size, NODES))
    for m in node:
        for other in node[node != m]:
            weights[:, m] *= (position - other) / (m - other)
    return weights


@njit(cache=True, parallel=True, error_model="numpy", fastmath={"contract"})
def add_block(
    spectra, first, omega, source, level, first_row, stencil, reduced, node_step, slowness, weights, onward, translation,
    rotation, first_frequency, out,
):  # fmt: skip
    """Add what one block of elementary spectra gives to the records.

    Each pair's spectrum is the sum over its nodes of stencil times spectrum, with the phase of a wave of the mean slowness
    taken out before and put back after, so that what is interpolated varies slowly with distance.

    Parameters
    ----------
    spectra, first
        Block (rows, 18, frequencies) and the number of its first row.
    omega, source
        Complex angular frequencies (frequencies,), and spectra of the sub-events' moment rate with their time shift
        (events, frequencies).
    level, first_row, stencil, reduced, weights, onward
        As in `pairs.Pairs`.
    node_step, slowness
        Step of the nodes in m and mean slowness in s/m of each depth (depths,).
    translation, rotation
        Powers of i omega (frequencies,).
    first_frequency, out
        Where in out (receivers, 6, all frequencies) the block goes; added to.
    """
    n = omega.size
    bounds = (0, 4, 6, 10, 12, 16, 18)
    advance = np.empty((node_step.size, n), np.complex128)
    for d in range(node_step.size):
        for f in range(n):
            advance[d, f] = np.exp(1j * omega[f] * slowness[d] * node_step[d])
    for receiver in prange(first_row.shape[0]):
        part = np.empty((6, n), np.complex128)
        whole = np.empty((6, n), np.complex128)
        phase = np.empty(n, np.complex128)
        for event in range(first_row.shape[1]):
            row = first_row[receiver, event] - first
            if row + NODES <= 0 or row >= spectra.shape[0]:
                continue
            d = level[event]
            shift = slowness[d] * reduced[receiver, event]
            for f in range(n):
                phase[f] = np.exp(1j * omega[f] * shift) if shift != 0.0 else 1.0 + 0.0j
            whole[:, :] = 0.0
            for m in range(NODES):
                share = stencil[receiver, event, m]
                if 0 <= row + m < spectra.shape[0] and share != 0.0:
                    for c in range(6):
                        part[c, :] = 0.0
                        for e in range(bounds[c], bounds[c + 1]):
                            w = share * weights[receiver, event, e]
                            for f in range(n):
                                part[c, f] += w * spectra[row + m, e, f]
                    for c in range(6):
                        for f in range(n):
                            whole[c, f] += part[c, f] * phase[f]
                for f in range(n):
                    phase[f] *= advance[d, f]
            c, s = np.cos(onward[receiver, event]), np.sin(onward[receiver, event])
            for r in (0, 3):
                for f in range(n):
                    factor = source[event, f] * (translation[f] if r == 0 else rotation[f])
                    radial = whole[r, f] * factor
                    transverse = whole[r + 1, f] * factor
                    out[receiver, r, first_frequency + f] += radial * s + transverse * c
                    out[receiver, r + 1, first_frequency + f] += radial * c - transverse * s
                    out[receiver, r + 2, first_frequency + f] += whole[r + 2, f] * factor
