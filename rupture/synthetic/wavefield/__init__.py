"""Complete seismograms of a layered anelastic half-space, six components, by wavenumber integration."""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from rupture.synthetic.wavefield.mechanism import ELEMENTS, double_couple, element_weights, to_east_north
    from rupture.synthetic.wavefield.records import raised_cosine_spectrum, stored_wavefield, wavefield_records
    from rupture.synthetic.wavefield.sampling import FrequencyPlan
    from rupture.synthetic.wavefield.store import GreensStore
    from rupture.synthetic.wavefield.tables import GreensTable, Motion, greens, greens_at_depths

_HOME = {
    "GreensTable": "tables", "Motion": "tables", "greens": "tables", "greens_at_depths": "tables",
    "ELEMENTS": "mechanism", "double_couple": "mechanism", "element_weights": "mechanism", "to_east_north": "mechanism",
    "raised_cosine_spectrum": "records", "wavefield_records": "records",
    "stored_wavefield": "records",
    "FrequencyPlan": "sampling", "GreensStore": "store",
}  # fmt: skip

__all__ = [
    "ELEMENTS", "FrequencyPlan", "GreensStore", "GreensTable", "Motion", "double_couple", "element_weights", "greens",
    "greens_at_depths", "raised_cosine_spectrum", "stored_wavefield", "to_east_north", "wavefield_records",
]  # fmt: skip


def __getattr__(name: str) -> Any:
    """Load a public name from its module when it is first asked for (Numba is dear at import)."""
    if name not in _HOME:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    return getattr(import_module(f"{__name__}.{_HOME[name]}"), name)
