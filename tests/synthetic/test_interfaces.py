"""Coefficients at interfaces and at the free surface against boundary conditions solved as linear systems."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rupture.synthetic.interfaces import (
    free_surface_p,
    free_surface_sv,
    psv_coefficients,
    sh_coefficients,
    surface_reflection,
    vertical_slowness,
)
from rupture.synthetic.ray_paths import transmission

UPPER = (2700.0, 6000.0, 3460.0)
LOWER = (3300.0, 8000.0, 4500.0)


def wave(kind, down, p, rho, alpha, beta):
    """Displacement (R, down) and traction (R, down) of a unit plane wave, less the common factor i omega.

    Hooke's law written out: traction_R = mu (d_z u_R + d_R u_z), traction_z = (lambda + 2 mu) d_z u_z + lambda d_R u_R.
    """
    xi, eta = vertical_slowness(p, alpha), vertical_slowness(p, beta)
    sign = 1 if down else -1
    if kind == "P":
        u, q = np.array([alpha * p, sign * alpha * xi]), sign * xi
    else:
        u, q = np.array([beta * eta, -sign * beta * p]), sign * eta
    mu, lam = rho * beta**2, rho * (alpha**2 - 2 * beta**2)
    return np.array([u[0], u[1], mu * (q * u[0] + p * u[1]), (lam + 2 * mu) * q * u[1] + lam * p * u[0]])


def solve(kind, down, p):
    """Outgoing waves (up P, up SV in the upper, down P, down SV in the lower medium) of an incident one."""
    out = np.stack(
        [
            wave("P", False, p, *UPPER),
            wave("SV", False, p, *UPPER),
            -wave("P", True, p, *LOWER),
            -wave("SV", True, p, *LOWER),
        ],
        axis=1,
    )
    incident = wave(kind, down, p, *(UPPER if down else LOWER))
    scale = np.array([1, 1, 1e-7, 1e-7])  # tractions are huge beside displacements
    return np.linalg.solve(out * scale[:, None], -incident * scale * (1 if down else -1))


@pytest.mark.parametrize("p", [1e-9, 5e-5, 1.1e-4, 1.5e-4, 2.1e-4, 2.4e-4, 2.8e-4])
def test_psv_coefficients_satisfy_the_boundary_conditions(p):
    (rho1, alpha1, beta1), (rho2, alpha2, beta2) = UPPER, LOWER
    got = psv_coefficients(
        p, rho1, beta1, vertical_slowness(p, alpha1), vertical_slowness(p, beta1),
        rho2, beta2, vertical_slowness(p, alpha2), vertical_slowness(p, beta2),
    )  # fmt: skip
    p_down, s_down = solve("P", True, p), solve("SV", True, p)
    p_up, s_up = solve("P", False, p), solve("SV", False, p)
    want = [
        p_down[0], p_down[2] * alpha2 / alpha1, p_up[0] * alpha1 / alpha2,
        s_down[1], s_down[3] * beta2 / beta1, s_up[1] * beta1 / beta2,
    ]  # fmt: skip
    np.testing.assert_allclose(got, want, rtol=1e-9, atol=1e-12)


@given(st.floats(1e-6, 2.2e-4))
def test_sh_energy_is_kept(p):
    eta1, eta2 = vertical_slowness(p, UPPER[2]), vertical_slowness(p, LOWER[2])
    back, down, _ = sh_coefficients(UPPER[0], UPPER[2], eta1, LOWER[0], LOWER[2], eta2)
    flux = LOWER[0] * LOWER[2] ** 2 * eta2.real / (UPPER[0] * UPPER[2] ** 2 * eta1.real)
    assert abs(back) ** 2 + flux * abs(down) ** 2 == pytest.approx(1, abs=1e-12)


def test_sh_is_totally_reflected_beyond_the_critical_angle():
    p = 2.5e-4
    back, _, _ = sh_coefficients(
        UPPER[0], UPPER[2], vertical_slowness(p, UPPER[2]), LOWER[0], LOWER[2], vertical_slowness(p, LOWER[2])
    )
    assert abs(back) == pytest.approx(1)


@pytest.mark.parametrize("p", [1e-8, 8e-5, 1.2e-4])
def test_transmission_is_the_same_both_ways(p):
    """Reciprocity of energy-normalised coefficients (Aki & Richards 2002, section 5.2.4)."""
    vp, vs, rho = (np.array([UPPER[k], LOWER[k]]) for k in (1, 2, 0))
    flipped = [v[::-1].copy() for v in (vp, vs, rho)]
    np.testing.assert_allclose(np.abs(transmission(p, 0, vp, vs, rho)), np.abs(transmission(p, 0, *flipped)), rtol=1e-9)


def test_nothing_changes_at_an_interface_between_equal_layers():
    vp, vs, rho = np.full(2, 6000.0), np.full(2, 3460.0), np.full(2, 2700.0)
    np.testing.assert_allclose(transmission(2e-4, 0, vp, vs, rho), [1, 1, 1], atol=1e-12)


@settings(max_examples=60)
@given(st.floats(1e-6, 2.88e-4))
def test_free_surface_motion_satisfies_zero_traction(p):
    """Arriving wave plus reflections: zero traction, and the motion that the closed forms say."""
    _, alpha, beta = UPPER
    down = np.stack([wave("P", True, p, *UPPER), wave("SV", True, p, *UPPER)], axis=1)
    for kind, closed in (("P", free_surface_p), ("SV", free_surface_sv)):
        if kind == "P" and p >= 1 / alpha:
            continue
        incident = wave(kind, False, p, *UPPER)
        back = np.linalg.solve(down[2:] / 1e7, -incident[2:] / 1e7)
        motion = incident[:2] + down[:2] @ back
        onward, up = closed(p, alpha, beta)
        np.testing.assert_allclose([onward, -up], motion, rtol=1e-7, atol=1e-9)
        same = surface_reflection(p, alpha, beta)[0 if kind == "P" else 1]
        assert abs(same - back[0 if kind == "P" else 1]) < 1e-8


def test_free_surface_doubles_at_vertical_incidence():
    assert free_surface_p(0.0, 6000.0, 3460.0) == pytest.approx((0, 2))
    assert free_surface_sv(0.0, 6000.0, 3460.0) == pytest.approx((2, 0))


def test_sv_at_45_degrees_moves_the_surface_up_and_down_only():
    """1 / beta^2 = 2 p^2: the surface moves by sqrt(2) vertically (Aki & Richards 2002, section 5.2 at j = 45 deg)."""
    onward, up = free_surface_sv(np.sin(np.pi / 4) / 3460.0, 6000.0, 3460.0)
    assert abs(onward) < 1e-12
    assert up == pytest.approx(-np.sqrt(2))


def test_denominator_vanishes_at_the_rayleigh_speed():
    """0.9194 of the shear speed for Poisson's ratio 0.25 (textbook value; Aki & Richards 2002, section 5.3 give 0.92)."""
    beta = 3460.0
    shares = np.linspace(0.9, 0.94, 4001)
    response = [abs(free_surface_sv(1 / (c * beta), beta * np.sqrt(3), beta)[1]) for c in shares]
    assert shares[int(np.argmax(response))] == pytest.approx(0.9194, abs=2e-4)
