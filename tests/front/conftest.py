import importlib.util
import sys
from pathlib import Path

import pytest


@pytest.fixture(scope="session")
def kinematic():
    """The forward model beside this file; tests are no package, so it is loaded by its place."""
    spec = importlib.util.spec_from_file_location("kinematic", Path(__file__).parent / "kinematic.py")
    module = importlib.util.module_from_spec(spec)
    # Dataclasses look their module up by name.
    sys.modules["kinematic"] = module
    spec.loader.exec_module(module)
    return module
