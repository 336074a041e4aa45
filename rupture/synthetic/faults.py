"""Faults of installations that a scenario can put into its records; the metadata know nothing of them."""

from __future__ import annotations

from typing import Annotated, Literal

import numpy as np
from numpy.typing import NDArray
from pydantic import BaseModel, ConfigDict, Field, model_validator

from rupture.conventions import ACC_E, COMPONENTS, ROT_E

Channel = Literal["acc_E", "acc_N", "acc_Z", "rot_E", "rot_N", "rot_Z"]
Sensor = Literal["translation", "rotation"]


class _Fault(BaseModel):
    model_config = ConfigDict(extra="forbid", strict=True, frozen=True)

    element: int | None = Field(default=None, ge=1)
    """Which sensor of an array, counted from 1; all when left out."""


class Turned(_Fault):
    """A sensor turned about the vertical, clockwise seen from above."""

    kind: Literal["turned"]
    sensor: Sensor
    angle_deg: float


class Reversed(_Fault):
    """Channels of wrong sign."""

    kind: Literal["reversed"]
    channels: tuple[Channel, ...]


class Swapped(_Fault):
    """Two channels in each other's place."""

    kind: Literal["swapped"]
    channels: tuple[Channel, ...]

    @model_validator(mode="after")
    def _two(self) -> Swapped:
        if len(set(self.channels)) != 2:
            raise ValueError("swapped needs two different channels")
        return self


class Late(_Fault):
    """A sensor whose clock runs late: its records carry times that are too late by so many seconds."""

    kind: Literal["late"]
    sensor: Sensor | Literal["both"]
    seconds: float


class Gain(_Fault):
    """Channels whose true gain is not the one in the metadata."""

    kind: Literal["gain"]
    channels: tuple[Channel, ...]
    factor: float = Field(gt=0)


class Clipped(_Fault):
    """Channels that cannot follow beyond a share of their largest motion."""

    kind: Literal["clipped"]
    channels: tuple[Channel, ...]
    share_of_peak: float = Field(gt=0, lt=1)


class Gappy(_Fault):
    """Channels with a gap."""

    kind: Literal["gappy"]
    channels: tuple[Channel, ...]
    start_s: float
    """Start of the gap after the origin time."""
    length_s: float = Field(gt=0)


class Dead(_Fault):
    """Channels that write one constant count."""

    kind: Literal["dead"]
    channels: tuple[Channel, ...]


Fault = Annotated[Turned | Reversed | Swapped | Late | Gain | Clipped | Gappy | Dead, Field(discriminator="kind")]


def turn_horizontals(records: NDArray[np.float64], east: int, angle_rad: float) -> None:
    """Turn one sensor's horizontals in place: what its E and N axes measure when it stands turned clockwise."""
    e, n = records[east].copy(), records[east + 1].copy()
    c, s = np.cos(angle_rad), np.sin(angle_rad)
    records[east] = c * e - s * n
    records[east + 1] = s * e + c * n


def spoil_motion(records: NDArray[np.float64], faults: tuple[Fault, ...]) -> NDArray[np.float64]:
    """Return six-component records as a faulty installation would feel them, shape (6, samples).

    Acts on what is a matter of the sensor: orientation, polarity, wiring, gain and clipping.
    """
    out = records.copy()
    for fault in faults:
        if isinstance(fault, Turned):
            turn_horizontals(out, ACC_E if fault.sensor == "translation" else ROT_E, np.radians(fault.angle_deg))
        elif isinstance(fault, Swapped):
            a, b = (COMPONENTS.index(c) for c in fault.channels)
            out[[a, b]] = out[[b, a]]
        elif isinstance(fault, Reversed | Gain | Clipped | Dead):
            for name in fault.channels:
                row = out[COMPONENTS.index(name)]
                if isinstance(fault, Reversed):
                    row *= -1
                elif isinstance(fault, Gain):
                    row *= fault.factor
                elif isinstance(fault, Clipped):
                    limit = fault.share_of_peak * np.abs(row).max()
                    np.clip(row, -limit, limit, out=row)
                else:
                    row[:] = 0.0
    return out


def delay_s(faults: tuple[Fault, ...], component: int) -> float:
    """Return by how many seconds the time stamps of a component are too late."""
    sensor = "translation" if component < ROT_E else "rotation"
    return sum(f.seconds for f in faults if isinstance(f, Late) and f.sensor in (sensor, "both"))


def gaps_s(faults: tuple[Fault, ...], component: int) -> list[tuple[float, float]]:
    """Return gaps of a component as (start, end) in s after the origin time."""
    name = COMPONENTS[component]
    return [(f.start_s, f.start_s + f.length_s) for f in faults if isinstance(f, Gappy) and name in f.channels]


def of_element(faults: tuple[Fault, ...], element: int | None) -> tuple[Fault, ...]:
    """Return the faults that concern one sensor of an array (or the only sensor of a site)."""
    return tuple(f for f in faults if f.element is None or f.element == element)
