"""Ranges of work on the processors at hand."""

from __future__ import annotations

import os
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor

__all__ = ["processors", "spread"]


def processors() -> int:
    """Processors this process may use."""
    try:
        return len(os.sched_getaffinity(0))
    except AttributeError:  # not on every system
        return os.cpu_count() or 1


def spread(work: Callable[[int, int], object], count: int, least: int = 50_000) -> None:
    """Call ``work(start, stop)`` for ranges that together are 0 to `count`, side by side.

    Parameters
    ----------
    work : callable
        Releases the GIL where it takes time.
    least : int
        Fewer are not worth a thread.
    """
    parts = max(1, min(processors(), count // least))
    if parts == 1:
        work(0, count)
        return
    bounds = [count * n // parts for n in range(parts + 1)]
    with ThreadPoolExecutor(parts) as pool:
        list(pool.map(work, bounds[:-1], bounds[1:]))
