"""Plane waves at interfaces and at the free surface: coefficients of Aki & Richards (2002), chapter 5.

Time dependence exp(-i omega t), as in the book. A horizontal slowness p and vertical slownesses (cos of the angle
divided by the speed) describe a wave; beyond the critical slowness the vertical one is positive imaginary. Unit
vectors of a wave that travels toward R: P along its ray; SV (cos j, -sin j) going down and (cos j, sin j) going up
in the axes (R, down).
"""

from __future__ import annotations

import numpy as np
from numba import njit

PSV = tuple[complex, complex, complex, complex, complex, complex]


@njit(cache=True, error_model="numpy")
def vertical_slowness(slowness: float, speed: float) -> complex:
    """Return sqrt(1 / speed^2 - slowness^2) in s/m with a positive imaginary part where it is not real."""
    square = 1.0 / (speed * speed) - slowness * slowness
    if square >= 0.0:
        return complex(np.sqrt(square), 0.0)
    return complex(0.0, np.sqrt(-square))


@njit(cache=True, error_model="numpy")
def psv_coefficients(
    p: float,
    rho1: float,
    beta1: float,
    xi1: complex,
    eta1: complex,
    rho2: float,
    beta2: float,
    xi2: complex,
    eta2: complex,
) -> PSV:
    """Return displacement coefficients of P and SV at an interface (Aki & Richards 2002, eq. 5.39-5.40).

    Parameters
    ----------
    p
        Horizontal slowness in s/m.
    rho1, beta1, xi1, eta1
        Above: density in kg/m^3, S speed in m/s, vertical slowness of P and of S in s/m.
    rho2, beta2, xi2, eta2
        The same below.

    Returns
    -------
    tuple
        Down P to up P, down P to down P, up P to up P, then the same for SV. The transmitted ones are those of the book
        times the speed going out over the speed coming in; `ray_paths.transmission` normalises them by energy.
    """
    m1, m2 = rho1 * beta1 * beta1, rho2 * beta2 * beta2
    p2 = p * p
    a = (rho2 - 2 * m2 * p2) - (rho1 - 2 * m1 * p2)
    b = (rho2 - 2 * m2 * p2) + 2 * m1 * p2
    c = (rho1 - 2 * m1 * p2) + 2 * m2 * p2
    d = 2 * (m2 - m1)
    e = b * xi1 + c * xi2
    f = b * eta1 + c * eta2
    g = a - d * xi1 * eta2
    h = a - d * xi2 * eta1
    det = e * f + g * h * p2
    return (
        ((b * xi1 - c * xi2) * f - (a + d * xi1 * eta2) * h * p2) / det,
        2 * rho1 * xi1 * f / det,
        2 * rho2 * xi2 * f / det,
        -((b * eta1 - c * eta2) * e - (a + d * xi2 * eta1) * g * p2) / det,
        2 * rho1 * eta1 * e / det,
        2 * rho2 * eta2 * e / det,
    )


@njit(cache=True, error_model="numpy")
def sh_coefficients(
    rho1: float, beta1: float, eta1: complex, rho2: float, beta2: float, eta2: complex
) -> tuple[complex, complex, complex]:
    """Return SH displacement coefficients: down to up, down to down, up to up (Aki & Richards 2002, eq. 5.33)."""
    z1, z2 = rho1 * beta1 * beta1 * eta1, rho2 * beta2 * beta2 * eta2
    return (z1 - z2) / (z1 + z2), 2 * z1 / (z1 + z2), 2 * z2 / (z1 + z2)


@njit(cache=True, error_model="numpy")
def free_surface_p(p: float, alpha: float, beta: float) -> tuple[complex, complex]:
    """Return motion of the free surface, toward R and up, for an arriving P wave of unit displacement.

    Aki & Richards (2002), section 5.2: the arriving wave plus reflected P and SV; twice the wave at p = 0.
    """
    xi, eta = vertical_slowness(p, alpha), vertical_slowness(p, beta)
    curve = 1.0 / (beta * beta) - 2 * p * p
    det = curve * curve + 4 * p * p * xi * eta
    return 4 * alpha * p * xi * eta / (beta * beta) / det, 2 * alpha * xi * curve / (beta * beta) / det


@njit(cache=True, error_model="numpy")
def free_surface_sv(p: float, alpha: float, beta: float) -> tuple[complex, complex]:
    """Return motion of the free surface, toward R and up, for an arriving SV wave of unit displacement.

    The arriving wave moves (cos j, -sin j) toward R and up. Complex beyond the critical slowness 1 / alpha.
    """
    xi, eta = vertical_slowness(p, alpha), vertical_slowness(p, beta)
    curve = 1.0 / (beta * beta) - 2 * p * p
    det = curve * curve + 4 * p * p * xi * eta
    return 2 * eta * curve / beta / det, -4 * p * xi * eta / beta / det


@njit(cache=True, error_model="numpy")
def surface_reflection(p: float, alpha: float, beta: float) -> tuple[complex, complex]:
    """Return reflection coefficients of P to P and SV to SV at the free surface (Aki & Richards 2002, eq. 5.27 and 5.31)."""
    xi, eta = vertical_slowness(p, alpha), vertical_slowness(p, beta)
    curve = 1.0 / (beta * beta) - 2 * p * p
    cross = 4 * p * p * xi * eta
    return (cross - curve * curve) / (cross + curve * curve), (curve * curve - cross) / (cross + curve * curve)
