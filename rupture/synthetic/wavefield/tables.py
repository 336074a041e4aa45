"""Elementary Green's functions of a layered half-space over distance, and records of any mechanism from them."""

from __future__ import annotations

from dataclasses import dataclass
from enum import Enum

import numpy as np
from numpy.typing import ArrayLike, NDArray

from rupture.earth.layers import LayeredModel
from rupture.errors import InputError
from rupture.synthetic.wavefield.integration import Report, integrate
from rupture.synthetic.wavefield.mechanism import COMPONENT_SLICES, ELEMENTS, element_weights, to_east_north
from rupture.synthetic.wavefield.sampling import FrequencyPlan

CODE_VERSION = 1
"""Part of the key of stored Green's functions: raised whenever the numbers change."""


class Motion(Enum):
    """What is wanted of translation and rotation: how often each is differentiated in time."""

    DISPLACEMENT = (0, 0)
    """Displacement in m and rotation in rad."""
    VELOCITY = (1, 1)
    """Velocity in m/s and rotation rate in rad/s."""
    ACCELERATION = (2, 2)
    """Acceleration in m/s^2 and rotational acceleration in rad/s^2."""
    SENSORS = (2, 1)
    """Acceleration in m/s^2 and rotation rate in rad/s: what the program works on."""


@dataclass(frozen=True)
class GreensTable:
    """Green's functions of one source depth: motion of the free surface after a moment step of 1 N m at time 0.

    Attributes
    ----------
    depth_km
        Depth of the source.
    distance_m
        Horizontal distances, shape (distances,).
    plan
        Time axis and frequencies.
    spectra
        Displacement (m) and rotation (rad) times s, shape (distances, 18, frequencies), at the complex frequencies
        of the plan; rows in the order of `ELEMENTS`.
    """

    depth_km: float
    distance_m: NDArray[np.float64]
    plan: FrequencyPlan
    spectra: NDArray[np.complex128]

    def motion_spectra(self, motion: Motion) -> NDArray[np.complex128]:
        """Return spectra (distances, 18, frequencies) of the wanted motion."""
        translation, rotation = (
            (1j * self.plan.omega) ** motion.value[0],
            (1j * self.plan.omega) ** motion.value[1],
        )
        factor = np.where(np.array([name.startswith("acc") for name, _ in ELEMENTS])[:, None], translation, rotation)
        return self.spectra * factor

    def series(self, motion: Motion) -> NDArray[np.float64]:
        """Return elementary time series, shape (distances, 18, samples), from the origin time on."""
        return self.plan.series(self.motion_spectra(motion))

    def records(
        self,
        moment_nm: NDArray[np.float64],
        azimuth_rad: ArrayLike,
        motion: Motion,
        back_azimuth_rad: ArrayLike | None = None,
        source_spectrum: NDArray[np.complex128] | None = None,
    ) -> NDArray[np.float64]:
        """Return six components East, North, Up of translation and rotation at each distance.

        Parameters
        ----------
        moment_nm
            Moment tensor in N m, axes north, east, down, shape (3, 3) or (distances, 3, 3).
        azimuth_rad
            Azimuth from source to receiver in rad, a number or shape (distances,).
        motion
            What is wanted.
        back_azimuth_rad
            Azimuth at the receiver toward the source; that of a flat Earth when not given.
        source_spectrum
            Spectrum of the moment-rate function of unit area at the complex frequencies of the plan, shape
            (frequencies,); a moment step at time 0 when not given.

        Returns
        -------
        ndarray
            Shape (distances, 6, samples).
        """
        azimuth = np.broadcast_to(np.asarray(azimuth_rad, float), self.distance_m.shape)
        weights = element_weights(np.broadcast_to(moment_nm, (*azimuth.shape, 3, 3)), azimuth)
        weighted = self.motion_spectra(motion) * weights[:, :, None]
        spectra = np.stack([weighted[:, part].sum(axis=1) for part in COMPONENT_SLICES], axis=1)
        if source_spectrum is not None:
            spectra *= source_spectrum
        back = azimuth + np.pi if back_azimuth_rad is None else np.asarray(back_azimuth_rad, float)
        return to_east_north(self.plan.series(spectra), back)


def greens(
    model: LayeredModel,
    source_depth_km: float,
    distance_m: ArrayLike,
    plan: FrequencyPlan,
    report: Report | None = None,
) -> GreensTable:
    """Return the Green's functions of a source at one depth.

    Parameters
    ----------
    model
        Layered anelastic half-space.
    source_depth_km
        Depth of the source in km, not on an interface.
    distance_m
        Horizontal distances in m, positive, shape (distances,).
    plan
        Time axis and band.
    report
        Called as it goes with (done, total).

    Raises
    ------
    InputError
        When a distance is not positive, or the source is not below the surface or lies on an interface.

    Examples
    --------
    >>> from rupture.earth.layers import LayeredModel
    >>> rock = LayeredModel("rock", [0.0], [6.0], [3.46], [2700.0], [500.0], [250.0])
    >>> table = greens(rock, 10.0, [40e3, 80e3], FrequencyPlan(step_s=0.5, samples=128, high_hz=0.5))
    >>> table.series(Motion.DISPLACEMENT).shape
    (2, 18, 128)
    """
    return greens_at_depths(model, [source_depth_km], distance_m, plan, report)[0]


def greens_at_depths(
    model: LayeredModel,
    source_depth_km: ArrayLike,
    distance_m: ArrayLike,
    plan: FrequencyPlan,
    report: Report | None = None,
) -> list[GreensTable]:
    """Return the Green's functions of several source depths, in their order, from one run through the layers.

    Parameters, errors as for `greens`; `source_depth_km` has shape (depths,).
    """
    distance = checked_distances(distance_m)
    asked = np.atleast_1d(np.asarray(source_depth_km, float))
    depth, where = np.unique(asked, return_inverse=True)
    spectra = np.empty((depth.size * distance.size, len(ELEMENTS), plan.omega.size), complex)
    for block in integrate(model, depth, [distance] * depth.size, plan, report):
        spectra[block.first : block.first + block.spectra.shape[0], :, block.frequencies] = block.spectra
    by_depth = spectra.reshape(depth.size, distance.size, len(ELEMENTS), plan.omega.size)
    return [GreensTable(float(depth[d]), distance, plan, by_depth[d]) for d in where]


def checked_distances(distance_m: ArrayLike) -> NDArray[np.float64]:
    """Return distances as an array of floats; raise InputError when one is not positive or there is none."""
    distance = np.atleast_1d(np.asarray(distance_m, float))
    if distance.ndim != 1 or not distance.size:
        raise InputError("Distances must form a list of at least one number")
    if not (distance > 0).all():
        raise InputError(
            f"A receiver at {distance.min() / 1e3:g} km distance: radial and transverse are not defined there; "
            "give distances above zero"
        )
    return distance
