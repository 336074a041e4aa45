"""Best values and 90 % intervals of back-azimuth and apparent velocity."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

if TYPE_CHECKING:
    from rupture.direction.estimate import SiteDirection

Array = NDArray[np.float64]


@dataclass(frozen=True)
class DirectionIntervals:
    """Per band and window, each of shape (B, T); NaN where a window is masked.

    They hold for a coherent wave from the source: how probable that is stands beside them in `SiteDirection.coherent`.
    Best values are modes of the marginal posteriors. Back-azimuths are in [0, 2 pi): where north lies inside an
    interval, p05 is larger than p95. Velocities are in m/s.
    """

    back_azimuth_best_rad: Array
    back_azimuth_p05_rad: Array
    back_azimuth_p95_rad: Array
    apparent_velocity_best_m_s: Array
    apparent_velocity_p05_m_s: Array
    apparent_velocity_p95_m_s: Array


def intervals(direction: SiteDirection) -> DirectionIntervals:
    """Return intervals of a site's direction, band by band."""
    angles, speeds = [], []
    for band, ratio in enumerate(direction.band_log_ratio):
        masked = np.isnan(direction.coherent[band])
        weight = _if_coherent(ratio)
        angles.append(
            [_blank(v, masked) for v in circular_interval(direction.back_azimuth_rad, weight.sum(axis=1, dtype=float))]
        )
        low, best, high = ladder_interval(np.log(direction.slowness_s_m), weight.sum(axis=0, dtype=float))
        speeds.append([_blank(np.exp(-v), masked) for v in (best, high, low)])
    theta = [np.array(column) for column in zip(*angles, strict=True)]
    speed = [np.array(column) for column in zip(*speeds, strict=True)]
    return DirectionIntervals(*theta, *speed)


def _if_coherent(log_ratio: NDArray[np.float32]) -> NDArray[np.float32]:
    """Posterior over prior without the even share that stray waves and noise add, up to a factor, shape (A, P, T).

    That share is the floor under the ratio of all trials. Where no trial is ruled out, little of the ratio is left
    above the floor; there half of it is kept, so that an open answer stays open.
    """
    ratio = np.exp(log_ratio)
    least = ratio.min(axis=(0, 1), keepdims=True)
    share = np.clip(2.0 * (1.0 - least), 0.0, 1.0)
    return np.asarray(ratio - least * share, np.float32)


def _blank(values: Array, masked: NDArray[np.bool_]) -> Array:
    return np.where(masked, np.nan, values)


def circular_interval(angle_rad: Array, weight: Array) -> tuple[Array, Array, Array]:
    """Return mode, p05 and p95 of densities on the circle.

    Parameters
    ----------
    angle_rad
        Uniform bin centres over [0, 2 pi), shape (A,).
    weight
        Densities, not normalised, shape (A, T).

    Returns
    -------
    best, p05, p95
        Shape (T,), rad in [0, 2 pi). The circle is cut opposite the mode.
    """
    count = angle_rad.size
    step = 2 * np.pi / count
    mode = weight.argmax(axis=0)
    order = (mode[None, :] + np.arange(count)[:, None] - count // 2) % count
    turned = np.take_along_axis(weight, order, axis=0)
    edges = mode - count // 2 - 0.5
    low, high = (_quantile(turned, q) for q in (0.05, 0.95))
    shift = _finer(*(weight[(mode + k) % count, np.arange(mode.size)] for k in (-1, 0, 1)))
    best = (angle_rad[mode] + shift * step) % (2 * np.pi)
    return best, (edges + low) * step % (2 * np.pi), (edges + high) * step % (2 * np.pi)


def ladder_interval(node: Array, weight: Array) -> tuple[Array, Array, Array]:
    """Return p05, mode and p95 of densities on uniform nodes, shapes (T,); `weight` has shape (nodes, T)."""
    step = node[1] - node[0]
    low, high = (node[0] - 0.5 * step + step * _quantile(weight, q) for q in (0.05, 0.95))
    mode = weight.argmax(axis=0)
    inside = mode.clip(1, node.size - 2)
    shift = _finer(*(weight[inside + k, np.arange(mode.size)] for k in (-1, 0, 1)))
    return low, node[mode] + np.where(mode == inside, shift, 0.0) * step, high


def _finer(left: Array, centre: Array, right: Array) -> Array:
    """Place of the top of a parabola through the logarithms of three bins, in bins from the middle one."""
    before, middle, after = (np.log(v + 1e-300) for v in (left, centre, right))
    bend = before - 2 * middle + after
    shift = np.where(bend < 0, 0.5 * (before - after) / np.where(bend < 0, bend, 1.0), 0.0)
    return np.clip(shift, -0.5, 0.5)


def _quantile(weight: Array, share: float) -> Array:
    """Position in bins, counted from the first bin's lower edge, below which a share of each column lies."""
    total = np.cumsum(weight, axis=0)
    target = share * total[-1]
    k = (total < target).sum(axis=0).clip(max=weight.shape[0] - 1)
    columns = np.arange(weight.shape[1])
    before = np.where(k > 0, total[k - 1, columns], 0.0)
    inside: Array = k + (target - before) / np.maximum(weight[k, columns], 1e-300)
    return inside
