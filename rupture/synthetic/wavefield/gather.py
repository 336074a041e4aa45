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


@njit(cache=True, parallel=True)
def add_block(
    spectra, first_distance, omega, source, event, start, first_node, stencil, reduced, node_step, slowness, weights,
    cosine, sine, translation, rotation, first_frequency, out,
):  # fmt: skip
    """Add what one block of elementary spectra gives to the records.

    Each pair's spectrum is the sum over its nodes of stencil times spectrum, with the phase of a wave of the mean slowness taken out
    before and put back after, so that what is interpolated varies slowly with distance.

    Parameters
    ----------
    spectra, first_distance
        Block (distances, 18, frequencies) and the index of its first distance among the nodes.
    omega, source
        Complex angular frequencies (frequencies,), and spectra of the sub-events' moment rate with their time shift
        (events, frequencies).
    event, start
        Sub-event of each pair (pairs,), pairs sorted by receiver, whose ranges start at start (receivers + 1,).
    first_node, stencil, reduced
        First node (pairs,), its weights (pairs, NODES), first node's distance minus the pair's in m (pairs,).
    node_step, slowness
        Step of the nodes in m and mean slowness in s/m, both 0 where pairs have nodes of their own.
    weights
        Multipliers of the elements (pairs, 18).
    cosine, sine
        Of the azimuth at the receiver away from the source (pairs,).
    translation, rotation
        Powers of i omega (frequencies,).
    first_frequency, out
        Where in out (receivers, 6, all frequencies) the block goes; added to.
    """
    n = omega.size
    bounds = (0, 4, 6, 10, 12, 16, 18)
    advance = np.empty(n, np.complex128)
    for f in range(n):
        advance[f] = np.exp(1j * omega[f] * slowness * node_step)
    for receiver in prange(start.size - 1):
        part = np.empty((6, n), np.complex128)
        whole = np.empty((6, n), np.complex128)
        phase = np.empty(n, np.complex128)
        for p in range(start[receiver], start[receiver + 1]):
            node = first_node[p] - first_distance
            if node + NODES <= 0 or node >= spectra.shape[0]:
                continue
            whole[:, :] = 0.0
            for f in range(n):
                phase[f] = np.exp(1j * omega[f] * slowness * reduced[p]) if slowness != 0.0 else 1.0 + 0.0j
            for m in range(NODES):
                share = stencil[p, m]
                if 0 <= node + m < spectra.shape[0] and share != 0.0:
                    for c in range(6):
                        part[c, :] = 0.0
                        for e in range(bounds[c], bounds[c + 1]):
                            w = share * weights[p, e]
                            for f in range(n):
                                part[c, f] += w * spectra[node + m, e, f]
                    for c in range(6):
                        for f in range(n):
                            whole[c, f] += part[c, f] * phase[f]
                for f in range(n):
                    phase[f] *= advance[f]
            c, s = cosine[p], sine[p]
            for row in (0, 3):
                for f in range(n):
                    factor = source[event[p], f] * (translation[f] if row == 0 else rotation[f])
                    radial = whole[row, f] * factor
                    transverse = whole[row + 1, f] * factor
                    out[receiver, row, first_frequency + f] += radial * s + transverse * c
                    out[receiver, row + 1, first_frequency + f] += radial * c - transverse * s
                    out[receiver, row + 2, first_frequency + f] += whole[row + 2, f] * factor
