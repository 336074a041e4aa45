"""Ray engine: direct, reflected and head waves of P and S in layers, six components, milliseconds per record.

An independent forward model: it solves its own rays and shares nothing with the estimators but the free-surface
physics. Distances are geodesic, the Earth between source and receiver is flat (fine to some 400 km). Left out: near
field, surface waves, conversions between P and S on the way, further multiples; the wavefield engine has them all.
"""

from __future__ import annotations

from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass

import numpy as np
from numba import config
from numpy.typing import NDArray

from rupture.conventions import KM
from rupture.earth.layers import LayeredModel
from rupture.errors import InputError
from rupture.geodesy import distance_azimuth
from rupture.synthetic.engine import Receivers, Sampling, SubEvents
from rupture.synthetic.moment_rate import moment_rate_spectrum, moment_tensor
from rupture.synthetic.ray_kernels import sum_spectra, trace_rays

REFERENCE_HZ = 1.0
"""Frequency at which the model's speeds hold; away from it they disperse as Q demands."""

PASS_SHARE = 0.8
"""Up to this share of the upper frequency the pass band is flat; from there it falls smoothly to zero."""

MARGIN_S = 5.0
"""Room in s before the first and after the last arrival, for the tails of phase-shifted waves."""

_DECAY_LEVELS = 200
_NEAREST_M = 1.0


@dataclass(frozen=True)
class Rays:
    """All rays of all pairs; arrays of shape (receivers, sources, rays).

    Attributes
    ----------
    name
        Names of the rays in order: P, S, then for each mirror P and S reflected, along it (head wave), reflected by surface and mirror.
    time_s, loss_s, slowness_s_m
        Travel time in s, t* in s, horizontal slowness in s/m; zero where the ray does not exist.
    motion
        Shape (receivers, sources, rays, 3), complex, convention exp(+i omega t): surface displacement in m toward R (away
        from the source), toward growing azimuth and up for a unit moment rate (1 N m/s); head waves per rad/s of frequency.
    head
        Shape (rays,): which rays are head waves.
    distance_m, azimuth_rad, back_azimuth_rad
        Shape (receivers, sources).
    """

    name: tuple[str, ...]
    time_s: NDArray[np.float64]
    loss_s: NDArray[np.float64]
    slowness_s_m: NDArray[np.float64]
    motion: NDArray[np.complex128]
    head: NDArray[np.bool_]
    distance_m: NDArray[np.float64]
    azimuth_rad: NDArray[np.float64]
    back_azimuth_rad: NDArray[np.float64]

    @property
    def exists(self) -> NDArray[np.bool_]:
        """Which rays exist, shape (receivers, sources, rays)."""
        return self.time_s > 0


