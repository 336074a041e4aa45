"""Frequencies off the real axis, wavenumbers of the discrete sum, and complex speeds: what the kernels run over."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.fft import irfft, next_fast_len
from scipy.special import erfc

from rupture.conventions import KM
from rupture.earth.layers import LayeredModel
from rupture.errors import InputError

REFERENCE_HZ = 1.0
"""Frequency at which a model's speeds hold; away from it they disperse as Q demands."""

WRAP_DECAY = float(np.log(1e3))
"""Whatever arrives after the period comes back at its start smaller by exp(-WRAP_DECAY)."""

GUARD_CYCLES = 30.0
"""The period exceeds the wanted time axis by this many periods of the upper frequency: the pass band's forerunner of
a wave at time zero comes round to the end of the period, where undoing the damping magnifies it."""

PASS_SHARE = 0.8
"""Up to this share of the upper frequency the pass band is flat; from there it falls smoothly to zero."""

TAIL = 13.0
"""Wavenumbers beyond exp(-TAIL) of evanescent decay between source and surface are left out."""

END_TERMS = 5
"""How many wavenumbers next to zero carry end-corrected weights."""


@dataclass(frozen=True)
class FrequencyPlan:
    """A time axis of `samples` steps from the origin time and the complex frequencies that resolve it.

    Frequencies n / period up to `high_hz`, moved off the real axis by a damping that keeps late waves from
    coming back at the start of the period (Bouchon 1981): spectra are those of s(t) exp(-damping t).

    Attributes
    ----------
    step_s, samples
        Time axis, the first sample at the origin time.
    high_hz
        Nothing above this frequency; must lie below half the sampling rate.

    Raises
    ------
    InputError
        When the band reaches the Nyquist frequency or no frequency fits.
    """

    step_s: float
    samples: int
    high_hz: float

    def __post_init__(self) -> None:
        if not self.step_s > 0 or self.samples < 8:
            raise InputError("The time axis needs a positive step and at least 8 samples")
        nyquist = 0.5 / self.step_s
        if not 0 < self.high_hz < nyquist:
            raise InputError(
                f"The upper frequency, {self.high_hz:g} Hz, must lie between 0 and half the sampling rate, {nyquist:g} Hz; "
                "lower it or sample faster"
            )
        if self.high_hz * self.step_s * self.samples < 4:
            raise InputError(
                f"A window of {self.step_s * self.samples:g} s is too short for waves up to {self.high_hz:g} Hz; "
                f"make it at least {4 / self.high_hz:g} s"
            )

    @property
    def cycle(self) -> int:
        """Samples of the whole period: the time axis and a guard."""
        return int(next_fast_len(self.samples + int(np.ceil(GUARD_CYCLES / (self.high_hz * self.step_s))), real=True))

    @property
    def period_s(self) -> float:
        """Length of the period in s."""
        return self.step_s * self.cycle

    @property
    def damping(self) -> float:
        """Imaginary part of the angular frequency, negated, in 1/s."""
        return WRAP_DECAY / self.period_s

    @property
    def frequency_hz(self) -> NDArray[np.float64]:
        """Real frequencies from 0 to high_hz, shape (frequencies,)."""
        return np.arange(int(self.high_hz * self.period_s + 1e-9) + 1) / self.period_s

    @property
    def omega(self) -> NDArray[np.complex128]:
        """Complex angular frequencies in rad/s, shape (frequencies,)."""
        return np.asarray(2 * np.pi * self.frequency_hz - 1j * self.damping, np.complex128)

    @property
    def window(self) -> NDArray[np.complex128]:
        """Pass band at the complex frequencies: 1 up to 0.8 high_hz, then an error-function fall to 0 at high_hz.

        Evaluated off the real axis, so that with the damping undone it is the same zero-phase filter for every period;
        shape (frequencies,).
        """
        share = (self.omega / (2 * np.pi * self.high_hz) - PASS_SHARE) / (1 - PASS_SHARE)
        return np.asarray(0.5 * erfc(6 * share - 3), np.complex128)

    def series(self, spectra: NDArray[np.complex128]) -> NDArray[np.float64]:
        """Turn spectra (..., frequencies) into band-limited time series (..., samples)."""
        damped = irfft(spectra * self.window, self.cycle, axis=-1)[..., : self.samples] / self.step_s
        damped *= np.exp(self.damping * self.step_s * np.arange(self.samples))
        return damped


@dataclass(frozen=True)
class Medium:
    """A layered model in SI, cut at the source depths, with complex speeds at each frequency.

    Attributes
    ----------
    thickness_m
        Shape (layers - 1,).
    density
        kg/m^3, shape (layers,).
    alpha2, beta2
        Squared complex P and S speed in m^2/s^2, shape (frequencies, layers).
    speed_s, speed_p
        Elastic speeds in m/s, shape (layers,).
    emit
        Index of the source depth at the base of each layer or -1, shape (layers,).
    layer_above
        Layer whose base is at each source depth, shape (depths,).
    """

    thickness_m: NDArray[np.float64]
    density: NDArray[np.float64]
    alpha2: NDArray[np.complex128]
    beta2: NDArray[np.complex128]
    speed_s: NDArray[np.float64]
    speed_p: NDArray[np.float64]
    emit: NDArray[np.int64]
    layer_above: NDArray[np.int64]


