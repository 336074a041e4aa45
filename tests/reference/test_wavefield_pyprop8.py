"""Six components against pyprop8 (O'Toole & Woodhouse 2011; Valentine), another method and another program.

Its derivatives with the source's place give the gradient of displacement at the receiver, hence rotation.
"""

import contextlib
import io
import warnings

import numpy as np
import pytest

from rupture.earth.layers import LayeredModel
from rupture.synthetic.wavefield.mechanism import COMPONENT_SLICES, double_couple, element_weights
from rupture.synthetic.wavefield.sampling import FrequencyPlan
from rupture.synthetic.wavefield.tables import Motion, greens

with warnings.catch_warnings(), contextlib.redirect_stdout(io.StringIO()):
    warnings.simplefilter("ignore")
    import pyprop8

# Layers: thickness km, vp km/s, vs km/s, density kg/m^3.
MODELS = {
    "half-space": [(np.inf, 6.0, 3.46, 2700.0)],
    "crust": [(2.0, 4.5, 2.5, 2400.0), (13.0, 6.0, 3.46, 2700.0), (20.0, 6.6, 3.8, 2900.0), (np.inf, 8.0, 4.5, 3300.0)],
    # A slow top layer and a low-velocity zone.
    "sediments": [
        (1.0, 3.0, 1.5, 2100.0), (3.0, 4.8, 2.7, 2450.0), (8.0, 5.9, 3.4, 2700.0), (6.0, 5.6, 3.2, 2650.0),
        (12.0, 6.7, 3.85, 2950.0), (np.inf, 7.9, 4.45, 3350.0),
    ],
}  # fmt: skip
DISTANCE_KM = np.array([20.0, 60.0, 110.0, 200.0])
AZIMUTH = np.radians([35.0, 100.0, 170.0, 285.0])
MECHANISM = double_couple(np.radians(20.0), np.radians(70.0), np.radians(30.0))
TO_EAST_NORTH_UP = np.array([[0.0, 1.0, 0.0], [1.0, 0.0, 0.0], [0.0, 0.0, -1.0]])
PYPROP8_UNIT = 1e-15  # its km, km/s, g/cm^3 with the moment as a bare number


def pulse(omega):
    """Gaussian moment rate, 1 % left at 1 Hz, centred at 4 s."""
    return np.exp(-0.5 * (omega / (2 * np.pi * 0.33)) ** 2 - 4j * omega)


def ours(layers):
    a = np.array(layers)
    top = np.concatenate([[0.0], np.cumsum(a[:-1, 0])])
    lossless = np.full(len(layers), np.inf)
    return LayeredModel("test", top, a[:, 1], a[:, 2], a[:, 3], lossless, lossless)


def theirs(layers, depth_km):
    structure = pyprop8.LayeredStructureModel([(h, vp, vs, rho / 1e3) for h, vp, vs, rho in layers])
    moment = TO_EAST_NORTH_UP @ MECHANISM @ TO_EAST_NORTH_UP.T
    source = pyprop8.PointSource(0.0, 0.0, depth_km, moment, np.zeros((3, 1)), 0.0)
    places = pyprop8.ListOfReceivers(DISTANCE_KM * np.sin(AZIMUTH), DISTANCE_KM * np.cos(AZIMUTH))
    return structure, source, places


@pytest.mark.parametrize(
    ("name", "depth_km", "kmax"),
    [
        ("half-space", 40.0, 2.4),
        ("crust", 12.0, 3.0),
        pytest.param("crust", 5.0, 3.6, marks=pytest.mark.slow),
        pytest.param("sediments", 5.2, 6.0, marks=pytest.mark.slow),
        pytest.param("sediments", 25.0, 4.5, marks=pytest.mark.slow),
    ],
)
def test_misfit_energy_of_six_components(name, depth_km, kmax):
    plan = FrequencyPlan(step_s=0.25, samples=400, high_hz=1.25)
    table = greens(ours(MODELS[name]), depth_km, DISTANCE_KM * 1e3, plan)
    mine = table.records(MECHANISM, AZIMUTH, Motion.DISPLACEMENT, source_spectrum=pulse(plan.omega))
    _, u, d = pyprop8.compute_seismograms(
        *theirs(MODELS[name], depth_km), plan.samples, plan.step_s, source_time_function=pulse, show_progress=False,
        pad_frac=0.2, alpha=0.05, derivatives=pyprop8.DerivativeSwitches(x=True, y=True),
        stencil_kwargs={"kmin": 0.0, "kmax": kmax, "nk": int(kmax * 240)},
    )  # fmt: skip
    east, north = -d[:, 0] / 1e3, -d[:, 1] / 1e3  # moving the source is moving the receiver the other way; per km
    other = np.empty_like(mine)
    other[:, :3] = u
    other[:, 3], other[:, 4] = north[:, 2], -east[:, 2]
    other[:, 5] = 0.5 * (east[:, 1] - north[:, 0])
    other *= PYPROP8_UNIT
    misfit = ((mine - other) ** 2).sum(axis=-1) / (other**2).sum(axis=-1)
    assert misfit.max() <= 0.01


