"""Rotation of the ground from a plane through several sensors, and how far it can be believed."""

from __future__ import annotations

import warnings
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rupture.records.report import UnusableError

Array = NDArray[np.float64]
Bool = NDArray[np.bool_]

_FLATTEST = 0.2
"""Narrowest shape, as the ratio of the array's two widths: below it the stations stand in a line."""
_VP_OVER_VS = np.sqrt(3.0)
"""Poisson solid; matters only where stations differ in height."""
_SPARE = 0.8
"""A subset left by gaps is used where its own limit is at least this share of the whole array's."""

_MOST_WEIGHT = 3.0
"""Weights of a sum of one whose magnitudes sum up to more than this would rather amplify noise than mend a bias."""


@dataclass(frozen=True)
class ArrayGeometry:
    """Places of the sensors about their centre.

    Attributes
    ----------
    places_m
        East, north, up of each sensor from the mean place, shape (sensors, 3).
    """

    places_m: Array

    @property
    def aperture_m(self) -> float:
        """Largest horizontal distance between two sensors."""
        d = self.places_m[:, None, :2] - self.places_m[None, :, :2]
        return float(np.sqrt((d**2).sum(axis=-1)).max())

    @property
    def plane(self) -> Array:
        """Weights of the sensors in value, east slope and north slope of the best plane, shape (3, sensors)."""
        return plane_weights(self.places_m[:, :2])


def plane_weights(places_m: Array) -> Array:
    """Return least-squares weights of a plane at the origin.

    Parameters
    ----------
    places_m
        East and north of each sensor, shape (sensors, 2).

    Returns
    -------
    ndarray
        Rows value, d/dEast, d/dNorth; shape (3, sensors).

    Raises
    ------
    UnusableError
        Fewer than three sensors, or sensors in a line.
    """
    if len(places_m) < 3:
        raise UnusableError(f"{len(places_m)} sensors: a plane needs three")
    widths = np.linalg.svd(places_m - places_m.mean(axis=0), compute_uv=False)
    if widths[1] < _FLATTEST * widths[0]:
        raise UnusableError(
            f"the sensors stand in a line (width {100 * widths[1] / widths[0]:.0f} % of the length): no gradient across it"
        )
    return np.linalg.pinv(np.column_stack([np.ones(len(places_m)), places_m]))


def value_weights(places_m: Array) -> Array:
    """Return the weights of the motion at the centre that a wave's curvature lowers as it lowers the plane's slope.

    Over a wavelength a plane's slope falls by the sensors' fourth moment, its value by their second, so that slope over
    value, which is slowness, comes out too large. Weights nearest to those of the plane are taken whose second moment,
    in the mean over directions, is the one that makes both fall alike to second order of the wavenumber. Where the
    sensors leave no choice (all at one distance from the centre) they are the plane's own.

    Parameters
    ----------
    places_m
        East and north of the sensors about their centre, shape (sensors, 2).

    Returns
    -------
    ndarray
        Shape (sensors,), sum one.

    Raises
    ------
    UnusableError
        As `plane_weights`.

    Examples
    --------
    A cross with a sensor in the middle, which takes more than a fifth:

    >>> cross = np.array([[0.0, 0.0], [1, 0], [-1, 0], [0, 1], [0, -1]])
    >>> value_weights(cross).round(3).tolist()
    [0.5, 0.125, 0.125, 0.125, 0.125]
    """
    plane = plane_weights(places_m)
    size = np.abs(places_m).max()
    angles = np.arange(12) * np.pi / 12
    along = np.stack([np.sin(angles), np.cos(angles)])
    place = places_m @ along
    slope = np.einsum("kd,km->md", along, plane[1:])
    moment = float((slope * place**3).sum(axis=0).mean()) / 3.0
    rules = np.stack([np.ones(len(places_m)), *(places_m.T / size), (places_m**2).sum(axis=1) / (2.0 * size**2)])
    wanted = np.array([1.0, 0.0, 0.0, moment / size**2])
    if np.linalg.matrix_rank(rules, rtol=1e-3) < len(rules):
        return np.asarray(plane[0])
    weights = plane[0] + np.linalg.pinv(rules) @ (wanted - rules @ plane[0])
    return np.asarray(weights if np.abs(weights).sum() < _MOST_WEIGHT else plane[0])


