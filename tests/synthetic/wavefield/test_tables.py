"""Physics of the elementary Green's functions: rotation, symmetry, layers, causality, attenuation, bad input."""

import numpy as np
import pytest

from rupture.earth.layers import LayeredModel
from rupture.errors import InputError
from rupture.synthetic.wavefield.integration import integrate
from rupture.synthetic.wavefield.mechanism import ELEMENTS, double_couple, element_weights, to_east_north
from rupture.synthetic.wavefield.sampling import FrequencyPlan
from rupture.synthetic.wavefield.tables import Motion, greens, greens_at_depths

INF = np.full(4, np.inf)
CRUST = LayeredModel(
    "crust",
    [0.0, 2.0, 15.0, 35.0],
    [4.5, 6.0, 6.6, 8.0],
    [2.5, 3.46, 3.8, 4.5],
    [2400.0, 2700.0, 2900.0, 3300.0],
    INF,
    INF,
)
PLAN = FrequencyPlan(step_s=0.25, samples=240, high_hz=1.0)
MOMENT = 1e16 * np.array([[1.0, 0.4, -0.7], [0.4, -0.3, 0.6], [-0.7, 0.6, 0.5]])


def relative(a, b):
    return np.abs(a - b).max(axis=-1) / np.abs(b).max(axis=-1)


def pulse(plan):
    """Gaussian moment rate of 1 s, centred at 4 s."""
    return np.exp(-0.5 * (plan.omega * 0.5) ** 2 - 4j * plan.omega)


def test_rotation_is_half_the_curl_of_five_receivers_50_m_apart():
    east, north, h = 18e3, 31e3, 50.0
    offsets = np.array([[0, 0], [h, 0], [-h, 0], [0, h], [0, -h]])
    place = np.array([east, north]) + offsets
    distance, azimuth = np.hypot(*place.T), np.arctan2(place[:, 0], place[:, 1])
    six = greens(CRUST, 9.0, distance, PLAN).records(MOMENT, azimuth, Motion.DISPLACEMENT, source_spectrum=pulse(PLAN))
    by_east, by_north = (six[1] - six[2]) / (2 * h), (six[3] - six[4]) / (2 * h)
    # A free surface: du_N/dz = -du_Z/dN, so the horizontal components are the tilt.
    curl = np.array([by_north[2], -by_east[2], 0.5 * (by_east[1] - by_north[0])])
    assert relative(six[0, 3:], curl).max() < 1e-3


def test_layer_split_in_two_changes_nothing():
    rows = [0, 0, 1, 1, 1, 2, 3, 3]
    top = [0.0, 0.7, 2.0, 6.3, 11.0, 15.0, 35.0, 61.0]
    split = LayeredModel(
        "split", top, *(np.asarray(v)[rows] for v in (CRUST.vp_km_s, CRUST.vs_km_s, CRUST.density_kg_m3, INF, INF))
    )
    distance = [10e3, 90e3]
    a, b = (greens(m, 10.0, distance, PLAN).spectra for m in (CRUST, split))
    assert np.abs(a - b).max(axis=(0, 2)) == pytest.approx(0.0, abs=1e-9 * np.abs(a).max())
    assert (relative(a, b) < 1e-6).all()


def test_depths_together_are_depths_alone():
    depth = [12.0, 3.0, 40.0]
    together = greens_at_depths(CRUST, depth, [30e3, 70e3], PLAN)
    for table, d in zip(together, depth, strict=True):
        alone = greens(CRUST, d, [30e3, 70e3], PLAN)
        assert table.depth_km == d
        assert relative(table.series(Motion.DISPLACEMENT), alone.series(Motion.DISPLACEMENT)).max() < 2e-4


