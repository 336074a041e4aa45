"""Compiled inner loops: energy onto distance nodes and harmonics, back again, and the windows' 6x6 algebra."""

from __future__ import annotations

import numba
import numpy as np


@numba.njit(parallel=True, cache=True)
def gather_energy(energy, low, part, phi, nodes, out):  # pragma: no cover - compiled
    """Add the energy of cells to the distance nodes and harmonics of each site.

    `energy` (C, F); `low`, `part` (S, C); `phi` (S, C, H); `out` (S, D, H, F), overwritten. Each thread owns a site.
    """
    sites, cells, harmonics = phi.shape
    frames = energy.shape[1]
    for s in numba.prange(sites):
        out[s] = 0.0
        for c in range(cells):
            d = low[s, c]
            above = part[s, c]
            below = 1.0 - above
            for h in range(harmonics):
                first, second = below * phi[s, c, h], above * phi[s, c, h]
                for f in range(frames):
                    out[s, d, h, f] += first * energy[c, f]
                    out[s, d + 1, h, f] += second * energy[c, f]


@numba.njit(parallel=True, cache=True)
def spread_gradient(field, low, part, phi, out):  # pragma: no cover - compiled
    """Add, as the adjoint of `gather_energy`, what every site's nodes hold to the cells.

    `field` (S, D, H, F); `out` (C, F), overwritten. Each thread owns a cell.
    """
    sites, cells, harmonics = phi.shape
    frames = out.shape[1]
    for c in numba.prange(cells):
        out[c] = 0.0
        for s in range(sites):
            d = low[s, c]
            above = part[s, c]
            below = 1.0 - above
            for h in range(harmonics):
                first, second = below * phi[s, c, h], above * phi[s, c, h]
                for f in range(frames):
                    out[c, f] += first * field[s, d, h, f] + second * field[s, d + 1, h, f]


@numba.njit(cache=True)
def _one_window(model, data, present, inverse, sandwich, work):  # pragma: no cover - compiled
    """Fill packed Sigma^-1 and Sigma^-1 C Sigma^-1 of one window; return log det Sigma + tr(Sigma^-1 C), or infinity."""
    size = 0
    index = np.empty(6, np.int64)
    for i in range(6):
        if present[i]:
            index[size] = i
            size += 1
    inverse[:] = 0.0
    sandwich[:] = 0.0
    if size == 0:
        return 0.0
    a, b, c = work[0], work[1], work[2]
    for i in range(size):
        for j in range(i, size):
            p, q = index[i], index[j]
            k = p * 6 - p * (p - 1) // 2 + (q - p)
            a[i, j] = a[j, i] = model[k]
            c[i, j] = c[j, i] = data[k]
    # Cholesky factor in the lower triangle of a, its inverse in b.
    log_det = 0.0
    for j in range(size):
        value = a[j, j]
        for k in range(j):
            value -= a[j, k] * a[j, k]
        if not value > 0.0:
            return np.inf
        root = np.sqrt(value)
        a[j, j] = root
        log_det += 2.0 * np.log(root)
        for i in range(j + 1, size):
            value = a[i, j]
            for k in range(j):
                value -= a[i, k] * a[j, k]
            a[i, j] = value / root
    for j in range(size):
        b[j, j] = 1.0 / a[j, j]
        for i in range(j + 1, size):
            value = 0.0
            for k in range(j, i):
                value -= a[i, k] * b[k, j]
            b[i, j] = value / a[i, i]
    # a <- Sigma^-1 = b^T b.
    for i in range(size):
        for j in range(i, size):
            value = 0.0
            for k in range(j, size):
                value += b[k, i] * b[k, j]
            a[i, j] = a[j, i] = value
    trace = 0.0
    for i in range(size):
        for j in range(size):
            value = 0.0
            for k in range(size):
                value += a[i, k] * c[k, j]
            b[i, j] = value
        trace += b[i, i]
    for i in range(size):
        for j in range(i, size):
            value = 0.0
            for k in range(size):
                value += b[i, k] * a[k, j]
            p, q = index[i], index[j]
            at = p * 6 - p * (p - 1) // 2 + (q - p)
            twice = 1.0 if i == j else 2.0
            inverse[at] = twice * a[i, j]
            sandwich[at] = twice * value
    return log_det + trace


@numba.njit(parallel=True, cache=True)
def window_terms(model, data, present, inverse, sandwich, value):  # pragma: no cover - compiled
    """Wishart terms of all windows.

    `model`, `data` (N, 21); `present` (N, 6); out: `inverse`, `sandwich` (N, 21), off-diagonals doubled so that a plain
    product with a packed kernel is the trace, and `value` (N,), log det Sigma + tr(Sigma^-1 C); infinite where Sigma is not
    positive definite.
    """
    blocks = 64
    count = model.shape[0]
    for block in numba.prange(blocks):
        work = np.zeros((3, 6, 6))
        for n in range(block * count // blocks, (block + 1) * count // blocks):
            value[n] = _one_window(model[n], data[n], present[n], inverse[n], sandwich[n], work)


@numba.njit(cache=True)
def fill_density(arms, common, east, north, time, volume, taper, out):  # pragma: no cover - compiled
    """Fill the density of line sources at points.

    `arms` (A, 4): azimuth, speed, duration, share; `common`: east, north, start, log spread, stray share; points and `out` (n,).
    """
    x0, y0, start, log_spread, stray = common
    spread2 = np.exp(2.0 * log_spread)
    for n in range(time.size):
        total = 0.0
        age = time[n] - start
        for k in range(arms.shape[0]):
            azimuth, speed, duration, share = arms[k]
            # Soft ends: source times are only known to a window's length.
            alive = 0.5 * (np.tanh(age / taper) - np.tanh((age - duration) / taper)) / duration
            if alive < 1e-12:
                continue
            reach = speed * min(max(age, 0.0), duration)
            dx = east[n] - x0 - reach * np.sin(azimuth)
            dy = north[n] - y0 - reach * np.cos(azimuth)
            total += share * alive * np.exp(-0.5 * (dx * dx + dy * dy) / spread2) / (2.0 * np.pi * spread2)
        out[n] = (1.0 - stray) * total + stray / volume
