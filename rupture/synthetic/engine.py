"""What both synthetic engines take and give: sub-events, receivers, sampling, six-component records."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from rupture.earth.layers import LayeredModel


@dataclass(frozen=True)
class SubEvents:
    """Point sources that make up a kinematic rupture; every array has shape (events,).

    Attributes
    ----------
    longitude_deg, latitude_deg, depth_km
        Places.
    time_s
        Onset of slip, s after the origin time.
    moment_nm
        Scalar seismic moment in N m.
    rise_time_s
        Duration of slip in s; moment-rate function is a raised cosine 1 - cos of this length.
    strike_rad, dip_rad, rake_rad
        Mechanism (Aki & Richards 2002 convention).
    """

    longitude_deg: NDArray[np.float64]
    latitude_deg: NDArray[np.float64]
    depth_km: NDArray[np.float64]
    time_s: NDArray[np.float64]
    moment_nm: NDArray[np.float64]
    rise_time_s: NDArray[np.float64]
    strike_rad: NDArray[np.float64]
    dip_rad: NDArray[np.float64]
    rake_rad: NDArray[np.float64]


@dataclass(frozen=True)
class Receivers:
    """Places at the free surface, arrays of shape (receivers,) in degrees."""

    longitude_deg: NDArray[np.float64]
    latitude_deg: NDArray[np.float64]


@dataclass(frozen=True)
class Sampling:
    """Common time axis: `samples` samples, `step_s` apart, the first at `start_s` after the origin time.

    Records are band-limited: nothing above `high_hz`, which must lie below half the sampling rate.
    """

    start_s: float
    step_s: float
    samples: int
    high_hz: float


class Engine(Protocol):
    """A forward model: records of a rupture at receivers."""

    def __call__(
        self, sources: SubEvents, receivers: Receivers, model: LayeredModel, sampling: Sampling
    ) -> NDArray[np.float64]:
        """Return acceleration (m/s^2) and rotation rate (rad/s), shape (receivers, 6, samples).

        Rows are in the order of `rupture.conventions.COMPONENTS`, axes East, North, Up.
        """
        ...
