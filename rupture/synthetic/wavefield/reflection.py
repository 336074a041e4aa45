"""Compiled kernels: the surface motion of a layered half-space per frequency and wavenumber, for sources at depth.

Method. Solutions that only radiate downward obey traction = Z(z) displacement with a 2x2 impedance Z for
P-SV and a number for SH. Z is carried upward from the half-space through the reflection of each interface
(a displacement form of the recursion of Kennett 1983, ch. 6), with decaying exponentials only, so nothing
overflows at any frequency or depth. Differences between P and S that vanish at low frequency are divided by
the squared S wavenumber analytically, which keeps full precision down to the static limit, where P and S
solutions become parallel. A unit force at the free surface then gives displacement and traction at the source
depths, hence strain, and reciprocity turns these into surface motion from moment-tensor sources (Aki & Richards 2002,
sec. 2.3-2.4 and 3.3): one sweep through the layers serves every mechanism and every source depth.

Conventions: time factor exp(+i omega t) with Im(omega) < 0, depth z downward, horizontal displacement i U.
"""

from __future__ import annotations

import numpy as np
from numba import njit, prange

J0_COLUMNS, J1_COLUMNS, J2_COLUMNS = 5, 9, 4
"""How many integrands go with each Bessel function; `integration._assemble` names them."""

NEGLIGIBLE_DEPTH = 10.0
"""Layers more than this many one-way S decay lengths below the source are not visited: their echo is exp(-20)."""


@njit(cache=True, error_model="numpy", fastmath={"contract"})
def _root(x, y):
    """Return the square root of x + iy with positive real part; hypot is not needed at these magnitudes."""
    modulus = np.sqrt(x * x + y * y)
    if x >= 0.0:
        re = np.sqrt(0.5 * (modulus + x))
        return complex(re, 0.5 * y / re) if re > 0.0 else complex(0.0, 0.0)
    im = np.sqrt(0.5 * (modulus - x))
    if y >= 0.0:
        return complex(0.5 * y / im, im)
    return complex(-0.5 * y / im, -im)


@njit(cache=True, error_model="numpy", fastmath={"contract"})
def _inverse(z):
    """Return 1 / z; the squares stay far from overflow for all that is divided here."""
    size = z.real * z.real + z.imag * z.imag
    return complex(z.real / size, -z.imag / size)


@njit(cache=True, error_model="numpy", fastmath={"contract"})
def _decay(nu, thickness):
    """Return exp(-nu thickness)."""
    size = np.exp(-nu.real * thickness)
    angle = nu.imag * thickness
    return complex(size * np.cos(angle), -size * np.sin(angle))


@njit(cache=True, error_model="numpy", fastmath={"contract"})
def _mean_decay(e_alpha, e_beta, x):
    """Return (e_alpha - e_beta) / x with x = log(e_alpha / e_beta), without cancellation for small x."""
    if x.real * x.real + x.imag * x.imag > 0.06:
        return (e_alpha - e_beta) * _inverse(x)
    series = 1.0 + x / 9.0
    for n in range(8, 1, -1):
        series = 1.0 + x / n * series
    return e_beta * series


@njit(cache=True, error_model="numpy", fastmath={"contract"})
def _impedance(k, nu_alpha, nu_beta, ratio, mu):
    """Return 1 / q and the symmetric impedance (00, 01, 11) of downgoing P-SV waves in a homogeneous layer."""
    sum_alpha, sum_beta = k + nu_alpha, k + nu_beta
    inverse_q = sum_alpha * sum_beta * _inverse(k * ratio * sum_beta + nu_alpha * sum_alpha)
    scale = mu * inverse_q
    return inverse_q, -nu_alpha * scale, k * (2.0 * mu - scale), -nu_beta * scale


