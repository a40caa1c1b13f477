"""All cells once through: which class of depth each belongs to, and what a class amounts to.

Classes are steps of depth of the highest corner. A lattice is designed from what the classes amount
to, so that nothing but a class number is kept of each cell.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numba import njit

from subside.superposition.interface import Bodies
from subside.superposition.rule import box_rule, surface_rule
from subside.superposition.sampling import points_in

__all__ = ["HARD", "Census", "Group", "take_census"]

HARD = 126
"""Class of the cells that need more than `_MANY_POINTS` sample points."""
_MANY_POINTS = 4096
"""Such cells are left to the plain sum, which may know an exact integral."""
_SHALLOWEST = 0.01
_STEP = 1.13
"""Ratio of depths within a class: 0.01 m to 40 km are 125 classes."""
_BLOCK = 50_000


@dataclass(frozen=True)
class Group:
    """What some cells amount to.

    Attributes
    ----------
    classes : tuple of int
    count : int
        Cells.
    points : float
        Sample points of all of them.
    widths : tuple of float
        Extents along x and along y, summed, m.
    box : array (4,)
        Smallest and largest x, smallest and largest y, m.
    top, bottom : float
        Depth of the highest and of the lowest corner, m.
    highest : array (2,)
        x and y of the shallowest cell.
    """

    classes: tuple[int, ...]
    count: int
    points: float
    widths: tuple[float, float]
    box: np.ndarray
    top: float
    bottom: float
    highest: np.ndarray

    def with_(self, other: Group) -> Group:
        """Both together."""
        low, high = np.minimum(self.box, other.box), np.maximum(self.box, other.box)
        upper = self if self.top <= other.top else other
        return Group(self.classes + other.classes, self.count + other.count,
                     self.points + other.points,
                     (self.widths[0] + other.widths[0], self.widths[1] + other.widths[1]),
                     np.array([low[0], high[1], low[2], high[3]]), upper.top,
                     max(self.bottom, other.bottom), upper.highest)


@dataclass(frozen=True)
class Census:
    """The cells by classes of depth.

    Attributes
    ----------
    number : array of int8 (cell,)
        Class of each cell, -1 for cells that are left out.
    groups : list of Group
        One for each class that occurs, shallowest first; the class `HARD` comes last.
    rule : array of int (column, 6) or None
        The finest rule that a cell of each pillar needs, those of the class `HARD` left out: the
        same whichever of its cells come together. None where no two cells share a pillar.
    """

    number: np.ndarray
    groups: list[Group]
    rule: np.ndarray | None

    @property
    def count(self) -> int:
        """Cells that are not left out."""
        return sum(group.count for group in self.groups)

    @property
    def points(self) -> float:
        """Sample points of all cells."""
        return sum(group.points for group in self.groups)


def take_census(bodies: Bodies, tolerance: float, gradient: bool,
                live: np.ndarray | None = None) -> Census:
    """Go through the cells.

    Parameters
    ----------
    tolerance : float
        Error of one cell's field, relative to itself, that sampling it by points may make.
    live : array of bool (cell,), optional
        Cells that count; all when left out.
    """
    number = np.full(bodies.count, -1, dtype=np.int8)
    stats = np.zeros((HARD + 1, 12))
    stats[:, 4:9] = np.inf
    column = bodies.column
    pillars = 0 if column is None else int(column.max(initial=-1)) + 1
    finest = np.ones((pillars, 6), np.int16) if 0 < pillars < bodies.count else None
    for start in range(0, bodies.count, _BLOCK):
        cells = np.arange(start, min(start + _BLOCK, bodies.count))
        if live is not None:
            cells = cells[live[cells]]
        if not cells.size:
            continue
        if bodies.boxes is not None:
            boxes = bodies.boxes(cells)
            extent, rule = _extents_of_boxes(boxes), box_rule(boxes, tolerance, gradient)
        else:
            corners = bodies.corners(cells)
            extent, rule = _extents(corners), surface_rule(corners, tolerance, gradient)
        number[cells] = _enter(stats, extent, rule, np.log(_STEP))
        if finest is not None and column is not None:
            _refine(finest, column[cells], rule, number[cells])
    groups = [Group((n,), int(s[0]), float(s[1]), (float(s[2]), float(s[3])),
                    np.array([s[4], -s[5], s[6], -s[7]]), float(s[8]), float(s[9]), s[10:12].copy())
              for n, s in enumerate(stats) if s[0] > 0]
    return Census(number, groups, finest)


@njit(cache=True, nogil=True)
def _extents(corners: np.ndarray) -> np.ndarray:
    """Smallest and largest x, y and depth of each cell, (cell, 6)."""
    extent = np.empty((corners.shape[0], 6))
    for cell in range(corners.shape[0]):
        for axis in range(3):
            low = high = corners[cell, 0, axis]
            for n in range(1, 8):
                low, high = min(low, corners[cell, n, axis]), max(high, corners[cell, n, axis])
            extent[cell, 2 * axis], extent[cell, 2 * axis + 1] = low, high
    return extent


def _extents_of_boxes(boxes: np.ndarray) -> np.ndarray:
    """The same of boxes (cell, 7)."""
    x, y, top, bottom, dx, dy, azimuth = boxes.T
    turn = np.radians(azimuth)
    cosine, sine = np.abs(np.cos(turn)), np.abs(np.sin(turn))
    half_x, half_y = 0.5 * (dx * cosine + dy * sine), 0.5 * (dx * sine + dy * cosine)
    return np.column_stack([x - half_x, x + half_x, y - half_y, y + half_y, top, bottom])


@njit(cache=True, nogil=True)
def _enter(stats: np.ndarray, extent: np.ndarray, rule: np.ndarray, log_step: float) -> np.ndarray:
    """Class of each cell; `stats` holds count, points, widths, box, top, bottom, highest place."""
    number = np.empty(extent.shape[0], dtype=np.int8)
    for cell in range(extent.shape[0]):
        low_x, high_x, low_y, high_y, top, bottom = extent[cell]
        points = points_in(rule[cell])
        kind = HARD
        if points <= _MANY_POINTS:
            depth = max(top, _SHALLOWEST)
            kind = min(int(math.log(depth / _SHALLOWEST) / log_step), HARD - 1)
        number[cell] = kind
        s = stats[kind]
        s[0] += 1
        s[1] += points
        s[2] += high_x - low_x
        s[3] += high_y - low_y
        s[4], s[5] = min(s[4], low_x), min(s[5], -high_x)
        s[6], s[7] = min(s[6], low_y), min(s[7], -high_y)
        if top < s[8]:
            s[8], s[10], s[11] = top, 0.5 * (low_x + high_x), 0.5 * (low_y + high_y)
        s[9] = max(s[9], bottom)
    return number


@njit(cache=True, nogil=True)
def _refine(finest: np.ndarray, column: np.ndarray, rule: np.ndarray, number: np.ndarray) -> None:
    """Raise the rule of each cell's pillar to what the cell needs."""
    for cell in range(column.size):
        if number[cell] != HARD:
            for n in range(6):
                finest[column[cell], n] = max(finest[column[cell], n], rule[cell, n])
