"""First arrivals of a spherical Earth whose speed depends on depth alone, at every distance.

The sphere is flattened (exact for travel times) and cut into thin homogeneous layers. In those the first arrival is the
direct ray from the source upward or a wave along the top of one of the faster layers below; the many thin layers of a
gradient make turning rays of the latter. A wave along a layer exists at every distance beyond its critical one, so that
shadow zones below slow layers and the core's shadow are bridged, as the Earth does by diffraction, and the table has no gap.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

EARTH_RADIUS_KM = 6371.0
DEEPEST_KM = 2891.0
"""Bottom of the mantle: what passes through the core never comes first within 11,000 km."""

_THIN_KM = 0.25 * np.concatenate([np.expm1(0.01 * np.arange(277)) / 0.01, np.arange(1500.0, 11564.0, 16.0)])
"""Edges of thin layers: 0.25 km at the surface, thickening to 4 km from 375 km down."""

_BISECTIONS = 48


def first_arrivals(
    depth_km: Array, speed_km_s: Array, source_depth_km: float, distance_km: Array
) -> tuple[Array, Array]:
    """Return travel time and horizontal slowness of the first arrival at the surface.

    Parameters
    ----------
    depth_km, speed_km_s
        Corners of the profile in km and km/s, shape (N,), starting at depth 0; a depth that stands twice is a
        discontinuity. The profile counts down to the first fluid (speed 0), to the bottom of the mantle at most.
    source_depth_km
        Within the profile.
    distance_km
        Along the surface of a sphere of radius 6371 km, shape (D,).

    Returns
    -------
    time_s, slowness_s_km
        Shape (D,); the slowness is the derivative of the time.

    References
    ----------
    Flattening: Müller (1971), Geophys. J. R. Astr. Soc. 23, 435-449. Times in layers: Aki & Richards (2002), ch. 9.

    Examples
    --------
    One layer of 6 km/s, a source 3 km down and 4 km away:

    >>> time, slowness = first_arrivals(np.array([0.0, 50.0]), np.array([6.0, 6.0]), 3.0, np.array([4.0]))
    >>> round(float(time[0]), 3), round(float(slowness[0]), 3)
    (0.833, 0.133)
    """
    top, bottom, speed = _thin_layers(depth_km, speed_km_s, source_depth_km)
    thickness = EARTH_RADIUS_KM * np.log((EARTH_RADIUS_KM - top) / (EARTH_RADIUS_KM - bottom))
    slowness = (1.0 - 0.5 * (top + bottom) / EARTH_RADIUS_KM) / speed
    above = int((bottom <= source_depth_km + 1e-9).sum())
    time, best = _direct(thickness[:above], slowness[:above], distance_km, float(slowness[0]))
    critical, delay, along = _along_layers(thickness, slowness, above)
    if along.size:
        later = delay[:, None] + along[:, None] * distance_km
        later[distance_km < critical[:, None]] = np.inf
        first = later.argmin(axis=0)
        least = later[first, np.arange(distance_km.size)]
        time, best = np.where(least < time, least, time), np.where(least < time, along[first], best)
    return time, best


def _thin_layers(depth_km: Array, speed_km_s: Array, source_depth_km: float) -> tuple[Array, Array, Array]:
    """Cut a profile so thinly that times err by some milliseconds, with an edge at the source."""
    thin = _THIN_KM.clip(max=depth_km[-1])
    edges = np.union1d(np.append(depth_km, source_depth_km), thin)
    top, bottom = edges[:-1], edges[1:]
    middle = 0.5 * (top + bottom)
    segment = np.searchsorted(depth_km, middle) - 1
    share = (middle - depth_km[segment]) / (depth_km[segment + 1] - depth_km[segment])
    speed = speed_km_s[segment] + share * (speed_km_s[segment + 1] - speed_km_s[segment])
    keep = np.logical_and.accumulate((speed > 0) & (bottom <= DEEPEST_KM + 1e-6))
    return top[keep], bottom[keep], speed[keep]


def _direct(thickness: Array, slowness: Array, distance: Array, surface: float) -> tuple[Array, Array]:
    """Time and slowness of the ray that leaves its source upward."""
    if not thickness.size:
        return surface * distance, np.full(distance.size, surface)
    fastest = slowness.min()
    low, high = np.zeros(distance.size), np.full(distance.size, 0.5 * np.pi)
    for _ in range(_BISECTIONS):
        angle = 0.5 * (low + high)
        ray = fastest * np.sin(angle)
        reach = (thickness * ray[:, None] / _vertical(slowness, ray[:, None])).sum(axis=1)
        low, high = np.where(reach > distance, low, angle), np.where(reach > distance, angle, high)
    ray = fastest * np.sin(0.5 * (low + high))
    return ray * distance + (thickness * _vertical(slowness, ray[:, None])).sum(axis=1), ray


def _along_layers(thickness: Array, slowness: Array, above: int) -> tuple[Array, Array, Array]:
    """Critical distance, delay and slowness of the wave along the top of each layer that is faster than all above it."""
    fastest = np.minimum.accumulate(np.concatenate([[np.inf], slowness]))[:-1]
    layers = np.flatnonzero(slowness < fastest * (1 - 1e-12))
    layers = layers[layers >= max(above, 1)]
    along = slowness[layers]
    number = np.arange(slowness.size)
    # Layers above the source are crossed once, those between source and layer twice, those below not at all.
    crossings = np.where(number < above, 1.0, 2.0) * (number < layers[:, None])
    vertical = np.where(crossings > 0, _vertical(slowness, along[:, None]), 1.0)
    path = crossings * thickness
    return (path / vertical).sum(axis=1) * along, (path * vertical).sum(axis=1), along


def _vertical(slowness: Array, horizontal: Array) -> Array:
    vertical: Array = np.sqrt(np.maximum(slowness**2 - horizontal**2, 1e-300))
    return vertical
