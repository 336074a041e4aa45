"""Moment tensors and how the elementary Green's functions add up to six components."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

ELEMENTS = (
    ("acc_R", "isotropic"), ("acc_R", "dip_slip"), ("acc_R", "strike_slip"), ("acc_R", "vertical"),
    ("acc_T", "dip_slip"), ("acc_T", "strike_slip"),
    ("acc_Z", "isotropic"), ("acc_Z", "dip_slip"), ("acc_Z", "strike_slip"), ("acc_Z", "vertical"),
    ("rot_R", "dip_slip"), ("rot_R", "strike_slip"),
    ("rot_T", "isotropic"), ("rot_T", "dip_slip"), ("rot_T", "strike_slip"), ("rot_T", "vertical"),
    ("rot_Z", "dip_slip"), ("rot_Z", "strike_slip"),
)  # fmt: skip
"""Component and source of each elementary Green's function, in table order.

R points away from the source, T toward growing azimuth (clockwise seen from above), Z up. With the moment tensor
turned to R, T and z down, sources are, for R and Z translation and T rotation: isotropic (M_RR + M_TT) / 2, vertical
M_zz (azimuthal order 0), dip_slip M_Rz (order 1), strike_slip (M_RR - M_TT) / 2 (order 2); for the other components
dip_slip M_Tz (order 1) and strike_slip M_RT (order 2).
"""


def double_couple(strike_rad: ArrayLike, dip_rad: ArrayLike, rake_rad: ArrayLike) -> NDArray[np.float64]:
    """Return unit double couples, axes north, east, down, shape (..., 3, 3).

    Aki & Richards (2002), box 4.4: strike clockwise from north, dip to the right of strike, rake of the hanging wall.

    Examples
    --------
    >>> double_couple(0.0, np.pi / 2, 0.0).round(12) + 0.0  # left-lateral on a vertical plane that strikes north
    array([[0., 1., 0.],
           [1., 0., 0.],
           [0., 0., 0.]])
    """
    strike, dip, rake = np.broadcast_arrays(
        np.asarray(strike_rad, float), np.asarray(dip_rad, float), np.asarray(rake_rad, float)
    )
    normal = np.stack([-np.sin(dip) * np.sin(strike), np.sin(dip) * np.cos(strike), -np.cos(dip)], axis=-1)
    slip = np.stack(
        [
            np.cos(rake) * np.cos(strike) + np.cos(dip) * np.sin(rake) * np.sin(strike),
            np.cos(rake) * np.sin(strike) - np.cos(dip) * np.sin(rake) * np.cos(strike),
            -np.sin(dip) * np.sin(rake),
        ],
        axis=-1,
    )
    return normal[..., :, None] * slip[..., None, :] + slip[..., :, None] * normal[..., None, :]


def element_weights(moment_nm: NDArray[np.float64], azimuth_rad: ArrayLike) -> NDArray[np.float64]:
    """Return what each elementary Green's function is multiplied by, shape (..., 18).

    Parameters
    ----------
    moment_nm
        Moment tensors, axes north, east, down, in N m, shape (..., 3, 3).
    azimuth_rad
        Azimuth from source to receiver in rad, shape (...) or broadcastable.
    """
    azimuth = np.asarray(azimuth_rad, float)
    c, s = np.cos(azimuth), np.sin(azimuth)
    m = np.asarray(moment_nm, float)
    nn, ee, ne = m[..., 0, 0], m[..., 1, 1], m[..., 0, 1]
    isotropic = 0.5 * (nn + ee) + 0.0 * azimuth
    strike_even = 0.5 * (nn - ee) * np.cos(2 * azimuth) + ne * np.sin(2 * azimuth)
    strike_odd = -0.5 * (nn - ee) * np.sin(2 * azimuth) + ne * np.cos(2 * azimuth)
    dip_even = m[..., 0, 2] * c + m[..., 1, 2] * s
    dip_odd = -m[..., 0, 2] * s + m[..., 1, 2] * c
    vertical = m[..., 2, 2] + 0.0 * azimuth
    even = [isotropic, dip_even, strike_even, vertical]
    odd = [dip_odd, strike_odd]
    return np.stack([*even, *odd, *even, *odd, *even, *odd], axis=-1)


COMPONENT_SLICES = (slice(0, 4), slice(4, 6), slice(6, 10), slice(10, 12), slice(12, 16), slice(16, 18))
"""Elements that add up to R, T, Z translation and R, T, Z rotation."""


def to_east_north(radial: NDArray[np.float64], back_azimuth_rad: ArrayLike) -> NDArray[np.float64]:
    """Turn six components R, T, Z, R, T, Z into East, North, Up; shape (..., 6, samples) in and out.

    Parameters
    ----------
    radial
        Components away from the source, toward growing azimuth, up.
    back_azimuth_rad
        Azimuth at the receiver toward the source in rad, shape (...) or broadcastable.
    """
    onward = np.asarray(back_azimuth_rad, float) + np.pi
    c, s = np.cos(onward)[..., None], np.sin(onward)[..., None]
    out = np.empty_like(radial)
    for row in (0, 3):
        out[..., row, :] = radial[..., row, :] * s + radial[..., row + 1, :] * c
        out[..., row + 1, :] = radial[..., row, :] * c - radial[..., row + 1, :] * s
        out[..., row + 2, :] = radial[..., row + 2, :]
    return out