def constant_q_speed2(
    speed: NDArray[np.float64], quality: NDArray[np.float64], omega: NDArray[np.complex128]
) -> NDArray[np.complex128]:
    """Return the squared complex speed of a constant-Q solid, shape (frequencies, layers).

    Kjartansson (1979): the modulus goes as (i omega)^(2 gamma) with gamma = arctan(1/Q) / pi, causal and with the
    same Q at every frequency; the phase speed equals `speed` at the reference frequency.
    """
    gamma = np.arctan(1.0 / quality) / np.pi
    power = np.exp(2 * gamma * np.log(1j * omega / (2 * np.pi * REFERENCE_HZ))[:, None])
    return np.asarray((speed * np.cos(0.5 * np.pi * gamma)) ** 2 * power, np.complex128)


def medium(model: LayeredModel, depth_km: NDArray[np.float64], omega: NDArray[np.complex128]) -> Medium:
    """Cut a model at ascending source depths and give its layers complex speeds.

    Raises
    ------
    InputError
        When a source lies at or above the surface or on an interface.
    """
    for depth in depth_km:
        if not depth > 0:
            raise InputError(f"A source at {depth:g} km depth is not below the surface; give a depth above 0 km")
        if np.any(np.abs(model.top_km - depth) < 1e-6):
            raise InputError(
                f"A source at {depth:g} km depth lies on an interface of Earth model {model.name}, where strain is not defined; "
                "move it by some metres"
            )
    top = np.union1d(model.top_km, depth_km)
    layer = np.searchsorted(model.top_km, top, side="right") - 1
    above = np.searchsorted(top, depth_km) - 1
    emit = np.full(top.size, -1)
    emit[above] = np.arange(depth_km.size)
    vp, vs = model.vp_km_s * KM, model.vs_km_s * KM
    return Medium(
        thickness_m=np.diff(top) * KM,
        density=model.density_kg_m3[layer],
        alpha2=np.ascontiguousarray(constant_q_speed2(vp, model.qp, omega)[:, layer]),
        beta2=np.ascontiguousarray(constant_q_speed2(vs, model.qs, omega)[:, layer]),
        speed_s=vs[layer],
        speed_p=vp[layer],
        emit=emit,
        layer_above=above,
    )


def wavenumber_step(model: LayeredModel, plan: FrequencyPlan, largest_distance_m: float) -> float:
    """Return the step of the wavenumber sum in rad/m.

    The sum stands for the wanted source and rings of sources around it (Bouchon 1981); the first ring is put so far
    that its fastest wave arrives after the period.
    """
    reach = model.vp_km_s.max() * KM * plan.period_s * 1.05 + 2 * largest_distance_m
    return float(2 * np.pi / reach)


def wavenumber_counts(layers: Medium, omega: NDArray[np.complex128], step: float) -> NDArray[np.int64]:
    """Return how many wavenumbers matter, shape (frequencies, depths).

    The largest is that at which S waves are evanescent enough on the way from the source to the surface,
    sum of sqrt(k^2 - (omega/beta)^2) thickness = TAIL: it follows slow layers near the surface only as far as a
    deep source can feed them.
    """
    counts = np.empty((omega.size, layers.layer_above.size), np.int64)
    for d, above in enumerate(layers.layer_above):
        thickness = layers.thickness_m[: above + 1]
        k_beta = np.abs(omega.real)[:, None] / layers.speed_s[: above + 1]
        low = np.zeros(omega.size)
        high = k_beta.max(axis=1) + TAIL / thickness.sum()
        for _ in range(30):
            middle = 0.5 * (low + high)
            decay = np.sqrt(np.maximum(middle[:, None] ** 2 - k_beta**2, 0.0)) @ thickness
            low, high = np.where(decay < TAIL, middle, low), np.where(decay < TAIL, high, middle)
        counts[:, d] = np.ceil(high / step).astype(np.int64) + 1
    return np.minimum.accumulate(counts, axis=1)


def wavenumber_weights(step: float, count: int) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return wavenumbers n step, n = 1, 2, ... and weights k dk / 2 pi, both of shape (count,).

    All integrands are odd functions of k, so a plain sum has the Euler-Maclaurin end error of an odd function at k = 0. Weights of
    the first wavenumbers take its leading terms away: sum c_n n^(2j+1) = B_(2j+2) / (2j+2) for j = 0, 1, ...
    """
    n = np.arange(1, count + 1, dtype=float)
    order = np.arange(END_TERMS)
    bernoulli = np.array([1 / 6, -1 / 30, 1 / 42, -1 / 30, 5 / 66])
    nodes = np.arange(1, END_TERMS + 1)
    correction = np.linalg.solve(nodes[None, :] ** (2.0 * order[:, None] + 1), bernoulli / (2.0 * order + 2))
    weight = np.ones(count)
    weight[:END_TERMS] += correction
    k = n * step
    return k, weight * k * step / (2 * np.pi)
