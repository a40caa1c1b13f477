"""Variables in time, read once and in storage order, active cells only."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from subside.grid.layout import Layout, chunk_along
from subside.grid.source import Source

__all__ = ["Gaps", "read_history"]


@dataclass
class Gaps:
    """Where a history is missing although it should not be, or there although it should not be.

    Attributes
    ----------
    missing, stray : dict
        Step to ``[count, flat number of the first cell]``: no value in a cell that has some;
        a value in a cell that has none at the first step.
    """

    missing: dict[int, list[int]] = field(default_factory=dict)
    stray: dict[int, list[int]] = field(default_factory=dict)

    @staticmethod
    def count(found: dict[int, list[int]], wrong: np.ndarray, step: int, cell: int) -> None:
        """Add a block (steps, cells) of flags that starts at `step` and flat number `cell`."""
        for n in np.flatnonzero(wrong.any(axis=1)):
            where = np.flatnonzero(wrong[n])
            entry = found.setdefault(step + int(n), [0, cell + int(where[0])])
            entry[0] += len(where)


def read_history(
    source: Source, name: str, layout: Layout, keep: np.ndarray, scale: tuple[float, float],
    gaps: Gaps | None = None, absent: np.ndarray | None = None,
) -> np.ndarray:
    """A variable (time, k, j, i) or (time, cell) as (time, kept cells).

    Parameters
    ----------
    keep : array (n,) of bool
        Cells of the file to keep.
    scale : (factor, offset)
        To SI.
    gaps : Gaps, optional
        Collects missing values of kept cells and values of `absent` ones.
    absent : array (n,) of bool
        Cells that have no value at the first step.

    Notes
    -----
    Blocks follow the storage chunks, so a compressed chunk is unpacked once however many steps it
    holds.
    """
    variable = source.variables[name]
    result = np.empty((layout.steps, int(np.count_nonzero(keep))))
    together = min(chunk_along(variable, "time"), layout.steps)
    slabs = list(layout.slabs(variable, together))
    column = np.array([0, *(np.count_nonzero(keep[layout.cells_of(*s)]) for s in slabs)]).cumsum()
    factor, offset = scale
    for first in range(0, layout.steps, together):
        steps = slice(first, min(first + together, layout.steps))
        for n, (start, stop) in enumerate(slabs):
            cells = layout.cells_of(start, stop)
            values = source.values(name, (steps, slice(start, stop)))
            values = values.reshape(values.shape[0], -1)
            kept = values[:, keep[cells]]
            if gaps is not None and absent is not None:
                gaps.count(gaps.stray, np.isfinite(values) & absent[cells], first, cells.start)
                if not np.isfinite(kept).all():
                    wrong = ~np.isfinite(values) & keep[cells]
                    gaps.count(gaps.missing, wrong, first, cells.start)
            kept *= factor
            kept += offset
            result[steps, column[n]:column[n + 1]] = kept
    return result
