"""Fixtures of the picture tests: invented results, built once."""

from __future__ import annotations

import importlib.util
from collections.abc import Callable
from functools import cache
from pathlib import Path
from types import ModuleType

import pytest

from rupture.result import Result


@cache
def _module(name: str) -> ModuleType:
    spec = importlib.util.spec_from_file_location(f"pictures_{name}", Path(__file__).with_name(f"{name}.py"))
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


@pytest.fixture(scope="session")
def build() -> Callable[..., Result]:
    """Build an invented result."""
    return _module("fabricated").fabricated_result


@pytest.fixture(scope="session")
def unilateral(build: Callable[..., Result]) -> Result:
    return build()


@pytest.fixture(scope="session")
def bilateral(build: Callable[..., Result]) -> Result:
    return build(second_km=50.0, sites=4)


@pytest.fixture(scope="session")
def date_line(build: Callable[..., Result]) -> Result:
    return build(longitude_deg=179.9, latitude_deg=-17.0)
