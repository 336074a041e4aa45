"""When the first P and S reach a site in a reference Earth: enough to place noise and signal windows."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cache, lru_cache
from typing import Any

from rupture.conventions import KM
from rupture.errors import DataError

_P = ("p", "P", "Pn", "Pg", "Pdiff", "PKP", "PKIKP")
_S = ("s", "S", "Sn", "Sg", "Sdiff", "SKS", "SKIKS")
_METRES_PER_DEGREE = 111_194.93
"""Arc of one degree on the sphere of radius 6,371 km that TauP uses."""


@dataclass(frozen=True)
class Arrivals:
    """First arrivals at one distance: times in s after the origin, horizontal slownesses in s/m."""

    p_s: float
    s_s: float
    p_slowness_s_m: float
    s_slowness_s_m: float


ArrivalModel = Callable[[float, float], Arrivals]
"""From distance in m and depth in km to first arrivals."""


def arrivals_from_times(times: Callable[[float, float], tuple[float, float]]) -> ArrivalModel:
    """Make an arrival model of a function that gives the times of P and S alone.

    Parameters
    ----------
    times
        From distance in m and depth in km to (P, S) in s after the origin.
    """

    def model(distance_m: float, depth_km: float) -> Arrivals:
        step = 500.0
        near, far = max(distance_m - step, 0.0), distance_m + step
        (p0, s0), (p1, s1) = times(near, depth_km), times(far, depth_km)
        p, s = times(distance_m, depth_km)
        return Arrivals(p, s, (p1 - p0) / (far - near), (s1 - s0) / (far - near))

    return model


@cache
def _model() -> Any:
    from obspy.taup import TauPyModel

    return TauPyModel("ak135")


def first_arrivals(distance_m: float, depth_km: float) -> Arrivals:
    """Return first P and S in ak135 (Kennett, Engdahl & Buland 1995) at a distance, rounded to 100 m.

    Raises
    ------
    DataError
        When the model gives no arrival.
    """
    return _cached(round(distance_m / 100.0), round(depth_km * 10.0))


@lru_cache(maxsize=4096)
def _cached(hundred_metres: int, tenth_km: int) -> Arrivals:
    degrees = hundred_metres * 100.0 / _METRES_PER_DEGREE
    found = [
        sorted(_model().get_travel_times(tenth_km / 10.0, degrees, phases), key=lambda a: a.time) for phases in (_P, _S)
    ]
    if not all(found):
        raise DataError(f"ak135 gives no first P or S at {degrees:.2f} degrees from a depth of {tenth_km / 10:.1f} km")
    p, s = (f[0] for f in found)
    slow = (float(a.ray_param_sec_degree) / _METRES_PER_DEGREE for a in (p, s))
    return Arrivals(float(p.time), float(s.time), *slow)


def reading_end_s(distance_m: float) -> float:
    """Return how long after the origin a record can matter: surface waves at 2 km/s, and five minutes of coda."""
    return distance_m / (2.0 * KM) + 300.0
