"""Kernels: sliding covariances of Green's functions over distance and lag, as harmonics of the back-azimuth."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import signal

from rupture.direction.covariance import PAIRS, band_signal
from rupture.errors import InputError

Array = NDArray[np.float64]

ROTATION_SCALE_M_S = 2.0 * 3000.0
"""Rotation rate times this is of the size of acceleration: twice an S speed near the surface."""

AVERAGED_ORDER, MECHANISM_ORDER = 2, 6
"""Highest azimuthal order of a kernel: turning a second-order tensor gives 2, radiation of a moment tensor 4 more."""

COMPONENT_SCALE = np.array([1.0, 1.0, 1.0, ROTATION_SCALE_M_S, ROTATION_SCALE_M_S, ROTATION_SCALE_M_S])

BASIS_DEG = ((0.0, 90.0, 0.0), (90.0, 90.0, 90.0), (0.0, 90.0, 90.0), (45.0, 90.0, 0.0), (90.0, 45.0, 90.0))
"""Strike, dip, rake of five double couples: north-east, north-down, east-down, minus (nn - ee), down-down less nn."""


@dataclass(frozen=True)
class KernelTable:
    """Kernels of one source depth.

    The kernel of a place at distance d and back-azimuth theta is
    sum over h of phi_h(theta) harmonics[band, d, h], phi = 1, cos theta, sin theta, cos 2 theta, ...

    Attributes
    ----------
    depth_km
        Of the source.
    distance_m
        Uniform, shape (D,).
    band_hz, window_s, hop_s
        Bands, shape (B, 2), the length of the windows and the step of the lags.
    lag_s
        Centre of the window less source time, multiples of the hop, shape (L,).
    harmonics
        Shape (B, D, H, 21, L), float32: entries of the covariance of East, North, Up of acceleration and of rotation rate
        times `ROTATION_SCALE_M_S`, over a common factor that makes the mean power at the middle distance one.
    scale
        That factor, (m/s^2)^2 for a unit moment step.
    """

    depth_km: float
    distance_m: Array
    band_hz: Array
    window_s: float
    hop_s: float
    lag_s: Array
    harmonics: NDArray[np.float32]
    scale: float

    @property
    def order(self) -> int:
        """Highest azimuthal order."""
        return (self.harmonics.shape[2] - 1) // 2

    def place(self, distance_m: Array) -> tuple[NDArray[np.int64], NDArray[np.float64]]:
        """Return the lower node and the weight of the upper one, same shape as `distance_m`.

        Raises
        ------
        InputError
            When a distance lies beyond the last node.
        """
        farthest = float(np.max(distance_m))
        if farthest > self.distance_m[-1] + 1.0:
            raise InputError(
                f"a cell lies {farthest / 1e3:.0f} km from a site, but the kernels end at {self.distance_m[-1] / 1e3:.0f} km; "
                "make the map smaller, leave the site out, or build the kernels for longer distances"
            )
        at = np.clip(
            (distance_m - self.distance_m[0]) / (self.distance_m[1] - self.distance_m[0]), 0, self.distance_m.size - 1
        )
        low = np.minimum(at.astype(np.int64), self.distance_m.size - 2)
        return low, at - low

    def at(self, band: int, distance_m: float, back_azimuth_rad: float) -> Array:
        """Return the kernel of one place, shape (21, L)."""
        low, part = (v[0] for v in self.place(np.array([distance_m])))
        mixed = (1 - part) * self.harmonics[band, low] + part * self.harmonics[band, low + 1]
        return np.einsum("h,hkl->kl", basis(np.array([back_azimuth_rad]), self.order)[0], mixed)


def basis(angle_rad: Array, order: int) -> Array:
    """Return 1, cos, sin, cos 2, sin 2, ... of angles, shape (..., 2 order + 1).

    Examples
    --------
    >>> basis(np.array([0.0]), 1)
    array([[1., 1., 0.]])
    """
    parts = [np.ones_like(angle_rad)]
    for m in range(1, order + 1):
        parts += [np.cos(m * angle_rad), np.sin(m * angle_rad)]
    return np.stack(parts, axis=-1)


def harmonics_of(samples: Array, order: int) -> Array:
    """Return coefficients over `basis` of values at uniform angles from 0 on, first axis to first axis."""
    count = samples.shape[0]
    if count < 2 * order + 1:
        raise InputError(f"{count} azimuths cannot hold harmonics up to order {order}")
    phi = basis(2 * np.pi * np.arange(count) / count, order)
    norm = np.full(2 * order + 1, 2.0 / count)
    norm[0] = 1.0 / count
    return np.tensordot((phi * norm).T, samples, axes=(1, 0))


def lag_grid(last_s: float, window_s: float, hop_s: float) -> Array:
    """Return lags from half a window before the origin to `last_s`, multiples of the hop, shape (L,)."""
    return hop_s * np.arange(-np.ceil(window_s / 2 / hop_s), np.floor(last_s / hop_s) + 1)


def covariances(series: Array, step_s: float, band: tuple[float, float], window_s: float, lag_s: Array) -> Array:
    """Return sliding covariances (..., 21, L) of six components that start at the origin time and are silent before it.

    The windows are those of `rupture.direction.covariance.sliding_covariances`, many records at once.

    Parameters
    ----------
    series
        Acceleration and rotation rate, shape (..., 6, samples).
    """
    window = 2 * round(window_s / step_s / 2)
    margin = window + round(3.0 / band[0] / step_s)
    width = [(0, 0)] * (series.ndim - 1) + [(margin, margin)]
    analytic = band_signal(np.pad(series * COMPONENT_SCALE[:, None], width), step_s, band)
    first = np.round(lag_s / step_s).astype(np.int64) + margin - window // 2
    inside = first + window <= analytic.shape[-1]
    at = first[inside, None] + np.arange(window)
    weight = signal.windows.hann(window + 1, sym=True)[:-1] + 1e-12
    weight /= weight.sum()
    out = np.zeros((*series.shape[:-2], len(PAIRS), lag_s.size))
    for k, (i, j) in enumerate(PAIRS):
        one, other = analytic[..., i, :], analytic[..., j, :]
        product = 0.5 * (one.real * other.real + one.imag * other.imag)
        out[..., k, inside] = product[..., at] @ weight
    return out


def turn_matrix(back_azimuth_rad: float) -> Array:
    """Return the 6x6 matrix from radial (away from the source), transverse (azimuth grows), up to East, North, Up."""
    s, c = np.sin(back_azimuth_rad + np.pi), np.cos(back_azimuth_rad + np.pi)
    turn = np.array([[s, c, 0.0], [c, -s, 0.0], [0.0, 0.0, 1.0]])
    return np.kron(np.eye(2), turn)


def unpack(packed: Array) -> Array:
    """Return symmetric matrices (..., 6, 6) from their 21 entries (..., 21)."""
    full = np.empty((*packed.shape[:-1], 6, 6), packed.dtype)
    full[..., PAIRS[:, 0], PAIRS[:, 1]] = packed
    full[..., PAIRS[:, 1], PAIRS[:, 0]] = packed
    return full


def averaged_kernel(
    basis_records: Array, step_s: float, band: tuple[float, float], window_s: float, lag_s: Array
) -> Array:
    """Return a kernel averaged over all double couples, radial frame.

    For double couples of any orientation <M_ij M_kl> = (d_ik d_jl + d_il d_jk - 2/3 d_ij d_kl) / 5, the one isotropic
    tensor that is traceless and has M_ij M_ij = 2: the mean over any five orthogonal traceless tensors of that norm.

    Parameters
    ----------
    basis_records
        Records for the five double couples of `BASIS_DEG`, radial, transverse, up, shape (5, ..., 6, samples).

    Returns
    -------
    ndarray
        Shape (..., 21, L).
    """
    four, five = basis_records[3], basis_records[4]
    # 2 (zz - xx) + (xx - yy), normed: what makes five orthogonal tensors of five double couples.
    fifth = (2 * five - four) / np.sqrt(3.0)
    total = [covariances(record, step_s, band, window_s, lag_s) for record in (*basis_records[:4], fifth)]
    return np.asarray(sum(total) / 5)


def averaged_harmonics(kernel: Array) -> Array:
    """Return the harmonics (5, 21, L) of a kernel in the radial frame, shape (21, L)."""
    full = unpack(kernel.T)
    angles = 2 * np.pi * np.arange(8) / 8
    turned = np.stack([(m := turn_matrix(a)) @ full @ m.T for a in angles])
    packed = turned[..., PAIRS[:, 0], PAIRS[:, 1]]
    return harmonics_of(packed.transpose(0, 2, 1), AVERAGED_ORDER)


def finished(
    depth_km: float,
    distance_m: Array,
    bands_hz: Sequence[tuple[float, float]],
    window_s: float,
    hop_s: float,
    lag_s: Array,
    harmonics: Array,
) -> KernelTable:
    """Return the table with its common factor taken out; `harmonics` has shape (B, D, H, 21, L)."""
    middle = harmonics[:, distance_m.size // 2, 0]
    diagonal = PAIRS[:, 0] == PAIRS[:, 1]
    scale = float(middle[:, diagonal].sum(axis=1).max(axis=1).mean() / 6)
    if not scale > 0:
        raise InputError("the kernels are zero: no wave of the chosen bands reaches the middle distance")
    return KernelTable(
        depth_km,
        distance_m,
        np.asarray(bands_hz, float),
        window_s,
        hop_s,
        lag_s,
        (harmonics / scale).astype(np.float32),
        scale,
    )
