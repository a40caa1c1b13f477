"""Compiled tiles: the influence of unit cells on surface targets.

Each function adds into ``tile (component, cell, target)``; components 0-2 are downward, east,
north, and 3-7, where the tile has them, the horizontal derivatives of `interface.GRADIENT`.
A cell's own volume divides out: a unit moment is spread evenly over its bulk.
"""

from __future__ import annotations

import math

import numpy as np
from numba import njit, prange

from subside.earth.box import box_surface, box_surface_gradient
from subside.earth.half_space import (
    closure_over_r2,
    closure_slopes_over_r2,
    contraction_over_r2,
    contraction_slopes_over_r2,
)
from subside.superposition.hexahedron import sample_cell

__all__ = ["fill_boxes", "fill_half_space", "fill_table"]


@njit(cache=True, parallel=True, fastmath=True)
def fill_half_space(tile: np.ndarray, x: np.ndarray, y: np.ndarray, corners: np.ndarray,
                    rule: np.ndarray, skip: np.ndarray, closure: bool, poisson: float) -> None:
    """Cells sampled by Gauss points, homogeneous half-space."""
    gradient = tile.shape[0] > 3
    for c in prange(corners.shape[0]):
        if skip[c]:
            continue
        points = sample_cell(corners[c], rule[c])
        for n in range(points.shape[0]):
            px, py, depth, weight = points[n, 0], points[n, 1], points[n, 2], points[n, 3]
            for t in range(x.size):
                east = x[t] - px
                north = y[t] - py
                r2 = east * east + north * north
                if closure:
                    outward, down = closure_over_r2(r2, depth)
                else:
                    outward, down = contraction_over_r2(r2, depth, poisson)
                tile[0, c, t] += weight * down
                tile[1, c, t] += weight * outward * east
                tile[2, c, t] += weight * outward * north
            if gradient:
                for t in range(x.size):
                    east = x[t] - px
                    north = y[t] - py
                    r2 = east * east + north * north
                    if closure:
                        outward, bend, slope = closure_slopes_over_r2(r2, depth)
                    else:
                        outward, bend, slope = contraction_slopes_over_r2(r2, depth, poisson)
                    tile[3, c, t] += weight * slope * east
                    tile[4, c, t] += weight * slope * north
                    tile[5, c, t] += weight * (outward + bend * east * east)
                    tile[6, c, t] += weight * (outward + bend * north * north)
                    tile[7, c, t] += weight * bend * east * north


@njit(cache=True, parallel=True)
def fill_boxes(tile: np.ndarray, x: np.ndarray, y: np.ndarray, boxes: np.ndarray,
               chosen: np.ndarray, closure: bool, poisson: float) -> None:
    """Chosen boxes by the exact integral, homogeneous half-space."""
    gradient = tile.shape[0] > 3
    for c in prange(boxes.shape[0]):
        if not chosen[c]:
            continue
        bx, by, top, bottom, dx, dy, azimuth = boxes[c]
        cosine = math.cos(math.radians(azimuth))
        sine = math.sin(math.radians(azimuth))
        share = 1.0 / (dx * dy * (bottom - top))
        pick = 3 if closure else 0
        for t in range(x.size):
            # the target in the box's own axes: x to its right, y along its azimuth
            u = (x[t] - bx) * cosine - (y[t] - by) * sine
            v = (x[t] - bx) * sine + (y[t] - by) * cosine
            x0, x1 = -0.5 * dx - u, 0.5 * dx - u
            y0, y1 = -0.5 * dy - v, 0.5 * dy - v
            field = box_surface(x0, x1, y0, y1, top, bottom, poisson)
            own_x, own_y = field[pick] * share, field[pick + 1] * share
            tile[0, c, t] += field[pick + 2] * share
            tile[1, c, t] += own_x * cosine + own_y * sine
            tile[2, c, t] += -own_x * sine + own_y * cosine
            if gradient:
                first = 5 if closure else 0
                slopes = box_surface_gradient(x0, x1, y0, y1, top, bottom, poisson)
                exx, eyy = slopes[first] * share, slopes[first + 1] * share
                exy = slopes[first + 2] * share
                gx, gy = slopes[first + 3] * share, slopes[first + 4] * share
                tile[3, c, t] += gx * cosine + gy * sine
                tile[4, c, t] += -gx * sine + gy * cosine
                tile[5, c, t] += (exx * cosine * cosine + eyy * sine * sine
                                  + 2 * exy * sine * cosine)
                tile[6, c, t] += (exx * sine * sine + eyy * cosine * cosine
                                  - 2 * exy * sine * cosine)
                tile[7, c, t] += ((eyy - exx) * sine * cosine
                                  + exy * (cosine * cosine - sine * sine))


@njit(cache=True, parallel=True, fastmath=True)
def fill_table(tile: np.ndarray, x: np.ndarray, y: np.ndarray, corners: np.ndarray,
               rule: np.ndarray, depths: np.ndarray, weights: np.ndarray, step: float,
               coefficients: np.ndarray) -> None:
    """Cells sampled by Gauss points, any earth model by its radial table.

    `coefficients (depth, function, interval, 4)`: cubic pieces over asinh(radius/depth); functions
    are outward, downward (times depth^2), then d outward/dr, outward/r, d downward/dr (times
    depth^3).
    """
    gradient = tile.shape[0] > 3
    functions, intervals = coefficients.shape[1], coefficients.shape[2]
    for c in prange(corners.shape[0]):
        points = sample_cell(corners[c], rule[c])
        local = np.empty((functions, intervals, 4))
        value = np.empty(functions)
        known = -1.0
        for n in range(points.shape[0]):
            px, py, depth, weight = points[n, 0], points[n, 1], points[n, 2], points[n, 3]
            if depth != known:
                _mix(depth, depths, weights, coefficients, local)
                known = depth
            for t in range(x.size):
                east = x[t] - px
                north = y[t] - py
                r = math.sqrt(east * east + north * north)
                place = math.asinh(r / depth) / step
                k = min(int(place), intervals - 1)
                s = place - k
                for f in range(functions):
                    value[f] = ((local[f, k, 0] * s + local[f, k, 1]) * s
                                + local[f, k, 2]) * s + local[f, k, 3]
                e = east / r if r > 0.0 else 0.0
                m = north / r if r > 0.0 else 0.0
                scale = weight / (depth * depth)
                tile[0, c, t] += scale * value[1]
                tile[1, c, t] += scale * value[0] * e
                tile[2, c, t] += scale * value[0] * m
                if gradient:
                    scale /= depth
                    tile[3, c, t] += scale * value[4] * e
                    tile[4, c, t] += scale * value[4] * m
                    bend = value[2] - value[3]
                    tile[5, c, t] += scale * (value[3] + bend * e * e)
                    tile[6, c, t] += scale * (value[3] + bend * m * m)
                    tile[7, c, t] += scale * bend * e * m


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
