"""Settings of the energy inversion: the table [energy] of the job file."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from rupture.errors import InputError

Waves = Literal["wavefield", "ray"]
"""Where Green's functions come from: complete seismograms, or direct, reflected and head waves only."""


@dataclass(frozen=True)
class EnergySettings:
    """How energy is inverted.

    Attributes
    ----------
    on
        Whether a run inverts at all.
    bands_hz
        Frequency bands, inverted together.
    window_s, hop_s
        Length of the sliding windows, and the step of windows and source times.
    cells
        Cells along each side of the map, where the grid is not given.
    waves
        `wavefield`, or `ray` as the cheap fallback.
    updates
        Most multiplicative updates.
    held_out_share
        Share of the windows that is held out to decide when to stop; 0 runs all updates.
    coda_share
        Energy of scattered waves over that of the direct ones in the kernels; 0 leaves them out. Held, not estimated: free
        energy on the map outbids any coda term for the scattered waves, and is then wrong.
    gains
        Whether gains of sites and component groups are estimated.
    gain_spread
        Standard deviation of the natural logarithm of such a gain before the records are looked at.
    least_model_error, most_model_error
        The model error of a site and band, as a share of amplitude, is estimated between these: below, the smallest mismatch
        rules the true place out; above, the error explains what energy should.
    most_distant_km
        Sites farther than this from any cell are left out.
    use_mechanism
        Whether the event's focal mechanism, where it has one, shapes the kernels; otherwise all double couples count alike.
    resamples
        Inversions of resampled windows and sites behind the intervals; 0 gives none.
    """

    on: bool = True
    bands_hz: tuple[tuple[float, float], ...] = ((0.2, 0.5), (0.5, 1.2))
    window_s: float = 5.0
    hop_s: float = 1.0
    cells: int = 25
    waves: Waves = "wavefield"
    updates: int = 60
    held_out_share: float = 0.1
    coda_share: float = 0.6
    gains: bool = False
    gain_spread: float = 0.4
    least_model_error: float = 0.1
    most_model_error: float = 0.3
    most_distant_km: float = 300.0
    use_mechanism: bool = False
    resamples: int = 6

    def __post_init__(self) -> None:
        if not self.bands_hz:
            raise InputError(
                "bands_hz of the energy inversion is empty; give at least one band, for example [[0.2, 1.2]]"
            )
        for low, high in self.bands_hz:
            if not 0 < low < high <= 5:
                raise InputError(
                    f"band {low:g} to {high:g} Hz of the energy inversion: corners must rise, from above 0 to 5 Hz"
                )
        if not 0 < self.hop_s <= self.window_s / 2:
            raise InputError("hop_s of the energy inversion must be positive and at most half of window_s")
        if not 5 <= self.cells <= 201:
            raise InputError("cells of the energy inversion must lie between 5 and 201")
        if self.updates < 1 or not 0 <= self.held_out_share <= 0.5:
            raise InputError("updates must be at least 1 and held_out_share between 0 and 0.5")
        if not self.gain_spread > 0 or not 0 < self.least_model_error <= self.most_model_error < 1:
            raise InputError(
                "gain_spread must be positive; least_model_error and most_model_error must rise, between 0 and 1"
            )
        if not 0 <= self.coda_share <= 5:
            raise InputError("coda_share must lie between 0 and 5")
        if not 10 <= self.most_distant_km <= 1000 or self.resamples < 0:
            raise InputError("most_distant_km must lie between 10 and 1000, and resamples not be negative")
