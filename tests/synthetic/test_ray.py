"""Ray engine: limits, symmetries and invariances."""

from dataclasses import replace

import numpy as np
import pytest

from rupture.conventions import ACC_Z, ACCELERATION, ROT_E, ROT_N, ROT_Z
from rupture.earth.layers import LayeredModel
from rupture.errors import InputError
from rupture.geodesy import destination
from rupture.synthetic.engine import Receivers, Sampling, SubEvents
from rupture.synthetic.moment_rate import moment_rate_spectrum, moment_tensor
from rupture.synthetic.ray import RayEngine, attenuation, ray_records
from rupture.synthetic.ray_paths import path_sums, solve_slowness

SAMPLING = Sampling(start_s=-5.0, step_s=0.05, samples=1600, high_hz=4.0)
UNIFORM = LayeredModel("uniform", [0.0], [6.0], [3.46], [2700.0], [1e9], [1e9])
CRUST = LayeredModel(
    "crust", [0, 4, 20, 35], [5.4, 6.0, 6.5, 8.0], [3.1, 3.46, 3.75, 4.5], [2550, 2700, 2900, 3300], [300, 700, 900, 1200],
    [150, 350, 450, 600],
)  # fmt: skip
DIRECT = RayEngine(reflections=False)


def event(depth_km=10.0, time_s=0.0, moment=1e18, rise_s=0.8, mechanism=(60.0, 70.0, 25.0), place=(10.0, 45.0)):
    angles = [np.radians([a]) for a in mechanism]
    values = (*place, depth_km, time_s, moment, rise_s)
    return SubEvents(*(np.array([v], float) for v in values), *angles)


def both(a, b):
    return SubEvents(*(np.concatenate([getattr(a, n), getattr(b, n)]) for n in SubEvents.__dataclass_fields__))


def around(azimuth_deg, distance_km, place=(10.0, 45.0)):
    return Receivers(*destination(*place, np.radians(np.atleast_1d(azimuth_deg)), np.atleast_1d(distance_km) * 1e3))


def test_solver_meets_the_distance_in_any_layers():
    rng = np.random.default_rng(1)
    for _ in range(200):
        layers = rng.integers(1, 8)
        path, speed = rng.uniform(10, 2e4, layers), rng.uniform(500, 8000, layers)
        distance = 10 ** rng.uniform(0, 6)
        p = solve_slowness(path, speed, distance)
        assert path_sums(path, speed, np.ones(layers), p)[0] == pytest.approx(distance, rel=1e-6)


def test_derivative_of_distance_by_slowness():
    path, speed, quality = np.array([3e3, 1e4]), np.array([3000.0, 3500.0]), np.array([100.0, 200.0])
    p, h = 2.5e-4, 1e-9
    low, high = path_sums(path, speed, quality, p - h), path_sums(path, speed, quality, p + h)
    assert path_sums(path, speed, quality, p)[1] == pytest.approx((high[0] - low[0]) / (2 * h), rel=1e-5)
    # dT/dX = p: the slowness is the derivative of the travel time.
    assert (high[2] - low[2]) / (high[0] - low[0]) == pytest.approx(p, rel=1e-6)


def test_splitting_a_layer_changes_nothing():
    split = LayeredModel(
        "split", [0, 4, 12, 20, 35], [5.4, 6.0, 6.0, 6.5, 8.0], [3.1, 3.46, 3.46, 3.75, 4.5], [2550, 2700, 2700, 2900, 3300],
        [300, 700, 700, 900, 1200], [150, 350, 350, 450, 600],
    )  # fmt: skip
    sites = around([20, 140], [60, 130])
    a, b = (ray_records(event(), sites, m, SAMPLING) for m in (CRUST, split))
    np.testing.assert_allclose(a, b, atol=1e-9 * np.abs(a).max())


