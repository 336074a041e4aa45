"""A layered anelastic Earth as plain numbers, shared by travel times and both synthetic engines."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rupture.errors import InputError


@dataclass(frozen=True)
class LayeredModel:
    """Homogeneous layers over a half-space; the last layer is the half-space.

    Attributes
    ----------
    name
        A name for messages and provenance.
    top_km
        Depth of the top of each layer in km, shape (layers,), starting at 0 and increasing.
    vp_km_s, vs_km_s
        P and S speed in km/s, shape (layers,).
    density_kg_m3
        Density in kg/m^3, shape (layers,).
    qp, qs
        Quality factors, shape (layers,); infinity for no loss.

    Raises
    ------
    InputError
        When depths do not increase (a layer without thickness), or a speed, density or quality factor is
        not positive, or vs is not below vp.
    """

    name: str
    top_km: NDArray[np.float64]
    vp_km_s: NDArray[np.float64]
    vs_km_s: NDArray[np.float64]
    density_kg_m3: NDArray[np.float64]
    qp: NDArray[np.float64]
    qs: NDArray[np.float64]

    def __post_init__(self) -> None:
        for field in ("top_km", "vp_km_s", "vs_km_s", "density_kg_m3", "qp", "qs"):
            value = np.asarray(getattr(self, field), float)
            object.__setattr__(self, field, value)
            if value.ndim != 1 or value.shape != self.top_km.shape or value.size == 0:
                raise InputError(f"Earth model {self.name}: {field} must hold one number for each layer")
            if field != "top_km" and not (value > 0).all():
                layer = int(np.argmin(value > 0)) + 1
                raise InputError(
                    f"Earth model {self.name}: layer {layer} has {field} = {value[layer - 1]}; it must be positive"
                )
        if self.top_km[0] != 0:
            raise InputError(
                f"Earth model {self.name}: the first layer starts at {self.top_km[0]} km, not at the surface"
            )
        if not (np.diff(self.top_km) > 0).all():
            layer = int(np.argmin(np.diff(self.top_km) > 0)) + 1
            raise InputError(f"Earth model {self.name}: layer {layer} has no positive thickness")
        if not (self.vs_km_s < self.vp_km_s).all():
            layer = int(np.argmin(self.vs_km_s < self.vp_km_s)) + 1
            raise InputError(f"Earth model {self.name}: layer {layer} has vs not below vp")

    def layer_at(self, depth_km: float) -> int:
        """Return the index of the layer that holds a depth (an interface belongs to the layer below it)."""
        return int(np.searchsorted(self.top_km, depth_km, side="right") - 1)
