"""Few targets: pillars are brought together on depth nodes, then one matrix product does the rest.

Each pillar stands for as many sources as there are depth nodes, however many cells it holds. Their
influence on the targets is computed once per leg, and meets the moments of all its dates at once.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numba
import numpy as np
from numba import njit, prange

from subside.superposition.census import Census, Group
from subside.superposition.columns import collapse, column_starts, is_level, outline_places
from subside.superposition.depth_nodes import depth_nodes
from subside.superposition.interface import Bodies
from subside.superposition.rule import surface_rule
from subside.superposition.spread import strength_of
from subside.superposition.table import RadialTable
from subside.superposition.tiles import fill_points, fill_table

__all__ = ["PillarPass"]

_BLOCK = 50_000
_SOURCES_AT_ONCE = 64


class PillarPass:
    """One band of cells in pillars, seen from few targets.

    Its sheets are arrays (pillar and sample place, depth node, source, time); see `BandPass`.

    Parameters
    ----------
    bodies : Bodies
        With columns.
    census : Census
    group : Group
        What the band's cells amount to.
    x, y : array (target,)
        m.
    earth : EarthModel
    sources : list of str
    depth_error : float
        Allowed to the interpolation in depth.
    components : int
        3, or 8 with the gradient.
    sampling : float
        Error of one cell's field, relative to itself, that sampling it by points may make.
    """

    def __init__(self, bodies: Bodies, census: Census, group: Group, x: np.ndarray, y: np.ndarray,
                 earth: Any, sources: list[str], depth_error: float, components: int,
                 sampling: float) -> None:
        self._x, self._y, self._earth, self._sources = x, y, earth, sources
        self._components, self._group = components, group
        self.depths, self._weights = depth_nodes(earth, sources, group.top, group.bottom,
                                                 depth_error, components > 3)
        self._survey(bodies, np.nonzero(np.isin(census.number, group.classes))[0], sampling)
        self._tables: dict[str, tuple[np.ndarray, np.ndarray, float, np.ndarray]] = {}

    def _survey(self, bodies: Bodies, cells: np.ndarray, sampling: float) -> None:
        """Outline, rule and number of rows of each pillar."""
        assert bodies.column is not None
        count = int(bodies.column.max()) + 1
        self._outline = np.zeros((count, 4, 2))
        self._rule = np.ones((count, 6), dtype=np.int64)
        dips = np.zeros(count, dtype=bool)
        there = np.zeros(count, dtype=bool)
        for start in range(0, cells.size, _BLOCK):
            some = cells[start:start + _BLOCK]
            column, corners = bodies.column[some], bodies.corners(some)
            self._outline[column] = corners[:, :4, :2]
            np.maximum.at(self._rule, column, surface_rule(corners, sampling, self._components > 3))
            depth = corners[:, :, 2]
            dip = (np.ptp(depth[:, :4], axis=1) > 0) | (np.ptp(depth[:, 4:], axis=1) > 0)
            dips[column[dip]] = True
            there[column] = True
        places = self._rule[:, [0, 1, 3, 4]].prod(axis=1)
        rows = np.where(there, np.where(dips, places, 1), 0)
        self._dips = dips
        self._first = np.concatenate([[0], np.cumsum(rows)])

    @property
    def bytes_per_date(self) -> float:
        """Of one sheet."""
        return 8.0 * self._first[-1] * self.depths.size * len(self._sources)

    @property
    def bytes_of_kernels(self) -> float:
        """What is needed beside: tiles only."""
        return 1e7

    @property
    def words(self) -> str:
        """For the record."""
        return f"{self._first[-1]} sources in pillars x {self.depths.size} depths"

    def roughness(self) -> np.ndarray:
        """All targets alike, (target,): nothing is interpolated between places."""
        return np.ones(self._x.size)

    def sheet(self, steps: int) -> np.ndarray:
        """An empty sheet."""
        return np.zeros((self._first[-1], self.depths.size, len(self._sources), steps))

    def deposit(self, sheet: np.ndarray, bodies: Bodies, cells: np.ndarray,
                moments: Mapping[str, np.ndarray], places: np.ndarray, sampling: float) -> None:
        """See `BandPass.deposit`."""
        assert bodies.column is not None
        column = bodies.column[cells]
        start = column_starts(column)
        if bodies.boxes is not None:
            boxes = bodies.boxes(cells)
            top, bottom = boxes[:, 2:3], boxes[:, 3:4]
        else:
            corners = bodies.corners(cells)
            top, bottom = corners[:, :4, 2], corners[:, 4:, 2]
        _collapse_all(sheet.reshape(*sheet.shape[:2], -1), self._first, self._outline, self._rule,
                      self._dips, column[start[:-1]], np.ascontiguousarray(top),
                      np.ascontiguousarray(bottom), start,
                      strength_of(moments, self._sources, places), self.depths, self._weights)

    def add_field(self, result: np.ndarray, sheet: np.ndarray, single: bool) -> None:
        """Add the field of a sheet into result (component, time, target). Main thread only."""
        poisson = self._earth.homogeneous_poisson_ratio
        width = max(16, -(-self._x.size // (2 * numba.get_num_threads())))
        for n, source in enumerate(self._sources):
            _add_influence(result, width, self._x, self._y, self._first, self._outline, self._rule,
                           self._dips, np.ascontiguousarray(sheet[:, :, n]), self.depths,
                           source == "closure", poisson or 0.0, *self._table(source))

    def _table(self, source: str) -> tuple[np.ndarray, np.ndarray, float, np.ndarray]:
        if self._earth.homogeneous_poisson_ratio is not None:
            return np.zeros(0), np.zeros(0), 1.0, np.zeros((0, 1, 1, 4))
        if source not in self._tables:
            box = self._group.box
            reach = np.hypot(max(box[1] - self._x.min(), self._x.max() - box[0]),
                             max(box[3] - self._y.min(), self._y.max() - box[2]))
            table = RadialTable.build(self._earth, source, self._group.top, self._group.bottom,
                                      float(reach), self._components > 3)
            self._tables[source] = (table.depths, table.weights, table.step, table.coefficients)
        return self._tables[source]


@njit(cache=True, nogil=True)
def _collapse_all(sheet: np.ndarray, at: np.ndarray, outline: np.ndarray, rule: np.ndarray,
                  dips: np.ndarray, column: np.ndarray, top: np.ndarray, bottom: np.ndarray,
                  start: np.ndarray, strength: np.ndarray, depths: np.ndarray,
                  weights: np.ndarray) -> None:
    """Add runs of cells (of pillars `column`) into sheet (row, node, series)."""
    for n in range(column.size):
        col = column[n]
        places = outline_places(outline[col], rule[col])
        sums = collapse(places, top, bottom, rule[col], start[n], start[n + 1], strength, depths,
                        weights)
        if dips[col] and is_level(top, bottom, start[n], start[n + 1]):
            # level cells of a pillar that has others: to each place its share of the area
            for g in range(places.shape[0]):
                sheet[at[col] + g] += places[g, 2] * sums[0]
        else:
            sheet[at[col]:at[col] + sums.shape[0]] += sums


@njit(cache=True, parallel=True)
def _add_influence(result: np.ndarray, width: int, x: np.ndarray, y: np.ndarray, at: np.ndarray,
                   outline: np.ndarray, rule: np.ndarray, dips: np.ndarray, sheet: np.ndarray,
                   depths: np.ndarray, closure: bool, poisson: float, table_depths: np.ndarray,
                   table_weights: np.ndarray, step: float, coefficients: np.ndarray) -> None:
    """Influence of all rows (row, node, time) on tiles of targets, times the moments."""
    components, steps, targets = result.shape
    nodes = depths.size
    for tile_number in prange((targets + width - 1) // width):
        first = tile_number * width
        last = min(first + width, targets)
        tx, ty = x[first:last], y[first:last]
        local = np.zeros((components, steps, last - first))
        tile = np.zeros((components, _SOURCES_AT_ONCE * nodes, last - first))
        mixed = np.empty(coefficients.shape[1:])
        filled, begun = 0, 0
        for col in range(outline.shape[0]):
            if at[col + 1] == at[col]:
                continue
            places = outline_places(outline[col], rule[col])
            for row in range(at[col], at[col + 1]):
                g = row - at[col]
                some = places[g:g + 1] if dips[col] else places
                points = np.empty((some.shape[0], 4))
                for d in range(nodes):
                    for n in range(some.shape[0]):
                        points[n, 0], points[n, 1], points[n, 2] = some[n, 0], some[n, 1], depths[d]
                        points[n, 3] = 1.0 if dips[col] else some[n, 2]
                    if table_depths.size > 0:
                        fill_table(tile, filled * nodes + d, tx, ty, points, table_depths,
                                   table_weights, step, coefficients, mixed)
                    else:
                        fill_points(tile, filled * nodes + d, tx, ty, points, closure, poisson)
                filled += 1
                if filled == _SOURCES_AT_ONCE or row == at[-1] - 1:
                    strength = sheet[begun:begun + filled].reshape(-1, steps).T
                    for k in range(components):
                        local[k] += np.dot(strength, tile[k, :filled * nodes])
                    tile[:] = 0.0
                    begun += filled
                    filled = 0
        result[:, :, first:last] += local
