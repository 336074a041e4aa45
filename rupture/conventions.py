"""The project's conventions: axes, component order, units and the slowness vector, stated once.

Axes are East, North, Up (right-handed). Rotation is half the curl of displacement, positive by the
right-hand rule. Everything inside is SI (m, s, rad, m/s^2, rad/s); degrees and km appear only in names
that say so. Back-azimuth is clockwise from north, at the site, toward the source; the slowness vector
points where the wave goes. Times are seconds after the origin time of the event.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

COMPONENTS = ("acc_E", "acc_N", "acc_Z", "rot_E", "rot_N", "rot_Z")
"""Row order of every six-component array: acceleration, then rotation rate, each East, North, Up."""

ACC_E, ACC_N, ACC_Z, ROT_E, ROT_N, ROT_Z = range(6)
ACCELERATION = slice(0, 3)
ROTATION = slice(3, 6)

ELLIPSOID = "WGS84"
KM = 1000.0


def slowness_vector(back_azimuth_rad: ArrayLike, slowness_s_m: ArrayLike) -> NDArray[np.float64]:
    """Return the horizontal slowness vector of a wave that comes from a back-azimuth.

    Parameters
    ----------
    back_azimuth_rad
        Back-azimuth in rad, any shape.
    slowness_s_m
        Apparent slowness in s/m, broadcastable to the back-azimuth.

    Returns
    -------
    ndarray
        East and north slowness in s/m, shape (2, ...): the wave travels away from its source.

    Examples
    --------
    >>> slowness_vector(0.0, 0.5) + 0.0  # a source in the north sends waves to the south
    array([ 0. , -0.5])
    """
    theta, slowness = np.broadcast_arrays(np.asarray(back_azimuth_rad, float), np.asarray(slowness_s_m, float))
    return np.stack([-slowness * np.sin(theta), -slowness * np.cos(theta)])
