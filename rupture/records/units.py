"""Input units of instruments: what is measured, how often it is differentiated, and the factor to SI."""

from __future__ import annotations

import math
import re
from dataclasses import dataclass

from rupture.records.report import UnusableError


@dataclass(frozen=True)
class Unit:
    """An input unit.

    Attributes
    ----------
    quantity
        "translation" or "rotation".
    order
        0 displacement or angle, 1 velocity or rotation rate, 2 acceleration.
    scale
        Size of the unit in m, rad and s (1e-9 for nm/s).
    """

    quantity: str
    order: int
    scale: float


_PREFIX = {
    "": 1.0, "p": 1e-12, "n": 1e-9, "u": 1e-6, "m": 1e-3, "c": 1e-2, "k": 1e3,
    "pico": 1e-12, "nano": 1e-9, "micro": 1e-6, "milli": 1e-3, "centi": 1e-2, "kilo": 1e3,
}  # fmt: skip
_BASE = {
    "m": ("translation", 0, 1.0),
    "rad": ("rotation", 0, 1.0),
    "deg": ("rotation", 0, math.pi / 180.0),
    "gal": ("translation", 2, 1e-2),
}
_SPELLINGS = (
    (r"[\s()\[\]_]|·", ""),
    (r"[µμ]", "u"),
    (r"\^", "**"),
    (r"met(er|re)s?", "m"),
    (r"radians?", "rad"),
    (r"degrees?", "deg"),
    (r"gals?$", "gal"),
    (r"per", "/"),
    (r"sec(ond)?s?", "s"),
    (r"squared?", "**2"),
)
_RATE = {
    "": 0,
    "/s": 1, "s-1": 1, "*s**-1": 1, "s**-1": 1, ".s-1": 1, "*s-1": 1, ".s**-1": 1, "/s**1": 1,
    "/s**2": 2, "/s/s": 2, "/s2": 2, "/s*s": 2, "/ss": 2, "s-2": 2, "*s**-2": 2, "s**-2": 2, ".s-2": 2, "*s-2": 2, ".s**-2": 2,
}  # fmt: skip
_PATTERN = re.compile(
    rf"(?P<prefix>{'|'.join(_PREFIX)})(?P<base>{'|'.join(_BASE)})(?P<rate>{'|'.join(map(re.escape, _RATE))})"
)


def parse_unit(name: str | None) -> Unit:
    """Read the spelling of an instrument's input unit.

    Every spelling in use for ground motion and rotation is taken, old SEED capitals included (where MM/S is
    mm/s); units of anything else are refused by name rather than guessed.

    Parameters
    ----------
    name
        Unit as StationXML gives it.

    Returns
    -------
    Unit
        Quantity, order of differentiation, factor to SI.

    Raises
    ------
    UnusableError
        When the unit is absent or is not one of translation or rotation.

    Examples
    --------
    >>> parse_unit("NM/SEC").order, parse_unit("NM/SEC").scale
    (1, 1e-09)
    >>> parse_unit("rad/s**2").quantity
    'rotation'
    """
    if name is None or not name.strip():
        raise UnusableError(
            "the metadata give no input unit; without it the record cannot be turned into ground motion"
        )
    text = name.strip().lower()
    for pattern, replacement in _SPELLINGS:
        text = re.sub(pattern, replacement, text)
    found = _PATTERN.fullmatch(text)
    if found is None or (found["base"] == "gal" and found["rate"]):
        raise UnusableError(
            f"the input unit '{name}' is not known as translation (m, m/s, m/s**2) or rotation (rad, rad/s, rad/s**2);"
            " correct it in the StationXML"
        )
    quantity, order, size = _BASE[found["base"]]
    return Unit(quantity, order + _RATE[found["rate"]], _PREFIX[found["prefix"]] * size)
