"""Is a site installed as its metadata say? Wiring, orientation, gains, from the first P and S of a known event."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from rupture.conventions import ACC_E, ROT_E, ROT_N, ROT_Z
from rupture.records.angles import (
    BENT_RAD,
    EXPLAINED,
    Angles,
    azimuth_bias,
    coherence,
    deviations,
    moved_too,
    relative_turn,
    widened,
)
from rupture.records.arrivals import Arrivals
from rupture.records.relations import Mean, Observation, Relation, mean_or_none, observe
from rupture.records.report import Calibration, Correction
from rupture.records.settings import CorrectionSettings
from rupture.records.wiring import WRONG_WIRING_RAD, find_wiring
from rupture.site import Site

_ALONE_RAD = np.radians(10.0)
"""Scatter of the first motion of P as the only witness (seen on real strong-motion records)."""
_FEWEST_ALONE = 3
"""Windows that it needs."""
_WORST_RAD = np.radians(20.0)
"""Most by which a suspicion widens the directions of a site."""
_PRIOR_RAD = np.radians(5.0)
"""Axes named N and E may be off by this (FDSN source identifiers); the prior of what is left uncorrected."""
_LEAST_RAD = np.radians(5.0)
_SURE = 1.7
"""A turn is noticed when larger than `_LEAST_RAD` and than so many standard deviations."""
_SURE_ENOUGH = 3.0
"""It is applied only beyond so many: a healthy site must not be spoilt by a chance deviation."""
_HOPELESS = 25.0
"""Misfit (sum of squares over errors) beyond which a site is told to be off even when no fault explains it."""
_LEAST_SLOWNESS_S_M = 2e-5
"""Below 1/50 s/km the first P comes from below and its slowness is not known well enough."""
_LEAST_GAIN, _GAIN_ERROR = 0.48, 0.12
"""Factor of three, and the scatter of apparent velocities about the reference Earth, as decimal logarithms."""


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
    before = site
    found = observe(site, arrivals)
    angles = deviations(found, travel_azimuth_rad)
    wiring = find_wiring(site, found, arrivals, travel_azimuth_rad)
    if wiring is not None:
        findings.append(Correction("polarity", np.nan, np.nan, "1", True, apply.polarity, wiring.name))
        repaired = wiring.repair(site)
        angles = deviations(observe(repaired, arrivals), travel_azimuth_rad)
        site = repaired if apply.polarity else site
    elif angles.relations > 1 and angles.worst() > WRONG_WIRING_RAD and angles.misfit() > _HOPELESS:
        note = f"directions deviate by up to {np.degrees(angles.worst()):.0f} deg; no single or double wiring fault explains it"
        findings.append(Correction("polarity", np.nan, np.nan, "1", True, False, note))
    site, angles = _relative(site, angles, apply, known, findings)
    site = _bias(site, angles, apply, known, findings)
    if site.data is not before.data:
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
        extra = min(0.5 * abs(turn.value), _WORST_RAD) if seen else 0.0
        return replace(site, azimuth_error_rad=float(np.hypot(site.azimuth_error_rad, extra))), angles
    tilt, torsion, polar = angles.tilt, angles.torsion, angles.polarisation
    if which == "rotation":
        turned, tilt = turn_sensor(site, ROT_E, turn.value), moved_too(tilt, turn.value)
    else:
        turned = turn_sensor(site, ACC_E, -turn.value)
        torsion, polar = moved_too(torsion, -turn.value), moved_too(polar, -turn.value)
    relative = moved_too(angles.relative, -turn.value)
    return turned, Angles(tilt, torsion, polar, relative)


def _bias(
    site: Site, angles: Angles, apply: CorrectionSettings, known: Calibration, findings: list[Correction]
) -> Site:
    own = azimuth_bias(angles)
    # The first motion alone is easily led astray by scattering under the site.
    alone = angles.tilt is None and angles.torsion is None
    if alone and own is not None and own.number < _FEWEST_ALONE:
        own = None
    if own is not None:
        own = widened(own, _ALONE_RAD if alone else BENT_RAD)
    bias = _pooled(own, known.azimuth_deg)
    if bias is None:
        return replace(site, azimuth_error_rad=float(np.hypot(site.azimuth_error_rad, _PRIOR_RAD)))
    error = bias.error
    seen = noticed(bias)
    side = "clockwise" if bias.value > 0 else "anticlockwise"
    note = f"the first P and S come in {abs(np.degrees(bias.value)):.1f} deg {side} of the geodesic"
    applied = seen and apply.azimuth and _sure(bias) and not (alone and known.azimuth_deg is None)
    findings.append(_degrees("azimuth", bias, seen, applied, note))
    # What is left: the error of the estimate, or, uncorrected, what prior and estimate together leave open.
    left = (
        error
        if applied
        else max((error**-2.0 + _PRIOR_RAD**-2.0) ** -0.5, min(0.5 * abs(bias.value), _WORST_RAD) if seen else 0.0)
    )
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
    sizes = [o.slowness_s_m for o in found if o.relation is relation and o.phase == phase and o.explained > EXPLAINED]
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
