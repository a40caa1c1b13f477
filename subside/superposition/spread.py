"""Spreading cells onto a lattice: the weights of a bin of cells, times their moments at all times.

A cell is sampled by its Gauss points, averaged into its weights, so that its size costs nothing
over time. Cells are sorted by lattice bin; the weights of a bin form a small matrix that meets the
moments of many steps at once. Cells that stand in upright columns have a shorter way: `columns`.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numba import njit

from subside.superposition.frame import Axis, barycentric
from subside.superposition.rule import GAUSS_NODES
from subside.superposition.sampling import points_in, sample_into
from subside.superposition.stencil import stencil_into

__all__ = ["Bins", "deposit_bins", "extent_of_points", "strength_of"]

_CHUNK = 256
_ENOUGH = 32
"""Cells after which a bin is cut where wider cells begin, which need more nodes."""


@dataclass(frozen=True)
class Bins:
    """Cells in the order of their lattice bins.

    Attributes
    ----------
    order : array of int (cell,)
        Position in the caller's arrays.
    row, column : array of int (cell,)
        First node of the cell's stencils.
    extra_rows, extra_columns : array of int (cell,)
        Nodes that the cell needs beyond one stencil, because its points lie in several bins.
    """

    order: np.ndarray
    row: np.ndarray
    column: np.ndarray
    extra_rows: np.ndarray
    extra_columns: np.ndarray

    @classmethod
    def of(cls, extent: np.ndarray, x: Axis, y: Axis) -> Bins:
        """Sort cells; `extent (cell, 4 or more)` is as `extent_of_points` gives it."""
        column, last_column = _first_nodes(extent[:, :2], x)
        row, last_row = _first_nodes(extent[:, 2:4], y)
        extra_rows, extra_columns = last_row - row, last_column - column
        wide, tall = int(extra_columns.max()) + 1, int(extra_rows.max()) + 1
        key = ((row * x.sources + column) * tall + extra_rows) * wide + extra_columns
        order = np.argsort(key, kind="stable")
        return cls(order, row[order], column[order], extra_rows[order], extra_columns[order])


def _first_nodes(interval: np.ndarray, axis: Axis) -> tuple[np.ndarray, np.ndarray]:
    """First stencil nodes of the two ends, with room for the rounding of a point's place."""
    low = np.floor((interval[:, 0] - axis.origin) / axis.spacing - 1e-7)
    high = np.floor((interval[:, 1] - axis.origin) / axis.spacing + 1e-7)
    return low.astype(np.int64), high.astype(np.int64)


