"""The compaction map: what the parts of cells below each pixel lose, over the pixel's area.

Every cell is a column seen from above: a quadrilateral (mean of its top and bottom outline) with a
thickness that varies between its corners. It is four triangles about its centre, where the
thickness is the mean of the corners': linear in each, and with upright sides of the volume of the
trilinear cell. The part below a pixel is each triangle clipped to the pixel, and its volume the
area times the thickness at the centroid, which is exact; so no volume is lost between the pixels.
"""

from __future__ import annotations

import numpy as np
from numba import njit
from scipy import sparse

from subside.superposition.interface import Bodies

__all__ = ["footprint_matrix"]

_CELLS_AT_ONCE = 20_000


def footprint_matrix(bodies: Bodies, west: float, north: float, spacing: float, rows: int,
                     columns: int) -> sparse.csr_matrix:
    """Shares of each cell's volume below each pixel.

    Parameters
    ----------
    bodies : Bodies
    west, north : float
        Outer edges of the map, m.
    spacing : float
        m.
    rows, columns : int
        Size of the map, north first.

    Returns
    -------
    csr_matrix (rows * columns, cell)
        A column sums to 1 where the whole cell lies below the map.
    """
    pixels, cells_of, shares = [np.zeros(0, int)], [np.zeros(0, int)], [np.zeros(0)]
    for start in range(0, bodies.count, _CELLS_AT_ONCE):
        cells = np.arange(start, min(start + _CELLS_AT_ONCE, bodies.count))
        corners = bodies.corners(cells)
        plan = 0.5 * (corners[:, :4, :2] + corners[:, 4:, :2])
        thickness = corners[:, 4:, 2] - corners[:, :4, 2]
        # in pixels, y running south, so that pixel (row, column) is a unit square
        quads = np.stack([(plan[..., 0] - west) / spacing, (north - plan[..., 1]) / spacing],
                         axis=-1)
        pixel, cell, share = _shares(quads, thickness, rows, columns)
        pixels.append(pixel)
        cells_of.append(cell + start)
        shares.append(share)
    # several triangles of a cell below one pixel add up here
    return sparse.csr_matrix(
        (np.concatenate(shares), (np.concatenate(pixels), np.concatenate(cells_of))),
        shape=(rows * columns, bodies.count))


@njit(cache=True)
def _shares(quads: np.ndarray, thickness: np.ndarray, rows: int, columns: int) -> tuple[
        np.ndarray, np.ndarray, np.ndarray]:
    capacity = 16 * quads.shape[0] + 64
    pixel = np.empty(capacity, dtype=np.int64)
    cell = np.empty(capacity, dtype=np.int64)
    share = np.empty(capacity)
    count = 0
    corner = np.empty((4, 3, 2))
    values = np.empty((4, 3))
    scratch = np.empty((2, 12, 2))
    for c in range(quads.shape[0]):
        whole = 0.0
        for n in range(4):
            _triangle(quads[c], thickness[c], n, corner[n], values[n])
            whole += _volume(corner[n], 3, corner[n], values[n])
        if whole == 0.0:
            continue
        for n in range(4):
            first_column, last_column = _span(corner[n, :, 0], columns)
            first_row, last_row = _span(corner[n, :, 1], rows)
            for row in range(first_row, last_row + 1):
                for column in range(first_column, last_column + 1):
                    polygon, size = _clip(corner[n], column, row, scratch)
                    part = _volume(polygon, size, corner[n], values[n]) / whole
                    if part == 0.0:
                        continue
                    if count == capacity:
                        capacity *= 2
                        pixel = _grown(pixel, capacity)
                        cell = _grown(cell, capacity)
                        bigger = np.empty(capacity)
                        bigger[:count] = share
                        share = bigger
                    pixel[count] = row * columns + column
                    cell[count] = c
                    share[count] = part
                    count += 1
    return pixel[:count], cell[:count], share[:count]


@njit(cache=True)
def _grown(values: np.ndarray, capacity: int) -> np.ndarray:
    bigger = np.empty(capacity, dtype=np.int64)
    bigger[:values.size] = values
    return bigger


@njit(cache=True)
def _triangle(quad: np.ndarray, thickness: np.ndarray, n: int, corner: np.ndarray,
              values: np.ndarray) -> None:
    """Centre and two following corners, and the thickness there."""
    corner[0] = 0.0
    values[0] = 0.0
    for m in range(4):
        corner[0] += 0.25 * quad[m]
        values[0] += 0.25 * thickness[m]
    for m in range(2):
        corner[1 + m] = quad[(n + m) % 4]
        values[1 + m] = thickness[(n + m) % 4]


@njit(cache=True)
def _span(along: np.ndarray, count: int) -> tuple[int, int]:
    """First and last pixel that three places touch, of those on the map."""
    low = min(along[0], along[1], along[2])
    high = max(along[0], along[1], along[2])
    # far outside: limited before it becomes an integer
    return (int(np.floor(max(low, 0.0))), int(np.floor(min(max(high, -1.0), count - 1.0))))


@njit(cache=True)
def _clip(triangle: np.ndarray, column: int, row: int, scratch: np.ndarray) -> tuple[
        np.ndarray, int]:
    """The triangle inside the unit square at (column, row) (Sutherland and Hodgman 1974)."""
    polygon, other = scratch[0], scratch[1]
    polygon[:3] = triangle
    size = 3
    for side in range(4):
        axis = side // 2
        limit = float((column if axis == 0 else row) + side % 2)
        keep_below = side % 2 == 1
        outside = 0
        for n in range(size):
            outside += polygon[n, axis] > limit if keep_below else polygon[n, axis] < limit
        if outside == 0:
            continue
        kept = 0
        for n in range(size):
            a, b = polygon[n], polygon[(n + 1) % size]
            inside_a = a[axis] <= limit if keep_below else a[axis] >= limit
            inside_b = b[axis] <= limit if keep_below else b[axis] >= limit
            if inside_a:
                other[kept] = a
                kept += 1
            if inside_a != inside_b:
                s = (limit - a[axis]) / (b[axis] - a[axis])
                other[kept, 0] = a[0] + s * (b[0] - a[0])
                other[kept, 1] = a[1] + s * (b[1] - a[1])
                kept += 1
        polygon, other = other, polygon
        size = kept
        if size < 3:
            break
    return polygon, size


@njit(cache=True)
def _volume(polygon: np.ndarray, size: int, corner: np.ndarray, values: np.ndarray) -> float:
    """Integral over a polygon of the linear thickness given at three corners, signed."""
    ux, uy = corner[1] - corner[0]
    vx, vy = corner[2] - corner[0]
    double = ux * vy - uy * vx
    if double == 0.0:
        return 0.0
    total = 0.0
    a = polygon[0]
    for n in range(1, size - 1):
        b, c = polygon[n], polygon[n + 1]
        area = 0.5 * ((b[0] - a[0]) * (c[1] - a[1]) - (c[0] - a[0]) * (b[1] - a[1]))
        px = (a[0] + b[0] + c[0]) / 3.0 - corner[0, 0]
        py = (a[1] + b[1] + c[1]) / 3.0 - corner[0, 1]
        share_1 = (px * vy - py * vx) / double
        share_2 = (ux * py - uy * px) / double
        total += area * (values[0] + share_1 * (values[1] - values[0])
                         + share_2 * (values[2] - values[0]))
    return total
