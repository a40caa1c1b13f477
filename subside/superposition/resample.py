"""From the lattice to the targets, with the same stencils as to it."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numba import njit, prange

from subside.superposition.frame import Frame
from subside.superposition.stencil import Stencil

__all__ = ["Raster", "Sampler"]


@dataclass(frozen=True)
class Raster:
    """Targets that form a regular product of x and y, in whatever order.

    Attributes
    ----------
    x, y : array (columns,), (rows,)
        Ascending, m.
    order : array of int (rows, columns)
        Which target stands there.
    """

    x: np.ndarray
    y: np.ndarray
    order: np.ndarray

    @cached_property
    def straight(self) -> bool:
        """Whether the targets of each row come one after another, west to east."""
        return bool((np.diff(self.order, axis=1) == 1).all())

    @classmethod
    def of(cls, x: np.ndarray, y: np.ndarray) -> Raster | None:
        """The raster that the targets form, or None."""
        columns, column = np.unique(x, return_inverse=True)
        rows, row = np.unique(y, return_inverse=True)
        if columns.size * rows.size != x.size:
            return None
        order = np.full((rows.size, columns.size), -1, dtype=np.int64)
        order[row, column] = np.arange(x.size)
        return cls(columns, rows, order) if (order >= 0).all() else None


class Sampler:
    """Reads the field of one band at the targets."""

    def __init__(self, x: np.ndarray, y: np.ndarray, raster: Raster | None, frame: Frame,
                 stencil: Stencil) -> None:
        self._raster = raster
        if raster is not None:
            x, y = raster.x, raster.y
        self._column, offset_x = frame.x.place(x)
        self._row, offset_y = frame.y.place(y)
        self._wx, self._wy = stencil.weights(offset_x), stencil.weights(offset_y)
        # the error of a wave of k d = 4, where the error of a point source is largest
        wave = np.array([4.0 / stencil.ratio])
        self._error_x = np.abs(stencil.symbol(wave, offset_x)[:, 0] - 1.0)
        self._error_y = np.abs(stencil.symbol(wave, offset_y)[:, 0] - 1.0)

    def roughness(self) -> np.ndarray:
        """How ill each target lies between the nodes, (target,): relative error of a short wave."""
        if self._raster is None:
            return self._error_x + self._error_y
        rough = np.empty(self._raster.order.size)
        rough[self._raster.order] = self._error_y[:, None] + self._error_x[None, :]
        return rough

    def add(self, result: np.ndarray, first: int, field: np.ndarray) -> None:
        """Add the field (row, column, component, time) into result (component, time, target).

        `first` is the step in `result` of the field's first.
        """
        flat = field.reshape(*field.shape[:2], -1)
        steps = field.shape[3]
        if self._raster is None:
            _to_points(result, first, steps, flat, self._row, self._wy, self._column, self._wx)
        else:
            _to_raster(result, first, steps, flat, self._row, self._wy, self._column, self._wx,
                       self._raster.order, self._raster.straight)


@njit(cache=True, parallel=True, fastmath={"contract"})
def _to_raster(result: np.ndarray, first: int, steps: int, field: np.ndarray, row: np.ndarray,
               wy: np.ndarray, column: np.ndarray, wx: np.ndarray, order: np.ndarray,
               straight: bool) -> None:
    """One pass along y, one along x, then whole rows of the map.

    `straight`: the targets of a row stand one after another in `result`.
    """
    width, columns = wx.shape[1], column.size
    series = field.shape[2]
    for j in prange(row.size):
        line = np.zeros((field.shape[1], series))
        for a in range(width):
            weight, source = wy[j, a], field[row[j] + a]
            for i in range(line.shape[0]):
                for k in range(series):
                    line[i, k] += weight * source[i, k]
        # rows a little longer than they need be, or they would all fall on the same cache lines
        read = np.empty((series, columns + 9))
        value = np.empty(series)
        for i in range(columns):
            value[:] = 0.0
            for b in range(width):
                weight, source = wx[i, b], line[column[i] + b]
                for k in range(series):
                    value[k] += weight * source[k]
            for k in range(series):
                read[k, i] = value[k]
        for k in range(series):
            target = result[k // steps, first + k % steps]
            if straight:
                start = order[j, 0]
                for i in range(columns):
                    target[start + i] += read[k, i]
            else:
                for i in range(columns):
                    target[order[j, i]] += read[k, i]


@njit(cache=True, parallel=True, fastmath={"contract"})
def _to_points(result: np.ndarray, first: int, steps: int, field: np.ndarray, row: np.ndarray,
               wy: np.ndarray, column: np.ndarray, wx: np.ndarray) -> None:
    width = wx.shape[1]
    series = field.shape[2]
    for i in prange(row.size):
        value = np.zeros(series)
        for a in range(width):
            for b in range(width):
                weight = wy[i, a] * wx[i, b]
                for k in range(series):
                    value[k] += weight * field[row[i] + a, column[i] + b, k]
        for k in range(series):
            result[k // steps, first + k % steps, i] += value[k]
