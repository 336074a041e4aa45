"""Pictures of a result: maps, panels, movie and report page. Matplotlib and Cartopy are loaded on first use."""

from __future__ import annotations

import importlib
from typing import Any

_PUBLIC = {
    "along_figure": "answer_figures",
    "direction_figure": "direction_figure",
    "directions_figure": "direction_figure",
    "draw_all": "draw",
    "energy_figure": "answer_figures",
    "frames_figure": "frames_figure",
    "kinds_figure": "answer_figures",
    "make_movie": "movie",
    "map_figure": "map_figure",
    "posterior_figure": "posterior_figure",
    "write_report": "report",
}

__all__ = list(_PUBLIC)


def __getattr__(name: str) -> Any:
    if name in _PUBLIC:
        return getattr(importlib.import_module(f"rupture.pictures.{_PUBLIC[name]}"), name)
    raise AttributeError(f"module 'rupture.pictures' has no attribute '{name}'")


def __dir__() -> list[str]:
    return sorted(__all__)
