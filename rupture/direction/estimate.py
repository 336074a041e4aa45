"""The slowness posterior of one site through time."""

from __future__ import annotations

import itertools
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

from rupture.conventions import ACC_E, ACC_N, ACC_Z, ROT_E, ROT_N, ROT_Z, slowness_vector
from rupture.direction.covariance import (
    REACH,
    band_signal,
    entry,
    independent_samples,
    mean_covariance,
    sliding_covariances,
)
from rupture.direction.likelihood import horizontal_forms, vertical_form
from rupture.direction.posterior import (
    as_before,
    fill_posterior,
    plane_wave_equation,
    polarisation_equation,
    turn_weights,
)
from rupture.errors import DataError, InputError
from rupture.site import Site

Array = NDArray[np.float64]


@dataclass(frozen=True)
class DirectionSettings:
    """How directions are estimated.

    Attributes
    ----------
    bands_hz
        Frequency bands in Hz; by default octave-and-a-half bands from 0.2 to 1.2 Hz within what the record holds.
    window_s
        Window length in s for all bands; by default one and a half periods of a band's lowest frequency, 4 s at least.
    hop_s
        Time between windows in s.
    back_azimuth_step_deg
        Step of the trial back-azimuths in degrees.
    slowest_km_s, fastest_km_s
        Range of trial apparent velocities in km/s.
    slowness_count
        How many trial slownesses, equally spaced in their logarithm.
    model_error_share
        Error amplitude of the plane-wave relations as a share of the rotation's amplitude; twice that where the
        vertical rotation is alone.
    polarisation_ratio
        Horizontal motion along the ray is expected to stay below this ratio to the vertical motion; used only
        where there is no horizontal rotation.
    stray_share
        Share of windows, coherent as they may look, whose wave comes from elsewhere than from the source.
    """

    bands_hz: tuple[tuple[float, float], ...] | None = None
    window_s: float | None = None
    hop_s: float = 0.5
    back_azimuth_step_deg: float = 3.0
    slowest_km_s: float = 0.4
    fastest_km_s: float = 20.0
    slowness_count: int = 28
    model_error_share: float = 0.05
    polarisation_ratio: float = 2.0
    stray_share: float = 0.05

    def __post_init__(self) -> None:
        for low, high in self.bands_hz or ():
            if not 0 < low < high:
                raise InputError(f"band {low} to {high} Hz: the lower corner must be above 0 and below the upper one")
        if not 0 < self.slowest_km_s < self.fastest_km_s:
            raise InputError("slowest_km_s must be above 0 and below fastest_km_s")
        if self.slowness_count < 4 or not 0 < self.back_azimuth_step_deg <= 30:
            raise InputError("slowness_count must be at least 4 and back_azimuth_step_deg at most 30")
        if not self.hop_s > 0 or (self.window_s is not None and not self.window_s >= self.hop_s):
            raise InputError("hop_s must be positive and window_s not shorter than hop_s")
        if not 0 < self.stray_share < 1 or not 0 <= self.model_error_share < 1 or not self.polarisation_ratio > 0:
            raise InputError("stray_share and model_error_share must lie between 0 and 1, polarisation_ratio above 0")


@dataclass(frozen=True)
class SiteDirection:
    """Posterior of the slowness vector of one site.

    Attributes
    ----------
    code
        Site.
    time_s
        Window centres, multiples of the hop after the origin time, shape (T,).
    band_hz, window_s
        Shapes (B, 2) and (B,).
    back_azimuth_rad
        Uniform over [0, 2 pi), first 0, shape (A,).
    slowness_s_m
        Uniform in the logarithm, increasing, shape (P,).
    log_ratio
        Log of posterior over prior, all bands, shape (A, P, T), float32: 0 everywhere where there is no coherent
        wave or the window is masked; bounded below, so that no single window can rule a place out.
    band_log_ratio
        The same band by band, shape (B, A, P, T).
    coherent
        Probability of a coherent wave, shape (B, T); NaN where masked.
    power
        Mean square ground acceleration above the noise in the bands of the shortest windows, (m/s^2)^2, shape (T,).
    weight
        Share of one independent observation that a window stands for, shape (T,).
    """

    code: str
    time_s: Array
    band_hz: Array
    window_s: Array
    back_azimuth_rad: Array
    slowness_s_m: Array
    log_ratio: NDArray[np.float32]
    band_log_ratio: NDArray[np.float32]
    coherent: Array
    power: Array
    weight: Array


