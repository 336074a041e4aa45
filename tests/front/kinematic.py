"""What sites would see of a rupture, from exact kinematics in plain NumPy; shares no code with the fit.

A rupture is a few hundred flashes at places and times along its arms, of random energy. A uniform Earth carries P and S of each
flash along straight rays from depth to every site; scattered waves follow with random delays, most from about the same side, the
rest from anywhere. A window sees all that arrives in it, weighed by its taper, and measures one slowness: the mean of all, weighed by
random amplitudes, with noise. Some windows are wrong altogether. Distances and azimuths are those of GeographicLib.
"""

from dataclasses import dataclass
from datetime import UTC, datetime

import numpy as np
from geographiclib.geodesic import Geodesic

from rupture.direction import SiteDirection
from rupture.event import Event

SITE_AZIMUTHS_DEG = np.array([12.0, 64.0, 101.0, 149.0, 187.0, 238.0, 283.0, 331.0])
SITE_DISTANCES_KM = np.array([85.0, 62.0, 118.0, 70.0, 140.0, 55.0, 96.0, 78.0])


@dataclass(frozen=True)
class Arm:
    azimuth_deg: float
    length_km: float
    speed_km_s: float


@dataclass(frozen=True)
class Scene:
    """One rupture and the sites that hear it; `duration_s` counts when there are no arms."""

    arms: tuple[Arm, ...] = ()
    duration_s: float = 20.0
    longitude_deg: float = 20.0
    latitude_deg: float = 38.0
    depth_km: float = 10.0
    s_speed_km_s: float = 3.5
    start_s: float = 0.3
    unevenness: float = 0.7
    coda: float = 0.2
    coda_s: float = 8.0
    noise: float = 0.02
    outliers: float = 0.03
    seed: int = 1
    site_azimuths_deg: tuple[float, ...] = tuple(SITE_AZIMUTHS_DEG)
    site_distances_km: tuple[float, ...] = tuple(SITE_DISTANCES_KM)

    @property
    def kind(self):
        return ("stationary", "unilateral", "bilateral")[len(self.arms)]

    @property
    def length_km(self):
        return sum(a.length_km for a in self.arms)

    @property
    def event(self):
        """Magnitude by Wells & Coppersmith (1994), all slip types: log10 L = -2.44 + 0.59 M."""
        size = self.length_km or 2.8 * self.duration_s
        magnitude = (np.log10(size) + 2.44) / 0.59
        return Event(datetime(2030, 1, 1, tzinfo=UTC), self.longitude_deg, self.latitude_deg, self.depth_km, magnitude)

    def sites(self):
        """Longitudes and latitudes of the sites."""
        ends = [
            Geodesic.WGS84.Direct(self.latitude_deg, self.longitude_deg, a, 1e3 * d)
            for a, d in zip(self.site_azimuths_deg, self.site_distances_km, strict=True)
        ]
        return np.array([e["lon2"] for e in ends]), np.array([e["lat2"] for e in ends])


def flashes(scene, rng, count=240):
    """Longitude, latitude, time, energy of the flashes."""
    if not scene.arms:
        time = np.sort(rng.uniform(0, scene.duration_s, count))
        azimuth, reach = rng.uniform(0, 360, count), 1.5e3 * np.sqrt(rng.uniform(size=count))
    else:
        share = np.array([a.length_km for a in scene.arms]) / scene.length_km
        which = (rng.uniform(size=count) > share[0]).astype(int)
        length, speed, angle = (
            np.array([getattr(a, n) for a in scene.arms])[which] for n in ("length_km", "speed_km_s", "azimuth_deg")
        )
        reach, azimuth = 1e3 * length * rng.uniform(size=count), angle
        time = reach / (1e3 * speed)
    ends = [
        Geodesic.WGS84.Direct(scene.latitude_deg, scene.longitude_deg, a, d)
        for a, d in zip(azimuth, reach, strict=True)
    ]
    energy = np.exp(scene.unevenness * rng.normal(size=count))
    # A flash is not instantaneous: slip lasts about a second.
    return [e["lon2"] for e in ends], [e["lat2"] for e in ends], time + rng.exponential(1.0, count), energy


