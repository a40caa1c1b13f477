"""A registry that nothing was loaded into: each test names the plug-ins it wants."""

from __future__ import annotations

from collections.abc import Iterator

import pytest

from subside.hooks.registry import Registry, registry


@pytest.fixture(autouse=True)
def fresh_registry() -> Iterator[None]:
    """What the registry held comes back afterwards."""
    before = dict(vars(registry))
    vars(registry).clear()
    vars(registry).update(vars(Registry()))
    yield
    vars(registry).clear()
    vars(registry).update(before)
