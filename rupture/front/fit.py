"""Fit of line sources to all windows at once: kind, direction, speed, length, with intervals."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from rupture.direction import SiteDirection
from rupture.earth.responses import Responses
from rupture.errors import InputError
from rupture.event import Event
from rupture.front.intervals import interval
from rupture.front.kernels import DURATION, LENGTH, LENGTH_2
from rupture.front.lines import KINDS, PARAMETERS, LinePrior, same_first_arm, to_parameters
from rupture.front.sampler import temper
from rupture.front.target import Target
from rupture.front.windows import Windows, lay_out
from rupture.mapping.grid import subsurface_length_km

Array = NDArray[np.float64]

CIRCULAR = ("azimuth_rad", "second_azimuth_rad")


@dataclass(frozen=True)
class FitSettings:
    """How line sources are fitted.

    Attributes
    ----------
    particles, moves
        Size of the population and moves of each at each temperature; errors of the answer fall with their root.
    hop_s
        Distance between the windows used, s.
    slowness_spread
        Standard deviation of the log of true over predicted apparent slowness.
    azimuth_spread_deg
        Standard deviation of true less predicted back-azimuth: rays bend sideways in an Earth that no layers describe.
    power_sigma
        Log-scatter of window power about a line of even strength.
    power_share
        Weight of the power term relative to the directions; 0 fits directions alone.
    trust
        Share of the windows' log-likelihood that counts: what one model of rays does not know makes windows less
        independent than their noise says.
    length_spread
        Standard deviation of the log of true over fitted length: where a rupture ends, surface waves and slip that goes on
        blur its last seconds.
    kind_threshold
        Probability from which a kind is named; below it the answer is "undetermined".
    widest_direction_deg
        A moving rupture whose 90 % interval of direction is wider than this is "undetermined".
    resamples
        Bootstrap samples of sites and windows that the answer is held against; 0 leaves them out.
    """

    particles: int = 600
    moves: int = 2
    hop_s: float = 1.0
    slowness_spread: float = 0.25
    azimuth_spread_deg: float = 3.0
    power_sigma: float = 0.8
    power_share: float = 1.0
    trust: float = 0.35
    length_spread: float = 0.08
    kind_threshold: float = 0.8
    widest_direction_deg: float = 90.0
    resamples: int = 20

    def __post_init__(self) -> None:
        if self.particles < 50 or self.moves < 1:
            raise InputError("particles must be at least 50 and moves at least 1")
        if self.resamples < 0 or self.resamples == 1:
            raise InputError("resamples must be 0, or 2 at least")
        if not self.hop_s > 0 or not self.slowness_spread > 0 or not self.power_sigma > 0:
            raise InputError("hop_s, slowness_spread and power_sigma must be positive")
        if not 0 <= self.length_spread < 1:
            raise InputError("length_spread must lie in [0, 1)")
        if not 0 < self.trust <= 1 or not self.power_share >= 0 or not 0.34 <= self.kind_threshold < 1:
            raise InputError("trust must lie in (0, 1], power_share be at least 0, kind_threshold lie in [0.34, 1)")


@dataclass(frozen=True)
class RuptureFit:
    """Posterior of the line-source fit.

    Attributes
    ----------
    kind
        stationary, unilateral, bilateral or undetermined.
    kind_probability
        Probability of each kind; kinds are equally likely beforehand.
    reason
        Why it is undetermined; empty otherwise.
    samples
        SI parameters per kind in the order of `parameters`, shape (draws, columns) each.
    parameters
        Names of the columns.
    sampled
        The draws as the sampler left them, in its coordinates and without the spread of lengths, for resampling.
    """

    kind: str
    kind_probability: dict[str, float]
    reason: str
    samples: dict[str, Array]
    sampled: dict[str, Array]
    parameters: tuple[str, ...] = PARAMETERS

    @property
    def likeliest(self) -> str:
        """The kind of highest probability, named or not."""
        return max(self.kind_probability, key=lambda kind: self.kind_probability[kind])

    def column(self, name: str, kind: str | None = None) -> Array:
        """Return the draws of a parameter for a kind, by default the likeliest."""
        return self.samples[kind or self.likeliest][:, self.parameters.index(name)]

    def interval(self, name: str, kind: str | None = None) -> tuple[float, float, float]:
        """Return best (median), p05 and p95 of a parameter; angles on the circle, in [0, 2 pi)."""
        return interval(self.column(name, kind), circular=name in CIRCULAR)

    def best(self, kind: str | None = None) -> Array:
        """Return the draw nearest to the medians of place, start, azimuths, speeds, lengths and duration, shape (parameters,)."""
        draws = self.samples[kind or self.likeliest]
        distance = np.zeros(draws.shape[0])
        for k, name in enumerate(self.parameters[: DURATION + 1]):
            middle, low, high = interval(draws[:, k], circular=name in CIRCULAR)
            width = (high - low) % (2 * np.pi) if name in CIRCULAR else high - low
            offset = (draws[:, k] - middle + np.pi) % (2 * np.pi) - np.pi if name in CIRCULAR else draws[:, k] - middle
            distance += (offset / width) ** 2 if width > 0 else 0.0
        best: Array = draws[int(np.argmin(distance))]
        return best


def prior_for(event: Event, longest_m: float | None = None) -> LinePrior:
    """Return priors scaled to the event's magnitude (Wells & Coppersmith 1994), or wide ones when it has none."""
    # Deep sources hardly make surface waves; over 15 km at half a hertz they lose about a factor e (common practice).
    surface = 0.5 * float(np.exp(-max(event.depth_km - 10.0, 0.0) / 15.0))
    if event.magnitude is None:
        return LinePrior(length_log_width=1.2, surface_ratio=surface)
    length = subsurface_length_km(event.magnitude) * 1e3
    if longest_m is not None:
        length = min(length, longest_m)
    # Rise times scale with the size of slip patches, about a tenth of the duration (common practice).
    duration = length / 2800.0
    return LinePrior(
        length_m=length,
        duration_s=max(2.0, 0.75 * duration),
        rise_s=max(0.5, 0.1 * duration),
        surface_ratio=surface,
    )


