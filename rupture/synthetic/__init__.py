"""Kinematic sources, two engines, noise and scenarios."""

from __future__ import annotations

from importlib import import_module
from typing import Any

_HOMES = {
    "SubEvents": "engine",
    "Receivers": "engine",
    "Sampling": "engine",
    "Engine": "engine",
    "Arm": "source",
    "KinematicSource": "source",
    "make_sub_events": "source",
    "RayEngine": "ray",
    "ray_records": "ray",
    "CodaSettings": "coda",
    "ScatteringEngine": "coda",
    "coloured_noise": "noise",
    "RotationSensor": "noise",
    "TranslationSensor": "noise",
    "Scenario": "scenario",
    "demo_scenario": "scenario",
    "read_scenario": "scenario",
    "ready_scenarios": "scenario",
    "SimulatedFiles": "simulate",
    "ground_motion": "simulate",
    "simulate": "simulate",
}

__all__ = sorted(_HOMES)


def __getattr__(name: str) -> Any:
    """Load the module that holds a public name when it is first asked for."""
    if name not in _HOMES:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    return getattr(import_module(f"{__name__}.{_HOMES[name]}"), name)
