"""A homogeneous half-space against the full-space solution of Aki & Richards (2002), eq. 4.29, and its curl.

Two ways. The vertical rotation of the free surface is made by SH waves alone, whose reflection is exactly +1: it is
exactly twice that of the full space, near field and all. The other components are checked through a slow plane-wave
sum: full-space waves by Weyl's integral, summed over both horizontal wavenumbers with no Bessel function, reproduce
eq. 4.29; the same sum with each plane wave's textbook reflection added must give our records.
"""

import numpy as np
import pytest

from rupture.earth.layers import LayeredModel
from rupture.synthetic.wavefield.mechanism import COMPONENT_SLICES, element_weights, to_east_north
from rupture.synthetic.wavefield.sampling import FrequencyPlan, constant_q_speed2
from rupture.synthetic.wavefield.tables import Motion, greens

VP, VS, RHO = 6000.0, 3400.0, 2700.0
PLAN = FrequencyPlan(step_s=0.2, samples=150, high_hz=2.0)
# No symmetry: all six components of the moment tensor differ.
MOMENT = np.array([[1.0, 0.4, -0.7], [0.4, -0.3, 0.6], [-0.7, 0.6, 0.5]]) * 1e15


def model(quality=np.inf):
    return LayeredModel("rock", [0.0], [VP / 1e3], [VS / 1e3], [RHO], [2.25 * quality], [quality])


def full_space(moment, receiver, omega, alpha, beta):
    """Aki & Richards (2002) eq. 4.29 for a moment step, and rotation; axes north, east, down."""
    r = np.linalg.norm(receiver)
    g = receiver / r
    iw = 1j * omega
    step = 1 / iw
    ta, tb = r / alpha, r / beta

    def primitive(t):
        return -np.exp(-iw * t) * (t / iw + 1 / iw**2)

    near = (primitive(tb) - primitive(ta)) * step
    p, s = np.exp(-iw * ta), np.exp(-iw * tb)
    mg = moment @ g
    gmg, trace = g @ mg, np.trace(moment)
    u = (
        (15 * g * gmg - 3 * g * trace - 6 * mg) * near / r**4
        + (6 * g * gmg - g * trace - 2 * mg) * p * step / (alpha**2 * r**2)
        - (6 * g * gmg - g * trace - 3 * mg) * s * step / (beta**2 * r**2)
        + g * gmg * p / (alpha**3 * r)
        - (g * gmg - mg) * s / (beta**3 * r)
    ) / (4 * np.pi * RHO)
    # Curl of the same: only the S Green's function exp(-i k r) / (4 pi r) survives it.
    k = omega / beta
    wave = np.exp(-1j * k * r) / (4 * np.pi * r) * step
    rotation = -np.cross(g, mg) * wave * (-(k**2) + 3j * k / r + 3 / r**2) / (2 * RHO * beta**2)
    return u, rotation


def our_spectra(table, moment, azimuth):
    weighted = table.spectra * element_weights(moment, azimuth)[:, None]
    return np.stack([weighted[:, part].sum(axis=1) for part in COMPONENT_SLICES], axis=1)


@pytest.mark.parametrize("quality", [np.inf, 60.0])
@pytest.mark.parametrize("depth_km", [2.0, 15.0])
def test_vertical_rotation_is_exactly_twice_that_of_the_full_space(quality, depth_km):
    distance = np.array([500.0, 3e3, 12e3, 40e3])
    azimuth = 0.7
    table = greens(model(quality), depth_km, distance, PLAN)
    ours = our_spectra(table, MOMENT, azimuth)[:, 5]
    beta = np.sqrt(constant_q_speed2(np.array([VS]), np.array([quality]), PLAN.omega))[:, 0]
    for i, r in enumerate(distance):
        place = np.array([r * np.cos(azimuth), r * np.sin(azimuth), -depth_km * 1e3])
        theirs = np.array(
            [-2 * full_space(MOMENT, place, w, VP, b)[1][2] for w, b in zip(PLAN.omega, beta, strict=True)]
        )
        assert np.abs(ours[i] - theirs).max() < 1e-3 * np.abs(theirs).max()


def plane_wave_sum(omega, depth, north, east, alpha, beta, free_surface):
    """Sum plane waves over horizontal wavenumbers; returns displacement and rotation, axes north, east, down."""
    largest = omega.real / beta.real + 12 / depth
    radial = (np.arange(1500) + 0.5) * largest / 1500
    angle = 2 * np.pi * np.arange(240) / 240
    k, psi = (a.ravel() for a in np.meshgrid(radial, angle, indexing="ij"))
    area = k * (radial[1] - radial[0]) * (angle[1] - angle[0]) / (4 * np.pi**2)
    kx, ky = k * np.cos(psi), k * np.sin(psi)
    mu = RHO * beta**2
    nu = {"p": np.sqrt(k**2 - (omega / alpha) ** 2 + 0j), "s": np.sqrt(k**2 - (omega / beta) ** 2 + 0j)}
    across = np.stack([-ky / k, kx / k, 0 * k])

    def gradient(kind, way):
        # way = -1: upgoing, exp(+nu z) above the source; +1: downgoing.
        return np.stack([1j * kx, 1j * ky, -way * nu[kind]])

    def green(kind):
        """Upgoing part of G_np at the surface from a force at depth, and its derivative with the source's place."""
        d = gradient(kind, -1)
        weyl = np.exp(-nu[kind] * depth) / (2 * nu[kind])
        sign = -1 if kind == "p" else 1
        tensor = sign * d[:, None] * d[None, :]
        if kind == "s":
            tensor = tensor + np.eye(3)[:, :, None] * (omega / beta) ** 2
        return np.einsum("npk,qk,pq->nk", tensor, -d, MOMENT) * weyl / (RHO * omega**2) / (1j * omega)

    field = [(green("p"), gradient("p", -1)), (green("s"), gradient("s", -1))]
    if free_surface:

        def traction(u, d):
            strain = d[:, None] * u[None, :] + d[None, :] * u[:, None]
            stress = mu * strain[2]
            stress[2] += RHO * (alpha**2 - 2 * beta**2) * np.einsum("nk,nk->k", d, u)
            return stress

        up = traction(*field[0]) + traction(*field[1])
        waves = [
            (gradient("p", 1), gradient("p", 1)),
            (np.cross(gradient("s", 1), across, axis=0), gradient("s", 1)),
            (across + 0j, gradient("s", 1)),
        ]
        matrix = np.moveaxis(np.stack([traction(u, d) for u, d in waves], axis=1), -1, 0)
        amplitude = np.linalg.solve(matrix, -up.T[..., None])[..., 0].T
        field += [(u * a, d) for (u, d), a in zip(waves, amplitude, strict=True)]
    phase = np.exp(1j * (kx * north + ky * east)) * area
    u = sum((v * phase).sum(axis=1) for v, _ in field)
    rotation = sum((0.5 * np.cross(d, v, axis=0) * phase).sum(axis=1) for v, d in field)
    return u, rotation


