"""Built-in reference models and layered `.nd` files as depth profiles."""

from __future__ import annotations

import itertools
import tempfile
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from rupture.earth.layers import LayeredModel
from rupture.errors import InputError

Array = NDArray[np.float64]

BUILT_IN = ("iasp91", "ak135", "prem")
"""Kennett & Engdahl (1991), Kennett, Engdahl & Buland (1995), Dziewonski & Anderson (1981), as ObsPy ships them."""

DEEPEST_KM = 410.0
"""The layers for the synthetic engines end here: what lies below is not seen at regional distances."""

_THICKEST_KM = 40.0
_NAMES = {"mantle", "moho", "outer-core", "cmb", "inner-core", "icocb", "iocb"}
_DEFAULT_Q = (600.0, 300.0)
"""Qp and Qs of ordinary crust where a file gives none (common practice)."""


def profile_of_built_in(name: str) -> Array:
    """Return depth, vp, vs, density, Qp, Qs at the corners of a built-in model, shape (points, 6); km, km/s, g/cm^3."""
    from obspy.taup import TauPyModel

    layers = TauPyModel(name).model.s_mod.v_mod.layers
    tops, bottoms = (
        np.stack(
            [layers[f"{end}_{what}"] for what in ("depth", "p_velocity", "s_velocity", "density", "qp", "qs")], axis=1
        )
        for end in ("top", "bot")
    )
    profile: Array = np.stack([tops, bottoms], axis=1).reshape(-1, 6).astype(float)
    if not (profile[:, 4:] > 0).all() or np.ptp(profile[:, 4]) == 0:
        profile[:, 4:] = _DEFAULT_Q  # the file carries none
    return profile


def read_nd(path: Path) -> Array:
    """Read an `.nd` file; return the profile as `profile_of_built_in` does.

    Raises
    ------
    InputError
        Naming file and line.
    """
    rows: list[list[float]] = []
    try:
        lines = path.read_text(encoding="utf-8").splitlines()
    except (OSError, UnicodeDecodeError) as error:
        raise InputError(f"{path}: cannot be read as a text file ({error})") from error
    for number, line in enumerate(lines, start=1):
        words = line.split("#")[0].split("//")[0].split()
        if not words or words[0].lower() in _NAMES:
            continue
        try:
            values = [float(word) for word in words]
        except ValueError:
            raise InputError(
                f"{path}, line {number}: '{line.strip()}' is neither numbers nor a discontinuity name"
            ) from None
        if len(values) not in (4, 6):
            raise InputError(
                f"{path}, line {number}: {len(values)} numbers; depth, vp, vs, density and perhaps Qp, Qs are needed"
            )
        if rows and values[0] < rows[-1][0]:
            raise InputError(f"{path}, line {number}: depth {values[0]:g} km lies above the line before")
        if not 0 <= values[2] < values[1] or not values[3] > 0:
            raise InputError(f"{path}, line {number}: vs must be below vp and density positive")
        rows.append([*values, *(_DEFAULT_Q if len(values) == 4 else ())])
    if len(rows) < 2:
        raise InputError(f"{path}: fewer than two depths; an Earth model needs a top and a bottom")
    if rows[0][0] != 0:
        raise InputError(f"{path}: the model starts at {rows[0][0]:g} km, not at the surface")
    return np.array(rows)


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
    table = np.array(values)
    solid = table[:, 1] > 0
    table, top = table[solid], np.array(tops)[solid]
    if top[0] != 0:
        raise InputError(
            f"Earth model {name}: the uppermost layer is a fluid; the relations used here need a solid surface"
        )
    return LayeredModel(name, top, table[:, 0], table[:, 1], 1e3 * table[:, 2], table[:, 3], table[:, 4])


def taup_file(profile: Array, content: str, cache: Path) -> Path:
    """Build TauP's own file for a layered model once and return its path; below the model ak135 goes on.

    Raises
    ------
    InputError
        When TauP cannot build the model.
    """
    path = cache / "models" / f"{content}.npz"
    if path.is_file():
        return path
    from obspy.taup.taup_create import build_taup_model

    below = profile_of_built_in("ak135")
    last = profile[-1]
    start = below[below[:, 0] > last[0] + 1e-6]
    here = [last[0], *(np.interp(last[0], below[:, 0], below[:, k]) for k in range(1, 6))]
    whole = np.vstack([profile, here, start]) if start.size else profile
    named = {2891.5: "outer-core", 5153.5: "inner-core"}
    lines, moho = [], False
    for row, following in zip(whole, np.vstack([whole[1:], whole[-1]]), strict=True):
        lines.append(" ".join(f"{v:.5f}" for v in row))
        if following[0] == row[0] and following is not row:
            name = named.get(float(row[0]))
            if name is None and not moho and following[1] > 7.6:
                name, moho = "mantle", True
            if name:
                lines.append(name)
    path.parent.mkdir(parents=True, exist_ok=True)
    with tempfile.TemporaryDirectory(dir=path.parent) as folder:
        source = Path(folder) / f"{content}.nd"
        source.write_text("\n".join(lines) + "\n", encoding="utf-8")
        try:
            build_taup_model(str(source), output_folder=folder, verbose=False)
        except Exception as error:
            raise InputError(
                f"TauP cannot build the layered Earth model ({error}); check its depths and speeds"
            ) from error
        (Path(folder) / f"{content}.npz").replace(path)
    return path