def strain_error(places_m: Array, wavenumber_rad_m: Array, directions: int = 36) -> Array:
    """Return the largest relative error of gradient over mean motion that a plane wave's curvature brings.

    The estimator compares array rotation with array translation, so what counts is the slope of the plane
    over the value at the centre, not the slope alone: both are lowered by the averaging.

    Parameters
    ----------
    places_m
        East and north of the sensors about their centre, shape (sensors, 2).
    wavenumber_rad_m
        Horizontal wavenumbers, shape (K,).
    directions
        Number of directions of propagation tried over half a turn.

    Returns
    -------
    ndarray
        Shape (K,); infinite where the mean motion vanishes.
    """
    weights = plane_weights(places_m)
    theta = np.arange(directions) * np.pi / directions
    along = np.stack([np.sin(theta), np.cos(theta)])
    phase = np.exp(-1j * wavenumber_rad_m[:, None, None] * (places_m @ along)[None])
    value, slope = phase_sum(value_weights(places_m), phase), np.stack([phase_sum(w, phase) for w in weights[1:]])
    true = -1j * wavenumber_rad_m[:, None] * along[:, None, :] * value
    with np.errstate(divide="ignore", invalid="ignore"):
        error = np.linalg.norm(slope - true, axis=0) / np.linalg.norm(true, axis=0)
    return np.asarray(np.nan_to_num(error, nan=np.inf).max(axis=1))


def phase_sum(weights: Array, phase: NDArray[np.complex128]) -> NDArray[np.complex128]:
    """Return the weighted sum over sensors, shapes (M,), (K, M, D) -> (K, D)."""
    return np.einsum("m,kmd->kd", weights, phase)


def highest_wavenumber(places_m: Array, error_share: float) -> float:
    """Return the wavenumber in rad/m up to which `strain_error` stays below a share.

    Parameters
    ----------
    places_m
        East and north of the sensors about their centre, shape (sensors, 2).
    error_share
        Allowed error.
    """
    aperture = ArrayGeometry(np.column_stack([places_m, np.zeros(len(places_m))])).aperture_m
    k = np.geomspace(0.02, 4.0 * np.pi, 300) / aperture
    over = strain_error(places_m, k) > error_share
    return float(k[int(np.argmax(over)) - 1]) if over.any() else float(k[-1])


def rotation_weights(places_m: Array, has: Bool) -> tuple[Array, Bool]:
    """Return the weights that turn sensor motion into rotation at the free surface.

    With three components at every sensor: the generalised inverse of ObsPy's array strain and rotation solver
    (Spudich et al. 1995; Spudich & Fletcher 2008). Verticals alone: the stress-free surface makes
    du_N/dz = -du_z/dN and du_E/dz = -du_z/dE, so rot_E = du_z/dN and rot_N = -du_z/dE.

    Parameters
    ----------
    places_m
        East, north, up of the sensors about the centre, shape (sensors, 3).
    has
        Which sensor has East, North, Up, shape (sensors, 3).

    Returns
    -------
    weights, possible
        Shape (3, sensors, 3), per m, rotation from motion of the same order of differentiation (rotation
        rate from velocity); and shape (3,): which of rot_E, rot_N, rot_Z there are.
    """
    weights = np.zeros((3, *places_m.shape))
    possible = np.zeros(3, bool)
    whole, vertical = has.all(axis=1), has[:, 2]
    try:
        if whole.sum() >= 3:
            weights[:, whole] = _solver_weights(places_m[whole])
            possible[:] = True
    except UnusableError:
        possible[:] = False
        weights[:] = 0.0
    if vertical.sum() > whole.sum() or not possible[0]:
        try:
            _, east, north = plane_weights(places_m[vertical, :2])
        except UnusableError:
            return weights, possible
        weights[:2] = 0.0
        weights[0, vertical, 2], weights[1, vertical, 2] = north, -east
        possible[:2] = True
    return weights, possible


