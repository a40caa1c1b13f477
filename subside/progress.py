"""How a long run tells what it is doing; the command line draws it, a script may ignore it."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from contextlib import contextmanager

__all__ = ["Progress"]


class Progress:
    """Silent progress. A subclass shows the stages."""

    @contextmanager
    def stage(self, name: str, total: float, unit: str) -> Iterator[Callable[[float], None]]:
        """A stage of `total` units; the caller tells how many it has finished since last time."""
        yield lambda done: None
