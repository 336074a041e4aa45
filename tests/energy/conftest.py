"""Small problems run on one thread: waiting for others costs more than the work."""

from collections.abc import Iterator

import numba
import pytest


@pytest.fixture(autouse=True)
def one_thread() -> Iterator[None]:
    before = numba.get_num_threads()
    numba.set_num_threads(1)
    yield
    numba.set_num_threads(before)
