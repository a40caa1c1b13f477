"""A small field, and a registry that nothing was loaded into."""

from __future__ import annotations

import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

sys.path.insert(0, str(Path(__file__).parents[1] / "cli"))

from small_field import write_field

from subside.hooks.registry import Registry, registry


@pytest.fixture
def field(tmp_path: Path) -> Path:
    """A folder with a sound scenario, its grid, points and survey."""
    return write_field(tmp_path / "field")


@pytest.fixture(autouse=True)
def fresh_registry() -> Iterator[Registry]:
    """The registry of this process, empty; what it held comes back afterwards."""
    before = dict(vars(registry))
    vars(registry).clear()
    vars(registry).update(vars(Registry()))
    yield registry
    vars(registry).clear()
    vars(registry).update(before)
