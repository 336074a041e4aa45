"""Energy inversion: non-negative energy over place and source time behind the covariances of all windows."""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from rupture.energy.build import build_kernels
    from rupture.energy.invert import EnergyInversion, invert_energy
    from rupture.energy.lines import LineAnswer, line_answer, line_summary
    from rupture.energy.settings import EnergySettings
    from rupture.energy.table import KernelTable

_HOME = {
    "EnergyInversion": "invert", "EnergySettings": "settings", "KernelTable": "table", "LineAnswer": "lines",
    "build_kernels": "build", "invert_energy": "invert", "line_answer": "lines", "line_summary": "lines",
}  # fmt: skip

__all__ = [
    "EnergyInversion", "EnergySettings", "KernelTable", "LineAnswer", "build_kernels", "invert_energy", "line_answer", "line_summary",
]  # fmt: skip


def __getattr__(name: str) -> Any:
    """Load a public name from its module when it is first asked for (Numba is dear at import)."""
    if name not in _HOME:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    return getattr(import_module(f"{__name__}.{_HOME[name]}"), name)
