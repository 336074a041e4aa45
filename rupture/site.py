"""A site: a place with up to six components on one clock."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rupture.conventions import ACCELERATION, COMPONENTS, ROT_Z, ROTATION
from rupture.errors import InputError


@dataclass(frozen=True)
class Site:
    """Corrected, oriented records of one site.

    Attributes
    ----------
    code
        Name of the site, normally NETWORK.STATION.
    longitude_deg, latitude_deg, elevation_m
        Place (WGS84).
    start_s
        Time of the first sample, s after the origin time.
    step_s
        Sampling interval in s.
    data
        Shape (6, samples) in the order of `rupture.conventions.COMPONENTS`: acceleration in m/s^2, rotation
        rate in rad/s. Zero where not valid, never NaN.
    valid
        Shape (6, samples), bool: False in gaps, clipped stretches and for components that are absent.
    band_hz
        Lowest and highest frequency at which these records can be used (response, sampling, array aperture).
    rotation_error_share
        Model error of the rotation as a share of its amplitude: 0 for a rotation sensor, for an array the
        amplitude error that non-uniform strain brings at the highest usable frequency.
    time_error_s, azimuth_error_rad
        Standard deviations of what corrections left behind; they widen the posterior.
    """

    code: str
    longitude_deg: float
    latitude_deg: float
    elevation_m: float
    start_s: float
    step_s: float
    data: NDArray[np.float64]
    valid: NDArray[np.bool_]
    band_hz: tuple[float, float]
    rotation_error_share: float = 0.0
    time_error_s: float = 0.0
    azimuth_error_rad: float = 0.0

    def __post_init__(self) -> None:
        if self.data.ndim != 2 or self.data.shape[0] != len(COMPONENTS) or self.valid.shape != self.data.shape:
            raise InputError(f"site {self.code}: data and valid must both have shape (6, samples)")
        if not np.isfinite(self.data).all():
            raise InputError(f"site {self.code}: data hold NaN or infinity; mask such samples first")
        if not self.step_s > 0:
            raise InputError(f"site {self.code}: sampling interval must be positive")

    @property
    def present(self) -> NDArray[np.bool_]:
        """Shape (6,): True for each component that has at least one valid sample."""
        present: NDArray[np.bool_] = np.asarray(self.valid.any(axis=1), np.bool_)
        return present

    @property
    def times_s(self) -> NDArray[np.float64]:
        """Sample times in s after the origin time, shape (samples,)."""
        times: NDArray[np.float64] = self.start_s + self.step_s * np.arange(self.data.shape[1], dtype=float)
        return times

    @property
    def kind(self) -> str:
        """What the site has: 6C, 3C+rotZ, Z+rotH, 3C, ... in the trade's short form."""
        has = self.present
        acc = (
            "3C"
            if has[ACCELERATION].all()
            else "".join(n[-1] for n, h in zip(COMPONENTS[:3], has[:3], strict=True) if h)
        )
        if has.all():
            return "6C"
        rot = has[ROTATION]
        if rot.all():
            turn = "rot3"
        elif rot[:2].all():
            turn = "rotH"
        elif has[ROT_Z] and not rot[:2].any():
            turn = "rotZ"
        else:
            turn = "rot" + "".join(n[-1] for n, h in zip(COMPONENTS[3:], rot, strict=True) if h) if rot.any() else ""
        return "+".join(part for part in (acc, turn) if part) or "empty"