def _solver_weights(places_m: Array) -> Array:
    from obspy.signal.array_analysis import array_rotation_strain

    plane_weights(places_m[:, :2])
    count = len(places_m)
    size = np.abs(places_m[:, :2]).max()
    # The solver is linear: one made-up sample gives its inverse, which then turns all samples in one product.
    sample = np.arange(1.0, count + 1.0)[None, :]
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        solved = array_rotation_strain(
            np.arange(count), sample, sample**2, sample**3, _VP_OVER_VS, 1.0, places_m / size, 1.0
        )
    inverse = solved["g"].reshape(6, count - 1, 3) / size
    gradients = np.concatenate([-inverse.sum(axis=1, keepdims=True), inverse], axis=1)
    return np.stack([-gradients[5], gradients[2], 0.5 * (gradients[3] - gradients[1])])


def array_motion(
    places_m: Array,
    acceleration: Array,
    velocity: Array,
    valid: Bool,
    needed_wavenumber_rad_m: float,
    error_share: float,
) -> tuple[Array, Bool]:
    """Return the six components at the centre of an array.

    Parameters
    ----------
    places_m
        East, north, up of the sensors about the centre, shape (sensors, 3).
    acceleration, velocity, valid
        Shape (sensors, 3, samples), East, North, Up.
    needed_wavenumber_rad_m
        A subset that gaps leave is used only where its own limit comes near this.
    error_share
        Error that sets the limit.

    Returns
    -------
    data, valid
        Shape (6, samples): acceleration at the centre from the plane's value, rotation rate from its slopes.
    """
    samples = valid.shape[-1]
    data, good = np.zeros((6, samples)), np.zeros((6, samples), bool)
    patterns, which = np.unique(valid.reshape(-1, samples), axis=1, return_inverse=True)
    for number, pattern in enumerate(patterns.T):
        has = pattern.reshape(-1, 3)
        here = np.flatnonzero(which.ravel() == number)
        for component in range(3):
            _plane_value(
                places_m, has[:, component], acceleration[:, component], here, data[component], good[component]
            )
        weights, possible = rotation_weights(places_m, has)
        for component in np.flatnonzero(possible).tolist():
            part = has[:, 2] if component < 2 else has.all(axis=1)
            centred = places_m[part, :2] - places_m[part, :2].mean(axis=0)
            if highest_wavenumber(centred, error_share) < _SPARE * needed_wavenumber_rad_m:
                continue
            data[3 + component, here] = np.einsum("mc,mct->t", weights[component], velocity[:, :, here])
            good[3 + component, here] = True
    return data, good


def _plane_value(places_m: Array, has: Bool, motion: Array, here: NDArray[np.intp], data: Array, good: Bool) -> None:
    if not has.any():
        return
    try:
        weights = value_weights(places_m[has, :2] - places_m[has, :2].mean(axis=0))
    except UnusableError:
        return
    data[here] = weights @ motion[np.ix_(has, here)]
    good[here] = True


def compact_group(places_m: Array, centre: int, error_share: float, wavenumber_rad_m: float) -> tuple[list[int], float]:
    """Return the best set of sensors nearest to one of them that still resolves a wavenumber.

    More sensors lower the noise, a wider array lowers the highest frequency: the product of number and
    highest wavenumber decides.

    Parameters
    ----------
    places_m
        East and north of all candidates, shape (sensors, 2).
    centre
        Index of the sensor in the middle.
    error_share, wavenumber_rad_m
        The set's `strain_error` at this wavenumber must not exceed the share.

    Returns
    -------
    members, score
        Indices (empty if no set serves) and that product in rad/m.
    """
    distance = np.linalg.norm(places_m - places_m[centre], axis=1)
    order = np.argsort(distance, kind="stable")
    best: list[int] = []
    best_score = 0.0
    for count in range(3, len(order) + 1):
        # Stations at the same distance come in together, so that the set stays round.
        if count < len(order) and distance[order[count]] < 1.1 * distance[order[count - 1]]:
            continue
        chosen = places_m[order[:count]]
        if distance[order[count - 1]] * wavenumber_rad_m > 2.0 * np.pi:
            break
        try:
            limit = highest_wavenumber(chosen - chosen.mean(axis=0), error_share)
        except UnusableError:
            continue
        if limit >= wavenumber_rad_m and limit * count > best_score:
            best, best_score = [int(i) for i in order[:count]], limit * count
    return best, best_score