@njit(cache=True, error_model="numpy", fastmath={"contract"})
def _layer_psv(k, nu_alpha, nu_beta, ratio, mu, thickness, e_alpha, e_beta, z00, z01, z11, want_transfer):
    """Carry the P-SV impedance from the base of a layer to its top; also return displacement base over top."""
    inverse_q, y00, y01, y11 = _impedance(k, nu_alpha, nu_beta, ratio, mu)
    # Displacement of downgoing waves across the layer; delta is (e_alpha - e_beta) / k_beta^2.
    slope = thickness * (1.0 - ratio) * _inverse(nu_alpha + nu_beta)
    delta = -slope * _mean_decay(e_alpha, e_beta, (nu_beta - nu_alpha) * thickness)
    shared = k * delta * inverse_q
    p00 = e_beta + k * shared
    p01 = nu_beta * shared
    p10 = -nu_alpha * shared
    p11 = e_alpha - k * shared
    # Reflection of displacement at the base: (Y_up - Z) w_up = (Z - Y_down) w_down.
    a00, a01, a11 = -y00 - z00, y01 - z01, -y11 - z11
    b00, b01, b11 = z00 - y00, z01 - y01, z11 - y11
    inverse = _inverse(a00 * a11 - a01 * a01)
    # Y_up has the sign of its off-diagonal kept, its diagonal turned.
    r00 = (a11 * b00 - a01 * b01) * inverse
    r01 = (a11 * b01 - a01 * b11) * inverse
    r10 = (a00 * b01 - a01 * b00) * inverse
    r11 = (a00 * b11 - a01 * b01) * inverse
    # Down through the layer, reflect, and up again; upgoing propagation mirrors the signs of the off-diagonals.
    m00 = r00 * p00 + r01 * p10
    m01 = r00 * p01 + r01 * p11
    m10 = r10 * p00 + r11 * p10
    m11 = r10 * p01 + r11 * p11
    s00 = 1.0 + p00 * m00 - p01 * m10
    s01 = p00 * m01 - p01 * m11
    s10 = p11 * m10 - p10 * m00
    s11 = 1.0 + p11 * m11 - p10 * m01
    inverse = _inverse(s00 * s11 - s01 * s10)
    top00 = -y00 + 2.0 * y00 * s11 * inverse
    top11 = -y11 + 2.0 * y11 * s00 * inverse
    top01 = y01 - 2.0 * y00 * s01 * inverse
    if not want_transfer:
        return top00, top01, top11, 0j, 0j, 0j, 0j
    c00, c01, c10, c11 = p00 + m00, p01 + m01, p10 + m10, p11 + m11
    t00 = (c00 * s11 - c01 * s10) * inverse
    t01 = (c01 * s00 - c00 * s01) * inverse
    t10 = (c10 * s11 - c11 * s10) * inverse
    t11 = (c11 * s00 - c10 * s01) * inverse
    return top00, top01, top11, t00, t01, t10, t11


@njit(cache=True, error_model="numpy", fastmath={"contract"})
def _layer_sh(nu_beta, mu, e_beta, z):
    """Carry the SH impedance through a layer; also return displacement base over top."""
    y = -mu * nu_beta
    reflection = (y - z) * _inverse(y + z)
    echo = _inverse(1.0 + e_beta * e_beta * reflection)
    return -y + 2.0 * y * echo, (1.0 + reflection) * e_beta * echo


