"""The cells that lose volume, as the lattice needs to know them: depths, extents, sample points."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numba import njit, prange

from subside.superposition.interface import Bodies
from subside.superposition.rule import surface_rule
from subside.superposition.spread import extent_of_points

__all__ = ["MANY_POINTS", "SampledCells", "losing_volume", "part_of"]

MANY_POINTS = 4096
"""Cells that need more sample points are left to `Direct`, which may know an exact integral."""
_BLOCK = 50_000


@dataclass(frozen=True)
class SampledCells:
    """What is kept of each live cell.

    Attributes
    ----------
    index : array of int (cell,)
        Number of the cell among the bodies.
    rule : array of int16 (cell, 6)
        Gauss orders and panels, as `surface_rule` gives them.
    extent : array (cell, 6)
        Smallest and largest x and y of the sample points, and of the corners' depths, m.
    points : array (cell,)
        Number of sample points.
    """

    index: np.ndarray
    rule: np.ndarray
    extent: np.ndarray
    points: np.ndarray

    @classmethod
    def of(cls, bodies: Bodies, index: np.ndarray, tolerance: float,
           gradient: bool) -> SampledCells:
        """Sample the chosen cells so finely that one cell's field errs by `tolerance` of itself."""
        rule = np.empty((index.size, 6), dtype=np.int16)
        extent, points = np.empty((index.size, 6)), np.empty(index.size)
        for start in range(0, index.size, _BLOCK):
            part = slice(start, start + _BLOCK)
            corners = bodies.corners(index[part])
            fine = surface_rule(corners, tolerance, gradient)
            rule[part], points[part] = fine, fine.prod(axis=1, dtype=float)
            extent[part] = extent_of_points(corners, rule[part])
        return cls(index, rule, extent, points)

    def chosen(self, which: np.ndarray) -> SampledCells:
        """Some of them."""
        return SampledCells(self.index[which], self.rule[which], self.extent[which],
                            self.points[which])

    @property
    def top(self) -> np.ndarray:
        """Depth of the highest corner, m."""
        return self.extent[:, 4]

    @property
    def bottom(self) -> np.ndarray:
        """Depth of the lowest corner, m."""
        return self.extent[:, 5]


def part_of(bodies: Bodies, index: np.ndarray) -> Bodies:
    """Some of the bodies as bodies of their own."""
    boxes = None if bodies.boxes is None else bodies.boxes[index]
    return Bodies(index.size, lambda some: bodies.corners(index[some]), boxes)


def losing_volume(*moments: np.ndarray) -> np.ndarray:
    """Which cells have a moment other than zero at any time, (cell,)."""
    live = np.zeros(moments[0].shape[1], dtype=np.bool_)
    for moment in moments:
        _mark(live, moment)
    return live


@njit(cache=True, parallel=True)
def _mark(live: np.ndarray, moment: np.ndarray) -> None:
    block = 4096  # cells that stay in cache from one step to the next
    for part in prange((live.size + block - 1) // block):
        for t in range(moment.shape[0]):
            for cell in range(part * block, min((part + 1) * block, live.size)):
                if moment[t, cell] != 0.0:
                    live[cell] = True
