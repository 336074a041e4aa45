"""The compiled posterior against a slow twin in plain NumPy, written from the formula."""

import numba
import numpy as np
import pytest
from scipy.special import logsumexp

from rupture.conventions import slowness_vector
from rupture.direction.covariance import PAIRS, band_signal, mean_covariance, sliding_covariances
from rupture.direction.likelihood import horizontal_forms, vertical_form
from rupture.direction.posterior import (
    as_before,
    fill_posterior,
    plane_wave_equation,
    polarisation_equation,
    turn_weights,
)

ANGLES, SPEEDS, WINDOWS = 36, 7, 53
DEGREES, ERROR, STRAY, KAPPA = 9.0, 0.1, 0.05, 2.0


@pytest.fixture(scope="module")
def windows():
    """Covariances of windows from pure noise to a clear wave, full matrices and packed."""
    rng = np.random.default_rng(8)
    p = slowness_vector(2.0, 1 / 3500)
    packed = []
    for signal in np.geomspace(1e-3, 1e2, WINDOWS):
        a = rng.standard_normal((3, 10)) * signal
        rot = np.array([-p[1] * a[2], p[0] * a[2], -(p[0] * a[1] - p[1] * a[0]) / 2]) * 3500
        x = np.vstack([a, rot]) + 0.3 * rng.standard_normal((6, 10))
        packed.append((x @ x.T / 10)[PAIRS[:, 0], PAIRS[:, 1]])
    # The noise holds a wave of its own, so that its rotation follows its translation.
    q = slowness_vector(4.0, 1 / 3000) * 3500
    a = 0.2 * np.eye(3)
    waves = np.vstack([a, -q[1] * a[2], q[0] * a[2], -(q[0] * a[1] - q[1] * a[0]) / 2])
    noise = (np.eye(6) * 0.09 + waves @ waves.T)[PAIRS[:, 0], PAIRS[:, 1]]
    theta = 2 * np.pi * np.arange(ANGLES) / ANGLES
    # Slowness in units of 1/3500 s/m, as the rotation above.
    grid = np.meshgrid(theta, np.geomspace(0.3, 3, SPEEDS), indexing="ij")
    trial = slowness_vector(grid[0].ravel(), grid[1].ravel())
    return theta, trial, np.array(packed).T, noise


def unpack(entries):
    full = np.zeros((6, 6))
    full[PAIRS[:, 0], PAIRS[:, 1]] = entries
    return full + full.T - np.diag(full.diagonal())


def student(residual, expected):
    """-2/N times the log-likelihood: the error's scale, at least one, at its most likely value."""
    return np.log(max(residual, expected)) + min(residual / expected, 1.0) - 1.0


def as_noise(background, c, rows, given):
    """The same when rotation follows translation as in the noise and what is left has the noise's power, to four times."""
    rows, given = list(rows), list(given)
    follows = np.linalg.solve(background[np.ix_(given, given)], background[np.ix_(given, rows)]).T
    turn = np.zeros((len(rows), 6))
    turn[:, rows], turn[:, given] = np.eye(len(rows)), -follows
    expected, axes = np.linalg.eigh(turn @ background @ turn.T)
    left = np.diag(axes.T @ turn @ c @ turn.T @ axes)
    total = 0.0
    for r, x in zip(left, expected, strict=True):
        # The least of log(s x) + r / (s x) over 1 <= s <= 4 lies at an end or where its slope is nothing, at s = r / x.
        scales = np.array([1.0, 4.0, *([r / x] if 1.0 < r / x < 4.0 else [])])
        total += np.min(np.log(scales * x) + r / (scales * x) - 1.0)
    return total


def twin(theta, trial, packed, noise, names, blur_rad=0.0):
    out = np.empty((ANGLES * SPEEDS, packed.shape[1]))
    coherent = np.empty(packed.shape[1])
    background = unpack(noise)
    for t in range(packed.shape[1]):
        c = unpack(packed[:, t])
        gain = np.zeros(len(out))
        unexplained = unchanged = 0.0
        if "horizontal" in names:
            total = (c[3, 3] + c[4, 4]) / 2
            unexplained += 2 * student(total, (background[3, 3] + background[4, 4]) / 2 + ERROR**2 * total)
            unchanged += as_noise(background, c, (3, 4), (2,))
        if "vertical" in names:
            unexplained += student(c[5, 5], background[5, 5] + ERROR**2 * c[5, 5])
            unchanged += as_noise(background, c, (5,), (0, 1))
        for j, (east, north) in enumerate(trial.T):
            if "horizontal" in names:
                rows = np.array([[0, 0, north, 1, 0, 0], [0, 0, -east, 0, 1, 0]])
                across = np.array([-north, east]) / np.hypot(east, north)
                axes = np.array([across, [across[1], -across[0]]]) @ rows
                expected = np.diag(axes @ background @ axes.T) + ERROR**2 * total
                left = np.diag(axes @ c @ axes.T)
                gain[j] -= 0.5 * DEGREES * sum(student(r, x) for r, x in zip(left, expected, strict=True))
            if "vertical" in names:
                row = np.array([-north / 2, east / 2, 0, 0, 0, 1])
                expected = row @ background @ row + ERROR**2 * c[5, 5]
                gain[j] -= 0.5 * DEGREES * student(row @ c @ row, expected)
        if "polarisation" in names:
            limit = KAPPA**2 * c[2, 2] + 0.05 * (c[0, 0] + c[1, 1])
            along = [np.array([np.sin(a), np.cos(a)]) @ c[:2, :2] @ np.array([np.sin(a), np.cos(a)]) for a in theta]
            rule = np.array([-0.5 * DEGREES * student(m / limit, 1.0) for m in along])
            gain += np.repeat(rule - logsumexp(rule) + np.log(ANGLES), SPEEDS)
        gain -= np.logaddexp(-0.5 * DEGREES * unexplained, -0.5 * DEGREES * unchanged) - np.log(2)
        evidence = np.exp(logsumexp(gain) - np.log(gain.size))
        coherent[t] = evidence / (1 + evidence)
        believed = coherent[t] * (1 - STRAY)
        ratio = np.exp(gain - np.log(evidence)).reshape(ANGLES, SPEEDS)
        order = np.fft.fftfreq(ANGLES, 1 / ANGLES)
        variance = (blur_rad * ANGLES / (2 * np.pi)) ** 2
        damping = np.exp(variance * (np.cos(2 * np.pi * order / ANGLES) - 1))
        ratio = np.fft.ifft(np.fft.fft(ratio, axis=0) * damping[:, None], axis=0).real
        out[:, t] = np.log(believed * np.maximum(ratio.ravel(), 0) + 1 - believed)
    return out.reshape(ANGLES, SPEEDS, -1), coherent


