"""Influence of unit cells on targets below the surface of a homogeneous half-space.

Far cells are Gauss points; the order follows from size over distance. Near cells and the one that
holds the target are exact in their singular part (contraction: Newtonian attraction of the box or
of the hexahedron; closure: the closing box), and the smooth image part is by Gauss points.
"""

from __future__ import annotations

import math

import numpy as np
from numba import njit, prange

from subside.earth.box import box_depth
from subside.earth.crack_box import crack_box_full_space, crack_full_space
from subside.earth.half_space import closure_depth, contraction_depth
from subside.earth.polyhedron import contraction_hexahedron_depth
from subside.superposition.hexahedron import octant_of, sample_cell, volume_of
from subside.superposition.rule import MAX_ORDER

__all__ = ["add_underground"]

_IMAGE_ORDER = 6
_SPLITS = 4
"""Times a closing hexahedron near the target is halved before its parts are taken as boxes."""


@njit(cache=True, parallel=True)
def add_underground(result: np.ndarray, x: np.ndarray, y: np.ndarray, z: np.ndarray,
                    corners: np.ndarray, boxes: np.ndarray, moment: np.ndarray, closure: bool,
                    poisson: float, tolerance: float) -> None:
    """Add into ``result (component, time, target)``: downward, east, north of ``moment (cell,
    time)`` in m3.

    `boxes` has one row for each cell, or none when the cells are hexahedra.
    """
    is_box = boxes.shape[0] > 0
    for t in prange(x.size):
        for c in range(corners.shape[0]):
            hexa = corners[c]
            centre, reach = _middle(hexa)
            gap = math.sqrt((x[t] - centre[0]) ** 2 + (y[t] - centre[1]) ** 2
                            + (z[t] - centre[2]) ** 2)
            order = _order(gap, reach, tolerance)
            if order <= MAX_ORDER:
                down, east, north = _by_points(hexa, order, x[t], y[t], z[t], closure, poisson)
            elif is_box:
                down, east, north = _near_box(hexa, boxes[c], x[t], y[t], z[t], closure, poisson)
            elif not closure:
                point = np.array([x[t], y[t], z[t]])
                east, north, down = contraction_hexahedron_depth(hexa, point, poisson,
                                                                 _IMAGE_ORDER)
                volume = volume_of(hexa)
                down, east, north = down / volume, east / volume, north / volume
            else:
                down, east, north = _near_closing(hexa, x[t], y[t], z[t], poisson, tolerance)
            for k in range(moment.shape[1]):
                result[0, k, t] += down * moment[c, k]
                result[1, k, t] += east * moment[c, k]
                result[2, k, t] += north * moment[c, k]


@njit(cache=True)
def _middle(hexa: np.ndarray) -> tuple[np.ndarray, float]:
    """Mean of the corners, and the distance from it to the farthest corner."""
    centre = np.zeros(3)
    for n in range(8):
        for axis in range(3):
            centre[axis] += hexa[n, axis] / 8.0
    reach = 0.0
    for n in range(8):
        reach = max(reach, math.sqrt((hexa[n, 0] - centre[0]) ** 2 + (hexa[n, 1] - centre[1]) ** 2
                                     + (hexa[n, 2] - centre[2]) ** 2))
    return centre, reach


@njit(cache=True)
def _order(gap: float, reach: float, tolerance: float) -> int:
    """Gauss order for a body of half-extent `reach` whose centre is `gap` away.

    The integrand is analytic inside the Bernstein ellipse through the singularity, so that the
    error falls as rho^(-2n); the factor 10 covers the kernels used here (tested).
    """
    if gap <= 1.2 * reach:
        return MAX_ORDER + 1
    ratio = gap / reach
    rho = ratio + math.sqrt(ratio * ratio - 1.0)
    return max(1, int(math.ceil(math.log(10.0 / tolerance) / (2.0 * math.log(rho)))))


@njit(cache=True)
def _rule(order: int) -> np.ndarray:
    return np.array([order, order, order, 1, 1, 1])


@njit(cache=True)
def _by_points(hexa: np.ndarray, order: int, x: float, y: float, z: float, closure: bool,
               poisson: float) -> tuple[float, float, float]:
    points = sample_cell(hexa, _rule(order))
    down = east = north = 0.0
    for n in range(points.shape[0]):
        dx, dy, depth, weight = x - points[n, 0], y - points[n, 1], points[n, 2], points[n, 3]
        r = math.sqrt(dx * dx + dy * dy)
        if closure:
            outward, deeper = closure_depth(r, z, depth, poisson)
        else:
            outward, deeper = contraction_depth(r, z, depth, poisson)
        down += weight * deeper
        if r > 0.0:
            east += weight * outward * dx / r
            north += weight * outward * dy / r
    return down, east, north


