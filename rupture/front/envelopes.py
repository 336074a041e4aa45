"""How long each site hears the rupture, from the power of its windows alone."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rupture.direction import SiteDirection
from rupture.earth.responses import Responses
from rupture.event import Event
from rupture.geodesy import distance_azimuth

Array = NDArray[np.float64]

FLOOR = 0.02
"""Window power counts down to this share of its peak; below it the record is late coda and noise."""

LOG_SCATTER = 0.8
"""Scatter of the log of window power about a source of even strength."""

CODA_RATIOS = (0.05, 0.15, 0.4, 1.0)
CODA_TIMES_S = (5.0, 10.0, 20.0)
"""Trial energies of the coda relative to direct S, and its decay times; the same for all sites."""

ONSETS_S = (-1.0, 0.0, 1.0, 2.0)
"""Trial shifts of the S onset: origin time, travel time and the growth of the rupture are not exact."""

DURATIONS = 60


@dataclass(frozen=True)
class SiteDuration:
    """Apparent duration of one site.

    Attributes
    ----------
    site
        Its number among the sites given.
    code
        Its name.
    duration_s, error_s
        Duration of radiation as heard there, and its standard error.
    """

    site: int
    code: str
    duration_s: float
    error_s: float


def envelope_durations(
    directions: Sequence[SiteDirection],
    site_longitude_deg: Sequence[float],
    site_latitude_deg: Sequence[float],
    event: Event,
    responses: Responses,
    longest_s: float,
) -> tuple[SiteDuration, ...]:
    """Return apparent durations of S.

    The envelope of a site is a box, as long as the rupture is heard there, seen through the S waves of the Earth, a coda and the
    window. Sites without at least eight windows of power after S are left out.

    Parameters
    ----------
    directions, site_longitude_deg, site_latitude_deg, event, responses, longest_s
        As in `rupture.front.directivity_durations`.
    """
    distance, _, _ = distance_azimuth(event.longitude_deg, event.latitude_deg, site_longitude_deg, site_latitude_deg)
    trial = np.geomspace(1.0, longest_s, DURATIONS)
    usable, misfits = [], []
    for k, direction in enumerate(directions):
        misfit = _misfit(direction, float(distance[k]), responses, trial)
        if misfit is not None:
            usable.append(k)
            misfits.append(misfit)
    if not usable:
        return ()
    table = np.array(misfits)
    # One coda for all: the scattering is that of the region.
    shared = table.min(axis=2).sum(axis=0)
    by_duration = table[:, int(np.argmin(shared))]
    out = []
    for k, row in zip(usable, by_duration, strict=True):
        weight = np.exp(-0.5 * (row - row.min())) * np.gradient(trial)
        weight /= weight.sum()
        mean = float(weight @ trial)
        spread = float(np.sqrt(weight @ (trial - mean) ** 2))
        out.append(SiteDuration(k, directions[k].code, mean, spread))
    return tuple(out)


def _misfit(direction: SiteDirection, distance_m: float, responses: Responses, trial_s: Array) -> Array | None:
    """Squared log misfit of each coda and duration in independent windows, best over onsets, shape (codas, durations)."""
    window = float(direction.window_s.min())
    hop = float(direction.time_s[1] - direction.time_s[0])
    waves = [k for k, name in enumerate(responses.wave) if name == "S"]
    arrival = np.array([float(responses.at(responses.time_s[k], np.array([distance_m]))[0]) for k in waves])
    energy = np.array([float(responses.at(responses.energy[k], np.array([distance_m]))[0]) for k in waves])
    arrival, energy = arrival[energy > 0.02 * energy.max()], energy[energy > 0.02 * energy.max()]
    begin = arrival[energy.argmax()] - 0.5 * window
    masked = np.isnan(direction.coherent).all(axis=0)
    chosen = (
        (direction.time_s >= begin) & (direction.time_s <= begin + trial_s[-1] + 30.0) & ~masked & (direction.power > 0)
    )
    if chosen.sum() < 8:
        return None
    power = direction.power[chosen]
    seen = np.log(power / power.max() + FLOOR)
    share = min(1.0, hop / (2.0 / 3.0 * window))
    fine = np.arange(0.0, trial_s[-1] + 90.0, hop)
    source = np.where(fine < trial_s[:, None], hop / trial_s[:, None], 0.0)
    # The last step of a box is as full as its duration says.
    source[np.arange(trial_s.size), (trial_s / hop).astype(int)] = (trial_s % hop) / trial_s
    taper = np.hanning(2 * round(window / hop) + 1)[::2] if window / hop >= 2 else np.ones(1)
    out = np.empty((len(CODA_RATIOS) * len(CODA_TIMES_S), trial_s.size))
    codas = [(ratio, time) for ratio in CODA_RATIOS for time in CODA_TIMES_S]
    for c, (ratio, decay) in enumerate(codas):
        tail = ratio * np.exp(-fine / decay) * hop / decay
        tail[0] += 1.0
        response = np.convolve(tail, taper / taper.sum())
        envelope = np.array([np.convolve(row, response)[: fine.size + taper.size] for row in source])
        axis = hop * (np.arange(envelope.shape[1]) - taper.size // 2)
        best = np.full(trial_s.size, np.inf)
        for onset in ONSETS_S:
            moved = sum(
                e * np.array([np.interp(direction.time_s[chosen] - t - onset, axis, row, 0.0, 0.0) for row in envelope])
                for t, e in zip(arrival, energy, strict=True)
            )
            model = np.log(moved / np.maximum(moved.max(axis=1, keepdims=True), 1e-300) + FLOOR)
            residual = seen - model
            residual = residual - residual.mean(axis=1, keepdims=True)
            best = np.minimum(best, share * (residual**2).sum(axis=1) / LOG_SCATTER**2 + (onset / 1.0) ** 2)
        out[c] = best
    return out
