"""Pack Natural Earth land and borders (TopoJSON) into the small files that the package carries.

Run once per new edition: `python -m rupture.pictures.pack_coastlines FOLDER`, where FOLDER holds
countries-10m.json, countries-50m.json and countries-110m.json of the npm package world-atlas.
"""

from __future__ import annotations

import argparse
import json
from collections import Counter
from collections.abc import Iterable, Iterator
from pathlib import Path
from typing import Any

import numpy as np

from rupture.errors import InputError
from rupture.pictures.coastlines import DATA_FOLDER, SCALES

POLE_RING_DEG = -89.9


def pack_topology(topology: dict[str, Any], target: Path) -> Path:
    """Write the land rings and the borders of one TopoJSON topology as delta-coded integers.

    Parameters
    ----------
    topology
        Parsed TopoJSON with the objects `land` and `countries`, quantised.
    target
        The npz file to write.

    Returns
    -------
    pathlib.Path
        The target.

    Raises
    ------
    InputError
        When the topology is not quantised or lacks one of the two objects.
    """
    try:
        transform, objects = topology["transform"], topology["objects"]
        land, countries = objects["land"], objects["countries"]
    except KeyError as error:
        raise InputError(f"TopoJSON without {error}; give the countries-*.json files of world-atlas") from error
    # One scale closes Antarctica with a ring of 100 m around the pole: no land ends there.
    south = transform["translate"][1]
    lift = transform["scale"][1]
    top = [south + lift * np.cumsum([step[1] for step in arc]).max() for arc in topology["arcs"]]
    polygons = [
        [ring for ring in polygon if max(top[_index(arc)] for arc in ring) > POLE_RING_DEG]
        for polygon in _polygons(land)
    ]
    polygons = [polygon for polygon in polygons if polygon]
    rings = [ring for polygon in polygons for ring in polygon]
    users: Counter[int] = Counter()
    for country in countries["geometries"]:
        users.update({_index(arc) for polygon in _polygons(country) for ring in polygon for arc in ring})
    borders = sorted(arc for arc, count in users.items() if count > 1)
    kept = sorted({_index(arc) for ring in rings for arc in ring} | set(borders))
    place = {arc: position for position, arc in enumerate(kept)}
    deltas = [np.asarray(topology["arcs"][arc], np.int32) for arc in kept]
    points = np.concatenate(deltas)
    flat = [place[arc] if arc >= 0 else ~place[~arc] for ring in rings for arc in ring]
    np.savez_compressed(
        target,
        scale=np.asarray(transform["scale"]),
        offset=np.asarray(transform["translate"]),
        # Columns and bytes apart: the high bytes are nearly all equal and deflate to nothing.
        delta=np.ascontiguousarray(points.T.astype("<i4")).view(np.uint8).reshape(2, -1, 4).transpose(2, 0, 1),
        arc_size=np.asarray([len(d) for d in deltas], np.int32),
        ring_arc=np.asarray(flat, np.int32),
        ring_size=np.asarray([len(ring) for ring in rings], np.int32),
        polygon_size=np.asarray([len(polygon) for polygon in polygons], np.int32),
        border_arc=np.asarray([place[arc] for arc in borders], np.int32),
    )
    return target


def _index(arc: int) -> int:
    return arc if arc >= 0 else ~arc


def _polygons(geometry: dict[str, Any]) -> Iterator[list[list[int]]]:
    kind = geometry.get("type")
    if kind == "GeometryCollection":
        for member in geometry["geometries"]:
            yield from _polygons(member)
    elif kind == "MultiPolygon":
        yield from geometry["arcs"]
    elif kind == "Polygon":
        yield geometry["arcs"]


def main(arguments: Iterable[str] | None = None) -> None:
    """Pack all scales of one folder into the package's data folder."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("folder", type=Path, help="folder with countries-10m.json and its like")
    folder: Path = parser.parse_args(list(arguments) if arguments is not None else None).folder
    for scale in SCALES:
        topology = json.loads((folder / f"countries-{scale}.json").read_text(encoding="utf-8"))
        path = pack_topology(topology, DATA_FOLDER / f"land_{scale}.npz")
        print(f"{path.name}: {path.stat().st_size / 1e6:.3f} MB")


if __name__ == "__main__":
    main()
