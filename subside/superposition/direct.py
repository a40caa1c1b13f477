"""The plain sum over finite cells: slow, simple, and the referee of every faster way.

For a tile of cells and a tile of targets the influence of each unit source is written into a
small matrix, compiled and in parallel; a matrix product with the moments adds up all times. Memory
is two tiles and the result, whatever the number of cells and targets.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

import numpy as np

from subside.errors import InputError
from subside.superposition import tiles
from subside.superposition.interface import DISPLACEMENT, GRADIENT, Bodies, Fields, Targets
from subside.superposition.rule import surface_rule
from subside.superposition.table import RadialTable
from subside.superposition.underground import fill_underground

__all__ = ["CELLS_IN_TILE", "Direct", "TARGETS_IN_TILE"]

CELLS_IN_TILE = 256
TARGETS_IN_TILE = 2048
_SHARE_OF_TOLERANCE = 0.1
"""The part of the tolerance that sampling a finite cell by points may use."""
_EXACT_FROM_POINTS = 36
"""A box over a half-space that would take more points than this is integrated exactly."""


class Direct:
    """The plain sum over finite cells."""

    name = "direct"

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
        names = DISPLACEMENT + (GRADIENT if gradient else ())
        steps = next(iter(moments.values())).shape[0]
        result = {name: np.zeros((steps, targets.x.size)) for name in names}
        surface = np.nonzero(targets.at_surface)[0]
        deep = np.nonzero(~targets.at_surface)[0]
        if deep.size and gradient:
            raise InputError("tilt and strain are available at the surface only.")
        for source, moment in moments.items():
            live = np.nonzero(np.any(moment != 0.0, axis=0))[0]
            if not live.size:
                progress(float(bodies.count) * targets.x.size)
                continue
            influence = _Surface(source, earth, bodies, targets, live, tolerance, gradient)
            underground = _Underground(source, earth, bodies, targets, tolerance)
            progress(float(bodies.count - live.size) * targets.x.size)
            for start in range(0, live.size, CELLS_IN_TILE):
                cells = live[start:start + CELLS_IN_TILE]
                corners = bodies.corners(cells)
                strength = np.ascontiguousarray(moment[:, cells])
                for fill, where in ((influence, surface), (underground, deep)):
                    for first in range(0, where.size, TARGETS_IN_TILE):
                        part = where[first:first + TARGETS_IN_TILE]
                        tile = fill(cells, corners, part)
                        for name, matrix in zip(names, tile, strict=False):
                            result[name][:, part] += strength @ matrix
                        progress(float(cells.size) * part.size)
        return result


class _Surface:
    """Influence of unit sources at surface targets, tile by tile."""

    def __init__(self, source: str, earth: Any, bodies: Bodies, targets: Targets,
                 live: np.ndarray, tolerance: float, gradient: bool) -> None:
        self._source = source
        self._bodies = bodies
        self._targets = targets
        self._tolerance = tolerance * _SHARE_OF_TOLERANCE
        self._poisson = earth.homogeneous_poisson_ratio
        self._components = 8 if gradient else 3
        self._table: RadialTable | None = None
        if self._poisson is None and targets.at_surface.any():
            self._table = RadialTable.covering(earth, source, bodies, live, targets, gradient)

    def __call__(self, cells: np.ndarray, corners: np.ndarray, part: np.ndarray) -> np.ndarray:
        """(component, cell, target) for cells and surface targets `part`."""
        x, y = self._targets.x[part], self._targets.y[part]
        tile = np.zeros((self._components, cells.size, part.size))
        rule = surface_rule(corners, self._tolerance)
        closure = self._source == "closure"
        if self._table is not None:
            table = self._table
            tiles.fill_table(tile, x, y, corners, rule, table.depths, table.weights, table.step,
                             table.coefficients)
            return tile
        exact = np.zeros(cells.size, dtype=bool)
        if self._bodies.boxes is not None:
            exact = rule.prod(axis=1) > _EXACT_FROM_POINTS
            boxes = self._bodies.boxes[cells]
            tiles.fill_boxes(tile, x, y, boxes, exact, closure, self._poisson)
        tiles.fill_half_space(tile, x, y, corners, rule, exact, closure, self._poisson)
        return tile


class _Underground:
    """Influence of unit sources at targets below the surface of a half-space."""

    def __init__(self, source: str, earth: Any, bodies: Bodies, targets: Targets,
                 tolerance: float) -> None:
        self._closure = source == "closure"
        self._targets = targets
        self._bodies = bodies
        self._tolerance = tolerance * _SHARE_OF_TOLERANCE
        self._poisson = earth.homogeneous_poisson_ratio
        if self._poisson is None and not targets.at_surface.all():
            raise InputError(
                f"earth model '{earth.name}' gives displacement at the surface only, and "
                f"{int((~targets.at_surface).sum())} points lie below it, the first "
                f"{float(targets.depth[~targets.at_surface][0]):g} m deep; leave their depth out, "
                "or use model = \"half-space\"."
            )

    def __call__(self, cells: np.ndarray, corners: np.ndarray, part: np.ndarray) -> np.ndarray:
        tile = np.zeros((3, cells.size, part.size))
        boxes = self._bodies.boxes[cells] if self._bodies.boxes is not None else np.zeros((0, 7))
        fill_underground(tile, self._targets.x[part], self._targets.y[part],
                         self._targets.depth[part], corners, boxes, self._closure, self._poisson,
                         self._tolerance)
        return tile
