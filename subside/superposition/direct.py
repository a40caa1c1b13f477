"""The plain sum over finite cells: slow, simple, and the referee of every faster way.

For a tile of cells and a tile of targets the influence of each unit source is written into a
small matrix, compiled and in parallel; a matrix product with the moments adds up all times. Memory
is a few tiles and the result, whatever the number of cells and targets.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

import numba
import numpy as np
from numba import njit
from threadpoolctl import threadpool_limits

from subside.errors import InputError
from subside.superposition.interface import DISPLACEMENT, GRADIENT, Bodies, Fields, Targets
from subside.superposition.rule import surface_rule
from subside.superposition.table import RadialTable
from subside.superposition.tiles import add_surface
from subside.superposition.underground import add_underground

__all__ = ["Direct", "DirectSum", "losing_volume"]

_SHARE_OF_TOLERANCE = 0.1
"""The part of the tolerance that sampling a finite cell by points may use."""
_EXACT_FROM_POINTS = 36
"""A box over a half-space that would take more points than this is integrated exactly."""
_MOST_POINTS = 300_000
"""A cell that would take more points is refused: too wide for its depth."""
_PAIRS_AT_ONCE = 2e7
"""Cell-target pairs between two words of progress."""


class Direct:
    """The plain sum over finite cells."""

    name = "direct"

    def __init__(self) -> None:
        self.achieved_error = 0.0
        self.notes = ["plain sum over all cells"]

    def solve(
        self,
        bodies: Bodies,
        moments: Mapping[str, np.ndarray],
        targets: Targets,
        earth: Any,
        *,
        tolerance: float,
        gradient: bool = False,
        progress: Callable[[float], None] = lambda pairs: None,
    ) -> Fields:
        """See `subside.superposition.interface.Solver`."""
        steps = next(iter(moments.values())).shape[0]
        live = np.nonzero(losing_volume(*moments.values()))[0]
        plain = DirectSum(bodies, targets, earth, tolerance=tolerance, gradient=gradient,
                          cells=live)
        self.achieved_error = plain.error
        result = np.zeros((len(plain.names), steps, targets.x.size))
        progress(float(bodies.count - live.size) * targets.x.size * len(moments))
        block = max(256, int(_PAIRS_AT_ONCE / max(targets.x.size, 1)))
        # each thread multiplies its own tiles: threads of the matrix library would be in the way
        with threadpool_limits(limits=1, user_api="blas"):
            for start in range(0, live.size, block):
                cells = live[start:start + block]
                plain.add(result, cells, {source: np.ascontiguousarray(moment[:, cells])
                                          for source, moment in moments.items()})
                progress(float(cells.size) * targets.x.size * len(moments))
        return dict(zip(plain.names, result, strict=True))


class DirectSum:
    """The plain sum, some cells at a time.

    Parameters
    ----------
    bodies, targets, earth, tolerance, gradient
        As in `Solver.solve`.
    cells : array of int
        All cells that may come.

    Raises
    ------
    InputError
        What the earth model cannot give.
    """

    def __init__(self, bodies: Bodies, targets: Targets, earth: Any, *, tolerance: float,
                 gradient: bool, cells: np.ndarray) -> None:
        self.names = DISPLACEMENT + (GRADIENT if gradient else ())
        self.error = _SHARE_OF_TOLERANCE * tolerance
        surface = np.nonzero(targets.at_surface)[0]
        deep = np.nonzero(~targets.at_surface)[0]
        _can_be_done(earth, targets, deep, gradient)
        self._bodies, self._surface, self._deep = bodies, surface, deep
        self._make = (
            lambda source: _Surface(source, earth, bodies, cells, targets, surface, tolerance,
                                    gradient),
            lambda source: _Underground(source, earth, bodies, targets, deep, tolerance))
        self._of_source: dict[str, tuple[_Surface, _Underground]] = {}

    def add(self, result: np.ndarray, cells: np.ndarray, moments: Mapping[str, np.ndarray]) -> None:
        """Add cells whose moments are (time, cell) into result (component, time, target)."""
        corners = self._bodies.corners(cells)
        steps = result.shape[1]
        for source, moment in moments.items():
            if source not in self._of_source:
                self._of_source[source] = (self._make[0](source), self._make[1](source))
            at_surface, underground = self._of_source[source]
            strength = np.ascontiguousarray(moment.T)
            for places, part in ((self._surface, at_surface), (self._deep, underground)):
                if places.size == result.shape[2]:
                    part.add(result, cells, corners, strength)
                elif places.size:
                    field = np.zeros((len(self.names), steps, places.size))
                    part.add(field, cells, corners, strength)
                    result[:, :, places] += field


def losing_volume(*moments: np.ndarray) -> np.ndarray:
    """Which cells have a moment other than zero at any time, (cell,)."""
    live = np.zeros(moments[0].shape[1], dtype=np.bool_)
    for moment in moments:
        _mark(live, moment)
    return live


@njit(cache=True, nogil=True)
def _mark(live: np.ndarray, moment: np.ndarray) -> None:
    block = 4096  # cells that stay in cache from one step to the next
    for first in range(0, live.size, block):
        for t in range(moment.shape[0]):
            for cell in range(first, min(first + block, live.size)):
                if moment[t, cell] != 0.0:
                    live[cell] = True


def _can_be_done(earth: Any, targets: Targets, deep: np.ndarray, gradient: bool) -> None:
    if deep.size and gradient:
        raise InputError("tilt and strain are available at the surface only.")
    if deep.size and earth.homogeneous_poisson_ratio is None:
        raise InputError(
            f"earth model '{earth.name}' gives displacement at the surface only, and {deep.size} "
            f"points lie below it, the first {float(targets.depth[deep[0]]):g} m deep; leave their "
            "depth out, or use model = \"half-space\"."
        )


def _refuse_too_shallow(corners: np.ndarray, points: np.ndarray) -> None:
    if (points > _MOST_POINTS).any():
        cell = corners[int(np.argmax(points))]
        width = float(np.ptp(cell[:, :2], axis=0).max())
        raise InputError(
            f"a cell {width:g} m wide reaches up to {float(cell[:, 2].min()):g} m below the ground "
            f"or seabed, near x = {float(cell[:, 0].mean()):.0f} m, y = "
            f"{float(cell[:, 1].mean()):.0f} m: it is too wide for its depth to be summed as "
            "points; split it, give its box instead of corners, or leave it out.")


def _tile_width(targets: int, largest: int, rounds: int) -> int:
    """Targets in a tile: `rounds` tiles for each thread, none larger than the cache likes."""
    fair = -(-targets // (rounds * numba.get_num_threads()))
    return int(min(max(fair, 16), largest))


class _Surface:
    """Unit sources of one kind seen from the surface targets."""

    def __init__(self, source: str, earth: Any, bodies: Bodies, live: np.ndarray, targets: Targets,
                 surface: np.ndarray, tolerance: float, gradient: bool) -> None:
        self._closure = source == "closure"
        self._boxes = bodies.boxes
        self._x, self._y = targets.x[surface], targets.y[surface]
        self._tolerance = tolerance * _SHARE_OF_TOLERANCE
        self._gradient = gradient
        self._poisson = earth.homogeneous_poisson_ratio
        if self._poisson is None and surface.size:
            table = RadialTable.covering(earth, source, bodies, live, targets, gradient)
            self._table = (table.depths, table.weights, table.step, table.coefficients)
            self._width = _tile_width(surface.size, 2048, 1)
        else:
            self._table = (np.zeros(0), np.zeros(0), 1.0, np.zeros((0, 1, 1, 4)))
            self._width = _tile_width(surface.size, 512, 4)

    def add(self, field: np.ndarray, cells: np.ndarray, corners: np.ndarray,
            strength: np.ndarray) -> None:
        """Add the cells' field into (component, time, target)."""
        rule = surface_rule(corners, self._tolerance, self._gradient)
        exact = np.zeros(cells.size, dtype=bool)
        boxes = np.zeros((cells.size, 7))
        if self._boxes is not None and self._poisson is not None:
            exact = rule.prod(axis=1) > _EXACT_FROM_POINTS
            boxes = self._boxes(cells)
        _refuse_too_shallow(corners, np.where(exact, 1, rule.prod(axis=1)))
        add_surface(field, self._width, self._x, self._y, corners, rule, boxes, exact, strength,
                    self._closure, self._poisson or 0.0, *self._table)


class _Underground:
    """Unit sources of one kind seen from targets below the surface of a half-space."""

    def __init__(self, source: str, earth: Any, bodies: Bodies, targets: Targets, deep: np.ndarray,
                 tolerance: float) -> None:
        self._closure = source == "closure"
        self._boxes = bodies.boxes
        self._x, self._y, self._z = targets.x[deep], targets.y[deep], targets.depth[deep]
        self._tolerance = tolerance * _SHARE_OF_TOLERANCE
        self._poisson = earth.homogeneous_poisson_ratio

    def add(self, field: np.ndarray, cells: np.ndarray, corners: np.ndarray,
            strength: np.ndarray) -> None:
        """Add the cells' field into (component, time, target)."""
        boxes = self._boxes(cells) if self._boxes is not None else np.zeros((0, 7))
        add_underground(field, self._x, self._y, self._z, corners, boxes, strength, self._closure,
                        self._poisson, self._tolerance)
