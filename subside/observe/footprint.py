"""What each pixel of the compaction map takes of the cells below it: exact volumes.

A cell loses the same share of its volume everywhere, so the part below a pixel loses in proportion
to its volume: the integral of the thickness over the overlap of outline and pixel. Along the two
directions s and t of an outline with four corners, each -1 to 1, the thickness is

    h = H (1 + a (s - <s>) + b (t - <t>) + d s t),

H its mean and <> the mean over the outline's area. H drops out of the share. The integrals of the
four terms belong to the outline, so to a whole pillar of cells; a, b, d belong to each cell. The
first term gives the share by area, which is all there is where thickness is even; the others
integrate to zero over the outline, so that nothing is lost between pixels.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Self

import numpy as np
from numba import njit

from subside.observe.overlap import directions, is_convex, jacobian, overlaps
from subside.superposition.interface import Bodies

if TYPE_CHECKING:
    from scipy import sparse

__all__ = ["Footprints", "column_sums", "outline_area", "outlines_of", "shape_of_thickness"]

_CELLS_AT_ONCE = 100_000
_EVEN = 1e-9
"""Of the thickness: corners that differ by less do so by the rounding of their depths."""


@dataclass(frozen=True)
class Footprints:
    """Cells seen from above.

    Attributes
    ----------
    outlines : array (column, 4, 2)
        x, y in m of the corners of each pillar, in order round about, either way. A cell that leans
        is a pillar of its own, with the mean of its top and bottom outline.
    shape : array (cell, 3) or None
        a, b, d of each cell's thickness; None where all are even.
    """

    outlines: np.ndarray
    shape: np.ndarray | None = None

    @classmethod
    def of(cls, bodies: Bodies) -> Self:
        """Those of all cells."""
        return cls(_outlines_of_columns(bodies), _shape_of(bodies))

    @classmethod
    def none(cls) -> Self:
        """Of no cells."""
        return cls(np.zeros((0, 4, 2)))

    @property
    def terms(self) -> int:
        """Sums that `column_sums` makes for each column: 4, or 1 where thickness is even."""
        return 1 if self.shape is None else 4

    def shares(self, west: float, north: float, spacing: float, rows: int,
               columns: int) -> sparse.csr_matrix:
        """How the sums of columns are shared out among pixels.

        Exact for outlines that are parallelograms, and for any where thickness is even. The
        integrals of the other terms over other outlines are by six Gauss points on each side of a
        piece: their error, over the outline's area, was found by random trial to be below 1e-8
        where the Jacobian of the outline varies by 20 % about its mean (a trapezium whose parallel
        sides are 1 to 1.5), 1e-6 at 40 % and 3e-4 where an angle comes to 180 degrees. Nothing is
        lost by it. An outline that is not convex is shared by area.

        Parameters
        ----------
        west, north : float
            Outer edges of the map, m.
        spacing : float
            m.
        rows, columns : int
            Size of the map, north first.

        Returns
        -------
        csr_matrix (rows * columns, terms * column)
            Term by term; times the sums of `column_sums` (terms, column) in a row it gives volumes.
            Columns of the first term sum to 1 where the whole outline lies below the map, those
            of others to 0. What lies beside the map is left out; four corners in one line have no
            area and no share.
        """
        from scipy import sparse

        # in pixels, y running south, so that pixel (row, column) is a unit square
        quads = np.empty(self.outlines.shape)
        quads[..., 0] = (self.outlines[..., 0] - west) / spacing
        quads[..., 1] = (north - self.outlines[..., 1]) / spacing
        start, pixel, share = overlaps(quads, self.terms, rows, columns)
        size = (rows * columns, len(quads))
        return sparse.hstack([sparse.csc_matrix((share[n], pixel, start), shape=size)
                              for n in range(self.terms)], format="csr")


def outlines_of(bodies: Bodies, cells: np.ndarray) -> np.ndarray:
    """Mean of top and bottom outline of some cells, (cell, 4, 2) in m."""
    outlines = np.empty((cells.size, 4, 2))
    for start in range(0, cells.size, _CELLS_AT_ONCE):
        corners = bodies.corners(cells[start:start + _CELLS_AT_ONCE])
        outlines[start:start + _CELLS_AT_ONCE] = 0.5 * (corners[:, :4, :2] + corners[:, 4:, :2])
    return outlines


def outline_area(outlines: np.ndarray) -> np.ndarray:
    """Area seen from above, m2 (column,), of outlines (column, 4, 2) in m."""
    one, two = outlines[:, 2] - outlines[:, 0], outlines[:, 3] - outlines[:, 1]
    return np.asarray(0.5 * np.abs(one[:, 0] * two[:, 1] - one[:, 1] * two[:, 0]))


def _outlines_of_columns(bodies: Bodies) -> np.ndarray:
    if bodies.column is None:
        return outlines_of(bodies, np.arange(bodies.count))
    some = np.zeros(int(bodies.column.max(initial=-1)) + 1, dtype=np.int64)
    some[bodies.column] = np.arange(bodies.count)
    return outlines_of(bodies, some)


def _shape_of(bodies: Bodies) -> np.ndarray | None:
    if bodies.boxes is not None:
        return None
    shape = np.zeros((bodies.count, 3))
    even = True
    for start in range(0, bodies.count, _CELLS_AT_ONCE):
        cells = np.arange(start, min(start + _CELLS_AT_ONCE, bodies.count))
        even &= _fill_shape(shape[start:start + cells.size], bodies.corners(cells))
    return None if even else shape


def shape_of_thickness(corners: np.ndarray) -> np.ndarray:
    """a, b, d of the thickness of cells, (cell, 3), from corners (cell, 8, 3) in m.

    A corner whose bottom lies above its top has no thickness. Zero where thickness is even.
    """
    shape = np.zeros((corners.shape[0], 3))
    _fill_shape(shape, np.asarray(corners, dtype=float))
    return shape


@njit(cache=True, nogil=True)
def _fill_shape(shape: np.ndarray, corners: np.ndarray) -> bool:
    """Put what is not zero into shape; whether there was nothing."""
    even = True
    thick, quad = np.empty(4), np.empty((4, 2))
    for c in range(corners.shape[0]):
        for k in range(4):
            thick[k] = max(corners[c, k + 4, 2] - corners[c, k, 2], 0.0)
        if thick.max() - thick.min() <= _EVEN * thick.max():
            continue
        for k in range(4):
            for axis in range(2):
                quad[k, axis] = 0.5 * (corners[c, k, axis] + corners[c, k + 4, axis])
        j0, j1, j2 = jacobian(directions(quad))
        if not is_convex(j0, j1, j2):
            continue
        a = 0.25 * (thick[1] - thick[0] + thick[2] - thick[3])
        b = 0.25 * (thick[3] - thick[0] + thick[2] - thick[1])
        d = 0.25 * (thick[0] - thick[1] + thick[2] - thick[3])
        # <s>, <t> of a convex outline are 1/3 at most, so this is more than zero
        mean = 0.25 * thick.sum() + (a * j1 + b * j2) / (3.0 * j0)
        shape[c, 0], shape[c, 1], shape[c, 2] = a / mean, b / mean, d / mean
        even = False
    return even


def column_sums(column: np.ndarray, lost: np.ndarray,
                shape: np.ndarray | None = None) -> tuple[np.ndarray, np.ndarray]:
    """Add up cells by the column they stand in. Leaves the interpreter free for other threads.

    Parameters
    ----------
    column : array of int (cell,)
    lost : array (date, cell)
        Volume lost, m3.
    shape : array (cell, 3), optional
        Of the thickness of these cells, where it is uneven.

    Returns
    -------
    names : array of int (n,)
        The columns that occur, ascending.
    sums : array (date, terms, n)
        m3; the volume lost, then its products with a, b and d.
    """
    names, place = _numbered(column)
    if shape is None:
        return names, _even_sums(place, lost, names.size)
    return names, _uneven_sums(place, lost, shape, names.size)


@njit(cache=True, nogil=True)
def _numbered(column: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """The numbers that occur, ascending, and where each is among them."""
    if column.size == 0:
        return np.empty(0, np.int64), np.empty(0, np.int32)
    low = column.min()
    place_of = np.full(column.max() - low + 1, -1, np.int32)
    for c in range(column.size):
        place_of[column[c] - low] = 0
    names = np.empty(np.count_nonzero(place_of == 0), np.int64)
    n = 0
    for k in range(place_of.size):
        if place_of[k] == 0:
            place_of[k], names[n] = n, low + k
            n += 1
    place = np.empty(column.size, np.int32)
    for c in range(column.size):
        place[c] = place_of[column[c] - low]
    return names, place


@njit(cache=True, nogil=True)
def _even_sums(place: np.ndarray, lost: np.ndarray, count: int) -> np.ndarray:
    sums = np.zeros((lost.shape[0], 1, count))
    for step in range(lost.shape[0]):
        for c in range(place.size):
            sums[step, 0, place[c]] += lost[step, c]
    return sums


@njit(cache=True, nogil=True)
def _uneven_sums(place: np.ndarray, lost: np.ndarray, shape: np.ndarray,
                 count: int) -> np.ndarray:
    sums = np.zeros((lost.shape[0], 4, count))
    for step in range(lost.shape[0]):
        for c in range(place.size):
            n, value = place[c], lost[step, c]
            sums[step, 0, n] += value
            sums[step, 1, n] += value * shape[c, 0]
            sums[step, 2, n] += value * shape[c, 1]
            sums[step, 3, n] += value * shape[c, 2]
    return sums
