"""Wiring faults: components with the wrong sign or in each other's place."""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from rupture.conventions import COMPONENTS
from rupture.records.angles import coherence, deviations
from rupture.records.arrivals import Arrivals
from rupture.records.relations import Observation, observe
from rupture.site import Site

WRONG_WIRING_RAD = np.radians(30.0)
"""Deviations up to this are called a turn; beyond, wiring faults are tried first."""
_POOR_FIT, _FIT_GAIN, _FIT_WEIGHT = 0.7, 0.15, 50.0
"""Coherence below which swaps with the vertical are tried, the gain that makes one credible, and its weight
beside the misfit of directions (own choice, on synthetic records)."""


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
    far_off = angles.worst() >= WRONG_WIRING_RAD
    if angles.relations < 2 or not (far_off or fit < _POOR_FIT):
        # One relation alone cannot tell a wiring fault from a wave that is not what it is taken for.
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
            if after.worst() < WRONG_WIRING_RAD and ((far_off and explains) or gained > _FIT_GAIN):
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
