"""The bound that no unbiased estimator of a direction can beat, and the errors of the program's own.

Model of a window (unconditional bound: Stoica & Nehorai 1990): N independent Gaussian samples of acceleration with an
unknown 3x3 covariance R, rotation rate that follows from it by the free-surface relations, and noise of known power on
every component. Parameters are both slownesses (or back-azimuth alone where the slowness is known) and the six entries
of R; the Fisher information N/2 tr(S^-1 dS S^-1 dS) is inverted whole, so that not knowing R costs what it must.
Written from the relations alone; nothing is shared with rupture.direction but its settings and its answer.
"""

import numpy as np

from rupture.direction import DirectionSettings, estimate_direction, intervals
from rupture.site import Site

STEP_S = 0.1
BAND_HZ = (0.3, 1.2)
WINDOW_S = 24.0
"""Long enough for a bound on many samples: with N the power of a Gaussian signal in a window itself varies, N/(N - 2)."""
SPEED_M_S = 3500.0
CHANNELS = {"6C": (0, 1, 2, 3, 4, 5), "3C+rotZ": (0, 1, 2, 5)}


def mixing(angle, slowness):
    """Six components from acceleration E, N, Z for a wave from `angle`, shape (6, 3)."""
    east, north = -slowness * np.sin(angle), -slowness * np.cos(angle)
    return np.vstack([np.eye(3), [[0, 0, -north], [0, 0, east], [north / 2, -east / 2, 0]]])


def wave_covariance(angle):
    """An S wave with histories of its own for P-SV (radial 0.8, up -0.5) and SH (1), E N Z."""
    radial = np.array([-np.sin(angle), -np.cos(angle), 0])
    transverse = np.array([np.cos(angle), -np.sin(angle), 0])
    sv = 0.8 * radial + np.array([0, 0, -0.5])
    return np.outer(sv, sv) + np.outer(transverse, transverse)


def noise_power(snr):
    """Noise of each component: the mean power of its sensor's three components over SNR^2."""
    signal = mixing(0.0, 1 / SPEED_M_S) @ wave_covariance(0.0) @ mixing(0.0, 1 / SPEED_M_S).T
    power = signal.diagonal()
    return np.repeat([power[:3].mean(), power[3:].mean()], 3) / snr**2


def samples():
    """Independent real samples that a window holds, from what filter and taper do to white noise.

    Twice the inverse of the sum over pairs of times of w_i w_j |correlation|^2 (Welch 1967 for tapers): the band's
    edges are cosine squared in amplitude, two thirds of each corner wide, half power at the corner, and the taper is a
    Hann window on products.
    """
    frequency = np.linspace(0.0, 2.0, 4001)
    low, high = BAND_HZ
    # sin^4 is a half here, which is where the corner lies in an edge that runs from 0 to 1.
    corner = 2 / np.pi * np.arcsin(0.5**0.25)
    rise = np.clip((frequency - low) / (2 / 3 * low) + corner, 0, 1)
    fall = np.clip((high - frequency) / (2 / 3 * high) + corner, 0, 1)
    power = (np.sin(np.pi / 2 * rise) * np.sin(np.pi / 2 * fall)) ** 4
    lag = STEP_S * np.arange(round(WINDOW_S / STEP_S))
    correlation = np.abs(np.exp(2j * np.pi * np.outer(lag, frequency)) @ power) / power.sum()
    weight = np.sin(np.pi * np.arange(lag.size) / lag.size) ** 2
    weight /= weight.sum()
    pairs = np.abs(np.subtract.outer(np.arange(lag.size), np.arange(lag.size)))
    return 2.0 / float(weight @ (correlation**2)[pairs] @ weight)


def bound_rad(kind, snr, slowness_known, count):
    """Smallest standard deviation of back-azimuth in rad."""
    angle, slowness = 0.6, 1 / SPEED_M_S
    keep = list(CHANNELS[kind])
    entries = [(i, j) for i in range(3) for j in range(i, 3)]
    centre = np.array([angle, 1.0, *(wave_covariance(angle)[i, j] for i, j in entries)])

    def covariance(q):
        r = np.zeros((3, 3))
        for value, (i, j) in zip(q[2:], entries, strict=True):
            r[i, j] = r[j, i] = value
        g = mixing(q[0], q[1] * slowness) * np.array([1, 1, 1, SPEED_M_S, SPEED_M_S, SPEED_M_S])[:, None]
        noise = noise_power(snr) * np.repeat([1, SPEED_M_S**2], 3)
        return (g @ r @ g.T + np.diag(noise))[np.ix_(keep, keep)]

    inverse = np.linalg.inv(covariance(centre))
    free = [k for k in range(centre.size) if not (slowness_known and k == 1)]
    slope = []
    for k in free:
        up, down = centre.copy(), centre.copy()
        up[k] += 1e-5
        down[k] -= 1e-5
        slope.append(inverse @ (covariance(up) - covariance(down)) / 2e-5)
    fisher = np.array([[0.5 * count * np.trace(a @ b) for b in slope] for a in slope])
    return float(np.sqrt(np.linalg.inv(fisher)[0, 0]))


def settings(kind, snr, slowness_known, **changes):
    """Trials finer than the errors; a slowness that is known leaves a sliver of the ladder."""
    expected = bound_rad(kind, snr, slowness_known, samples())
    # The slowness errs about as the angle does, as a share; six of that on either side.
    reach = 1.0 + (1e-4 if slowness_known else 6 * expected)
    step = 360 / np.ceil(360 / np.clip(np.degrees(expected) / 1.2, 0.1, 3.0))
    values = {
        "bands_hz": (BAND_HZ,), "window_s": WINDOW_S, "hop_s": WINDOW_S, "back_azimuth_step_deg": float(step),
        "slowest_km_s": SPEED_M_S / 1e3 / reach, "fastest_km_s": SPEED_M_S / 1e3 * reach,
        "slowness_count": 4 if slowness_known else 25, "model_error_share": 0.0,
    } | changes  # fmt: skip
    return DirectionSettings(**values)


def errors_rad(kind, snr, slowness_known, windows=200, seed=1, **changes):
    """Errors of back-azimuth in separate windows of one long record of a stationary random wave, rad."""
    rng = np.random.default_rng(seed)
    angle, slowness = np.radians(214.3), 1 / SPEED_M_S
    quiet, length = round(400 / STEP_S), round((windows + 4) * WINDOW_S / STEP_S)
    sv, sh = rng.standard_normal((2, length))
    radial = np.array([-np.sin(angle), -np.cos(angle), 0])
    transverse = np.array([np.cos(angle), -np.sin(angle), 0])
    motion = (0.8 * radial + np.array([0, 0, -0.5]))[:, None] * sv + transverse[:, None] * sh
    data = np.zeros((6, quiet + length))
    data[:, quiet:] = mixing(angle, slowness) @ motion
    data += np.sqrt(noise_power(snr))[:, None] * rng.standard_normal(data.shape)
    valid = np.zeros(data.shape, bool)
    valid[list(CHANNELS[kind])] = True
    site = Site("QQ.TEST", 10, 20, 0, -quiet * STEP_S, STEP_S, np.where(valid, data, 0), valid, (0.05, 3))
    found = estimate_direction(site, (-390, -10), settings(kind, snr, slowness_known, **changes))
    best = intervals(found).back_azimuth_best_rad[0, found.time_s > WINDOW_S]
    return (best[:windows] - angle + np.pi) % (2 * np.pi) - np.pi
