"""One synthetic rupture at the sites of a run, tracked exactly as the data were."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rupture.conventions import KM
from rupture.direction import DirectionSettings, estimate_direction
from rupture.earth.layers import LayeredModel
from rupture.earth.responses import Responses
from rupture.errors import DataError
from rupture.event import Event
from rupture.front import FitSettings, RuptureFit, fit_rupture
from rupture.front.lines import LinePrior
from rupture.site import Site
from rupture.synthetic.coda import CodaSettings, ScatteringEngine
from rupture.synthetic.engine import Receivers, Sampling
from rupture.synthetic.ray import ray_records
from rupture.synthetic.source import Arm, KinematicSource
from rupture.synthetic.sub_events import make_sub_events

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Trial:
    """What a synthetic rupture really does.

    Attributes
    ----------
    kind
        stationary, unilateral or bilateral.
    azimuth_deg, speed_km_s, length_km
        Of the longer arm; zero length when stationary.
    second_length_km
        Of the arm the other way, 0 unless bilateral.
    duration_s
        Of a stationary source.
    seed
        Of sub-events, noise and coda.
    """

    kind: str
    azimuth_deg: float
    speed_km_s: float
    length_km: float
    second_length_km: float
    duration_s: float
    seed: int

    def source(self, event: Event, magnitude: float, sub_events: int) -> KinematicSource:
        """Return the kinematic source at the hypocentre of an event."""
        arms = [Arm(self.azimuth_deg, self.length_km, self.speed_km_s)] if self.length_km > 0 else []
        if self.second_length_km > 0:
            arms.append(Arm((self.azimuth_deg + 180.0) % 360.0, self.second_length_km, self.speed_km_s))
        mechanism = event.mechanism_deg or (self.azimuth_deg, 90.0, 0.0)
        return KinematicSource(
            event.longitude_deg, event.latitude_deg, max(event.depth_km, 1.0), magnitude, mechanism, tuple(arms),
            0.0, self.duration_s, sub_events,
        )  # fmt: skip


@dataclass(frozen=True)
class Network:
    """The sites of a run as an experiment: what they have, how noisy they are, which Earth is believed.

    Attributes
    ----------
    event
        Hypocentre, magnitude, mechanism.
    sites
        Sites; their records give noise, masks and time axes.
    noise_window_s
        Stretch of noise of each site.
    layers
        Earth in which the synthetic waves run.
    responses
        Waves in which the estimator believes.
    direction, fit, prior
        As in the run.
    coda
        Scattering of the synthetic records.
    """

    event: Event
    sites: tuple[Site, ...]
    noise_window_s: tuple[tuple[float, float], ...]
    layers: LayeredModel
    responses: Responses
    direction: DirectionSettings
    fit: FitSettings
    prior: LinePrior
    coda: CodaSettings

    def records(self, trial: Trial, magnitude: float, sub_events: int = 150) -> list[Site]:
        """Return sites with the synthetic records of a trial and noise like that measured."""
        source = make_sub_events(trial.source(self.event, magnitude, sub_events), trial.seed)
        step = self.sites[0].step_s
        start = min(s.start_s for s in self.sites)
        end = max(s.start_s + s.step_s * s.data.shape[1] for s in self.sites)
        high = (
            min(0.3 / step, 1.5 * max((b for _, b in self.direction.bands_hz), default=2.0))
            if self.direction.bands_hz
            else min(0.3 / step, 2.0)
        )
        sampling = Sampling(start, step, int((end - start) / step), high)
        receivers = Receivers(
            *(np.array([getattr(s, n) for s in self.sites]) for n in ("longitude_deg", "latitude_deg"))
        )
        engine = ScatteringEngine(ray_records, self.coda, trial.seed) if self.coda.energy_ratio > 0 else ray_records
        motion = engine(source, receivers, self.layers, sampling)
        out = []
        for k, site in enumerate(self.sites):
            first = round((site.start_s - start) / step)
            count = min(site.data.shape[1], motion.shape[2] - first)
            rng = np.random.default_rng((trial.seed, 7, k))
            data = motion[k, :, first : first + count] + noise_like(site, self.noise_window_s[k], count, rng)
            valid = site.valid[:, :count]
            out.append(replace(site, data=np.where(valid, data, 0.0), valid=valid))
        return out

    def track(self, sites: list[Site], seed: int) -> RuptureFit | None:
        """Track records as the data were; None when no site gives a direction."""
        found, where = [], []
        for site, window in zip(sites, self.noise_window_s, strict=True):
            try:
                found.append(estimate_direction(site, window, self.direction))
                where.append(site)
            except DataError:
                continue
        if not found:
            return None
        return fit_rupture(
            found, [s.longitude_deg for s in where], [s.latitude_deg for s in where], self.event, self.responses, self.fit, seed,
            prior=self.prior,
        )  # fmt: skip


def noise_like(site: Site, window_s: tuple[float, float], samples: int, rng: np.random.Generator) -> Array:
    """Return noise with the amplitude spectra of a stretch of a site's records and random phases, shape (6, samples)."""
    first = max(0, int(np.ceil((window_s[0] - site.start_s) / site.step_s)))
    last = min(site.data.shape[1], int((window_s[1] - site.start_s) / site.step_s))
    stretch = site.data[:, first:last]
    if stretch.shape[1] < 16:
        return np.zeros((6, samples))
    taper = np.hanning(stretch.shape[1])
    spectrum = np.abs(np.fft.rfft(stretch * taper, axis=1)) / np.sqrt(np.sum(taper**2))
    known, wanted = np.fft.rfftfreq(stretch.shape[1]), np.fft.rfftfreq(samples)
    out = np.empty((6, samples))
    for row in range(6):
        amplitude = np.interp(wanted, known, np.sqrt(_smooth(spectrum[row] ** 2)))
        normal = rng.normal(size=wanted.size) + 1j * rng.normal(size=wanted.size)
        out[row] = np.fft.irfft(amplitude * normal * np.sqrt(samples / 2.0), samples)
    return out


def _smooth(power: Array, width: int = 9) -> Array:
    """Return the running mean: a single stretch's periodogram scatters by its own size."""
    padded = np.pad(power, width // 2, mode="edge")
    smoothed: Array = np.convolve(padded, np.full(width, 1.0 / width), mode="valid")
    return smoothed


def outcome(trial: Trial, fit: RuptureFit | None) -> dict[str, Any]:
    """Return truth and answer side by side, plain numbers."""
    row: dict[str, Any] = {
        "true_kind": trial.kind, "true_azimuth_deg": trial.azimuth_deg, "true_speed_km_s": trial.speed_km_s,
        "true_length_km": trial.length_km, "kind": "undetermined", "likeliest": "undetermined",
        "azimuth_deg": None, "speed_km_s": None, "length_km": None,
    }  # fmt: skip
    if fit is None:
        return row
    row |= {"kind": fit.kind, "likeliest": fit.likeliest}
    moving = "unilateral" if fit.likeliest == "stationary" else fit.likeliest
    for name, parameter, scale in (
        ("azimuth_deg", "azimuth_rad", 180 / np.pi), ("speed_km_s", "speed_m_s", 1 / KM), ("length_km", "length_m", 1 / KM),
    ):  # fmt: skip
        best, low, high = (v * scale for v in fit.interval(parameter, moving))
        row[name], row[f"{name}_p05"], row[f"{name}_p95"] = best, low, high
    return row