FREQUENCIES = (0, 20, 45)
AZIMUTH, DISTANCE, DEPTH = 0.7, 9e3, 6e3


def test_the_plane_wave_sum_is_the_full_space_of_aki_and_richards():
    place = np.array([DISTANCE * np.cos(AZIMUTH), DISTANCE * np.sin(AZIMUTH), -DEPTH])
    for f in FREQUENCIES:
        omega = PLAN.omega[f]
        mine = plane_wave_sum(omega, DEPTH, place[0], place[1], VP + 0j, VS + 0j, free_surface=False)
        for a, b in zip(mine, full_space(MOMENT, place, omega, VP, VS), strict=True):
            assert np.abs(a - b).max() < 2e-3 * np.abs(b).max()


def test_the_plane_wave_sum_with_its_reflections_is_ours():
    ours = our_spectra(greens(model(), DEPTH / 1e3, [DISTANCE], PLAN), MOMENT, AZIMUTH)[0]
    # to_east_north works on the last axis, whatever it holds.
    ours = to_east_north(ours[None].view(float), AZIMUTH + np.pi).view(complex)[0]
    for f in FREQUENCIES:
        u, rotation = plane_wave_sum(
            PLAN.omega[f],
            DEPTH,
            DISTANCE * np.cos(AZIMUTH),
            DISTANCE * np.sin(AZIMUTH),
            VP + 0j,
            VS + 0j,
            free_surface=True,
        )
        for three, rows in ((u, slice(0, 3)), (rotation, slice(3, 6))):
            north, east, down = three
            theirs = np.array([east, north, -down])
            assert np.abs(ours[rows, f] - theirs).max() < 2e-3 * np.abs(theirs).max()


def test_static_offset_of_an_explosion_is_mogis():
    # Mogi (1958), formula from memory: u = (1 - 2 nu) M / (2 pi mu R^3) (r, d) for an isotropic moment M; tilt is its derivative.
    # The waves' coda decays with the square of time only, hence the long window.
    distance = np.array([2e3, 10e3, 25e3])
    depth, moment = 5e3, 1e16
    plan = FrequencyPlan(step_s=1.0, samples=500, high_hz=0.4)
    u = greens(model(), depth / 1e3, distance, plan).records(np.eye(3) * moment, np.pi / 2, Motion.DISPLACEMENT)
    late = u[..., -100:].mean(axis=-1)
    mu, ratio = RHO * VS**2, (VS / VP) ** 2
    poisson = (0.5 - ratio) / (1 - ratio)
    big = np.hypot(distance, depth)
    scale = (1 - 2 * poisson) * moment / (2 * np.pi * mu)
    # East of the source, East is radial; rot_N = -d u_Z / d E.
    expected = {0: scale * distance / big**3, 2: scale * depth / big**3, 4: 3 * scale * depth * distance / big**5}
    for component, value in expected.items():
        assert late[:, component] == pytest.approx(value, rel=5e-3)
    assert np.abs(late[:, [1, 3, 5]]).max() < 1e-6 * np.abs(late).max()


def test_high_frequency_and_large_depth_stay_stable():
    """Twenty-one layers of the same rock over a source at 250 km: S waves decay by exp(-700) at the largest wavenumbers."""
    layers = 21
    same = np.ones(layers)
    stack = LayeredModel(
        "stack", 12.0 * np.arange(layers), VP / 1e3 * same, VS / 1e3 * same, RHO * same, np.inf * same, np.inf * same
    )
    plan = FrequencyPlan(step_s=0.1, samples=1000, high_hz=3.0)
    distance, depth, azimuth = 80e3, 250e3 - 1e3, 0.7
    ours = our_spectra(greens(stack, depth / 1e3, [distance], plan), MOMENT, azimuth)[0, 5]
    place = np.array([distance * np.cos(azimuth), distance * np.sin(azimuth), -depth])
    some = np.arange(1, plan.omega.size, 7)
    theirs = np.array([-2 * full_space(MOMENT, place, w, VP, VS)[1][2] for w in plan.omega[some]])
    assert np.isfinite(ours).all()
    assert (np.abs(ours[some] - theirs) < 1e-3 * np.abs(theirs) + 5e-5 * np.abs(theirs).max()).all()