def test_nothing_before_p():
    distance = np.array([40e3, 120e3])
    plan = FrequencyPlan(step_s=0.1, samples=600, high_hz=2.0)
    six = greens(CRUST, 10.0, distance, plan).records(MOMENT, 0.4, Motion.SENSORS, source_spectrum=pulse(plan))
    # No ray is faster than the fastest layer; the pulse starts some 2.2 s before its centre at 4 s (four s.d.).
    earliest = np.hypot(distance, 10e3) / 8000.0 + 1.8
    for r in range(2):
        before = np.arange(plan.samples) * plan.step_s < earliest[r]
        assert before.sum() > 60
        assert (np.abs(six[r][:, before]).max(axis=1) < 3e-4 * np.abs(six[r]).max(axis=1)).all()


def test_whole_setting_turned_turns_the_records():
    turn = np.radians(68.0)
    c, s = np.cos(turn), np.sin(turn)
    matrix = np.array([[c, -s, 0.0], [s, c, 0.0], [0.0, 0.0, 1.0]])  # north, east, down
    table = greens(CRUST, 10.0, [35e3], PLAN)
    a = table.records(MOMENT, 0.3, Motion.VELOCITY)[0]
    b = table.records(matrix @ MOMENT @ matrix.T, 0.3 + turn, Motion.VELOCITY)[0]
    for row in (0, 3):
        turned = [a[row] * c + a[row + 1] * s, a[row + 1] * c - a[row] * s, a[row + 2]]
        assert np.allclose(turned, b[row : row + 3], atol=1e-9 * np.abs(b[row : row + 3]).max())


def test_records_are_linear_in_the_moment_and_motions_are_derivatives():
    table = greens(CRUST, 10.0, [35e3], PLAN)
    stf = pulse(PLAN)
    parts = sum(
        MOMENT[i, j]
        * table.records(
            np.outer(np.eye(3)[i], np.eye(3)[j]) + np.outer(np.eye(3)[j], np.eye(3)[i]), 0.3, Motion.SENSORS
        )
        / 2
        for i in range(3)
        for j in range(3)
    )
    assert np.allclose(parts, table.records(MOMENT, 0.3, Motion.SENSORS), atol=1e-12 * np.abs(parts).max())
    u, v, a, sensors = (table.records(MOMENT, 0.3, m, source_spectrum=stf)[0] for m in Motion)
    middle = slice(3, -3)
    for low, high in ((u, v), (v, a)):
        slope = (
            45 * (np.roll(low, -1) - np.roll(low, 1))
            - 9 * (np.roll(low, -2) - np.roll(low, 2))
            + np.roll(low, -3)
            - np.roll(low, 3)
        ) / 15
        assert np.abs(slope[:, middle] - high[:, middle]).max() < 0.02 * np.abs(high).max()
    assert np.array_equal(sensors[:3], a[:3])
    assert np.array_equal(sensors[3:], v[3:])


def test_attenuation_takes_what_constant_q_says():
    """Direct SH to a near surface point: spectral ratio exp(-pi f t / Q), and arrival by the speed at each frequency."""
    vs, depth, q = 3.4, 30.0, 80.0
    rock = [LayeredModel("rock", [0.0], [6.0], [vs], [2700.0], [2 * x], [x]) for x in (np.inf, q)]
    lossless, lossy = (greens(m, depth, [20e3], PLAN).spectra[0, 17] for m in rock)
    path_s = np.hypot(20.0, depth) / vs
    f = PLAN.frequency_hz
    some = (f > 0.2) & (f < 0.8)
    ratio = lossy[some] / lossless[some]
    # The damped axis: evaluate Kjartansson's law at the complex frequency, and Q's plain law for size.
    assert np.abs(ratio) == pytest.approx(np.exp(-np.pi * f[some] * path_s / q), rel=0.12)
    gamma = np.arctan(1 / q) / np.pi
    slowing = (1j * PLAN.omega[some] / (2 * np.pi)) ** -gamma / np.cos(np.pi * gamma / 2)
    exact = np.exp(-1j * PLAN.omega[some] * path_s * (slowing - 1))
    near_field_and_modulus = ratio / exact
    assert np.abs(near_field_and_modulus - 1).max() < 0.1


