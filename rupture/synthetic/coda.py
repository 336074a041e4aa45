"""Scattered coda: late six-component plane waves from all sides, added to the records of any engine."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rupture.conventions import ACCELERATION, KM
from rupture.earth.layers import LayeredModel
from rupture.errors import InputError
from rupture.geodesy import distance_azimuth
from rupture.synthetic.engine import Engine, Receivers, Sampling, SubEvents
from rupture.synthetic.interfaces import free_surface_sv


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
    rotation. P is left out: in the coda S has some nine tenths of the energy (equipartition, Weaver 1982).
    """

    engine: Engine
    settings: CodaSettings
    seed: int

    def __call__(
        self, sources: SubEvents, receivers: Receivers, model: LayeredModel, sampling: Sampling
    ) -> NDArray[np.float64]:
        """Return records with coda, shape (receivers, 6, samples); see `rupture.synthetic.engine.Engine`."""
        longitude, latitude = np.asarray(receivers.longitude_deg, float), np.asarray(receivers.latitude_deg, float)
        total = np.zeros((longitude.size, 6, sampling.samples))
        group = np.floor(sources.time_s / self.settings.group_s).astype(int)
        for number in np.unique(group):
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
            for r in range(longitude.size):
                rng = np.random.default_rng((self.seed, int(number), r))
                total[r] += scatter(direct[r], float(back_azimuth[r]), model, sampling.step_s, self.settings, rng)
        return total


def scatter(
    direct: NDArray[np.float64],
    back_azimuth_rad: float,
    model: LayeredModel,
    step_s: float,
    settings: CodaSettings,
    rng: np.random.Generator,
) -> NDArray[np.float64]:
    """Return the coda that follows six-component records of one site, shape (6, samples).

    Parameters
    ----------
    direct
        Unscattered records, shape (6, samples).
    back_azimuth_rad
        Direction of the source at the site.
    model
        The Earth, for the speeds at the surface.
    step_s
        Sampling interval in s.
    settings, rng
        Amount and shape of the coda; source of random numbers.
    """
    samples = direct.shape[1]
    length = 2 * samples
    omega = 2 * np.pi * np.fft.rfftfreq(length, step_s)
    inputs = np.fft.rfft(direct[ACCELERATION], length, axis=1)
    count = settings.waves
    delay = rng.exponential(settings.decay_s, count)
    forward = rng.random(count) < settings.forward_share
    around = back_azimuth_rad + np.radians(settings.forward_spread_deg) * rng.standard_normal(count)
    azimuth = np.where(forward, around, 2 * np.pi * rng.random(count))
    transfer = plane_s_waves(azimuth, rng.random(count), rng.standard_normal((count, 2, 3)), model)
    # transfer (waves, 6, 3) and delays make one filter from three to six components.
    turn = np.exp(-1j * omega[:, None] * delay[None, :])
    filters = (turn @ transfer.reshape(count, 18)).reshape(omega.size, 6, 3)
    coda = np.fft.irfft(np.einsum("fci,if->cf", filters, inputs), length, axis=1)[:, :samples]
    have = np.sum(coda[ACCELERATION] ** 2)
    want = settings.energy_ratio * np.sum(direct[ACCELERATION] ** 2)
    return coda * np.sqrt(want / have) if have > 0 else coda


def plane_s_waves(
    back_azimuth_rad: NDArray[np.float64],
    share: NDArray[np.float64],
    polarisation: NDArray[np.float64],
    model: LayeredModel,
) -> NDArray[np.complex128]:
    """Return six-component amplitudes of plane S waves at the free surface, shape (waves, 6, inputs).

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
    return np.stack([east, north, up, -p_north * up, p_east * up, -0.5 * (p_east * north - p_north * east)], axis=1)