def fit_rupture(
    directions: Sequence[SiteDirection],
    site_longitude_deg: Sequence[float],
    site_latitude_deg: Sequence[float],
    event: Event,
    responses: Responses,
    settings: FitSettings,
    seed: int,
    progress: Callable[[int, int], None] | None = None,
    prior: LinePrior | None = None,
) -> RuptureFit:
    """Fit stationary, unilateral and bilateral line sources.

    Parameters
    ----------
    directions, site_longitude_deg, site_latitude_deg
        Per site; at least one.
    event, responses
        Hypocentre, and the waves that a point source sends to the surface.
    settings, seed
        How, and the random numbers.
    progress
        Called with (kinds done, kinds).
    prior
        By default from the magnitude.

    Raises
    ------
    DataError
        When no site has a usable window.
    """
    prior = prior or prior_for(event)
    windows = windows_of(directions, site_longitude_deg, site_latitude_deg, event, responses, settings, prior)
    return fit_windows(windows, prior, settings, seed, progress)


def windows_of(
    directions: Sequence[SiteDirection],
    site_longitude_deg: Sequence[float],
    site_latitude_deg: Sequence[float],
    event: Event,
    responses: Responses,
    settings: FitSettings,
    prior: LinePrior,
) -> Windows:
    """Lay out the windows that a rupture as long as the prior allows can be heard in; arguments as `fit_rupture`."""
    return lay_out(
        directions, site_longitude_deg, site_latitude_deg, event, responses, longest_duration_s(prior),
        settings.slowness_spread, np.radians(settings.azimuth_spread_deg), settings.hop_s, settings.power_sigma, settings.power_share,
    )  # fmt: skip


def longest_duration_s(prior: LinePrior) -> float:
    """Return how long after S windows are looked at: three times the expected length at 2.8 km/s, and the coda."""
    return 3.0 * prior.length_m / 2800.0 + 20.0


def fit_windows(
    windows: Windows,
    prior: LinePrior,
    settings: FitSettings,
    seed: int,
    progress: Callable[[int, int], None] | None = None,
) -> RuptureFit:
    """Fit line sources to windows that are laid out already; see `fit_rupture`."""
    samples, sampled, evidence = {}, {}, {}
    for number, kind in enumerate(KINDS):
        rng = np.random.default_rng((seed, number))
        target = Target(kind, windows, prior, settings.trust)
        found = temper(
            target.draw,
            target.log_prior,
            target.log_likelihood,
            settings.particles,
            settings.moves,
            rng,
            target.angles,
            target.rename,
        )
        sampled[kind] = same_first_arm(kind, found.draws, longer_first=True)
        samples[kind] = spread_lengths(to_parameters(kind, sampled[kind]), settings.length_spread, rng)
        evidence[kind] = found.log_evidence
        if progress is not None:
            progress(number + 1, len(KINDS))
    largest = max(evidence.values())
    weight = {kind: float(np.exp(value - largest)) for kind, value in evidence.items()}
    share = {kind: value / sum(weight.values()) for kind, value in weight.items()}
    fit = RuptureFit(max(share, key=lambda kind: share[kind]), share, "", samples, sampled)
    return _judge(fit, settings)


def spread_lengths(parameters: Array, spread: float, rng: np.random.Generator) -> Array:
    """Return SI parameters, shape (count, columns), whose lengths and durations are off by a lognormal error of their own."""
    out = parameters.copy()
    out[:, (LENGTH, LENGTH_2, DURATION)] *= np.exp(spread * rng.standard_normal((parameters.shape[0], 1)))
    return out


def _judge(fit: RuptureFit, settings: FitSettings) -> RuptureFit:
    kind = fit.kind
    if fit.kind_probability[kind] < settings.kind_threshold:
        return replace(fit, kind="undetermined", reason="no kind of rupture is likely enough to be named")
    if kind != "stationary":
        _, low, high = fit.interval("azimuth_rad")
        width = np.degrees((high - low) % (2 * np.pi))
        if width > settings.widest_direction_deg:
            return replace(fit, kind="undetermined", reason=f"the direction is open by {width:.0f} degrees")
    return fit
