"""Scattered coda: late six-component plane waves from all sides, added to the records of any engine."""

from __future__ import annotations

from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass

import numpy as np
from numba import config, njit
from numpy.typing import NDArray
from scipy.fft import next_fast_len

from rupture.conventions import ACCELERATION, KM
from rupture.earth.layers import LayeredModel
from rupture.errors import InputError
from rupture.geodesy import distance_azimuth
from rupture.progress import Report
from rupture.synthetic.engine import Engine, Receivers, Sampling, SubEvents
from rupture.synthetic.interfaces import free_surface_sv

SAME_PLACE_M = 2000.0
"""Receivers nearer than this to each other are one array and share their scattered waves."""


@dataclass(frozen=True)
class CodaSettings:
    """How much scattered energy follows the direct waves, and how.

    Attributes
    ----------
    energy_ratio
        Energy of the coda over that of the unscattered waves, at each site, in translation.
    decay_s
        Decay time tau_c: delays are exponentially distributed.
    forward_share
        Share of the scattered waves that come from about the direction of the source; the rest come from all sides.
    forward_spread_deg
        Standard deviation of those about the direction of the source.
    waves
        Number of scattered waves for each group of sub-events.
    group_s
        Sub-events within this many seconds of source time share their scatterers.
    """

    energy_ratio: float = 0.5
    decay_s: float = 8.0
    forward_share: float = 0.5
    forward_spread_deg: float = 25.0
    waves: int = 80
    group_s: float = 4.0

    def __post_init__(self) -> None:
        if self.energy_ratio < 0:
            raise InputError(f"coda energy_ratio {self.energy_ratio:g} cannot be negative")
        if not (self.decay_s > 0 and self.group_s > 0):
            raise InputError("coda decay_s and group_s must be positive")
        if not 0 <= self.forward_share <= 1:
            raise InputError(f"coda forward_share {self.forward_share:g} must lie between 0 and 1")
        if self.waves < 10:
            raise InputError(f"{self.waves} scattered waves cannot make a coda; give at least 10")


@dataclass(frozen=True)
class ScatteringEngine:
    """An engine whose records have a coda; itself an `Engine`.

    Each group of sub-events sends, besides the waves of the inner engine, scattered S waves: copies of its ground motion, delayed,
    turned to another azimuth, apparent speed and polarisation, each an exact plane SV or SH wave at the free surface with its
    rotation. P is left out: in the coda S has some nine tenths of the energy (equipartition, Weaver 1982). `report` is told how many
    groups are done.
    """

    engine: Engine
    settings: CodaSettings
    seed: int
    report: Report | None = None

    def __call__(
        self, sources: SubEvents, receivers: Receivers, model: LayeredModel, sampling: Sampling
    ) -> NDArray[np.float64]:
        """Return records with coda, shape (receivers, 6, samples); see `rupture.synthetic.engine.Engine`."""
        longitude, latitude = np.asarray(receivers.longitude_deg, float), np.asarray(receivers.latitude_deg, float)
        places = group_places(longitude, latitude)
        total = np.zeros((longitude.size, 6, sampling.samples))
        group = np.floor(sources.time_s / self.settings.group_s).astype(int)
        numbers = np.unique(group)
        for done, number in enumerate(numbers):
            if self.report is not None:
                self.report(done, numbers.size)
            member = group == number
            part = SubEvents(*(getattr(sources, name)[member] for name in SubEvents.__dataclass_fields__))
            direct = self.engine(part, receivers, model, sampling)
            total += direct
            if self.settings.energy_ratio == 0:
                continue
            heaviest = int(np.argmax(part.moment_nm))
            _, _, back_azimuth = distance_azimuth(
                part.longitude_deg[heaviest], part.latitude_deg[heaviest], longitude, latitude
            )
            total += self._coda_of_group(int(number), direct, back_azimuth, places, model, sampling)
        return total

    def _coda_of_group(
        self,
        number: int,
        direct: NDArray[np.float64],
        back_azimuth_rad: NDArray[np.float64],
        places: list[tuple[NDArray[np.int64], NDArray[np.float64]]],
        model: LayeredModel,
        sampling: Sampling,
    ) -> NDArray[np.float64]:
        """Return the coda of one group of sub-events; places are shared among threads, each owns its rows."""
        out = np.zeros_like(direct)

        def one(place: tuple[NDArray[np.int64], NDArray[np.float64]]) -> None:
            # Sensors of one array see the same scattered waves, each at its own time.
            members, offset_m = place
            first = int(members[0])
            rng = np.random.default_rng((self.seed, number, first))
            back_azimuth = float(back_azimuth_rad[first])
            out[members] = scatter(direct[first], back_azimuth, offset_m, model, sampling, self.settings, rng)

        with ThreadPoolExecutor(config.NUMBA_NUM_THREADS) as pool:
            list(pool.map(one, places))
        return out