def test_rotation_rate_obeys_the_free_surface_relations():
    """Each ray alone: rot_E = -p_N a_Z and so on, post-critical SV included (design of the project, section 2)."""
    sites = around([35], [150])
    rays = DIRECT.trace(event(), sites, CRUST)
    slowness = rays.slowness_s_m[0, 0, 1]
    onward = rays.back_azimuth_rad[0, 0] + np.pi
    p_east, p_north = slowness * np.sin(onward), slowness * np.cos(onward)
    records = DIRECT(event(), sites, CRUST, SAMPLING)[0]
    late = SAMPLING.start_s + SAMPLING.step_s * np.arange(SAMPLING.samples) > rays.time_s[0, 0, 1] - 2.0
    acc, rot = records[ACCELERATION][:, late], records[3:, late]
    scale = np.abs(rot).max()
    np.testing.assert_allclose(rot[0], -p_north * acc[2], atol=1e-3 * scale)
    np.testing.assert_allclose(rot[1], p_east * acc[2], atol=1e-3 * scale)
    np.testing.assert_allclose(rot[2], -(p_east * acc[1] - p_north * acc[0]) / 2, atol=1e-3 * scale)


def test_rotation_is_half_the_curl_of_neighbouring_records():
    """Finite differences of five receivers 20 m apart; the far field is good to 1 / (k r), here 1 % and better."""
    centre, step = around([50], [120]), 20.0
    lon, lat = float(centre.longitude_deg[0]), float(centre.latitude_deg[0])
    east, north = (destination(lon, lat, a, [-step, step]) for a in (np.pi / 2, 0.0))
    sites = Receivers(np.concatenate([[lon], east[0], north[0]]), np.concatenate([[lat], east[1], north[1]]))
    full = ray_records(event(rise_s=0.5), sites, CRUST, SAMPLING)
    # Rotation rate is half the curl of velocity; its time derivative that of acceleration.
    d_east, d_north = (full[2] - full[1]) / (2 * step), (full[4] - full[3]) / (2 * step)
    curl_z = 0.5 * (d_east[1] - d_north[0])
    rate = np.gradient(full[0], SAMPLING.step_s, axis=1)
    band = slice(5, -5)

    def misfit(got, want):
        return np.sqrt(np.sum((got[band] - want[band]) ** 2) / np.sum(want[band] ** 2))

    # The plain derivative of a sampled record is itself low at high frequency: take it from spectra instead.
    omega = 2 * np.pi * np.fft.rfftfreq(SAMPLING.samples, SAMPLING.step_s)
    rate = np.fft.irfft(1j * omega * np.fft.rfft(full[0], axis=1), SAMPLING.samples, axis=1)
    assert misfit(rate[ROT_Z], curl_z) < 0.02
    # At the free surface the horizontal rotations are +- the slope of the vertical motion.
    assert misfit(rate[ROT_E], d_north[ACC_Z]) < 0.02
    assert misfit(rate[ROT_N], -d_east[ACC_Z]) < 0.02


def test_turning_the_world_turns_the_records():
    sites, turn = [25.0, 190.0, 300.0], 77.0
    a = ray_records(
        event(mechanism=(60.0, 70.0, 25.0), place=(10.0, 0.0)), around(sites, 80.0, (10.0, 0.0)), CRUST, SAMPLING
    )
    b = ray_records(
        event(mechanism=(60.0 + turn, 70.0, 25.0), place=(10.0, 0.0)),
        around(np.array(sites) + turn, 80.0, (10.0, 0.0)), CRUST, SAMPLING,
    )  # fmt: skip
    c, s = np.cos(np.radians(turn)), np.sin(np.radians(turn))
    for row in (0, 3):
        east, north = a[:, row] * c + a[:, row + 1] * s, -a[:, row] * s + a[:, row + 1] * c
        # The ellipsoid is not round: azimuths differ by some hundredths of a degree.
        np.testing.assert_allclose(b[:, row], east, atol=0.02 * np.abs(a[:, row : row + 2]).max())
        np.testing.assert_allclose(b[:, row + 1], north, atol=0.02 * np.abs(a[:, row : row + 2]).max())