@pytest.mark.parametrize("name", MODELS)
@pytest.mark.parametrize("depth_km", [5.2, 12.5, 40.0])
def test_static_offset(name, depth_km):
    plan = FrequencyPlan(step_s=1.0, samples=600, high_hz=0.25)
    table = greens(ours(MODELS[name]), depth_km, DISTANCE_KM * 1e3, plan)
    mine = table.records(MECHANISM, AZIMUTH, Motion.DISPLACEMENT)[:, :3, -200:].mean(axis=-1)
    other = PYPROP8_UNIT * pyprop8.compute_static(
        *theirs(MODELS[name], depth_km), stencil_kwargs={"kmin": 0.0, "kmax": 13.0 / depth_km, "nk": 4000}
    )
    off = np.linalg.norm(mine - other, axis=1) / np.linalg.norm(other, axis=1)
    assert off.max() <= 0.01


def test_moment_response_is_the_gradient_of_the_force_response():
    """Reciprocity: strain at depth under a surface force (ours) is the source-place gradient of a buried force (theirs)."""
    layers, depth_km, distance_km, azimuth = MODELS["crust"], 12.0, 40.0, 0.6
    plan = FrequencyPlan(step_s=0.5, samples=200, high_hz=0.8)
    some = [4, 30, 80]
    structure = pyprop8.LayeredStructureModel([(h, vp, vs, rho / 1e3) for h, vp, vs, rho in layers])
    east, north = distance_km * np.sin(azimuth), distance_km * np.cos(azimuth)
    force = pyprop8.PointSource(0.0, 0.0, depth_km, np.zeros((3, 3, 3)), np.eye(3)[:, :, None], 0.0)
    motion, gradient = pyprop8.compute_spectra(
        structure, force, pyprop8.ListOfReceivers(np.array([east]), np.array([north])), plan.omega[some], show_progress=False,
        derivatives=pyprop8.DerivativeSwitches(x=True, y=True, z=True), squeeze_outputs=False,
        stencil_kwargs={"kmin": 0.0, "kmax": 4.0, "nk": 2500},
    )  # fmt: skip
    # (force direction E, N, Up; [derivative x, y, z;] component R, T, Z; frequency); their T grows against the azimuth.
    motion, gradient = motion[:, 0], gradient[:, 0].copy()
    # Moving the source also turns R and T: take that out, for the gradient of the vector itself.
    for q, turn in ((0, -np.cos(azimuth) / distance_km), (1, np.sin(azimuth) / distance_km)):
        gradient[:, q, 0] += turn * motion[:, 1]
        gradient[:, q, 1] -= turn * motion[:, 0]
    table = greens(ours(layers), depth_km, [distance_km * 1e3], plan)
    for p, q in [(0, 0), (0, 1), (1, 2), (2, 2), (0, 2), (1, 1)]:
        moment = np.zeros((3, 3))
        moment[p, q] = moment[q, p] = 1.0
        turned = TO_EAST_NORTH_UP @ moment @ TO_EAST_NORTH_UP.T
        mine = np.stack(
            [
                (table.spectra[0] * element_weights(turned, azimuth)[:, None])[part].sum(axis=0)
                for part in COMPONENT_SLICES[:3]
            ]
        )[:, some] * (1j * plan.omega[some])
        theirs_pq = gradient[p, q] if p == q else gradient[p, q] + gradient[q, p]
        theirs_pq = theirs_pq * np.array([1.0, -1.0, 1.0])[:, None] * PYPROP8_UNIT
        assert np.abs(mine - theirs_pq).max() <= 0.01 * np.abs(theirs_pq).max(), (p, q)