def compiled(theta, trial, packed, noise, names, blur_rad=0.0):
    across, along = horizontal_forms(np.repeat(theta, SPEEDS), np.hypot(*trial))
    build = {
        "horizontal": lambda: [plane_wave_equation(f, (3, 4), packed, noise, ERROR) for f in (across, along)],
        "vertical": lambda: [plane_wave_equation(vertical_form(trial), (5,), packed, noise, ERROR)],
        "polarisation": lambda: [polarisation_equation(theta, SPEEDS, packed, KAPPA, DEGREES)],
    }
    out, coherent = np.zeros((ANGLES, SPEEDS, packed.shape[1]), np.float32), np.zeros(packed.shape[1])
    equations = {name: build[name]() for name in names}
    before = {
        "horizontal": lambda: as_before((3, 4), (2,), packed, noise),
        "vertical": lambda: as_before((5,), (0, 1), packed, noise),
        "polarisation": lambda: equations["polarisation"][0].null,
    }
    fill_posterior(
        out,
        coherent,
        [e for name in names for e in equations[name]],
        np.sum([before[name]() for name in names], axis=0),
        DEGREES,
        STRAY,
        turn_weights(blur_rad, ANGLES),
    )
    return out, coherent


@pytest.mark.parametrize("blur_rad", [0.0, 0.03, 0.3])
@pytest.mark.parametrize("names", [("horizontal", "vertical"), ("horizontal",), ("vertical", "polarisation")])
def test_compiled_posterior_is_its_slow_twin(windows, names, blur_rad):
    out, coherent = compiled(*windows, names, blur_rad)
    expected, share = twin(*windows, names, blur_rad)
    np.testing.assert_allclose(coherent, share, rtol=1e-9)
    np.testing.assert_allclose(out, expected, atol=2e-4 if blur_rad else 2e-6)


def test_one_thread_or_two_give_the_same_bits(windows):
    before = numba.get_num_threads()
    if numba.config.NUMBA_NUM_THREADS < 2:
        pytest.skip("one thread only here")
    results = []
    for count in (1, 2):
        numba.set_num_threads(count)
        results.append(compiled(*windows, ("horizontal", "vertical"), 0.1)[0])
    numba.set_num_threads(before)
    assert results[0].tobytes() == results[1].tobytes()


def test_turn_weights_have_the_variance_asked_for():
    for sigma_deg in (0.5, 3.0, 10.0):
        weights = turn_weights(np.radians(sigma_deg), 120)
        offsets = 3.0 * (np.arange(weights.size) - weights.size // 2)
        assert weights.sum() == pytest.approx(1.0, abs=1e-12)
        assert np.sqrt((weights * offsets**2).sum()) == pytest.approx(sigma_deg, rel=1e-3)


def test_sliding_covariance_is_the_weighted_sum(windows):
    rng = np.random.default_rng(3)
    analytic = rng.standard_normal((6, 400)) + 1j * rng.standard_normal((6, 400))
    centres = np.arange(40, 360, 7)
    found = sliding_covariances(analytic, 60, centres)
    weight = np.sin(np.pi * np.arange(60) / 60) ** 2
    for n, centre in enumerate(centres):
        part = analytic[:, centre - 30 : centre + 30]
        full = 0.5 * ((part * weight) @ part.conj().T).real / weight.sum()
        np.testing.assert_allclose(unpack(found[:, n]), full, rtol=1e-9, atol=1e-12)


def test_band_signal_keeps_a_line_in_the_band_and_its_power():
    time = np.arange(4000) * 0.05
    inside, outside = np.cos(2 * np.pi * 0.5 * time), np.cos(2 * np.pi * 2.0 * time)
    out = band_signal(np.array([inside, outside]), 0.05, (0.2, 1.2))[:, 1000:3000]
    np.testing.assert_allclose(out[0].real, inside[1000:3000], atol=2e-3)
    np.testing.assert_allclose(np.abs(out[0]), 1.0, atol=2e-3)
    assert np.abs(out[1]).max() < 2e-3
    assert mean_covariance(np.tile(out[:1], (6, 1)), 0, 2000)[0] == pytest.approx(0.5, rel=1e-3)