@dataclass(frozen=True)
class RayEngine:
    """The ray engine with its choices; call it as any `rupture.synthetic.engine.Engine`.

    Attributes
    ----------
    reflections
        Whether waves reflected from below (PmP, SmS and the like, also by way of the surface: pPmP, sSmS) are added.
    head_waves
        Whether waves refracted along those interfaces (Pn, Sn and the like) are added.
    least_contrast
        Interfaces at which the S speed grows by less than this share are not mirrors.
    least_amplitude
        Direct and reflected rays weaker than this share of the strongest of their pair are left out.
    """

    reflections: bool = True
    head_waves: bool = True
    least_contrast: float = 0.05
    least_amplitude: float = 0.005

    def trace(self, sources: SubEvents, receivers: Receivers, model: LayeredModel) -> Rays:
        """Trace the rays of every pair of sub-event and receiver.

        Raises
        ------
        InputError
            When a sub-event is not below the surface or lies on an interface, or a receiver stands on an epicentre.
        """
        layer = _source_layers(sources.depth_km, model)
        distance, azimuth, back_azimuth = distance_azimuth(
            sources.longitude_deg[None, :],
            sources.latitude_deg[None, :],
            np.asarray(receivers.longitude_deg, float)[:, None],
            np.asarray(receivers.latitude_deg, float)[:, None],
        )
        if (distance < _NEAREST_M).any():
            r, s = np.argwhere(distance < _NEAREST_M)[0]
            raise InputError(
                f"receiver {r + 1} is at zero distance from sub-event {s + 1} "
                f"({sources.longitude_deg[s]:.4f}, {sources.latitude_deg[s]:.4f}); move it off the epicentre"
            )
        mirrors = self._mirrors(model)
        time, loss, slowness, motion = trace_rays(
            model.top_km * KM, model.vp_km_s * KM, model.vs_km_s * KM, model.density_kg_m3, model.qp, model.qs,
            mirrors, layer, np.asarray(sources.depth_km, float) * KM,
            moment_tensor(sources.strike_rad, sources.dip_rad, sources.rake_rad),
            np.ascontiguousarray(distance), np.ascontiguousarray(azimuth), self.head_waves,
        )  # fmt: skip
        names = ["P", "S"]
        for mirror in mirrors:
            depth = f"{model.top_km[mirror + 1]:g} km"
            names += [
                f"{wave} {way} {depth}"
                for way in ("reflected at", "along", "reflected at surface and")
                for wave in "PS"
            ]
        head = np.array([" along " in name for name in names])
        return Rays(tuple(names), time, loss, slowness, motion, head, distance, azimuth, back_azimuth)

    def _mirrors(self, model: LayeredModel) -> NDArray[np.int64]:
        if not self.reflections:
            return np.empty(0, np.int64)
        growth = np.diff(model.vs_km_s) / model.vs_km_s[:-1]
        return np.flatnonzero(growth >= self.least_contrast).astype(np.int64)

    def __call__(
        self, sources: SubEvents, receivers: Receivers, model: LayeredModel, sampling: Sampling
    ) -> NDArray[np.float64]:
        """Return acceleration (m/s^2) and rotation rate (rad/s), shape (receivers, 6, samples).

        Parameters
        ----------
        sources, receivers, model, sampling
            See `rupture.synthetic.engine`.

        Returns
        -------
        ndarray
            Rows in the order of `rupture.conventions.COMPONENTS`, axes East, North, Up.

        Raises
        ------
        InputError
            As `trace`, and when the band reaches half the sampling rate.

        Notes
        -----
        Rotation rate follows from acceleration and each ray's own slowness vector by the free-surface relations
        (Cochard et al. 2006): exact for every plane wave, phase-shifted ones included.
        """
        check_sampling(sampling)
        rays = self.trace(sources, receivers, model)
        arrival = rays.time_s + sources.time_s[None, :, None]
        weight = six_components(rays)
        size = np.abs(weight[..., :3]).max(axis=-1) * ~rays.head
        heard = (
            rays.exists
            & (arrival < sampling.start_s + sampling.samples * sampling.step_s)
            & (rays.head | (size >= self.least_amplitude * size.max(axis=-1, keepdims=True)))
        )
        out = np.zeros((rays.distance_m.shape[0], 6, sampling.samples))
        if not heard.any():
            return out
        # A period of its own that holds every arrival, so that nothing wraps around and quiet times cost nothing.
        margin = MARGIN_S + 8.0 / sampling.high_hz
        early = int(np.floor((arrival[heard].min() - margin - sampling.start_s) / sampling.step_s))
        last = arrival[heard].max() + float(np.max(sources.rise_time_s)) + margin - sampling.start_s
        period = _fast_length(int(np.ceil(last / sampling.step_s)) - early)
        step_hz = 1.0 / (period * sampling.step_s)
        frequency = np.asarray(step_hz * np.arange(1, int(sampling.high_hz / step_hz) + 1), np.float64)
        source = (
            moment_rate_spectrum(frequency, sources.moment_nm, sources.rise_time_s)
            * pass_band(frequency, sampling.high_hz)
            * (-((2 * np.pi * frequency) ** 2))
        )
        loss_step = max(float(rays.loss_s.max()), 1e-6) / (_DECAY_LEVELS - 2)
        decay = attenuation(frequency, np.asarray(loss_step * np.arange(_DECAY_LEVELS), np.float64))
        after = arrival - sampling.start_s - early * sampling.step_s
        spectra = _sum_rays(after, rays, weight * heard[..., None], source, decay, loss_step, step_hz)
        full = np.zeros((*spectra.shape[:2], period // 2 + 1), np.complex128)
        full[..., 1 : frequency.size + 1] = spectra
        series = np.fft.irfft(full, period, axis=-1) / sampling.step_s
        first, stop = max(early, 0), min(early + period, sampling.samples)
        out[..., first:stop] = series[..., first - early : stop - early]
        return out


ray_records = RayEngine()
"""The ray engine with its defaults: direct waves, reflections from below and head waves."""


def check_sampling(sampling: Sampling) -> None:
    """Raise InputError unless the band lies below half the sampling rate and the axis has samples."""
    if not sampling.step_s > 0 or sampling.samples < 2:
        raise InputError("the time axis needs a positive step and at least 2 samples")
    nyquist = 0.5 / sampling.step_s
    if not 0 < sampling.high_hz < nyquist:
        raise InputError(
            f"the upper frequency, {sampling.high_hz:g} Hz, must lie between 0 and half the sampling rate, {nyquist:g} Hz; "
            "lower it or sample faster"
        )


def six_components(rays: Rays) -> NDArray[np.complex128]:
    """Return six-component amplitudes of rays, shape (receivers, sources, rays, 6): motion turned to East, North, Up and rotation."""
    onward = rays.back_azimuth_rad[..., None] + np.pi
    sine, cosine = np.sin(onward), np.cos(onward)
    radial, transverse, up = (rays.motion[..., k] for k in range(3))
    east, north = radial * sine + transverse * cosine, radial * cosine - transverse * sine
    p_east, p_north = rays.slowness_s_m * sine, rays.slowness_s_m * cosine
    return np.stack([east, north, up, -p_north * up, p_east * up, -0.5 * (p_east * north - p_north * east)], axis=-1)


def attenuation(frequency_hz: NDArray[np.float64], loss_s: NDArray[np.float64]) -> NDArray[np.complex128]:
    """Return exp(-pi f t*) with the dispersion that causality asks for, shape (losses, frequencies).

    Constant Q over the band, phase speed growing as 1 + ln(f) / (pi Q) from 1 Hz (Aki & Richards 2002, eq. 5.94).
    """
    f = frequency_hz[None, :]
    return np.exp(loss_s[:, None] * (-np.pi * f + 2j * f * np.log(f / REFERENCE_HZ)))


def pass_band(frequency_hz: NDArray[np.float64], high_hz: float) -> NDArray[np.float64]:
    """Return 1 up to 0.8 high_hz, falling as a cosine to 0 at high_hz."""
    share = np.clip((frequency_hz / high_hz - PASS_SHARE) / (1 - PASS_SHARE), 0.0, 1.0)
    return 0.5 * (1 + np.cos(np.pi * share))


def _sum_rays(
    after_s: NDArray[np.float64],
    rays: Rays,
    weight: NDArray[np.complex128],
    source: NDArray[np.complex128],
    decay: NDArray[np.complex128],
    loss_step_s: float,
    step_hz: float,
) -> NDArray[np.complex128]:
    """Add the spectra of all rays, receivers shared among threads; shape (receivers, 6, frequencies)."""
    parts = np.ascontiguousarray(np.stack([weight.real, weight.imag], axis=-1))
    sources, decays = np.stack([source.real, source.imag]), np.stack([decay.real, decay.imag])
    out = np.zeros((after_s.shape[0], 2, 6, source.shape[1]))

    def one(r: int) -> None:
        sum_spectra(after_s[r], rays.loss_s[r], parts[r], rays.head, sources, decays, loss_step_s, step_hz, out[r])

    with ThreadPoolExecutor(config.NUMBA_NUM_THREADS) as pool:
        list(pool.map(one, range(after_s.shape[0])))
    return out[:, 0] + 1j * out[:, 1]


def _source_layers(depth_km: NDArray[np.float64], model: LayeredModel) -> NDArray[np.int64]:
    depth = np.asarray(depth_km, float)
    if not (depth > 0).all():
        worst = int(np.argmin(depth))
        raise InputError(
            f"sub-event {worst + 1} lies at {depth[worst]:g} km depth, not below the surface; give a depth above 0 km"
        )
    gap = np.abs(depth[:, None] - model.top_km[None, :])
    if (gap < 1e-6).any():
        s, layer = np.argwhere(gap < 1e-6)[0]
        raise InputError(
            f"sub-event {s + 1} lies on the interface at {model.top_km[layer]:g} km of Earth model {model.name}; "
            "move it by some metres"
        )
    return (np.searchsorted(model.top_km, depth, side="right") - 1).astype(np.int64)


def _fast_length(samples: int) -> int:
    from scipy.fft import next_fast_len

    length = int(next_fast_len(samples, real=True))
    return length + length % 2
