"""How far the first P and S of a known event deviate from where they should come from, relation by relation."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from rupture.records.relations import Mean, Observation, Relation, circular_mean, mean_or_none

_FLOOR_RAD = np.radians(3.0)
"""A single window of a healthy site is off by about this (scattering; measured on synthetic records with coda)."""
_POLAR_FLOOR_RAD = np.radians(4.0)
_TORSION_FLOOR_RAD = np.radians(8.0)
_TORSION_ERROR_RAD = np.radians(15.0)
"""Vertical rotation fares worse: several waves at once enter it first; what averaging does not take away."""
_RELATIVE_ERROR_RAD = np.radians(4.5)
"""The same for torsion against tilt over all windows."""
BENT_RAD = np.radians(3.0)
"""Rays leave the geodesic by about this in the crust (common practice)."""
_CERTAIN = 2.0
"""Standard deviations taken off a deviation before it counts as a wiring fault."""
EXPLAINED, LINEAR = 0.3, 0.6
"""Share that a relation must explain to be heard; a first motion must be nearly linear (own choice, after real
strong-motion records of a deep earthquake in a basin, where it mostly is not)."""


@dataclass(frozen=True)
class Angles:
    """How the first P and S deviate from the geodesic, in rad, per relation; and the two sensors from each other.

    Attributes
    ----------
    tilt, torsion, polarisation
        Azimuth of propagation less the geodesic's; None where there is no observation.
    relative
        Torsion less tilt over all windows.
    """

    tilt: Mean | None
    torsion: Mean | None
    polarisation: Mean | None
    relative: Mean | None

    @property
    def relations(self) -> int:
        """Number of relations that have an observation of the first P or S."""
        return sum(m is not None for m in (self.tilt, self.torsion, self.polarisation))

    def misfit(self) -> float:
        """Return the sum of squares of all deviations over their errors, zero for a healthy site."""
        parts = [m for m in (self.tilt, self.torsion, self.polarisation) if m is not None]
        total = sum(m.value**2 / (m.error**2 + BENT_RAD**2) for m in parts)
        return total + (self.relative.value**2 / self.relative.error**2 if self.relative is not None else 0.0)

    def worst(self) -> float:
        """Return the largest deviation in rad that its error does not explain."""
        parts = (self.tilt, self.torsion, self.polarisation, self.relative)
        return max((abs(m.value) - _CERTAIN * m.error for m in parts if m is not None), default=0.0)


def deviations(found: Sequence[Observation], travel_azimuth_rad: float) -> Angles:
    """Return the mean deviations of a site's observations from the direction of the geodesic.

    Parameters
    ----------
    found
        From `rupture.records.relations.observe`.
    travel_azimuth_rad
        Azimuth in which waves from the hypocentre travel at the site.
    """

    def mean(relation: Relation, phases: str, floor: float, common: float = 0.0) -> Mean | None:
        least = LINEAR if relation is Relation.POLARISATION else EXPLAINED
        chosen = [o for o in found if o.relation is relation and o.phase and o.phase in phases and o.explained > least]
        found_mean = circular_mean(
            np.array([o.angle_rad - travel_azimuth_rad for o in chosen]),
            np.array([o.angle_error_rad for o in chosen]),
            floor,
        )
        return widened(found_mean, common)

    tilts = {(o.time_s, o.band_hz): o for o in found if o.relation is Relation.TILT}
    pairs = [
        (o, tilts[o.time_s, o.band_hz])
        for o in found
        if o.relation is Relation.TORSION and (o.time_s, o.band_hz) in tilts
    ]
    pairs = [(v, h) for v, h in pairs if min(v.explained, h.explained) > EXPLAINED]
    relative = circular_mean(
        np.array([v.angle_rad - h.angle_rad for v, h in pairs]),
        np.array([np.hypot(v.angle_error_rad, h.angle_error_rad) for v, h in pairs]),
        _TORSION_FLOOR_RAD,
    )
    return Angles(
        mean(Relation.TILT, "P", _FLOOR_RAD) or mean(Relation.TILT, "S", _TORSION_FLOOR_RAD, _TORSION_ERROR_RAD),
        mean(Relation.TORSION, "PS", _TORSION_FLOOR_RAD, _TORSION_ERROR_RAD),
        mean(Relation.POLARISATION, "P", _POLAR_FLOOR_RAD),
        widened(relative, _RELATIVE_ERROR_RAD),
    )


def widened(mean: Mean | None, by: float) -> Mean | None:
    """Add an independent error, where there is an angle."""
    return None if mean is None else replace(mean, error=float(np.hypot(mean.error, by)))


def coherence(found: Sequence[Observation]) -> float:
    """Return the median share of rotation that the matching accelerations explain; NaN where rotation is missing."""
    shares = [o.explained for o in found if o.relation is not Relation.POLARISATION]
    return float(np.median(shares)) if shares else float("nan")


def weighted(parts: Sequence[Mean]) -> Mean | None:
    """Return the inverse-variance mean of deviations (rad); its error grows where they contradict each other."""
    if not parts:
        return None
    centre = min(parts, key=lambda m: m.error).value
    mean = mean_or_none([moved(m, -centre) for m in parts])
    return None if mean is None else moved(mean, centre)


def relative_turn(angles: Angles) -> Mean | None:
    """Return by how much the rotation sensor stands clockwise of the translation sensor."""
    parts = [angles.relative] if angles.relative is not None else []
    if angles.tilt is not None and angles.polarisation is not None:
        both = float(np.hypot(angles.polarisation.error, angles.tilt.error))
        parts.append(replace(moved(angles.polarisation, -angles.tilt.value), error=both))
    return weighted(parts)


def azimuth_bias(angles: Angles) -> Mean | None:
    """Return by how much the whole site sees the first P and S clockwise of the geodesic."""
    return weighted([m for m in (angles.tilt, angles.torsion, angles.polarisation) if m is not None])


def moved(mean: Mean, by: float) -> Mean:
    """Return an angle moved by so many rad, wrapped to half a turn either way."""
    return replace(mean, value=float((mean.value + by + np.pi) % (2.0 * np.pi) - np.pi))


def moved_too(mean: Mean | None, by: float) -> Mean | None:
    """Do the same where there is an angle."""
    return None if mean is None else moved(mean, by)
