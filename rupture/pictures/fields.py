"""What is shown per cell and frame: location probability of the ray stack, or energy of the inversion."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rupture.errors import InputError
from rupture.geodesy import LocalPlane
from rupture.result import Result

Array = NDArray[np.float64]

FIELDS = ("location", "energy")


@dataclass(frozen=True)
class Field:
    """One quantity on its own grid and frames.

    Attributes
    ----------
    name
        One of `FIELDS`.
    dataset
        The group of the result that holds it.
    plane
        Plane around the epicentre.
    """

    name: str
    dataset: Any
    plane: LocalPlane

    @property
    def label(self) -> str:
        """What one value of a frame is."""
        return "location probability per cell" if self.name == "location" else "share of all energy per cell and frame"

    @property
    def total_label(self) -> str:
        """What the whole-rupture map shows."""
        return "location, mean over time" if self.name == "location" else "share of energy"

    @cached_property
    def source_time(self) -> Array:
        """Frame times in s after origin."""
        return self.dataset["source_time"].values.astype(float)

    @cached_property
    def is_trace(self) -> bool:
        """Whether the cells lie on a fault trace."""
        return "cell" in self.dataset.dims

    @cached_property
    def places_km(self) -> Array:
        """Shape (northing, easting, 2) or (cell, 2): places of the cells in km from the epicentre."""
        if not self.is_trace:
            east, north = np.meshgrid(self.dataset["easting"].values, self.dataset["northing"].values)
            return np.stack([east, north], axis=-1).astype(float)
        return (
            np.stack(self.plane.to_plane(self.dataset["longitude"].values, self.dataset["latitude"].values), axis=-1)
            / 1e3
        )

    @cached_property
    def edges_km(self) -> tuple[float, float, float, float]:
        """West, east, south and north edge of a regular grid, half a cell beyond its centres."""
        edges = []
        for name in ("easting", "northing"):
            axis = self.dataset[name].values.astype(float)
            half = (axis[1] - axis[0]) / 2 if axis.size > 1 else 0.5
            edges += [float(axis[0] - half), float(axis[-1] + half)]
        return edges[0], edges[1], edges[2], edges[3]

    @property
    def spacing_km(self) -> float:
        """Distance between neighbouring cells."""
        if self.is_trace:
            apart = np.hypot(*np.diff(self.places_km, axis=0).T)
            return float(np.median(apart)) if apart.size else 1.0
        west, east, _, _ = self.edges_km
        return (east - west) / self.dataset.sizes["easting"]

    @cached_property
    def values(self) -> Array:
        """Values, (frames, cells...): smoothed probability where there is such a thing; energy as a share of all."""
        if self.name == "location":
            name = "smoothed_probability" if "smoothed_probability" in self.dataset else "location_probability"
            return np.nan_to_num(np.asarray(self.dataset[name].values, float))
        energy = np.nan_to_num(np.asarray(self.dataset["energy"].values, float))
        whole = energy.sum()
        return energy / whole if whole > 0 else energy

    @cached_property
    def present(self) -> Array:
        """Shape (frames,): probability that there is a source at all; 1 where the field does not say."""
        if "no_source_probability" in self.dataset:
            return 1.0 - np.nan_to_num(np.asarray(self.dataset["no_source_probability"].values, float))
        return np.ones(self.source_time.size)

    def total(self, active: NDArray[np.bool_]) -> Array:
        """Return the whole-rupture share per cell, summing to 1 (0 when never anything).

        Location probability is averaged over the active frames, each weighted by the probability of a source;
        energy is summed over all frames.
        """
        if self.name == "energy":
            return self.values.sum(axis=0)
        share = self.values.reshape(self.values.shape[0], -1)
        whole = share.sum(axis=1, keepdims=True)
        frames = np.divide(share, whole, out=np.zeros_like(share), where=whole > 0)
        total = (frames * (self.present * active)[:, None]).sum(axis=0)
        return (total / total.sum() if total.sum() > 0 else total).reshape(self.values.shape[1:])


def field_of(result: Result, plane: LocalPlane, name: str) -> Field | None:
    """Return a field of a result, or None for 'location' where nothing was mapped.

    Raises
    ------
    InputError
        For an unknown name, or 'energy' where no inversion ran.
    """
    if name not in FIELDS:
        raise InputError(f"field must be 'location' or 'energy', not '{name}'")
    if name == "energy":
        if result.energy is None:
            raise InputError("this result holds no energy inversion; run `rupture track` with it switched on")
        return Field(name, result.energy, plane)
    return None if result.map is None else Field(name, result.map, plane)
