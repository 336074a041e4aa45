"""The inner loop of the stack: for each cell, rows of the sites' tables, shifted by travel time and added."""

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