def arrivals(scene, source, rng, site_longitude, site_latitude):
    """Time, east and north slowness toward the source, energy of all that comes to a site."""
    rows = []
    for lon, lat, time, energy in zip(*flashes(scene, source), strict=True):
        line = Geodesic.WGS84.Inverse(site_latitude, site_longitude, lat, lon)
        back, distance = np.radians(line["azi1"]), line["s12"]
        path = np.hypot(distance, 1e3 * scene.depth_km)
        for share, speed in ((1.0, 1e3 * scene.s_speed_km_s), (0.05, 1.73e3 * scene.s_speed_km_s)):
            slow = distance / path / speed
            when = scene.start_s + time + path / speed
            level = share * energy / path**2
            rows.append((when, slow * np.sin(back), slow * np.cos(back), level))
            if share < 1.0:
                continue
            for _ in range(6):
                # Six scattered waves a flash: half about the direction of the source, half from anywhere.
                angle = back + rng.normal(0, 0.5) if rng.uniform() < 0.5 else rng.uniform(0, 2 * np.pi)
                fast = slow * rng.uniform(0.6, 1.1)
                late = when + rng.exponential(scene.coda_s)
                rows.append(
                    (late, fast * np.sin(angle), fast * np.cos(angle), scene.coda * level / 6 * rng.exponential())
                )
    return np.array(rows).T


def observe(scene):
    """Return a `SiteDirection` for each site."""
    lon, lat = scene.sites()
    return [
        one_site(scene, f"K{k}", np.random.default_rng((scene.seed, k)), *place)
        for k, place in enumerate(zip(lon, lat, strict=True))
    ]


def one_site(scene, code, rng, longitude, latitude, hop=0.5):
    # All sites hear the same flashes, each with its own scattering and noise.
    source = np.random.default_rng((scene.seed, 1000))
    when, east, north, energy = arrivals(scene, source, rng, longitude, latitude)
    time = hop * np.arange(np.floor(when.min() / hop) - 10, np.ceil(when.max() / hop) + 20)
    angle, slow = np.radians(3.0) * np.arange(120), np.geomspace(5e-5, 2.5e-3, 28)
    trial_e, trial_n = (np.outer(f(angle), slow) for f in (np.sin, np.cos))
    # Radiation and interference: every arrival has its own random weight, the same in all windows that hold it.
    energy = energy * rng.gamma(2.0, 0.5, energy.size)
    floor = scene.noise * energy.sum() / 20.0
    ratios, coherent = [], []
    windows = (7.5, 4.0)
    for window in windows:
        taper = np.where(
            np.abs(time[:, None] - when) < window / 2, np.cos(np.pi * (time[:, None] - when) / window) ** 2, 0.0
        )
        weight = taper * energy
        total = weight.sum(axis=1) + floor * window / 4
        mean_e, mean_n = weight @ east / total, weight @ north / total
        spread = (weight @ (east**2 + north**2)) / total - mean_e**2 - mean_n**2
        # The error of the mean falls with the independent samples of a window, and so does its noise from window to window.
        sigma = np.sqrt(np.maximum(spread, 0) / 2 / (0.6 * window) + (0.02 * 3e-4) ** 2 + (3e-4 * scene.noise) ** 2)
        smooth = taper_of(window, hop)
        jitter = np.array([np.convolve(rng.normal(size=time.size), smooth, "same") for _ in range(2)])
        seen_e, seen_n = mean_e + sigma * jitter[0], mean_n + sigma * jitter[1]
        wrong = np.repeat(rng.uniform(size=time.size // 8 + 1) < scene.outliers, 8)[: time.size]
        turn = np.repeat(rng.uniform(0, 2 * np.pi, time.size // 8 + 1), 8)[: time.size]
        seen_e[wrong], seen_n[wrong] = 3e-4 * np.sin(turn[wrong]), 3e-4 * np.cos(turn[wrong])
        misfit = ((trial_e[..., None] - seen_e) ** 2 + (trial_n[..., None] - seen_n) ** 2) / (2 * sigma**2)
        like = np.exp(-misfit + misfit.min(axis=(0, 1)))
        like /= like.mean(axis=(0, 1))
        believed = 0.95 * np.clip(weight.sum(axis=1) / total, 0, 1) ** 4
        ratios.append(np.log(believed * like + 1 - believed))
        coherent.append(believed)
        if window == min(windows):
            power = total * np.exp(0.2 * np.convolve(rng.normal(size=time.size), smooth, "same")) - floor
    ratio = np.array(ratios, np.float32)
    return SiteDirection(
        code, time, np.array([[0.2, 0.5], [0.5, 1.2]]), np.array(windows), angle, slow, ratio.sum(axis=0), ratio,
        np.array(coherent), np.maximum(power, 0.0), np.full(time.size, hop / (np.mean(windows) * 2 / 3)),
    )  # fmt: skip


def taper_of(window, hop):
    """Weights that make white noise as smooth as overlapping windows, with unit variance."""
    row = np.hanning(max(3, int(2 * (window / hop / 2) + 1)))
    return row / np.sqrt((row**2).sum())
