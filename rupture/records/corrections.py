"""Is a site installed as its metadata say? Wiring, orientation, gains, from the first P and S of a known event."""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from rupture.conventions import ACC_E, COMPONENTS, ROT_E, ROT_N, ROT_Z
from rupture.records.arrivals import Arrivals
from rupture.records.relations import Mean, Observation, Relation, circular_mean, mean_or_none, observe
from rupture.records.report import Calibration, Correction
from rupture.records.settings import CorrectionSettings
from rupture.site import Site

Array = NDArray[np.float64]

_FLOOR_RAD = np.radians(3.0)
"""A single window of a healthy site is off by about this (scattering; measured on synthetic records with coda)."""
_POLAR_FLOOR_RAD = np.radians(4.0)
_TORSION_FLOOR_RAD = np.radians(8.0)
_TORSION_ERROR_RAD = np.radians(15.0)
"""Vertical rotation fares worse: several waves at once enter it first; what averaging does not take away."""
_RELATIVE_ERROR_RAD = np.radians(4.5)
"""The same for torsion against tilt over all windows."""
_BENT_RAD = np.radians(3.0)
"""Rays leave the geodesic by about this in the crust (common practice)."""
_PRIOR_RAD = np.radians(5.0)
"""Axes named N and E may be off by this (FDSN source identifiers); the prior of what is left uncorrected."""
_LEAST_RAD = np.radians(5.0)
_SURE = 2.0
"""A turn is noticed when larger than `_LEAST_RAD` and than so many standard deviations."""
_SURE_ENOUGH = 3.0
"""It is applied only beyond so many: a healthy site must not be spoilt by a chance deviation."""
_CERTAIN = 2.0
"""Standard deviations taken off a deviation before it counts as a wiring fault."""
_WRONG_WIRING_RAD = np.radians(30.0)
"""Deviations up to this are called a turn; beyond, wiring faults are tried first."""
_POOR_FIT, _FIT_GAIN, _FIT_WEIGHT = 0.7, 0.15, 50.0
"""Coherence below which swaps with the vertical are tried, the gain that makes one credible, and its weight
beside the misfit of directions (own choice, on synthetic records)."""
_LEAST_SLOWNESS_S_M = 2e-5
"""Below 1/50 s/km the first P comes from below and its slowness is not known well enough."""
_LEAST_GAIN, _GAIN_ERROR = 0.48, 0.12
"""Factor of three, and the scatter of apparent velocities about the reference Earth, as decimal logarithms."""


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

    def misfit(self) -> float:
        """Return the sum of squares of all deviations over their errors, zero for a healthy site."""
        parts = [m for m in (self.tilt, self.torsion, self.polarisation) if m is not None]
        total = sum(m.value**2 / (m.error**2 + _BENT_RAD**2) for m in parts)
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
        chosen = [o for o in found if o.relation is relation and o.phase and o.phase in phases and o.explained > 0.3]
        found_mean = circular_mean(
            np.array([o.angle_rad - travel_azimuth_rad for o in chosen]),
            np.array([o.angle_error_rad for o in chosen]),
            floor,
        )
        return _widened(found_mean, common)

    tilts = {(o.time_s, o.band_hz): o for o in found if o.relation is Relation.TILT}
    pairs = [
        (o, tilts[o.time_s, o.band_hz])
        for o in found
        if o.relation is Relation.TORSION and (o.time_s, o.band_hz) in tilts
    ]
    pairs = [(v, h) for v, h in pairs if min(v.explained, h.explained) > 0.3]
    relative = circular_mean(
        np.array([v.angle_rad - h.angle_rad for v, h in pairs]),
        np.array([np.hypot(v.angle_error_rad, h.angle_error_rad) for v, h in pairs]),
        _TORSION_FLOOR_RAD,
    )
    return Angles(
        mean(Relation.TILT, "P", _FLOOR_RAD) or mean(Relation.TILT, "S", _TORSION_FLOOR_RAD, _TORSION_ERROR_RAD),
        mean(Relation.TORSION, "PS", _TORSION_FLOOR_RAD, _TORSION_ERROR_RAD),
        mean(Relation.POLARISATION, "P", _POLAR_FLOOR_RAD),
        _widened(relative, _RELATIVE_ERROR_RAD),
    )


def _widened(mean: Mean | None, by: float) -> Mean | None:
    return None if mean is None else replace(mean, error=float(np.hypot(mean.error, by)))


