"""Two-point rays through homogeneous layers: slowness, time, spreading, loss and interface coefficients, compiled."""

from __future__ import annotations

import numpy as np
from numba import njit
from numpy.typing import NDArray

from rupture.synthetic.interfaces import psv_coefficients, sh_coefficients, vertical_slowness

Floats = NDArray[np.float64]

_CONVERGED = 1e-11
"""Newton stops when the ray comes out within this share of the distance."""


@njit(cache=True, error_model="numpy")
def solve_slowness(path_m: Floats, speed: Floats, distance_m: float) -> float:
    """Return the slowness of the ray that crosses `path_m` metres of each layer vertically and comes out at a distance.

    Newton's method on w, the tangent of the angle in the fastest layer crossed: distance grows with w and is concave,
    so that from w = 0 every step stays below the root and the iteration cannot fail.

    Parameters
    ----------
    path_m
        Vertical metres crossed in each layer, going up and down added, shape (layers,); zero where not crossed.
    speed
        Speed in m/s, shape (layers,).
    distance_m
        Horizontal distance in m.
    """
    fastest = 0.0
    for k in range(path_m.size):
        if path_m[k] > 0.0 and speed[k] > fastest:
            fastest = speed[k]
    w = 0.0
    for _ in range(200):
        reach, slope = 0.0, 0.0
        for k in range(path_m.size):
            if path_m[k] > 0.0:
                ratio = speed[k] / fastest
                root = np.sqrt(1.0 + w * w * (1.0 - ratio * ratio))
                reach += path_m[k] * ratio * w / root
                slope += path_m[k] * ratio / root**3
        step = (distance_m - reach) / slope
        w += step
        if abs(distance_m - reach) <= _CONVERGED * distance_m:
            break
    return w / (fastest * np.sqrt(1.0 + w * w))


@njit(cache=True, error_model="numpy")
def path_sums(path_m: Floats, speed: Floats, quality: Floats, slowness: float) -> tuple[float, float, float, float]:
    """Return distance in m, its derivative by slowness in m^2/s, time in s and t* in s along a ray."""
    distance, derivative, time, loss = 0.0, 0.0, 0.0, 0.0
    for k in range(path_m.size):
        if path_m[k] > 0.0:
            eta2 = 1.0 / speed[k] ** 2 - slowness * slowness
            eta = np.sqrt(eta2)
            distance += path_m[k] * slowness / eta
            derivative += path_m[k] / (speed[k] ** 2 * eta2 * eta)
            piece = path_m[k] / (speed[k] ** 2 * eta)
            time += piece
            loss += piece / quality[k]
    return distance, derivative, time, loss


@njit(cache=True, error_model="numpy")
def transmission(p: float, upper: int, vp: Floats, vs: Floats, rho: Floats) -> tuple[complex, complex, complex]:
    """Return energy-normalised transmission of P, SV and SH through the interface under layer `upper`.

    Displacement coefficient times the square root of density x speed x cosine, out over in: the same upward and
    downward (Aki & Richards 2002, box 5.6 on reciprocity).
    """
    lower = upper + 1
    xi1, eta1 = vertical_slowness(p, vp[upper]), vertical_slowness(p, vs[upper])
    xi2, eta2 = vertical_slowness(p, vp[lower]), vertical_slowness(p, vs[lower])
    _, _, p_up, _, _, sv_up = psv_coefficients(p, rho[upper], vs[upper], xi1, eta1, rho[lower], vs[lower], xi2, eta2)
    _, _, sh_up = sh_coefficients(rho[upper], vs[upper], eta1, rho[lower], vs[lower], eta2)
    # Slowness-normalised coefficients; speed ratios of displacement and of energy flux leave sqrt(rho eta) alone.
    p_norm = np.sqrt(rho[upper] * xi1 / (rho[lower] * xi2))
    s_norm = np.sqrt(rho[upper] * eta1 / (rho[lower] * eta2))
    sh_norm = s_norm * vs[upper] / vs[lower]
    return p_up * p_norm, sv_up * s_norm, sh_up * sh_norm


@njit(cache=True, error_model="numpy")
def reflection(p: float, upper: int, vp: Floats, vs: Floats, rho: Floats) -> tuple[complex, complex, complex]:
    """Return reflection coefficients of P, SV and SH that come down on the interface under layer `upper`."""
    lower = upper + 1
    xi1, eta1 = vertical_slowness(p, vp[upper]), vertical_slowness(p, vs[upper])
    xi2, eta2 = vertical_slowness(p, vp[lower]), vertical_slowness(p, vs[lower])
    p_back, _, _, sv_back, _, _ = psv_coefficients(
        p, rho[upper], vs[upper], xi1, eta1, rho[lower], vs[lower], xi2, eta2
    )
    sh_back, _, _ = sh_coefficients(rho[upper], vs[upper], eta1, rho[lower], vs[lower], eta2)
    return p_back, sv_back, sh_back


@njit(cache=True, error_model="numpy")
def head_derivative(
    p: float, upper: int, vp: Floats, vs: Floats, rho: Floats, shear: bool
) -> tuple[complex, complex, complex]:
    """Return the derivative, at grazing, of the reflection coefficients by the vertical slowness below, in m/s.

    The coefficients of P, SV and SH are ratios of linear functions of that slowness; its branch point makes the head
    wave (Aki & Richards 2002, section 6.2; Cerveny & Ravindra 1971).
    """
    lower = upper + 1
    xi1, eta1 = vertical_slowness(p, vp[upper]), vertical_slowness(p, vs[upper])
    small = complex(1e-6 / vs[lower], 0.0)
    values = np.zeros((2, 3), np.complex128)
    for n in range(2):
        grazing = small * n
        xi2 = vertical_slowness(p, vp[lower]) if shear else grazing
        eta2 = grazing if shear else vertical_slowness(p, vs[lower])
        p_back, _, _, sv_back, _, _ = psv_coefficients(
            p, rho[upper], vs[upper], xi1, eta1, rho[lower], vs[lower], xi2, eta2
        )
        sh_back, _, _ = sh_coefficients(rho[upper], vs[upper], eta1, rho[lower], vs[lower], eta2)
        values[n, 0], values[n, 1], values[n, 2] = p_back, sv_back, sh_back
    return (
        (values[1, 0] - values[0, 0]) / small,
        (values[1, 1] - values[0, 1]) / small,
        (values[1, 2] - values[0, 2]) / small,
    )