def scatter(
    direct: NDArray[np.float64],
    back_azimuth_rad: float,
    offset_m: NDArray[np.float64],
    model: LayeredModel,
    sampling: Sampling,
    settings: CodaSettings,
    rng: np.random.Generator,
) -> NDArray[np.float64]:
    """Return the coda that follows six-component records of one place, shape (sensors, 6, samples).

    Parameters
    ----------
    direct
        Unscattered records, shape (6, samples).
    back_azimuth_rad
        Direction of the source at the place.
    offset_m
        East and north of each sensor from where `direct` was recorded, shape (sensors, 2).
    model
        The Earth, for the speeds at the surface.
    sampling
        Time axis and band of the records.
    settings, rng
        Amount and shape of the coda; source of random numbers.
    """
    samples = direct.shape[1]
    # Nothing is scattered before the first wave has come.
    first = int(np.argmax(direct.any(axis=0)))
    length = next_fast_len(2 * (samples - first), real=True)
    step_hz = 1.0 / (length * sampling.step_s)
    band = min(int(sampling.high_hz / step_hz) + 1, length // 2)
    inputs = np.fft.rfft(direct[ACCELERATION, first:], length, axis=1)[:, :band]
    count = settings.waves
    delay = rng.exponential(settings.decay_s, count)
    forward = rng.random(count) < settings.forward_share
    around = back_azimuth_rad + np.radians(settings.forward_spread_deg) * rng.standard_normal(count)
    azimuth = np.where(forward, around, 2 * np.pi * rng.random(count))
    slowness, transfer = plane_s_waves(azimuth, rng.random(count), rng.standard_normal((count, 2, 3)), model)
    late = delay + offset_m @ slowness
    spectra = _filter_waves(late, _parts(transfer, -1), _parts(inputs, 1), step_hz)
    full = np.zeros((len(late), 6, length // 2 + 1), complex)
    full[..., :band] = spectra[..., 0, :] + 1j * spectra[..., 1, :]
    coda = np.zeros((len(late), *direct.shape))
    coda[..., first:] = np.fft.irfft(full, length, axis=-1)[..., : samples - first]
    have = np.sum(coda[0, ACCELERATION] ** 2)
    want = settings.energy_ratio * np.sum(direct[ACCELERATION] ** 2)
    return coda * np.sqrt(want / have) if have > 0 else coda


def _parts(values: NDArray[np.complex128], axis: int) -> NDArray[np.float64]:
    return np.ascontiguousarray(np.stack([values.real, values.imag], axis=axis))


@njit(cache=True, nogil=True, error_model="numpy")
def _filter_waves(
    late_s: NDArray[np.float64],
    transfer: NDArray[np.float64],
    inputs: NDArray[np.float64],
    step_hz: float,
) -> NDArray[np.float64]:
    """Add delayed waves made of three inputs, real and imaginary parts apart on the last axis but one.

    Shapes: late (sensors, waves), transfer (waves, 6, 3, 2), inputs (3, 2, frequencies), result (sensors, 6, 2, frequencies).
    """
    sensors, waves = late_s.shape
    band = inputs.shape[2]
    out = np.zeros((sensors, 6, 2, band))
    line_re, line_im = np.empty(band), np.empty(band)
    for sensor in range(sensors):
        filters = np.zeros((6, 3, 2, band))
        for wave in range(waves):
            angle = -2 * np.pi * step_hz * late_s[sensor, wave]
            turn_re, turn_im = np.cos(angle), np.sin(angle)
            now_re, now_im = 1.0, 0.0
            for k in range(band):
                line_re[k], line_im[k] = now_re, now_im
                now_re, now_im = now_re * turn_re - now_im * turn_im, now_re * turn_im + now_im * turn_re
            for c in range(6):
                for i in range(3):
                    w_re, w_im = transfer[wave, c, i, 0], transfer[wave, c, i, 1]
                    for k in range(band):
                        filters[c, i, 0, k] += w_re * line_re[k] - w_im * line_im[k]
                        filters[c, i, 1, k] += w_re * line_im[k] + w_im * line_re[k]
        for c in range(6):
            for i in range(3):
                for k in range(band):
                    out[sensor, c, 0, k] += (
                        filters[c, i, 0, k] * inputs[i, 0, k] - filters[c, i, 1, k] * inputs[i, 1, k]
                    )
                    out[sensor, c, 1, k] += (
                        filters[c, i, 0, k] * inputs[i, 1, k] + filters[c, i, 1, k] * inputs[i, 0, k]
                    )
    return out


def group_places(
    longitude_deg: NDArray[np.float64], latitude_deg: NDArray[np.float64]
) -> list[tuple[NDArray[np.int64], NDArray[np.float64]]]:
    """Return receivers that stand together: their numbers and, in m, east and north from the first of them."""
    free = np.ones(longitude_deg.size, bool)
    places = []
    for r in range(longitude_deg.size):
        if not free[r]:
            continue
        distance, azimuth, _ = distance_azimuth(longitude_deg[r], latitude_deg[r], longitude_deg, latitude_deg)
        members = np.flatnonzero(free & (distance < SAME_PLACE_M))
        free[members] = False
        members = np.concatenate([[r], members[members != r]])
        offset = distance[members, None] * np.stack([np.sin(azimuth[members]), np.cos(azimuth[members])], axis=1)
        places.append((members, offset))
    return places


def plane_s_waves(
    back_azimuth_rad: NDArray[np.float64],
    share: NDArray[np.float64],
    polarisation: NDArray[np.float64],
    model: LayeredModel,
) -> tuple[NDArray[np.float64], NDArray[np.complex128]]:
    """Return slowness vectors and six-component amplitudes of plane S waves at the free surface.

    Parameters
    ----------
    back_azimuth_rad
        Where the waves come from, shape (waves,).
    share
        Squared sine of the angle of incidence, uniform in [0, 1) for waves from everywhere below, shape (waves,).
    polarisation
        SV and SH amplitude for each input, shape (waves, 2, inputs).
    model
        The Earth; its first layer counts.

    Returns
    -------
    slowness
        East and north in s/m, shape (2, waves).
    amplitude
        Complex, for exp(+i omega t), shape (waves, 6, inputs).
    """
    vp, vs = float(model.vp_km_s[0]) * KM, float(model.vs_km_s[0]) * KM
    slowness = np.sqrt(share) / vs
    response = np.array([free_surface_sv(p, vp, vs) for p in slowness])
    sv, sh = polarisation[:, 0], polarisation[:, 1]
    # Conjugated: the coefficients are for exp(-i omega t), the transforms here for exp(+i omega t).
    radial, up = np.conj(response[:, :1]) * sv, np.conj(response[:, 1:]) * sv
    transverse = 2.0 * sh
    sine, cosine = np.sin(back_azimuth_rad + np.pi)[:, None], np.cos(back_azimuth_rad + np.pi)[:, None]
    east, north = radial * sine + transverse * cosine, radial * cosine - transverse * sine
    p_east, p_north = slowness[:, None] * sine, slowness[:, None] * cosine
    six = np.stack([east, north, up, -p_north * up, p_east * up, -0.5 * (p_east * north - p_north * east)], axis=1)
    return np.stack([p_east[:, 0], p_north[:, 0]]), np.ascontiguousarray(six)
