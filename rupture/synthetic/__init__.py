"""Kinematic sources, two engines, noise and scenarios.

The function that writes files is `rupture.synthetic.simulate.simulate`: a module of its own name hides it here.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from rupture.synthetic.coda import CodaSettings, ScatteringEngine
    from rupture.synthetic.engine import Engine, Receivers, Sampling, SubEvents
    from rupture.synthetic.noise import RotationSensor, TranslationSensor, coloured_noise
    from rupture.synthetic.ray import RayEngine, ray_records
    from rupture.synthetic.scenario import Scenario, demo_scenario, read_scenario, ready_scenarios
    from rupture.synthetic.simulate import SimulatedFiles, ground_motion
    from rupture.synthetic.source import Arm, KinematicSource
    from rupture.synthetic.sub_events import make_sub_events

_HOMES = {
    "SubEvents": "engine",
    "Receivers": "engine",
    "Sampling": "engine",
    "Engine": "engine",
    "Arm": "source",
    "KinematicSource": "source",
    "make_sub_events": "sub_events",
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
}

__all__ = [
    "Arm",
    "CodaSettings",
    "Engine",
    "KinematicSource",
    "RayEngine",
    "Receivers",
    "RotationSensor",
    "Sampling",
    "ScatteringEngine",
    "Scenario",
    "SimulatedFiles",
    "SubEvents",
    "TranslationSensor",
    "coloured_noise",
    "demo_scenario",
    "ground_motion",
    "make_sub_events",
    "ray_records",
    "read_scenario",
    "ready_scenarios",
]


def __getattr__(name: str) -> Any:
    """Load the module that holds a public name when it is first asked for."""
    if name not in _HOMES:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    return getattr(import_module(f"{__name__}.{_HOMES[name]}"), name)