@njit(cache=True, parallel=True, error_model="numpy", fastmath={"contract"})
def surface_kernels(
    k, weight, count, omega2, alpha2, beta2, density, thickness, emit, layer_of_depth, out0, out1, out2
):
    """Fill the integrands that go with J0, J1 and J2, weighted by k dk / 2 pi.

    Parameters
    ----------
    k, weight
        Wavenumbers in rad/m and quadrature weights k dk / 2 pi, shape (K,).
    count
        How many wavenumbers matter, shape (F, D), not increasing with depth.
    omega2, alpha2, beta2
        Squared angular frequency (F,) and squared complex speeds (F, L), frequency-dependent through Q.
    density, thickness
        kg/m^3 (L,) and m (L - 1,) of a model that has an interface at each source depth.
    emit, layer_of_depth
        Depth whose source lies at the base of a layer or -1 (L,); and the layer above each source depth (D,).
    out0, out1, out2
        Results, shapes (K, D, F, 5), (K, D, F, 9), (K, D, F, 4), complex, overwritten.
    """
    layers = density.size
    depths = layer_of_depth.size
    k_alpha2, k_beta2, ratios = np.empty_like(alpha2), np.empty_like(alpha2), np.empty_like(alpha2)
    for f in range(omega2.size):
        for j in range(layers):
            k_alpha2[f, j] = omega2[f] / alpha2[f, j]
            k_beta2[f, j] = omega2[f] / beta2[f, j]
            ratios[f, j] = beta2[f, j] / alpha2[f, j]
    for ik in prange(k.size):
        kk = k[ik]
        k2 = kk * kk
        w = weight[ik]
        nu_a = np.empty(layers, np.complex128)
        nu_b = np.empty(layers, np.complex128)
        transfer = np.empty((layers, 5), np.complex128)
        at_source = np.empty((depths, 4), np.complex128)
        for f in range(omega2.size):
            active = 0
            for d in range(depths):
                if ik < count[f, d]:
                    active = d + 1
                else:
                    out0[ik, d, f, :] = 0.0
                    out1[ik, d, f, :] = 0.0
                    out2[ik, d, f, :] = 0.0
            if active == 0:
                continue
            last = layer_of_depth[active - 1]
            bottom = layers - 1
            below = 0.0
            for j in range(layers):
                nu_a[j] = _root(k2 - k_alpha2[f, j].real, -k_alpha2[f, j].imag)
                nu_b[j] = _root(k2 - k_beta2[f, j].real, -k_beta2[f, j].imag)
                if j > last and j < layers - 1:
                    below += nu_b[j].real * thickness[j]
                    if below > NEGLIGIBLE_DEPTH:
                        bottom = j
                        break
            mu = density[bottom] * beta2[f, bottom]
            _, z00, z01, z11 = _impedance(kk, nu_a[bottom], nu_b[bottom], ratios[f, bottom], mu)
            z_sh = -mu * nu_b[bottom]
            for j in range(bottom - 1, -1, -1):
                d = emit[j]
                if d >= 0 and d < active:
                    at_source[d, 0] = z00
                    at_source[d, 1] = z01
                    at_source[d, 2] = z11
                    at_source[d, 3] = z_sh
                mu = density[j] * beta2[f, j]
                e_a = _decay(nu_a[j], thickness[j])
                e_b = _decay(nu_b[j], thickness[j])
                z00, z01, z11, t00, t01, t10, t11 = _layer_psv(
                    kk, nu_a[j], nu_b[j], ratios[f, j], mu, thickness[j], e_a, e_b, z00, z01, z11, j <= last
                )
                z_sh, t_sh = _layer_sh(nu_b[j], mu, e_b, z_sh)
                if j <= last:
                    transfer[j, 0] = t00
                    transfer[j, 1] = t01
                    transfer[j, 2] = t10
                    transfer[j, 3] = t11
                    transfer[j, 4] = t_sh
            # Displacement under unit traction at the surface, carried down to each source.
            inverse = _inverse(z00 * z11 - z01 * z01)
            u00, u01, u10, u11 = z11 * inverse, -z01 * inverse, -z01 * inverse, z00 * inverse
            v = -_inverse(z_sh)
            for j in range(last + 1):
                t00, t01, t10, t11 = transfer[j, 0], transfer[j, 1], transfer[j, 2], transfer[j, 3]
                u00, u10 = t00 * u00 + t01 * u10, t10 * u00 + t11 * u10
                u01, u11 = t00 * u01 + t01 * u11, t10 * u01 + t11 * u11
                v *= transfer[j, 4]
                d = emit[j]
                if d < 0 or d >= active:
                    continue
                z00, z01, z11 = at_source[d, 0], at_source[d, 1], at_source[d, 2]
                rigidity = density[j] * beta2[f, j]
                modulus = density[j] * alpha2[f, j]
                lame = modulus - 2.0 * rigidity
                soft, hard = _inverse(rigidity), _inverse(modulus)
                # Strain by reciprocity: a for radial, b for vertical, c for transverse motion of the surface.
                a1 = kk * u00
                a2 = -(z00 * u00 + z01 * u10) * soft
                a3 = -(z01 * u00 + z11 * u10 + lame * a1) * hard
                b1 = kk * u01
                b2 = (z00 * u01 + z01 * u11) * soft
                b3 = -(z01 * u01 + z11 * u11 + lame * b1) * hard
                c1 = -kk * v
                c2 = at_source[d, 3] * v * soft
                wk = w * kk
                wi = w / kk
                o = out0[ik, d, f]
                o[0] = w * b1
                o[1] = w * b3
                o[2] = w * a2
                o[3] = w * c2
                o[4] = wk * b2
                o = out1[ik, d, f]
                o[0] = w * a1
                o[1] = w * a3
                o[2] = w * b2
                o[3] = wk * c2
                o[4] = wk * b1
                o[5] = wk * b3
                o[6] = wi * a2
                o[7] = wi * c2
                o[8] = w * c1
                o = out2[ik, d, f]
                o[0] = w * b1
                o[1] = wk * c1
                o[2] = wi * a1
                o[3] = wi * c1