def test_records_add_up_scale_and_shift():
    sites = around([10, 80, 200], [50, 90, 160])
    one, two = event(), event(depth_km=14.0, time_s=3.0, moment=2e18, place=(10.3, 45.1))
    a, b = ray_records(one, sites, CRUST, SAMPLING), ray_records(two, sites, CRUST, SAMPLING)
    scale = np.abs(a).max(axis=(0, 2))[None, :, None]
    np.testing.assert_allclose(
        ray_records(both(one, two), sites, CRUST, SAMPLING) / scale, (a + b) / scale, atol=1e-3
    )  # tails of phase-shifted waves wrap around in periods of different length
    later = ray_records(replace(one, time_s=np.array([4.0])), sites, CRUST, SAMPLING)
    shift = round(4.0 / SAMPLING.step_s)
    np.testing.assert_allclose(later[..., shift:] / scale, a[..., :-shift] / scale, atol=1e-6)
    np.testing.assert_allclose(
        ray_records(replace(one, moment_nm=np.array([3e18])), sites, CRUST, SAMPLING), 3 * a, rtol=1e-9, atol=1e-15
    )


def test_longitude_wraps():
    sites = Receivers(np.array([-179.2, 179.5]), np.array([10.2, 9.6]))
    shifted = Receivers(sites.longitude_deg + 360, sites.latitude_deg)
    a = ray_records(event(place=(179.9, 10.0)), sites, CRUST, SAMPLING)
    b = ray_records(event(place=(-180.1, 10.0)), shifted, CRUST, SAMPLING)
    np.testing.assert_allclose(a, b, atol=1e-9 * np.abs(a).max())


def test_nothing_comes_before_the_first_arrival():
    sites = around([30], [120])
    times = SAMPLING.start_s + SAMPLING.step_s * np.arange(SAMPLING.samples)
    rays = DIRECT.trace(event(), sites, CRUST)
    turn = DIRECT(event(rise_s=1.5), sites, CRUST, SAMPLING)[0, ROT_Z]
    assert np.abs(turn[times < rays.time_s[0, 0, 1] - 3.0]).max() < 1e-3 * np.abs(turn).max()
    # Coefficients beyond the critical angle turn the phase at all frequencies alike, which is not quite causal: tails as 1 / t^3.
    records = ray_records(event(rise_s=1.5), sites, CRUST, SAMPLING)[0, :3]
    assert np.abs(records[:, times < rays.time_s[0, 0, 0] - 3.0]).max() < 2e-3 * np.abs(records).max()


def test_band_is_kept():
    records = ray_records(event(rise_s=0.3), around([30], [70]), CRUST, SAMPLING)[0]
    spectrum = np.abs(np.fft.rfft(records[2] * np.hanning(SAMPLING.samples)))
    frequency = np.fft.rfftfreq(SAMPLING.samples, SAMPLING.step_s)
    assert spectrum[frequency > SAMPLING.high_hz + 0.3].max() < 1e-4 * spectrum.max()


def test_window_before_and_after_the_waves_is_empty():
    sites = around([30], [70])
    early = Sampling(-60.0, 0.05, 400, 4.0)
    assert not ray_records(event(), sites, CRUST, early).any()
    late = Sampling(600.0, 0.05, 400, 4.0)
    assert not ray_records(event(), sites, CRUST, late).any()


def test_window_that_starts_among_the_waves_is_the_same_piece():
    sites = around([30], [70])
    whole = ray_records(event(), sites, CRUST, SAMPLING)
    piece = ray_records(event(), sites, CRUST, replace(SAMPLING, start_s=15.0, samples=500))
    np.testing.assert_allclose(piece, whole[..., 400:900], atol=1e-4 * np.abs(whole).max())


def test_moment_rate_spectrum_is_that_of_the_raised_cosine():
    step, rise, moment = 0.001, 1.3, 5e17
    t = np.arange(0, 20, step)
    rate = np.where(t < rise, moment * (1 - np.cos(2 * np.pi * t / rise)) / rise, 0.0)
    frequency = np.array([0.05, 0.4, 1 / rise, 1.7, 3.0])
    direct = np.array([(rate * np.exp(-2j * np.pi * f * t)).sum() * step for f in frequency])
    got = moment_rate_spectrum(frequency, np.array([moment]), np.array([rise]))[0]
    np.testing.assert_allclose(got, direct, atol=1e-5 * moment)


