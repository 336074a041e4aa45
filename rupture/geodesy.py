"""Distances, azimuths and local plane coordinates on the WGS84 ellipsoid (pyproj)."""

from __future__ import annotations

from functools import cache

import numpy as np
from numpy.typing import ArrayLike, NDArray
from pyproj import Geod, Proj

from rupture.conventions import ELLIPSOID


@cache
def _geod() -> Geod:
    return Geod(ellps=ELLIPSOID)


def distance_azimuth(
    longitude_from_deg: ArrayLike,
    latitude_from_deg: ArrayLike,
    longitude_to_deg: ArrayLike,
    latitude_to_deg: ArrayLike,
) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]:
    """Return geodesic distance and the azimuths at both ends.

    Parameters
    ----------
    longitude_from_deg, latitude_from_deg, longitude_to_deg, latitude_to_deg
        Points in degrees, any shapes that broadcast.

    Returns
    -------
    distance_m, azimuth_rad, back_azimuth_rad
        Distance in m; azimuth at `from` toward `to`; azimuth at `to` toward `from` (the back-azimuth when
        `from` is the source and `to` the site), both clockwise from north in [0, 2 pi).

    Examples
    --------
    >>> d, az, baz = distance_azimuth(10.0, 0.0, 11.0, 0.0)
    >>> round(float(d)), round(float(np.degrees(az))), round(float(np.degrees(baz)))
    (111319, 90, 270)
    """
    lon1, lat1, lon2, lat2 = np.broadcast_arrays(
        *(np.asarray(v, float) for v in (longitude_from_deg, latitude_from_deg, longitude_to_deg, latitude_to_deg))
    )
    azimuth, back, distance = _geod().inv(lon1.ravel(), lat1.ravel(), lon2.ravel(), lat2.ravel())
    shape = lon1.shape
    return (
        np.reshape(distance, shape),
        np.radians(np.reshape(azimuth, shape)) % (2 * np.pi),
        np.radians(np.reshape(back, shape)) % (2 * np.pi),
    )


def destination(
    longitude_deg: ArrayLike, latitude_deg: ArrayLike, azimuth_rad: ArrayLike, distance_m: ArrayLike
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return longitude and latitude in degrees of points reached along geodesics; longitudes in [-180, 180).

    Parameters
    ----------
    longitude_deg, latitude_deg
        Start points in degrees.
    azimuth_rad, distance_m
        Azimuth clockwise from north in rad and distance in m (negative walks backwards).
    """
    lon, lat, azimuth, distance = np.broadcast_arrays(
        *(np.asarray(v, float) for v in (longitude_deg, latitude_deg, azimuth_rad, distance_m))
    )
    lon2, lat2, _ = _geod().fwd(lon.ravel(), lat.ravel(), np.degrees(azimuth).ravel(), distance.ravel())
    shape = lon.shape
    return wrap_longitude(np.reshape(lon2, shape)), np.reshape(lat2, shape)


def wrap_longitude(longitude_deg: ArrayLike) -> NDArray[np.float64]:
    """Return longitudes in [-180, 180) degrees."""
    return (np.asarray(longitude_deg, float) + 180.0) % 360.0 - 180.0


class LocalPlane:
    """Plane coordinates around a centre: azimuthal equidistant, true distance and azimuth from the centre.

    Parameters
    ----------
    longitude_deg, latitude_deg
        Centre in degrees; any place on Earth, poles and date line included.
    """

    def __init__(self, longitude_deg: float, latitude_deg: float) -> None:
        self.longitude_deg = float(wrap_longitude(longitude_deg))
        self.latitude_deg = float(latitude_deg)
        self._proj = Proj(proj="aeqd", lon_0=self.longitude_deg, lat_0=self.latitude_deg, ellps=ELLIPSOID)

    def to_plane(
        self, longitude_deg: ArrayLike, latitude_deg: ArrayLike
    ) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Return east and north in m of points given in degrees."""
        lon, lat = np.broadcast_arrays(np.asarray(longitude_deg, float), np.asarray(latitude_deg, float))
        east, north = self._proj(lon.ravel(), lat.ravel())
        return np.reshape(east, lon.shape), np.reshape(north, lon.shape)

    def to_geographic(self, east_m: ArrayLike, north_m: ArrayLike) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Return longitude (in [-180, 180)) and latitude in degrees of points given in m."""
        east, north = np.broadcast_arrays(np.asarray(east_m, float), np.asarray(north_m, float))
        lon, lat = self._proj(east.ravel(), north.ravel(), inverse=True)
        return wrap_longitude(np.reshape(lon, east.shape)), np.reshape(lat, east.shape)
