"""One thread for histories of a few cells: waiting for a second one costs more than the work."""

from __future__ import annotations

from collections.abc import Iterator

import numba
import pytest


@pytest.fixture(autouse=True, scope="module")
def _one_thread() -> Iterator[None]:
    before = numba.get_num_threads()
    numba.set_num_threads(1)
    yield
    numba.set_num_threads(before)
