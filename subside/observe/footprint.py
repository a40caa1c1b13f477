"""The compaction map: what the parts of cells below each pixel lose, over the pixel's area.

Every cell is a column seen from above: a quadrilateral (mean of its top and bottom outline) with a
thickness that varies between its corners. The part of it below a pixel is the polygon clipped to
the pixel, and the volume of that part the integral of the thickness over the polygon.
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
    parts = []
    for start in range(0, bodies.count, _CELLS_AT_ONCE):
        cells = np.arange(start, min(start + _CELLS_AT_ONCE, bodies.count))
        corners = bodies.corners(cells)
        plan = 0.5 * (corners[:, :4, :2] + corners[:, 4:, :2])
        thickness = corners[:, 4:, 2] - corners[:, :4, 2]
        # in pixels, y running south, so that pixel (row, column) is a unit square
        quads = np.stack([(plan[..., 0] - west) / spacing, (north - plan[..., 1]) / spacing],
                         axis=-1)
        pixel, cell, share = _shares(quads, thickness, rows, columns)
        parts.append(sparse.coo_matrix((share, (pixel, cell + start)),
                                       shape=(rows * columns, bodies.count)))
    if not parts:
        return sparse.csr_matrix((rows * columns, 0))
    return sparse.csr_matrix(sum(p.tocsr() for p in parts))


@njit(cache=True)
def _shares(quads: np.ndarray, thickness: np.ndarray, rows: int, columns: int) -> tuple[
        np.ndarray, np.ndarray, np.ndarray]:
    capacity = 16 * quads.shape[0] + 64
    pixel = np.empty(capacity, dtype=np.int64)
    cell = np.empty(capacity, dtype=np.int64)
    share = np.empty(capacity)
    count = 0
    for c in range(quads.shape[0]):
        quad = quads[c]
        whole = _volume(quad, thickness[c], quad, 4)
        if whole == 0.0:
            continue
        first_column = max(int(np.floor(quad[:, 0].min())), 0)
        last_column = min(int(np.floor(quad[:, 0].max())), columns - 1)
        first_row = max(int(np.floor(quad[:, 1].min())), 0)
        last_row = min(int(np.floor(quad[:, 1].max())), rows - 1)
        for row in range(first_row, last_row + 1):
            for column in range(first_column, last_column + 1):
                polygon, size = _clip(quad, column, row)
                if size < 3:
                    continue
                part = _volume(polygon, thickness[c], quad, size) / whole
                if part <= 0.0:
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
def _clip(quad: np.ndarray, column: int, row: int) -> tuple[np.ndarray, int]:
    """The quadrilateral inside the unit square at (column, row) (Sutherland and Hodgman 1974)."""
    polygon = np.empty((12, 2))
    polygon[:4] = quad
    size = 4
    other = np.empty((12, 2))
    for side in range(4):
        axis = side // 2
        limit = float((column if axis == 0 else row) + side % 2)
        keep_below = side % 2 == 1
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
def _volume(polygon: np.ndarray, thickness: np.ndarray, quad: np.ndarray, size: int) -> float:
    """Integral of the thickness over a convex polygon inside the quadrilateral, absolute.

    The thickness is bilinear in the quadrilateral; three mid-edge points a triangle are exact for
    it where the outline is a parallelogram.
    """
    total = 0.0
    for n in range(1, size - 1):
        a, b, c = polygon[0], polygon[n], polygon[n + 1]
        area = 0.5 * ((b[0] - a[0]) * (c[1] - a[1]) - (c[0] - a[0]) * (b[1] - a[1]))
        mean = (_thickness_at(0.5 * (a[0] + b[0]), 0.5 * (a[1] + b[1]), thickness, quad)
                + _thickness_at(0.5 * (b[0] + c[0]), 0.5 * (b[1] + c[1]), thickness, quad)
                + _thickness_at(0.5 * (c[0] + a[0]), 0.5 * (c[1] + a[1]), thickness, quad)) / 3.0
        total += area * mean
    return abs(total)


@njit(cache=True)
def _thickness_at(x: float, y: float, thickness: np.ndarray, quad: np.ndarray) -> float:
    """Bilinear thickness at a place, by Newton's method on the bilinear map (exact in one step
    for a parallelogram)."""
    u = v = 0.5
    for _ in range(12):
        fx = ((1 - u) * (1 - v) * quad[0, 0] + u * (1 - v) * quad[1, 0] + u * v * quad[2, 0]
              + (1 - u) * v * quad[3, 0]) - x
        fy = ((1 - u) * (1 - v) * quad[0, 1] + u * (1 - v) * quad[1, 1] + u * v * quad[2, 1]
              + (1 - u) * v * quad[3, 1]) - y
        xu = (1 - v) * (quad[1, 0] - quad[0, 0]) + v * (quad[2, 0] - quad[3, 0])
        xv = (1 - u) * (quad[3, 0] - quad[0, 0]) + u * (quad[2, 0] - quad[1, 0])
        yu = (1 - v) * (quad[1, 1] - quad[0, 1]) + v * (quad[2, 1] - quad[3, 1])
        yv = (1 - u) * (quad[3, 1] - quad[0, 1]) + u * (quad[2, 1] - quad[1, 1])
        det = xu * yv - xv * yu
        if det == 0.0:
            break
        du = (fx * yv - fy * xv) / det
        dv = (fy * xu - fx * yu) / det
        u -= du
        v -= dv
        if abs(du) + abs(dv) < 1e-13:
            break
    return ((1 - u) * (1 - v) * thickness[0] + u * (1 - v) * thickness[1] + u * v * thickness[2]
            + (1 - u) * v * thickness[3])
