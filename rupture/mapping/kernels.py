"""The inner loops of the stack: rows of the sites' tables, shifted by travel time, for each cell."""

from __future__ import annotations

import numba
import numpy as np


@numba.njit(parallel=True, cache=True)
def add_shifted_rows(out, table, row, shift, stride):  # pragma: no cover - compiled
    """Add table[row[c], f * stride + shift[c]] to out[c, f], linear in time, nothing beyond the table's ends.

    Each thread owns its cells, so that the sum does not depend on how many there are.

    Parameters
    ----------
    out
        Shape (C, F), float32, changed in place.
    table
        Shape (rows, T), float32, contiguous in time.
    row
        Row of each cell, int64, shape (C,); negative: nothing is added.
    shift
        Position in the table of frame 0, in samples, shape (C,).
    stride
        Samples of the table from frame to frame.
    """
    cells, frames = out.shape
    length = table.shape[1]
    for c in numba.prange(cells):
        r = row[c]
        if r < 0:
            continue
        whole = int(np.floor(shift[c]))
        part = np.float32(shift[c] - whole)
        rest = np.float32(1.0) - part
        first = max(0, -(whole // stride))
        last = min(frames, (length - 2 - whole) // stride + 1)
        for f in range(first, last):
            at = f * stride + whole
            out[c, f] += rest * table[r, at] + part * table[r, at + 1]


@numba.njit(parallel=True, cache=True)
def middle_mean_power(out, level, length, gain, shift, stride):  # pragma: no cover - compiled
    """Set out[c, f] to exp of the mean over the middle half of the sites of level[s, f * stride + shift] + gain[s, c].

    A quarter of the sites that have a value (rounded down) is left out at either end, so that no single one makes or
    unmakes a cell's power. Where no site has a value the power is 0.

    Parameters
    ----------
    out
        Shape (C, F), float32, overwritten.
    level
        Log power of each site, shape (S, T), float64; what lies beyond `length[s]` is not read.
    length
        Samples of each site, int64, shape (S,).
    gain
        Log of what distance took from the power, shape (S, C).
    shift
        Position in `level` of frame 0, in samples, shape (S, C).
    stride
        Samples from frame to frame.
    """
    cells, frames = out.shape
    sites = level.shape[0]
    for c in numba.prange(cells):
        values = np.empty(sites)
        for f in range(frames):
            heard = 0
            for s in range(sites):
                place = shift[s, c] + f * stride
                at = int(np.floor(place))
                if at < 0 or at + 1 >= length[s]:
                    continue
                part = place - at
                value = (1.0 - part) * level[s, at] + part * level[s, at + 1] + gain[s, c]
                k = heard
                while k > 0 and values[k - 1] > value:
                    values[k] = values[k - 1]
                    k -= 1
                values[k] = value
                heard += 1
            if heard == 0:
                out[c, f] = 0.0
                continue
            left_out = heard // 4
            total = 0.0
            for k in range(left_out, heard - left_out):
                total += values[k]
            out[c, f] = np.exp(total / (heard - 2 * left_out))