@njit(cache=True)
def _near_box(hexa: np.ndarray, box: np.ndarray, x: float, y: float, z: float, closure: bool,
              poisson: float) -> tuple[float, float, float]:
    """Exact box; of a closing one the image part is by Gauss points."""
    bx, by, top, bottom, dx, dy, azimuth = box
    cosine = math.cos(math.radians(azimuth))
    sine = math.sin(math.radians(azimuth))
    u = (x - bx) * cosine - (y - by) * sine
    v = (x - bx) * sine + (y - by) * cosine
    share = 1.0 / (dx * dy * (bottom - top))
    x0, x1, y0, y1 = -0.5 * dx - u, 0.5 * dx - u, -0.5 * dy - v, 0.5 * dy - v
    if closure:
        own_x, own_y, down = crack_box_full_space(x0, x1, y0, y1, top - z, bottom - z, poisson)
    else:
        own_x, own_y, down = box_depth(x0, x1, y0, y1, top, bottom, z, poisson)
    east = share * (own_x * cosine + own_y * sine)
    north = share * (-own_x * sine + own_y * cosine)
    down *= share
    if closure:
        image = _image(hexa, x, y, z, poisson)
        return down + image[0], east + image[1], north + image[2]
    return down, east, north


@njit(cache=True)
def _image(hexa: np.ndarray, x: float, y: float, z: float, poisson: float) -> tuple[
        float, float, float]:
    """What the free surface adds to a closing body: half-space minus full space."""
    points = sample_cell(hexa, _rule(_IMAGE_ORDER))
    down = east = north = 0.0
    for n in range(points.shape[0]):
        dx, dy, depth, weight = x - points[n, 0], y - points[n, 1], points[n, 2], points[n, 3]
        if dx == 0.0 and dy == 0.0 and z == depth:
            dx = 1e-6 * depth
        r = math.sqrt(dx * dx + dy * dy)
        outward, deeper = closure_depth(r, z, depth, poisson)
        full_east, full_north, full_down = crack_full_space(dx, dy, z - depth, poisson)
        down += weight * (deeper - full_down)
        if r > 0.0:
            east += weight * (outward * dx / r - full_east)
            north += weight * (outward * dy / r - full_north)
    return down, east, north


@njit(cache=True)
def _near_closing(hexa: np.ndarray, x: float, y: float, z: float, poisson: float,
                  tolerance: float) -> tuple[float, float, float]:
    """A closing hexahedron near the target: halved where near, the last parts taken as boxes."""
    stack = np.empty((8 * _SPLITS + 8, 8, 3))
    level = np.empty(8 * _SPLITS + 8, dtype=np.int64)
    stack[0] = hexa
    level[0] = 0
    size = 1
    total = volume_of(hexa)
    down = east = north = 0.0
    while size > 0:
        size -= 1
        part = stack[size].copy()
        depth = level[size]
        centre, reach = _middle(part)
        gap = math.sqrt((x - centre[0]) ** 2 + (y - centre[1]) ** 2 + (z - centre[2]) ** 2)
        order = _order(gap, reach, tolerance)
        share = volume_of(part) / total
        if order <= MAX_ORDER:
            d, e, m = _by_points(part, order, x, y, z, True, poisson)
        elif depth == _SPLITS:
            d, e, m = _near_box(part, _as_box(part), x, y, z, True, poisson)
        else:
            for octant in range(8):
                stack[size] = octant_of(part, octant)
                level[size] = depth + 1
                size += 1
            continue
        down += share * d
        east += share * e
        north += share * m
    return down, east, north


@njit(cache=True)
def _as_box(hexa: np.ndarray) -> np.ndarray:
    """The upright box of the same centre, azimuth and volume (its sides as the mean edges)."""
    along = (hexa[1] - hexa[0] + hexa[2] - hexa[3] + hexa[5] - hexa[4] + hexa[6] - hexa[7]) / 4.0
    across = (hexa[3] - hexa[0] + hexa[2] - hexa[1] + hexa[7] - hexa[4] + hexa[6] - hexa[5]) / 4.0
    centre = _middle(hexa)[0]
    dx = math.sqrt(along[0] ** 2 + along[1] ** 2)
    dy = math.sqrt(across[0] ** 2 + across[1] ** 2)
    height = volume_of(hexa) / (dx * dy)
    # the box's own x points along (cos, -sin) of its azimuth
    azimuth = math.degrees(math.atan2(-along[1], along[0]))
    return np.array([centre[0], centre[1], centre[2] - height / 2, centre[2] + height / 2,
                     dx, dy, azimuth])
