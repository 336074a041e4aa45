"""What rotation and translation of one site say about the direction of a wave, each on its own.

At a free surface rot_E = -p_N a_Z and rot_N = p_E a_Z: horizontal rotation and vertical acceleration give the
slowness p in the frame of the ROTATION sensor ("tilt"). rot_Z = -(p_E a_N - p_N a_E)/2: vertical rotation and
horizontal acceleration give it in the frame of the TRANSLATION sensor ("torsion"). The first motion of P gives
its direction in the frame of the translation sensor, too ("polarisation"). Sources: Aki & Richards (2002) ch. 5;
Cochard et al. (2006). A healthy site gives one answer three times.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from enum import Enum

import numpy as np
from numpy.typing import NDArray
from scipy.signal import butter, sosfiltfilt

from rupture.conventions import ACC_E, ACC_N, ACC_Z, ROT_E, ROT_N, ROT_Z
from rupture.records.arrivals import Arrivals
from rupture.site import Site

Array = NDArray[np.float64]

_HIGHEST_HZ = 4.0
"""Above, waves are scattered too much to tell about the installation (own choice)."""
_LOWEST_HZ = 0.1
_SHORTEST_S, _PERIODS = 1.5, 2.5
"""Window: that many periods of the lowest frequency of a band, at least so many seconds."""
_SNR_NEEDED = 3.0
_FEWEST_SAMPLES = 64
_NOISE_S = 40.0
"""Record before P and after the last window that is filtered along."""


class Relation(Enum):
    """Which relation an observation comes from."""

    TILT = "horizontal rotation against vertical acceleration"
    TORSION = "vertical rotation against horizontal acceleration"
    POLARISATION = "first motion of P"


@dataclass(frozen=True)
class Observation:
    """The slowness that one relation gives in one window and band.

    Attributes
    ----------
    relation
        Which one.
    time_s, band_hz
        Centre of the window, band.
    phase
        "P" in the first P, "S" in the first S, "" elsewhere.
    angle_rad
        Azimuth in which the wave travels, in the frame of the relation's sensor.
    angle_error_rad
        Standard deviation from the misfit.
    slowness_s_m
        Size of the slowness; NaN for the polarisation.
    explained
        Share of the variance that the relation explains.
    """

    relation: Relation
    time_s: float
    band_hz: tuple[float, float]
    phase: str
    angle_rad: float
    angle_error_rad: float
    slowness_s_m: float
    explained: float


def octaves(low_hz: float, high_hz: float) -> list[tuple[float, float]]:
    """Return octave bands from the highest frequency down; at least one where the range allows."""
    bands = []
    high = high_hz
    while high / 2.0 >= low_hz * 0.999:
        bands.append((high / 2.0, high))
        high /= 2.0
    return bands[::-1]


def observe(site: Site, arrivals: Arrivals) -> list[Observation]:
    """Return all observations of a site from first P to well after S.

    Parameters
    ----------
    site
        Records.
    arrivals
        First P and S (s after the origin).

    Returns
    -------
    list of Observation
        Windows without gaps that stand out of the noise before P.
    """
    found: list[Observation] = []
    end = arrivals.s_s + max(arrivals.s_s - arrivals.p_s, 20.0)
    site = _between(site, arrivals.p_s - _NOISE_S, end + _NOISE_S)
    if site.data.shape[1] < _FEWEST_SAMPLES:
        return found
    low = max(site.band_hz[0], _LOWEST_HZ)
    high = min(site.band_hz[1], _HIGHEST_HZ, 0.4 / site.step_s)
    times = site.times_s
    for band in octaves(low, high):
        sos = butter(3, band, "bandpass", fs=1.0 / site.step_s, output="sos")
        data = sosfiltfilt(sos, site.data, axis=1)
        noise = _noise_power(data, site, times, arrivals)
        length = max(_SHORTEST_S, _PERIODS / band[0])
        samples = max(round(length / site.step_s), 8)
        count = 2.0 * (band[1] - band[0]) * length
        for start in np.arange(arrivals.p_s - 0.25 * length, end, 0.5 * length):
            first = int(np.searchsorted(times, start))
            if start < times[0] or first + samples > times.size:
                continue
            part = slice(first, first + samples)
            phase = _phase(start, length, arrivals)
            centre = start + 0.5 * length
            ok = np.asarray(site.valid[:, part].all(axis=1))
            found += _window(data[:, part], ok, noise, count, centre, band, phase)
    return found


def _between(site: Site, start_s: float, end_s: float) -> Site:
    keep = slice(*(int(i) for i in np.searchsorted(site.times_s, [start_s, end_s])))
    start = site.start_s + keep.start * site.step_s
    return replace(site, start_s=start, data=site.data[:, keep], valid=site.valid[:, keep])


def _phase(start: float, length: float, arrivals: Arrivals) -> str:
    """Name the wave that a window is about: it must hold the onset and end before the next one."""
    if arrivals.p_s - 0.3 * length <= start <= arrivals.p_s + max(1.0, 0.3 * length):
        return "P" if start + length <= arrivals.s_s + 0.1 * length else ""
    if arrivals.s_s - 0.3 * length <= start <= arrivals.s_s + max(2.0, 0.5 * length):
        return "S"
    return ""


def _noise_power(data: Array, site: Site, times: Array, arrivals: Arrivals) -> Array:
    before = site.valid & (times < arrivals.p_s - 2.0)
    counts = np.maximum(before.sum(axis=1), 1)
    return np.asarray((data**2 * before).sum(axis=1) / counts)


def _window(
    d: Array, ok: NDArray[np.bool_], noise: Array, count: float, time_s: float, band: tuple[float, float], phase: str
) -> list[Observation]:
    power = (d**2).mean(axis=1)
    loud = ok & (power > _SNR_NEEDED**2 * noise) & (power > 0)
    found = []
    if ok[[ACC_Z, ROT_E, ROT_N]].all() and loud[ACC_Z] and (loud[ROT_E] or loud[ROT_N]):
        found.append((Relation.TILT, *tilt(d[ACC_Z], d[ROT_E], d[ROT_N], count)))
    if ok[[ACC_E, ACC_N, ROT_Z]].all() and loud[ROT_Z] and (loud[ACC_E] or loud[ACC_N]):
        found.append((Relation.TORSION, *torsion(d[ACC_E], d[ACC_N], d[ROT_Z], count)))
    if phase == "P" and ok[:3].all() and loud[ACC_Z] and (loud[ACC_E] or loud[ACC_N]):
        found.append((Relation.POLARISATION, *polarisation(d[ACC_E], d[ACC_N], d[ACC_Z], count)))
    return [
        Observation(relation, time_s, band, phase, angle, error, size, explained)
        for relation, angle, error, size, explained in found
        if np.isfinite(angle) and error < np.radians(60.0)
    ]


Estimate = tuple[float, float, float, float]


def tilt(a_z: Array, rot_e: Array, rot_n: Array, count: float) -> Estimate:
    """Return angle, its error (rad), slowness (s/m) and share explained, from rot_E = -p_N a_Z, rot_N = p_E a_Z.

    Parameters
    ----------
    a_z, rot_e, rot_n
        Samples of one window, shape (n,).
    count
        Number of independent samples in it.
    """
    power = float(a_z @ a_z)
    p_n, p_e = -float(rot_e @ a_z) / power, float(rot_n @ a_z) / power
    left = float(((rot_e + p_n * a_z) ** 2 + (rot_n - p_e * a_z) ** 2).sum())
    total = float((rot_e**2 + rot_n**2).sum())
    size = float(np.hypot(p_e, p_n))
    error = np.sqrt(0.5 * left / power / count) / size if size > 0 else np.inf
    return float(np.arctan2(p_e, p_n)), float(error), size, 1.0 - left / total


def torsion(a_e: Array, a_n: Array, rot_z: Array, count: float) -> Estimate:
    """Return angle, its error (rad), slowness (s/m) and share explained, from rot_Z = (p_N a_E - p_E a_N) / 2.

    Motion along one line leaves the slowness along that line open: the error then grows without bound.
    """
    a = np.stack([a_e, a_n])
    normal = a @ a.T
    if not np.linalg.cond(normal) < 1e8:
        return np.nan, np.inf, np.nan, np.nan
    inverse = np.linalg.inv(normal)
    g = inverse @ (a @ rot_z)
    left = rot_z - g @ a
    spread = float(left @ left) / rot_z.size * inverse * rot_z.size / count
    p_e, p_n = -2.0 * g[1], 2.0 * g[0]
    size = float(np.hypot(p_e, p_n))
    # g is p turned by 90 degrees and halved: its spread along p is that of the angle.
    along = np.array([p_e, p_n]) / max(size, 1e-300)
    error = 2.0 * np.sqrt(max(float(along @ spread @ along), 0.0)) / max(size, 1e-300)
    return float(np.arctan2(p_e, p_n)), error, size, 1.0 - float(left @ left) / float(rot_z @ rot_z)


def polarisation(a_e: Array, a_n: Array, a_z: Array, count: float) -> Estimate:
    """Return the direction in which P travels: its ground motion is up and away, or down and toward."""
    power = float(a_z @ a_z)
    u_e, u_n = float(a_e @ a_z) / power, float(a_n @ a_z) / power
    left = float(((a_e - u_e * a_z) ** 2 + (a_n - u_n * a_z) ** 2).sum())
    total = float((a_e**2 + a_n**2).sum())
    size = float(np.hypot(u_e, u_n))
    error = np.sqrt(0.5 * left / power / count) / size if size > 0 else np.inf
    return float(np.arctan2(u_e, u_n)), float(error), float("nan"), 1.0 - left / total


@dataclass(frozen=True)
class Mean:
    """A robust mean: value, standard deviation, number of observations kept."""

    value: float
    error: float
    number: int


def circular_mean(angle_rad: Array, error_rad: Array, floor_rad: float) -> Mean | None:
    """Return the weighted mean of angles, outliers left out; None without any.

    Parameters
    ----------
    angle_rad, error_rad
        Shape (n,).
    floor_rad
        What a single observation may be off whatever its misfit says (scattering, a second wave).

    Notes
    -----
    Windows overlap by half, so n of them count as n/2; the error is the larger of the formal one and of
    the scatter, and never below a third of the floor.
    """
    if not angle_rad.size:
        return None
    weight = 1.0 / (error_rad**2 + floor_rad**2)
    keep = np.ones(angle_rad.size, bool)
    centre = _median_angle(angle_rad, weight)
    off = _wrapped(angle_rad - centre)
    spread = 1.4826 * np.median(np.abs(off))
    keep = np.abs(off) <= 3.0 * np.maximum(spread, np.sqrt(error_rad**2 + floor_rad**2))
    w, off = weight[keep], off[keep]
    mean = float((w @ off) / w.sum())
    independent = max(0.5 * keep.sum(), 1.0)
    formal = np.sqrt(1.0 / w.sum() * keep.sum() / independent)
    scatter = np.sqrt((w @ (off - mean) ** 2) / w.sum() / independent)
    return Mean(float(_wrapped(np.array(centre + mean))), float(max(formal, scatter, floor_rad / 3.0)), int(keep.sum()))


def _median_angle(angle_rad: Array, weight: Array) -> float:
    """Return the observation with the least weighted distance to all others."""
    distance = np.abs(_wrapped(angle_rad[:, None] - angle_rad[None, :]))
    return float(angle_rad[int(np.argmin(distance @ weight))])


def _wrapped(angle_rad: Array) -> Array:
    return np.asarray((angle_rad + np.pi) % (2.0 * np.pi) - np.pi)


def mean_or_none(values: Sequence[Mean]) -> Mean | None:
    """Return the inverse-variance mean of estimates of one quantity; None without any."""
    if not values:
        return None
    weight = np.array([m.error**-2.0 for m in values])
    value = np.array([m.value for m in values])
    mean = float(weight @ value / weight.sum())
    scatter = float(weight @ (value - mean) ** 2 / weight.sum()) / len(values)
    return Mean(mean, float(max(weight.sum() ** -0.5, scatter**0.5)), sum(m.number for m in values))
