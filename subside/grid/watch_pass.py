"""The compiled pass of `subside.grid.watch` over pressures.

Most values change nothing: a first, vectorised look at a tile of cells asks only whether any value
is wrong or exceeds what was largest so far; a tile that has one is gone through value by value.
"""

from __future__ import annotations

import numpy as np
from numba import njit

__all__ = ["look"]

_TILE = 2048  # cells at a time: what belongs to a cell stays in the cache


@njit(cache=True, nogil=True)
def look(p, before, limit, initial, edge, skip,  # type: ignore[no-untyped-def]
         counts, where, jump, jump_at, largest):
    """See `subside.grid.watch.PressureWatch.see`.

    Parameters
    ----------
    p : array (steps, m)
        Pa.
    before : array (m,)
        The date before the first; the first itself where there is none.
    edge : array (m,)
        1.0 on the outer edge, else 0.0.
    skip : int
        Dates that do not count for `largest`.
    counts, where : array (steps, 3)
        Cells without value, at or below zero, above the limit: how many, and the first.
    jump, jump_at : array (steps,)
        Largest change from the date before, and the first cell that has it.
    largest : array (2,)
        Largest change from the initial pressure anywhere and on the edge.
    """
    steps, m = p.shape
    for start in range(0, m, _TILE):
        stop = min(start + _TILE, m)
        for n in range(steps):
            now = p[n][start:stop]
            last = before[start:stop] if n == 0 else p[n - 1][start:stop]
            at_start = initial[start:stop]
            anywhere, on_edge = (largest[0], largest[1]) if n >= skip else (np.inf, np.inf)
            if not _notable(now, last, limit[start:stop], at_start, edge[start:stop], jump[n],
                            anywhere, on_edge):
                continue
            _name(now, limit[start:stop], start, counts[n], where[n])
            for c in range(len(now)):
                step = abs(now[c] - last[c])
                if step > jump[n]:
                    jump[n], jump_at[n] = step, start + c
                if n >= skip:
                    change = abs(at_start[c] - now[c])
                    largest[0] = max(largest[0], change)
                    largest[1] = max(largest[1], change * edge[start + c])


@njit(cache=True, nogil=True)
def _notable(p, before, limit, initial, edge, jump,  # type: ignore[no-untyped-def]
             anywhere, on_edge):
    """How many times any value (m,) is wrong or exceeds what is given: 0 for most tiles."""
    count = np.int64(0)
    for n in range(len(p)):
        change = abs(initial[n] - p[n])
        count += (np.int64(not abs(p[n]) < np.inf) + np.int64(p[n] <= 0.0)
                  + np.int64(p[n] > limit[n]) + np.int64(abs(p[n] - before[n]) > jump)
                  + np.int64(change > anywhere) + np.int64(change * edge[n] > on_edge))
    return count


@njit(cache=True, nogil=True)
def _name(p, limit, start, counts, where):  # type: ignore[no-untyped-def]
    """Count what is wrong with the pressures (m,) of cells from `start`, and note the first."""
    for c in range(len(p)):
        for check in range(3):
            if check == 0:
                wrong = not np.isfinite(p[c])
            elif check == 1:
                wrong = p[c] <= 0.0
            else:
                wrong = p[c] > limit[c]
            if wrong:
                if counts[check] == 0:
                    where[check] = start + c
                counts[check] += 1
