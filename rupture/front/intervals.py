"""Best values and 90 % intervals of draws, also on the circle."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


def interval(values: Array, circular: bool = False, weights: Array | None = None) -> tuple[float, float, float]:
    """Return median, p05 and p95 of draws; a circle is cut opposite the mean direction.

    Parameters
    ----------
    values
        Shape (draws,); angles in rad where `circular`, which come back in [0, 2 pi).
    circular
        Whether they go round a circle.
    weights
        Shape (draws,); equal when not given.

    Examples
    --------
    >>> interval(np.array([1.0, 2.0, 3.0]))[0]
    2.0
    """
    weights = np.full(values.size, 1.0 / values.size) if weights is None else weights / weights.sum()
    turn = 0.0
    if circular:
        turn = float(np.angle(np.sum(weights * np.exp(1j * values))))
        values = (values - turn + np.pi) % (2 * np.pi) - np.pi
    order = np.argsort(values)
    reach = np.cumsum(weights[order]) - 0.5 * weights[order]
    low, middle, high = np.interp([0.05, 0.5, 0.95], reach, values[order]) + turn
    if circular:
        low, middle, high = (float(v % (2 * np.pi)) for v in (low, middle, high))
    return float(middle), float(low), float(high)
