"""What a look at some dates of some cells has found: small, mergeable, picklable."""

from __future__ import annotations

from typing import Any

import numpy as np

from subside.grid.stream import Strays

__all__ = ["MISSING", "NOT_POSITIVE", "TOO_HIGH", "Seen"]

MISSING, NOT_POSITIVE, TOO_HIGH = range(3)
"""What may be wrong with a pressure: no value, zero or less, above lithostatic."""

_NONE = np.int64(np.iinfo(np.int64).max)  # beyond every cell


class Seen:
    """Findings by date; of equal ones the lowest cell counts, so the order of parts does not show.

    Parameters
    ----------
    steps : int
        Dates of the file.

    Attributes
    ----------
    counts, first, values : array (steps, 3)
        For `MISSING`, `NOT_POSITIVE`, `TOO_HIGH`: how many cells, the lowest, its pressure in Pa.
    jump, jump_cell : array (steps,)
        Largest change from the date before, Pa, and the lowest cell that has it.
    compared : array (steps,) of bool
        Whether a date was held against the one before.
    anywhere, on_edge : float
        Largest change from the initial pressure in any cell and on the outer edge, Pa.
    strays : Strays
    """

    def __init__(self, steps: int, strays: Strays | None = None) -> None:
        self.counts = np.zeros((steps, 3), np.int64)
        self.first = np.full((steps, 3), _NONE)
        self.values = np.zeros((steps, 3))
        self.jump = np.zeros(steps)
        self.jump_cell = np.full(steps, _NONE)
        self.compared = np.zeros(steps, bool)
        self.anywhere = self.on_edge = 0.0
        self.strays = Strays() if strays is None else strays

    def wrong(self, rows: Any, counts: np.ndarray, first: np.ndarray, values: np.ndarray) -> None:
        """Add what is wrong on the dates `rows`; see `counts`, `first`, `values`."""
        first = np.where(counts > 0, first, _NONE)
        self.values[rows] = np.where(first < self.first[rows], values, self.values[rows])
        self.first[rows] = np.minimum(first, self.first[rows])
        self.counts[rows] += counts

    def jumps(self, rows: Any, jump: np.ndarray, cell: np.ndarray) -> None:
        """Add the largest changes on the dates `rows`."""
        mine, where = self.jump[rows], self.jump_cell[rows]
        better = (jump > mine) | ((jump == mine) & (cell < where))
        self.jump_cell[rows] = np.where(better, cell, where)
        self.jump[rows] = np.maximum(jump, mine)

    def changes(self, anywhere: float, on_edge: float) -> None:
        """Add the largest changes from the initial pressure."""
        self.anywhere = max(self.anywhere, anywhere)
        self.on_edge = max(self.on_edge, on_edge)

    def merge(self, other: Seen) -> None:
        """Add what was seen of other cells or dates of the same grid."""
        everything = slice(None)
        self.wrong(everything, other.counts, other.first, other.values)
        self.jumps(everything, other.jump, other.jump_cell)
        self.compared |= other.compared
        self.changes(other.anywhere, other.on_edge)
        if other.strays is not self.strays:
            self.strays.merge(other.strays)
