"""Compiled tiles: the influence of unit cells on surface targets, and its product with moments.

Each thread takes a tile of targets and goes through the cells in chunks: the influence of a chunk
fits into its cache, and a matrix product adds up all times at once. Components 0-2 are downward,
east, north, and 3-7, where wanted, the horizontal derivatives of `interface.GRADIENT`. A cell's own
volume divides out: a unit moment is spread evenly over its bulk.
"""

from __future__ import annotations

import math

import numpy as np
from numba import njit, prange

from subside.earth.box import box_surface, box_surface_gradient
from subside.earth.half_space import (
    closure_slopes_over_r2,
    contraction_slopes_over_r2,
)
from subside.superposition.hexahedron import sample_cell

__all__ = ["add_surface", "fill_points", "fill_table"]

_CHUNK = 64


@njit(cache=True, parallel=True)
def add_surface(result: np.ndarray, width: int, x: np.ndarray, y: np.ndarray, corners: np.ndarray,
                rule: np.ndarray, boxes: np.ndarray, exact: np.ndarray, moment: np.ndarray,
                closure: bool, poisson: float, depths: np.ndarray, weights: np.ndarray,
                step: float, coefficients: np.ndarray) -> None:
    """Add the field of some cells into ``result (component, time, target)``.

    Parameters
    ----------
    width : int
        Targets in a tile.
    corners, rule : array (cell, 8, 3), (cell, 6)
        Cells and how finely they are sampled.
    boxes, exact : array (cell, 7), (cell,)
        Boxes, and which of them are integrated exactly.
    moment : array (cell, time)
        m3 lost.
    closure : bool
        The source kind, for the closed forms of the half-space.
    depths, weights, step, coefficients
        A radial table (see `table.RadialTable`) of any other earth; no depths for the half-space.
    """
    components, steps, targets = result.shape
    for tile_number in prange((targets + width - 1) // width):
        first = tile_number * width
        last = min(first + width, targets)
        tx, ty = x[first:last], y[first:last]
        local = np.zeros((components, steps, last - first))
        tile = np.empty((components, _CHUNK, last - first))
        mixed = np.empty(coefficients.shape[1:])
        for start in range(0, corners.shape[0], _CHUNK):
            stop = min(start + _CHUNK, corners.shape[0])
            tile[:] = 0.0
            for c in range(start, stop):
                row = c - start
                if exact[c]:
                    _fill_box(tile, row, tx, ty, boxes[c], closure, poisson)
                    continue
                points = sample_cell(corners[c], rule[c])
                if depths.size > 0:
                    fill_table(tile, row, tx, ty, points, depths, weights, step, coefficients,
                                mixed)
                else:
                    fill_points(tile, row, tx, ty, points, closure, poisson)
            strength = moment[start:stop].T
            for k in range(components):
                local[k] += np.dot(strength, tile[k, :stop - start])
        result[:, :, first:last] += local


# Short loops with few outputs are turned into vector code, one loop with eight is not; so the
# kernel goes into scratch once, and the loops after it only multiply. A tile comes whole, with a
# row: a view of it would be taken as strided, and not vectorised.


@njit(cache=True, fastmath=True, error_model="numpy")
def fill_points(tile: np.ndarray, row: int, x: np.ndarray, y: np.ndarray,
                 points: np.ndarray, closure: bool, poisson: float) -> None:
    """A cell as weighted points in a homogeneous half-space."""
    size = x.size
    dx, dy, outward, bend = np.empty(size), np.empty(size), np.empty(size), np.empty(size)
    gradient = tile.shape[0] > 3
    for n in range(points.shape[0]):
        px, py, depth, weight = points[n, 0], points[n, 1], points[n, 2], points[n, 3]
        for t in range(size):
            dx[t] = x[t] - px
            dy[t] = y[t] - py
            r2 = dx[t] * dx[t] + dy[t] * dy[t]
            if closure:
                q, bent, _ = closure_slopes_over_r2(r2, depth)
            else:
                q, bent, _ = contraction_slopes_over_r2(r2, depth, poisson)
            outward[t] = weight * q
            bend[t] = weight * bent
        _add_displacement(tile[0, row], tile[1, row], tile[2, row], dx, dy, outward, depth)
        if gradient:
            _add_slopes(tile[3, row], tile[4, row], dx, dy, bend, depth)
            _add_strain(tile[5, row], tile[6, row], tile[7, row], dx, dy, outward, bend)


# Both surface kernels point at their source: downward = -depth x outward/r, and so the slope of
# the downward movement is -depth times the bend of the horizontal one (tested).


@njit(cache=True, fastmath=True, error_model="numpy")
def _add_displacement(down: np.ndarray, east: np.ndarray, north: np.ndarray, dx: np.ndarray,
                      dy: np.ndarray, outward: np.ndarray, depth: float) -> None:
    for t in range(dx.size):
        down[t] -= depth * outward[t]
        east[t] += outward[t] * dx[t]
        north[t] += outward[t] * dy[t]


@njit(cache=True, fastmath=True, error_model="numpy")
def _add_slopes(by_east: np.ndarray, by_north: np.ndarray, dx: np.ndarray, dy: np.ndarray,
                bend: np.ndarray, depth: float) -> None:
    for t in range(dx.size):
        by_east[t] -= depth * bend[t] * dx[t]
        by_north[t] -= depth * bend[t] * dy[t]


@njit(cache=True, fastmath=True, error_model="numpy")
def _add_strain(along_east: np.ndarray, along_north: np.ndarray, shear: np.ndarray,
                dx: np.ndarray, dy: np.ndarray, outward: np.ndarray, bend: np.ndarray) -> None:
    for t in range(dx.size):
        along_east[t] += outward[t] + bend[t] * dx[t] * dx[t]
        along_north[t] += outward[t] + bend[t] * dy[t] * dy[t]
        shear[t] += bend[t] * dx[t] * dy[t]


@njit(cache=True)
def _fill_box(tile: np.ndarray, row: int, x: np.ndarray, y: np.ndarray, box: np.ndarray,
              closure: bool, poisson: float) -> None:
    """An upright box by the exact integral, homogeneous half-space."""
    bx, by, top, bottom, dx, dy, azimuth = box
    cosine = math.cos(math.radians(azimuth))
    sine = math.sin(math.radians(azimuth))
    share = 1.0 / (dx * dy * (bottom - top))
    pick = 3 if closure else 0
    first = 5 if closure else 0
    for t in range(x.size):
        # the target in the box's own axes: x to its right, y along its azimuth
        u = (x[t] - bx) * cosine - (y[t] - by) * sine
        v = (x[t] - bx) * sine + (y[t] - by) * cosine
        x0, x1 = -0.5 * dx - u, 0.5 * dx - u
        y0, y1 = -0.5 * dy - v, 0.5 * dy - v
        field = box_surface(x0, x1, y0, y1, top, bottom, poisson)
        own_x, own_y = field[pick] * share, field[pick + 1] * share
        tile[0, row, t] += field[pick + 2] * share
        tile[1, row, t] += own_x * cosine + own_y * sine
        tile[2, row, t] += -own_x * sine + own_y * cosine
        if tile.shape[0] > 3:
            slopes = box_surface_gradient(x0, x1, y0, y1, top, bottom, poisson)
            exx, eyy = slopes[first] * share, slopes[first + 1] * share
            exy = slopes[first + 2] * share
            gx, gy = slopes[first + 3] * share, slopes[first + 4] * share
            tile[3, row, t] += gx * cosine + gy * sine
            tile[4, row, t] += -gx * sine + gy * cosine
            tile[5, row, t] += exx * cosine * cosine + eyy * sine * sine + 2 * exy * sine * cosine
            tile[6, row, t] += exx * sine * sine + eyy * cosine * cosine - 2 * exy * sine * cosine
            tile[7, row, t] += (eyy - exx) * sine * cosine + exy * (cosine * cosine - sine * sine)


@njit(cache=True, fastmath=True, error_model="numpy")
def fill_table(tile: np.ndarray, row: int, x: np.ndarray, y: np.ndarray,
                points: np.ndarray, depths: np.ndarray, weights: np.ndarray, step: float,
                coefficients: np.ndarray, mixed: np.ndarray) -> None:
    """A cell as weighted points, any earth model by its radial table.

    `coefficients (depth, function, interval, 4)`: cubic pieces over asinh(radius/depth); functions
    are outward, downward (times depth^2), then d outward/dr, outward/r, d downward/dr (times
    depth^3). `mixed` is scratch of one depth.
    """
    functions, intervals = mixed.shape[0], mixed.shape[1]
    value = np.empty(functions)
    known = -1.0
    for n in range(points.shape[0]):
        px, py, depth, weight = points[n]
        if depth != known:
            _mix(depth, depths, weights, coefficients, mixed)
            known = depth
        for t in range(x.size):
            dx = x[t] - px
            dy = y[t] - py
            r = math.sqrt(dx * dx + dy * dy)
            place = math.asinh(r / depth) / step
            k = min(int(place), intervals - 1)
            s = place - k
            for f in range(functions):
                value[f] = ((mixed[f, k, 0] * s + mixed[f, k, 1]) * s
                            + mixed[f, k, 2]) * s + mixed[f, k, 3]
            e = dx / r if r > 0.0 else 0.0
            m = dy / r if r > 0.0 else 0.0
            scale = weight / (depth * depth)
            tile[0, row, t] += scale * value[1]
            tile[1, row, t] += scale * value[0] * e
            tile[2, row, t] += scale * value[0] * m
            if tile.shape[0] > 3:
                scale /= depth
                tile[3, row, t] += scale * value[4] * e
                tile[4, row, t] += scale * value[4] * m
                bend = value[2] - value[3]
                tile[5, row, t] += scale * (value[3] + bend * e * e)
                tile[6, row, t] += scale * (value[3] + bend * m * m)
                tile[7, row, t] += scale * bend * e * m


@njit(cache=True)
def _mix(depth: float, depths: np.ndarray, weights: np.ndarray, coefficients: np.ndarray,
         local: np.ndarray) -> None:
    """Barycentric interpolation in depth of the table's pieces into `local`."""
    share = np.zeros(depths.size)
    total = 0.0
    for d in range(depths.size):
        gap = depth - depths[d]
        if abs(gap) < 1e-12 * depth:
            share[:] = 0.0
            share[d] = 1.0
            total = 1.0
            break
        share[d] = weights[d] / gap
        total += share[d]
    local[:] = 0.0
    for d in range(depths.size):
        part = share[d] / total
        if part != 0.0:
            for f in range(local.shape[0]):
                for k in range(local.shape[1]):
                    for m in range(4):
                        local[f, k, m] += part * coefficients[d, f, k, m]
