"""What all tests share: a cache of their own, so that no test reads what an earlier version left in the user's."""

import os

import pytest


@pytest.fixture(autouse=True, scope="session")
def _own_cache(tmp_path_factory):
    """A cache named in the environment is kept: who runs the tests often may name a lasting one."""
    if os.environ.get("RUPTURE_CACHE"):
        yield
        return
    os.environ["RUPTURE_CACHE"] = str(tmp_path_factory.mktemp("cache"))
    yield
    del os.environ["RUPTURE_CACHE"]