def test_far_rotation_obeys_the_plane_wave_relation():
    # SH from below at grazing distance: rot_Z = -(p_E a_N - p_N a_E) / 2 for the direct wave of a half-space.
    rock = LayeredModel("rock", [0.0], [6.0], [3.4], [2700.0], [np.inf], [np.inf])
    plan = FrequencyPlan(step_s=0.1, samples=800, high_hz=2.0)
    table = greens(rock, 25.0, [120e3], plan)
    six = table.records(double_couple(0.0, np.pi / 2, 0.0) * 1e16, np.pi / 2, Motion.SENSORS)[0]
    slowness = 120.0 / np.hypot(120.0, 25.0) / 3400.0
    assert relative(six[5], -slowness * six[1] / 2) < 0.02


def test_elements_have_azimuth_free_names_and_weights():
    assert len(ELEMENTS) == 18
    weights = element_weights(np.eye(3), [0.0, 1.0, 2.0])
    explosion = [source in ("isotropic", "vertical") for _, source in ELEMENTS]
    assert np.array_equal(weights != 0, np.tile(explosion, (3, 1)))
    record = np.arange(12.0).reshape(1, 6, 2)
    back = to_east_north(to_east_north(record, np.pi / 2), 3 * np.pi / 2)
    assert back.shape == record.shape


@pytest.mark.parametrize(
    ("depth", "distance", "match"),
    [
        (-1.0, [1e4], "not below the surface"),
        (0.0, [1e4], "not below the surface"),
        (15.0, [1e4], "interface"),
        (10.0, [0.0, 1e4], "0 km distance"),
        (10.0, [-5.0], "distance"),
        (10.0, [], "at least one"),
        (np.nan, [1e4], "not below the surface"),
    ],
)
def test_bad_input_is_said_in_a_sentence(depth, distance, match):
    with pytest.raises(InputError, match=match):
        greens(CRUST, depth, distance, PLAN)


def test_bad_plans_and_models():
    with pytest.raises(InputError, match="half the sampling rate"):
        FrequencyPlan(step_s=0.5, samples=100, high_hz=1.0)
    with pytest.raises(InputError, match="too short"):
        FrequencyPlan(step_s=0.5, samples=10, high_hz=0.5)
    with pytest.raises(InputError, match="positive step"):
        FrequencyPlan(step_s=0.0, samples=100, high_hz=0.5)
    with pytest.raises(InputError, match="vs not below vp"):
        LayeredModel("m", [0.0], [3.0], [3.0], [2700.0], [100.0], [100.0])
    with pytest.raises(InputError, match="positive thickness"):
        LayeredModel("m", [0.0, 5.0, 4.0], [5.0, 6, 7], [3.0, 3.4, 3.8], [2700.0] * 3, [100.0] * 3, [100.0] * 3)


def test_progress_counts_to_the_end_and_memory_limits_change_nothing(monkeypatch):
    import rupture.synthetic.wavefield.integration as integration

    distance = np.linspace(5e3, 60e3, 7)
    seen = []
    whole = greens(CRUST, 8.0, distance, PLAN, lambda done, total: seen.append((done, total))).spectra
    assert [done for done, _ in seen] == list(range(1, seen[-1][1] + 1))
    monkeypatch.setattr(integration, "TABLE_BYTES", 24 * 3 * 400)
    monkeypatch.setattr(integration, "BLOCK_BYTES", 288 * 400 * 5)
    blocks = list(integrate(CRUST, np.array([8.0]), [distance], PLAN))
    assert len({(b.first, b.frequencies.start) for b in blocks}) == len(blocks) > 20
    pieces = np.zeros_like(whole)
    for b in blocks:
        pieces[b.first : b.first + b.spectra.shape[0], :, b.frequencies] = b.spectra
    assert np.allclose(pieces, whole, rtol=1e-9, atol=1e-12 * np.abs(whole).max())
