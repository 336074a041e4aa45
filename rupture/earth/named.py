"""Built-in reference models and layered `.nd` files as depth profiles."""

from __future__ import annotations

import itertools
from importlib.resources import files
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from rupture.earth.layers import LayeredModel
from rupture.errors import InputError

Array = NDArray[np.float64]

BUILT_IN = {"iasp91": ("iasp91.tvel", 2), "ak135": ("ak135.tvel", 2), "prem": ("prem.nd", 0)}
"""Kennett & Engdahl (1991), Kennett, Engdahl & Buland (1995), Dziewonski & Anderson (1981): file of ObsPy, title lines."""

DEEPEST_KM = 410.0
"""The layers for the synthetic engines end here: what lies below is not seen at regional distances."""

_THICKEST_KM = 40.0
_NAMES = {"mantle", "moho", "outer-core", "cmb", "inner-core", "icocb", "iocb"}
_DEFAULT_Q = (600.0, 300.0)
"""Qp and Qs of ordinary crust where a file gives none (common practice)."""


def profile_of_built_in(name: str) -> Array:
    """Return depth, vp, vs, density, Qp, Qs at the corners of a built-in model, shape (points, 6); km, km/s, g/cm^3."""
    file, titles = BUILT_IN[name]
    text = files("obspy").joinpath("taup", "data", file).read_text(encoding="utf-8")
    return _profile(text.splitlines(), file, titles)


def read_nd(path: Path) -> Array:
    """Read an `.nd` file; return the profile as `profile_of_built_in` does.

    Raises
    ------
    InputError
        Naming file and line.
    """
    try:
        lines = path.read_text(encoding="utf-8").splitlines()
    except (OSError, UnicodeDecodeError) as error:
        raise InputError(f"{path}: cannot be read as a text file ({error})") from error
    return _profile(lines, str(path))


def _profile(lines: list[str], where: str, titles: int = 0) -> Array:
    rows: list[list[float]] = []
    for number, line in enumerate(lines, start=1):
        words = line.split("#")[0].split("//")[0].split()
        if number <= titles or not words or words[0].lower() in _NAMES:
            continue
        row = _row(words, f"{where}, line {number}")
        if rows and row[0] < rows[-1][0]:
            raise InputError(f"{where}, line {number}: depth {row[0]:g} km lies above the line before")
        if row[2] == 0 and row[0] < DEEPEST_KM and not rows:
            raise InputError(
                f"{where}, line {number}: the uppermost layer is a fluid; the relations used here need a solid surface"
            )
        if row[2] == 0 and row[0] < DEEPEST_KM:
            raise InputError(
                f"{where}, line {number}: a fluid (vs = 0) at {row[0]:g} km; S waves need a solid down to the core"
            )
        rows.append(row)
    if len(rows) < 2:
        raise InputError(f"{where}: fewer than two depths; an Earth model needs a top and a bottom")
    if rows[0][0] != 0:
        raise InputError(f"{where}: the model starts at {rows[0][0]:g} km, not at the surface")
    return np.array(rows)


def _row(words: list[str], where: str) -> list[float]:
    try:
        values = [float(word) for word in words]
    except ValueError:
        raise InputError(f"{where}: '{' '.join(words)}' is neither numbers nor a discontinuity name") from None
    if len(values) not in (4, 6):
        raise InputError(f"{where}: {len(values)} numbers; depth, vp, vs, density and perhaps Qp, Qs are needed")
    if not np.isfinite(values).all():
        raise InputError(f"{where}: every number must be finite")
    _, vp, vs, density, qp, qs = values = [*values, *(_DEFAULT_Q if len(values) == 4 else ())]
    if not 0 <= vs < vp or not density > 0:
        raise InputError(f"{where}: vs must be below vp and density positive")
    if not qp > 0 or not (qs > 0 or vs == 0):
        raise InputError(f"{where}: Qp and Qs must be positive")
    return values


def continued_below(profile: Array) -> Array:
    """Return a profile with ak135 below its end, so that far first arrivals, which dive deep, are there too."""
    below = profile_of_built_in("ak135")
    start = below[below[:, 0] > profile[-1, 0]]
    if not start.size:
        return profile
    here = [profile[-1, 0], *(np.interp(profile[-1, 0], below[:, 0], column) for column in below.T[1:])]
    return np.vstack([profile, here, start])


def layers_from_profile(name: str, profile: Array) -> LayeredModel:
    """Cut a profile into homogeneous layers: gradients into steps of at most 40 km, mean values in each."""
    tops: list[float] = []
    values: list[Array] = []
    for upper, lower in itertools.pairwise(profile):
        if lower[0] <= upper[0] or upper[0] >= DEEPEST_KM:
            continue
        bottom = min(lower[0], DEEPEST_KM)
        pieces = 1 if np.allclose(upper[1:3], lower[1:3]) else int(np.ceil((bottom - upper[0]) / _THICKEST_KM))
        edges = np.linspace(upper[0], bottom, pieces + 1)
        for top, end in itertools.pairwise(edges):
            share = (0.5 * (top + end) - upper[0]) / (lower[0] - upper[0])
            row = upper[1:] + share * (lower[1:] - upper[1:])
            if values and np.allclose(values[-1][:3], row[:3]):
                continue
            tops.append(top)
            values.append(row)
    if profile[-1, 0] < DEEPEST_KM and not (values and np.allclose(values[-1][:3], profile[-1, 1:4])):
        tops.append(profile[-1, 0])
        values.append(profile[-1, 1:])
    table, top = np.array(values), np.array(tops)
    return LayeredModel(name, top, table[:, 0], table[:, 1], 1e3 * table[:, 2], table[:, 3], table[:, 4])