@njit(cache=True, nogil=True)
def extent_of_points(corners: np.ndarray, rule: np.ndarray) -> np.ndarray:
    """Smallest and largest x, y of each cell's points, and of its corners' depths, (cell, 6).

    The trilinear map takes its extremes over a block at the block's corners.
    """
    extent = np.empty((corners.shape[0], 6))
    for cell in range(corners.shape[0]):
        c = corners[cell]
        near = np.empty(3)
        for d in range(3):
            near[d] = GAUSS_NODES[rule[cell, d], 0] / rule[cell, 3 + d]
        for axis in range(2):
            low, high = np.inf, -np.inf
            for n in range(8):
                u = near[0] if n % 2 == 0 else 1 - near[0]
                v = near[1] if (n // 2) % 2 == 0 else 1 - near[1]
                w = near[2] if n // 4 == 0 else 1 - near[2]
                top = ((1 - v) * ((1 - u) * c[0, axis] + u * c[1, axis])
                       + v * (u * c[2, axis] + (1 - u) * c[3, axis]))
                foot = ((1 - v) * ((1 - u) * c[4, axis] + u * c[5, axis])
                        + v * (u * c[6, axis] + (1 - u) * c[7, axis]))
                place = (1 - w) * top + w * foot
                low, high = min(low, place), max(high, place)
            extent[cell, 2 * axis], extent[cell, 2 * axis + 1] = low, high
        extent[cell, 4], extent[cell, 5] = c[:, 2].min(), c[:, 2].max()
    return extent


def strength_of(moments: Mapping[str, np.ndarray], sources: Sequence[str],
                places: np.ndarray) -> np.ndarray:
    """Moments of some cells in rows, (cell, source * time).

    Parameters
    ----------
    moments : mapping of source to array (time, n)
    sources : sequence of str
        All kinds, in their order; those that `moments` has not are zero.
    places : array of int (cell,)
        Where in `moments` the cells are.
    """
    steps = next(iter(moments.values())).shape[0]
    strength = np.empty((places.size, len(sources) * steps))
    for n, source in enumerate(sources):
        if source in moments:
            rows_of_cells(strength, moments[source], places, n * steps)
        else:
            strength[:, n * steps:(n + 1) * steps] = 0.0
    return strength


@njit(cache=True, nogil=True)
def rows_of_cells(strength: np.ndarray, moment: np.ndarray, cells: np.ndarray, first: int) -> None:
    """Moments (time, cell) of some cells into the rows of ``strength (cell, series)``.

    `first` is the series of the first date. A cache line of the result is filled at a time.
    """
    steps = moment.shape[0]
    for part in range(0, cells.size, 512):
        for start in range(0, steps, 8):
            for c in range(part, min(part + 512, cells.size)):
                for t in range(start, min(start + 8, steps)):
                    strength[c, first + t] = moment[t, cells[c]]


@njit(cache=True, nogil=True)
def deposit_bins(lattice: np.ndarray, strength: np.ndarray, corners: np.ndarray, rule: np.ndarray,
                 row: np.ndarray, column: np.ndarray, extra_rows: np.ndarray,
                 extra_columns: np.ndarray, x_origin: float, y_origin: float, spacing: float,
                 coefficients: np.ndarray, depths: np.ndarray, weights: np.ndarray) -> None:
    """Add cells, in the order of `Bins`, onto the lattice.

    Parameters
    ----------
    lattice : array (row, column * depth node * series)
    strength : array (cell, series)
    corners, rule, row, column, extra_rows, extra_columns : array (cell, ...)
        See `Bins`.
    x_origin, y_origin, spacing, coefficients, depths, weights
        The lattice, the stencil (powers first, nodes last), the depth nodes.
    """
    width, nodes, series = coefficients.shape[1], depths.size, strength.shape[1]
    most = 1
    for cell in range(rule.shape[0]):
        most = max(most, points_in(rule[cell]))
    points, edge = np.empty((most, 4)), np.empty((3, 6))
    start, end = 0, row.size
    while start < end:
        stop, tall, wide = _chunk(start, end, row, column, extra_rows, extra_columns, width)
        matrix = np.zeros((stop - start, tall * wide * nodes))
        for c in range(start, stop):
            count = sample_into(points, corners[c], rule[c], edge)
            _fill_weights(matrix[c - start], points[:count], row[start], column[start], wide,
                          x_origin, y_origin, spacing, coefficients, depths, weights)
        product = np.dot(matrix.T, strength[start:stop]).reshape(tall, wide * nodes * series)
        left = column[start] * nodes * series
        for a in range(tall):
            target = lattice[row[start] + a, left:left + wide * nodes * series]
            for k in range(target.size):
                target[k] += product[a, k]
        start = stop


@njit(cache=True, nogil=True)
def _chunk(start: int, end: int, row: np.ndarray, column: np.ndarray, extra_rows: np.ndarray,
           extra_columns: np.ndarray, width: int) -> tuple[int, int, int]:
    """Cells from `start` that one matrix holds, and the nodes it spans along y and x."""
    stop, tall, wide = start, 0, 0
    while (stop < end and stop - start < _CHUNK and row[stop] == row[start]
           and column[stop] == column[start]):
        wider = extra_rows[stop] > tall or extra_columns[stop] > wide
        if wider and stop - start >= _ENOUGH:
            break
        tall, wide = max(tall, extra_rows[stop]), max(wide, extra_columns[stop])
        stop += 1
    return stop, tall + width, wide + width


@njit(cache=True, nogil=True, fastmath={"contract"}, error_model="numpy")
def _fill_weights(matrix: np.ndarray, points: np.ndarray, row: int, column: int, wide: int,
                  x_origin: float, y_origin: float, spacing: float, coefficients: np.ndarray,
                  depths: np.ndarray, weights: np.ndarray) -> None:
    """Average the stencils of a cell's points into matrix[(a, b, node)].

    Points above each other share one stencil in x and y.
    """
    width, nodes = coefficients.shape[1], depths.size
    column_of, shared = np.zeros(nodes), np.empty(nodes)
    wx, wy = np.empty(width), np.empty(width)
    for n in range(points.shape[0]):
        x, y, depth, weight = points[n]
        barycentric(shared, depth, depths, weights)
        for d in range(nodes):
            column_of[d] += weight * shared[d]
        if (n + 1 < points.shape[0] and abs(points[n + 1, 0] - x) < 1e-9 * spacing
                and abs(points[n + 1, 1] - y) < 1e-9 * spacing):
            continue
        place_x, place_y = (x - x_origin) / spacing, (y - y_origin) / spacing
        whole_x, whole_y = np.floor(place_x), np.floor(place_y)
        stencil_into(wx, coefficients, place_x - whole_x - 0.5)
        stencil_into(wy, coefficients, place_y - whole_y - 0.5)
        right, up = int(whole_x) - column, int(whole_y) - row
        for a in range(width):
            for b in range(width):
                start = ((up + a) * wide + right + b) * nodes
                share = wy[a] * wx[b]
                for d in range(nodes):
                    matrix[start + d] += share * column_of[d]
        column_of[:] = 0.0