@dataclass(frozen=True)
class Wiring:
    """A wiring fault: which component is found in which place, and with which sign.

    Attributes
    ----------
    name
        In words.
    source, sign
        Repair: component i of the repaired site is `sign[i]` times component `source[i]`; both of length 6.
    """

    name: str
    source: tuple[int, ...]
    sign: tuple[int, ...]

    def repair(self, site: Site) -> Site:
        """Return the site with the fault undone."""
        order, sign = list(self.source), np.array(self.sign, float)[:, None]
        return replace(site, data=sign * site.data[order], valid=site.valid[order])

    def after(self, other: Wiring) -> Wiring:
        """Return the repair of both faults, the other one first."""
        source = tuple(other.source[i] for i in self.source)
        sign = tuple(s * other.sign[i] for s, i in zip(self.sign, self.source, strict=True))
        return Wiring(f"{other.name}; {self.name}", source, sign)


def wiring_faults() -> list[Wiring]:
    """Return the single faults looked for: one component reversed, both horizontals reversed, two swapped."""
    straight = tuple(range(6))
    faults = []
    groups = [(i,) for i in straight] + [(0, 1), (3, 4)]
    for group in groups:
        sign = tuple(-1 if i in group else 1 for i in straight)
        faults.append(Wiring(f"{' and '.join(COMPONENTS[i] for i in group)} reversed", straight, sign))
    for a, b in [*itertools.combinations(range(3), 2), *itertools.combinations(range(3, 6), 2)]:
        source = tuple(b if i == a else a if i == b else i for i in straight)
        faults.append(Wiring(f"{COMPONENTS[a]} and {COMPONENTS[b]} swapped", source, (1,) * 6))
    return faults


def find_wiring(
    site: Site, found: Sequence[Observation], arrivals: Arrivals, travel_azimuth_rad: float
) -> Wiring | None:
    """Return the wiring fault that explains a site far off, or one whose rotation does not fit; None for others.

    One fault is preferred to two. A fault is named only when its repair brings every deviation back to what
    a turn could be and the misfit to a fraction; or, for a vertical in the place of a horizontal, when rotation
    and acceleration then fit clearly better.

    Parameters
    ----------
    site
        Records.
    found
        Its observations.
    arrivals, travel_azimuth_rad
        For observing the repaired site.
    """
    angles, fit = deviations(found, travel_azimuth_rad), coherence(found)
    far_off = angles.worst() >= _WRONG_WIRING_RAD
    if not far_off and not fit < _POOR_FIT:
        return None
    singles = [f for f in wiring_faults() if _concerns(f, site)]
    pairs = [b.after(a) for a, b in itertools.permutations(singles, 2)] if far_off else []
    for candidates in (singles, _distinct(pairs)):
        tried = []
        for fault in candidates:
            repaired = observe(fault.repair(site), arrivals)
            after, new_fit = deviations(repaired, travel_azimuth_rad), coherence(repaired)
            gained = new_fit - fit if np.isfinite(new_fit) else 0.0
            explains = after.misfit() < 0.25 * angles.misfit() and gained > -_FIT_GAIN
            if after.worst() < _WRONG_WIRING_RAD and ((far_off and explains) or gained > _FIT_GAIN):
                tried.append((after.misfit() - _FIT_WEIGHT * gained, fault))
        if tried:
            return min(tried, key=lambda t: t[0])[1]
    return None


def _concerns(fault: Wiring, site: Site) -> bool:
    """Whether a fault touches components that the site has, and only those."""
    moved = [i for i in range(6) if fault.source[i] != i or fault.sign[i] < 0]
    return bool(site.present[moved].all())


def _distinct(faults: Sequence[Wiring]) -> list[Wiring]:
    return list({(f.source, f.sign): f for f in faults}.values())


def turn_sensor(site: Site, first: int, angle_rad: float) -> Site:
    """Return the site with one sensor's horizontals turned back.

    Parameters
    ----------
    site
        Records.
    first
        Row of the sensor's east component: ACC_E or ROT_E.
    angle_rad
        By how much the sensor stands clockwise of its metadata.
    """
    data, valid = site.data.copy(), site.valid.copy()
    c, s = np.cos(angle_rad), np.sin(angle_rad)
    both = site.valid[first] & site.valid[first + 1]
    data[first] = c * site.data[first] + s * site.data[first + 1]
    data[first + 1] = -s * site.data[first] + c * site.data[first + 1]
    valid[first : first + 2] = both
    return replace(site, data=np.where(valid, data, 0.0), valid=valid)


def weighted(parts: Sequence[Mean]) -> Mean | None:
    """Return the inverse-variance mean of deviations (rad); its error grows where they contradict each other."""
    if not parts:
        return None
    centre = min(parts, key=lambda m: m.error).value
    mean = mean_or_none([_moved(m, -centre) for m in parts])
    return None if mean is None else _moved(mean, centre)