def test_attenuation_is_causal_and_has_the_wanted_q():
    """|A| = exp(-pi f t*); with its dispersion a pulse starts sharply, without it half of it comes early."""
    length, step = 4096, 0.01
    frequency = np.fft.rfftfreq(length, step)
    response = np.ones(frequency.size, complex)
    response[1:] = attenuation(frequency[1:], np.array([0.3]))[0]
    np.testing.assert_allclose(np.abs(response[1:]), np.exp(-np.pi * 0.3 * frequency[1:]))
    shift = np.exp(-2j * np.pi * frequency * 5.0)
    pulse, plain = (np.fft.irfft(r * shift, length) for r in (response, np.abs(response)))
    # 50 Hz waves come ln(50) t* / pi earlier than those of 1 Hz.
    onset = round((5.0 - np.log(50) * 0.3 / np.pi) / step)
    assert np.sum(pulse[: onset - 5] ** 2) < 0.002 * np.sum(pulse**2)
    assert np.sum(plain[:500] ** 2) > 0.4 * np.sum(plain**2)


def test_losses_of_records_follow_q():
    lossy = replace(UNIFORM, qp=np.array([200.0]), qs=np.array([100.0]))
    sites = around([40], [100])
    clean, damped = (DIRECT(event(rise_s=0.3), sites, m, SAMPLING)[0, ROT_Z] for m in (UNIFORM, lossy))
    frequency = np.fft.rfftfreq(SAMPLING.samples, SAMPLING.step_s)
    ratio = np.abs(np.fft.rfft(damped)) / np.maximum(np.abs(np.fft.rfft(clean)), 1e-30)
    loss = np.hypot(100.0, 10.0) / 3.46 / 100
    for f in (0.5, 1.0, 2.0):
        assert ratio[np.argmin(np.abs(frequency - f))] == pytest.approx(np.exp(-np.pi * f * loss), rel=0.02)


def test_moment_tensors_are_double_couples():
    rng = np.random.default_rng(3)
    tensor = moment_tensor(rng.uniform(0, 2 * np.pi, 50), rng.uniform(0, np.pi / 2, 50), rng.uniform(-np.pi, np.pi, 50))
    values = np.linalg.eigvalsh(tensor)
    np.testing.assert_allclose(values, np.tile([-1.0, 0.0, 1.0], (50, 1)), atol=1e-12)


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"depth_km": 0.0}, "not below the surface"),
        ({"depth_km": -3.0}, "not below the surface"),
        ({"depth_km": 20.0}, "on the interface at 20 km"),
    ],
)
def test_bad_source_depth(change, words):
    with pytest.raises(InputError, match=words):
        ray_records(event(**change), around([10], [50]), CRUST, SAMPLING)


def test_receiver_at_zero_distance():
    with pytest.raises(InputError, match="receiver 2 is at zero distance"):
        ray_records(event(), Receivers(np.array([11.0, 10.0]), np.array([45.0, 45.0])), CRUST, SAMPLING)


def test_band_above_nyquist():
    with pytest.raises(InputError, match=r"half the sampling rate, 10 Hz"):
        ray_records(event(), around([10], [50]), CRUST, replace(SAMPLING, high_hz=10.0))


def test_shear_speed_above_p_speed():
    with pytest.raises(InputError, match="vs not below vp"):
        replace(UNIFORM, vs_km_s=np.array([6.5]))


def test_no_layer_without_thickness():
    with pytest.raises(InputError, match="no positive thickness"):
        replace(CRUST, top_km=np.array([0.0, 4.0, 4.0, 35.0]))


def test_rotation_rows_are_where_the_conventions_say():
    """A wave toward north from a source in the south: rot_E = -p a_Z, rot_N = 0."""
    records = ray_records(event(), around([0], [90]), CRUST, SAMPLING)[0]
    assert np.abs(records[ROT_N]).max() < 1e-3 * np.abs(records[ROT_E]).max()
    assert np.sum(records[ROT_E] * records[ACC_Z]) < 0