def default_bands(site: Site) -> tuple[tuple[float, float], ...]:
    """Return bands with corners 0.2, 0.5, 1.2 Hz as far as the record holds them (at most to a third of its rate).

    Raises
    ------
    DataError
        When the record holds no band of at least half an octave between 0.05 and 5 Hz.
    """
    low, high = max(site.band_hz[0], 0.05), min(site.band_hz[1], 1.0 / (3.0 * site.step_s), 5.0)
    corners = (0.2, 0.5, 1.2)
    bands = []
    for a, b in itertools.pairwise(corners):
        inside = max(a, low), min(b, high)
        if inside[1] >= 1.4 * inside[0]:
            bands.append(inside)
    if not bands and high >= 1.4 * low:
        bands.append((max(low, high / 2.5), high))
    if not bands:
        raise DataError(f"site {site.code}: usable from {low:g} to {high:g} Hz only, too narrow for a direction")
    return tuple(bands)


def estimate_direction(site: Site, noise_window_s: tuple[float, float], settings: DirectionSettings) -> SiteDirection:
    """Return the posterior of back-azimuth and slowness in sliding windows.

    Parameters
    ----------
    site
        Records; what a site lacks narrows its likelihood.
    noise_window_s
        Start and end of a stretch before the first arrival, s after the origin time.
    settings
        How.

    Raises
    ------
    DataError
        When the record is shorter than one window, the noise stretch too short, a band lies outside the record,
        or the site has no rotation of any kind.
    """
    bands = settings.bands_hz or default_bands(site)
    windows = [settings.window_s or max(4.0, 1.5 / low) for low, _ in bands]
    nyquist = 0.5 / site.step_s
    for low, high in bands:
        if high * (1 + REACH) > nyquist:
            raise DataError(
                f"site {site.code}: band {low:g} to {high:g} Hz reaches above its Nyquist frequency {nyquist:g} Hz"
            )
    has = site.present
    horizontal = bool(has[[ACC_Z, ROT_E, ROT_N]].all())
    vertical = bool(has[[ACC_E, ACC_N, ROT_Z]].all())
    if not horizontal and not vertical:
        raise DataError(f"site {site.code} ({site.kind}): no rotation with its matching translation, so no direction")
    theta = np.radians(settings.back_azimuth_step_deg) * np.arange(round(360 / settings.back_azimuth_step_deg))
    slowness = np.geomspace(1e-3 / settings.fastest_km_s, 1e-3 / settings.slowest_km_s, settings.slowness_count)
    grid = np.meshgrid(theta, slowness, indexing="ij")
    trial = slowness_vector(grid[0].ravel(), grid[1].ravel())
    time = _window_times(site, max(windows), settings.hop_s)
    centre = np.rint((time - site.start_s) / site.step_s).astype(int)
    used = np.zeros(6, bool)
    used[[ACC_Z, ROT_E, ROT_N]] |= horizontal
    used[[ACC_E, ACC_N, ROT_Z]] |= vertical
    shape = (len(bands), theta.size, slowness.size, time.size)
    ratios = np.zeros(shape, np.float32)
    coherent = np.full((len(bands), time.size), np.nan)
    power = np.zeros(time.size)
    for b, (band, window_s) in enumerate(zip(bands, windows, strict=True)):
        analytic = band_signal(site.data, site.step_s, band)
        window = max(2, round(window_s / site.step_s))
        first, last = _noise_samples(site, noise_window_s, window)
        clear = _clear_windows(site.valid[used], centre, window, round(0.5 / (band[0] * site.step_s)))
        noise = mean_covariance(analytic, first, last)
        covariance = sliding_covariances(analytic, window, centre)
        if window_s == min(windows):
            # Long windows would smear the onset and end that the shortest ones show.
            power += np.maximum(sum(covariance[entry(k, k)] - noise[entry(k, k)] for k in (ACC_E, ACC_N, ACC_Z)), 0.0)
        degrees = independent_samples(band, window_s)
        error = float(np.hypot(settings.model_error_share, site.rotation_error_share))
        equations = []
        unchanged = np.zeros(time.size)
        if horizontal:
            # Scales of their own: waves of one back-azimuth and several slownesses in a window spoil the first alone.
            equations += [
                plane_wave_equation(form, (ROT_E, ROT_N), covariance, noise, error)
                for form in horizontal_forms(grid[0].ravel(), grid[1].ravel())
            ]
            unchanged += as_before((ROT_E, ROT_N), (ACC_Z,), covariance, noise)
        if vertical:
            # Alone, one relation in two unknowns cannot show by its misfit that waves of several slownesses overlap.
            own = error if horizontal else float(np.hypot(2 * settings.model_error_share, site.rotation_error_share))
            equations.append(plane_wave_equation(vertical_form(trial), (ROT_Z,), covariance, noise, own))
            unchanged += as_before((ROT_Z,), (ACC_E, ACC_N), covariance, noise)
        if vertical and not horizontal:
            equations.append(
                polarisation_equation(theta, slowness.size, covariance, settings.polarisation_ratio, degrees)
            )
            unchanged += equations[-1].null
        fill_posterior(
            ratios[b],
            coherent[b],
            equations,
            unchanged,
            degrees,
            settings.stray_share,
            turn_weights(site.azimuth_error_rad, theta.size),
        )
        ratios[b][..., ~clear] = 0.0
        coherent[b, ~clear] = np.nan
        power[~clear] = 0.0
    total = np.ascontiguousarray(ratios.sum(axis=0))
    overlap = np.full(time.size, min(1.0, settings.hop_s / (float(np.mean(windows)) * 2.0 / 3.0)))
    return SiteDirection(
        site.code, time, np.array(bands), np.array(windows), theta, slowness, total, ratios, coherent, power, overlap
    )  # fmt: skip