def relative_turn(angles: Angles) -> Mean | None:
    """Return by how much the rotation sensor stands clockwise of the translation sensor."""
    parts = [angles.relative] if angles.relative is not None else []
    if angles.tilt is not None and angles.polarisation is not None:
        both = float(np.hypot(angles.polarisation.error, angles.tilt.error))
        parts.append(replace(_moved(angles.polarisation, -angles.tilt.value), error=both))
    return weighted(parts)


def azimuth_bias(angles: Angles) -> Mean | None:
    """Return by how much the whole site sees the first P and S clockwise of the geodesic."""
    return weighted([m for m in (angles.tilt, angles.torsion, angles.polarisation) if m is not None])


def noticed(mean: Mean) -> bool:
    """Whether a turn is larger than its error and large enough to matter."""
    return bool(abs(mean.value) > max(_LEAST_RAD, _SURE * mean.error))


def _sure(mean: Mean) -> bool:
    return noticed(mean) and abs(mean.value) > _SURE_ENOUGH * mean.error


_NOTHING_KNOWN = Calibration()


@dataclass(frozen=True)
class Examined:
    """A site after examination: corrected records, findings, what is left of its azimuth's uncertainty."""

    site: Site
    corrections: tuple[Correction, ...]
    coherence: float


def examine(
    site: Site,
    arrivals: Arrivals,
    travel_azimuth_rad: float,
    apply: CorrectionSettings,
    known: Calibration = _NOTHING_KNOWN,
) -> Examined:
    """Look for wiring faults, turned sensors and wrong gains; correct what the settings allow.

    Parameters
    ----------
    site
        Records; the clocks of both sensors agree already.
    arrivals
        First P and S.
    travel_azimuth_rad
        Azimuth in which waves from the hypocentre travel at the site.
    apply
        Which findings change the records.
    known
        What other earthquakes have said; averaged with what this one says.
    """
    findings: list[Correction] = []
    found = observe(site, arrivals)
    angles = deviations(found, travel_azimuth_rad)
    wiring = find_wiring(site, found, arrivals, travel_azimuth_rad)
    if wiring is not None:
        findings.append(Correction("polarity", np.nan, np.nan, "1", True, apply.polarity, wiring.name))
        repaired = wiring.repair(site)
        angles = deviations(observe(repaired, arrivals), travel_azimuth_rad)
        site = repaired if apply.polarity else site
    elif angles.worst() > _WRONG_WIRING_RAD and angles.misfit() > 25.0:
        note = f"directions deviate by up to {np.degrees(angles.worst()):.0f} deg; no single or double wiring fault explains it"
        findings.append(Correction("polarity", np.nan, np.nan, "1", True, False, note))
    site, angles = _relative(site, angles, apply, known, findings)
    site = _bias(site, angles, apply, known, findings)
    found = observe(site, arrivals)
    site = _gain(site, found, arrivals, apply, findings)
    return Examined(site, tuple(findings), coherence(found))


def _pooled(own: Mean | None, other_deg: tuple[float, float] | None) -> Mean | None:
    other = Mean(float(np.radians(other_deg[0])), float(np.radians(other_deg[1])), 1) if other_deg is not None else None
    return mean_or_none([m for m in (own, other) if m is not None])


def _relative(
    site: Site, angles: Angles, apply: CorrectionSettings, known: Calibration, findings: list[Correction]
) -> tuple[Site, Angles]:
    turn = _pooled(relative_turn(angles), known.turn_deg)
    if turn is None:
        return site, angles
    seen = noticed(turn)
    of_translation = azimuth_bias(replace(angles, tilt=None))
    rotation_off = abs(angles.tilt.value) if angles.tilt is not None else np.inf
    translation_off = abs(of_translation.value) if of_translation is not None else np.inf
    which = "rotation" if rotation_off >= translation_off else "translation"
    side = "clockwise" if turn.value > 0 else "anticlockwise"
    note = f"the rotation sensor stands {abs(np.degrees(turn.value)):.1f} deg {side} of the translation sensor"
    if seen:
        note += f"; the {which} sensor deviates more from the geodesic and is taken as turned"
    applied = seen and apply.turn and _sure(turn)
    findings.append(_degrees("relative turn", turn, seen, applied, note))
    if not applied:
        # Half of what may be wrong widens the direction of a site that is left as it is.
        extra = 0.5 * abs(turn.value) if seen else 0.0
        return replace(site, azimuth_error_rad=float(np.hypot(site.azimuth_error_rad, extra))), angles
    tilt, torsion, polar = angles.tilt, angles.torsion, angles.polarisation
    if which == "rotation":
        turned, tilt = turn_sensor(site, ROT_E, turn.value), _moved_too(tilt, turn.value)
    else:
        turned = turn_sensor(site, ACC_E, -turn.value)
        torsion, polar = _moved_too(torsion, -turn.value), _moved_too(polar, -turn.value)
    relative = _moved_too(angles.relative, -turn.value)
    return turned, Angles(tilt, torsion, polar, relative)


