"""Pictures of a result: maps, panels, movie and report page. Matplotlib and Cartopy are loaded on first use."""

from __future__ import annotations

import importlib
from typing import Any

_PUBLIC = {
    "along_figure": "distance",
    "direction_figure": "panels",
    "directions_figure": "panels",
    "draw_all": "draw",
    "draw_everything": "draw",
    "energy_along_figure": "distance",
    "energy_figure": "answers",
    "energy_fit_figure": "inversion",
    "frames_figure": "frames",
    "kinds_figure": "answers",
    "make_movie": "movie",
    "map_figure": "maps",
    "read_overlay": "overlays",
    "section_figure": "sections",
    "posterior_figure": "posteriors",
    "write_report": "report",
}

__all__ = list(_PUBLIC)


def __getattr__(name: str) -> Any:
    if name in _PUBLIC:
        return getattr(importlib.import_module(f"rupture.pictures.{_PUBLIC[name]}"), name)
    raise AttributeError(f"module 'rupture.pictures' has no attribute '{name}'")


def __dir__() -> list[str]:
    return sorted(__all__)