def _window_times(site: Site, window_s: float, hop_s: float) -> Array:
    first = np.ceil((site.start_s + 0.5 * window_s + site.step_s) / hop_s)
    last = np.floor((site.start_s + site.step_s * (site.data.shape[1] - 2) - 0.5 * window_s) / hop_s)
    if last < first:
        length = site.step_s * site.data.shape[1]
        raise DataError(f"site {site.code}: the record of {length:.1f} s is shorter than one window of {window_s:g} s")
    return hop_s * np.arange(first, last + 1)


def _noise_samples(site: Site, noise_window_s: tuple[float, float], window: int) -> tuple[int, int]:
    first = max(0, int(np.ceil((noise_window_s[0] - site.start_s) / site.step_s)))
    last = min(site.data.shape[1], int(np.floor((noise_window_s[1] - site.start_s) / site.step_s)))
    if last - first < window:
        raise DataError(
            f"site {site.code}: only {max(0, last - first) * site.step_s:.1f} s of record before the first arrival; "
            f"noise cannot be measured, {window * site.step_s:.0f} s are needed"
        )
    return first, last


def _clear_windows(valid: NDArray[np.bool_], centre: NDArray[np.int64], window: int, guard: int) -> NDArray[np.bool_]:
    bad = ~valid.all(axis=0)
    if guard and bad.any():
        bad = ndimage.binary_dilation(bad, iterations=1, structure=np.ones(2 * guard + 1, bool))
    count = np.concatenate([[0], np.cumsum(bad)])
    half = window // 2
    return count[np.minimum(centre + half, bad.size)] == count[np.maximum(centre - half, 0)]