def _moved(mean: Mean, by: float) -> Mean:
    return replace(mean, value=float((mean.value + by + np.pi) % (2.0 * np.pi) - np.pi))


def _moved_too(mean: Mean | None, by: float) -> Mean | None:
    return None if mean is None else _moved(mean, by)


def _bias(
    site: Site, angles: Angles, apply: CorrectionSettings, known: Calibration, findings: list[Correction]
) -> Site:
    own = azimuth_bias(angles)
    if own is not None:
        own = replace(own, error=float(np.hypot(own.error, _BENT_RAD)))
    bias = _pooled(own, known.azimuth_deg)
    if bias is None:
        return replace(site, azimuth_error_rad=float(np.hypot(site.azimuth_error_rad, _PRIOR_RAD)))
    error = bias.error
    seen = noticed(bias)
    side = "clockwise" if bias.value > 0 else "anticlockwise"
    note = f"the first P and S come in {abs(np.degrees(bias.value)):.1f} deg {side} of the geodesic"
    applied = seen and apply.azimuth and _sure(bias)
    findings.append(_degrees("azimuth", bias, seen, applied, note))
    # What is left: the error of the estimate, or, uncorrected, what prior and estimate together leave open.
    left = error if applied else max((error**-2.0 + _PRIOR_RAD**-2.0) ** -0.5, 0.5 * abs(bias.value) if seen else 0.0)
    if applied:
        for first in (ACC_E, ROT_E):
            site = turn_sensor(site, first, -bias.value)
    return replace(site, azimuth_error_rad=float(np.hypot(site.azimuth_error_rad, left)))


def _degrees(kind: str, mean: Mean, seen: bool, applied: bool, note: str) -> Correction:
    return Correction(kind, float(np.degrees(mean.value)), float(np.degrees(mean.error)), "deg", seen, applied, note)


def gain_ratio(found: Sequence[Observation], relation: Relation, arrivals: Arrivals) -> Mean | None:
    """Return the decimal logarithm of rotation over what translation predicts.

    Rotation over acceleration is slowness, and a reference Earth knows that of the first P (for the tilt) and
    S (for the torsion) to some tenths. Near the epicentre, where waves come from below, it does not say.

    Parameters
    ----------
    found
        Observations.
    relation
        Tilt (horizontal rotations) or torsion (vertical rotation).
    arrivals
        Slowness of the first P and S.
    """
    phase, slowness = ("P", arrivals.p_slowness_s_m) if relation is Relation.TILT else ("S", arrivals.s_slowness_s_m)
    sizes = [o.slowness_s_m for o in found if o.relation is relation and o.phase == phase and o.explained > 0.3]
    if not sizes or not slowness > _LEAST_SLOWNESS_S_M:
        return None
    logs = np.log10(np.array(sizes) / slowness)
    scatter = float(np.std(logs)) / max(0.5 * len(logs), 1.0) ** 0.5
    return Mean(float(np.median(logs)), float(np.hypot(_GAIN_ERROR, scatter)), len(logs))


def _gain(
    site: Site,
    found: Sequence[Observation],
    arrivals: Arrivals,
    apply: CorrectionSettings,
    findings: list[Correction],
) -> Site:
    for relation, name, rows in (
        (Relation.TILT, "horizontal rotation", [ROT_E, ROT_N]),
        (Relation.TORSION, "vertical rotation", [ROT_Z]),
    ):
        ratio = gain_ratio(found, relation, arrivals)
        if ratio is None:
            continue
        seen = abs(ratio.value) > max(_LEAST_GAIN, _SURE * ratio.error)
        factor = 10.0**ratio.value
        size = f"{factor:.3g} times" if factor >= 1 else f"1/{1 / factor:.3g} of"
        note = f"{name} is {size} what the accelerations predict"
        note += "; one of the two sensitivities is wrong" if seen else ""
        applied = seen and apply.gain
        findings.append(Correction(f"gain of {name}", ratio.value, ratio.error, "log10", seen, applied, note))
        if applied:
            data = site.data.copy()
            data[rows] /= factor
            site = replace(site, data=data)
    return site


def coherence(found: Sequence[Observation]) -> float:
    """Return the median share of rotation that the matching accelerations explain; NaN where rotation is missing."""
    shares = [o.explained for o in found if o.relation is not Relation.POLARISATION]
    return float(np.median(shares)) if shares else float("nan")
