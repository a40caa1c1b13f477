"""Influence of unit cells on targets below the surface of a homogeneous half-space.

Far cells are Gauss points; the order follows from size over distance. Near cells and the one that
holds the target are exact in their full-space part (closed forms for boxes and for hexahedra with
plane faces; a twisted hexahedron is cut where it is near until its parts are plane enough). What
the free surface adds to them, their image above the ground, is by Gauss points again, and cut
where the image is near.
"""

from __future__ import annotations

import math

import numpy as np
from numba import njit, prange

from subside.earth.box import box_depth
from subside.earth.crack_body import (
    crack_box_full_space,
    crack_full_space,
    crack_hexahedron_full_space,
)
from subside.earth.half_space import closure_depth, contraction_depth
from subside.earth.polyhedron import hexahedron_attraction
from subside.superposition.hexahedron import octant_of, sample_cell, volume_of
from subside.superposition.rule import MAX_ORDER

__all__ = ["add_underground"]

_SPLITS = 12
"""Times a near hexahedron may be halved."""
_HALF_SPACE, _FULL_SPACE, _IMAGE = 0, 1, 2
"""Kernels: all of it, without the free surface, and what the free surface adds."""
_FACES = np.array([[0, 1, 2, 3], [4, 5, 6, 7], [0, 1, 5, 4], [1, 2, 6, 5], [2, 3, 7, 6],
                   [3, 0, 4, 7]])


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
                down, east, north = _by_points(hexa, order, x[t], y[t], z[t], closure, poisson,
                                               _HALF_SPACE)
            elif is_box:
                down, east, north = _near_box(hexa, boxes[c], x[t], y[t], z[t], closure, poisson,
                                              tolerance)
            else:
                down, east, north = _near_hexahedron(hexa, x[t], y[t], z[t], closure, poisson,
                                                     tolerance)
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
    return max(1, math.ceil(math.log(10.0 / tolerance) / (2.0 * math.log(rho))))


@njit(cache=True)
def _rule(order: int) -> np.ndarray:
    return np.array([order, order, order, 1, 1, 1])


@njit(cache=True)
def _by_points(hexa: np.ndarray, order: int, x: float, y: float, z: float, closure: bool,
               poisson: float, kernel: int) -> tuple[float, float, float]:
    """Down, east, north of unit strength by Gauss points."""
    points = sample_cell(hexa, _rule(order))
    down = east = north = 0.0
    for n in range(points.shape[0]):
        dx, dy, depth, weight = x - points[n, 0], y - points[n, 1], points[n, 2], points[n, 3]
        if kernel == _FULL_SPACE:
            e, m, d = _full_space(dx, dy, z - depth, closure, poisson)
        elif kernel == _IMAGE:
            over_r, d = _image(dx * dx + dy * dy, z, depth, closure, poisson)
            e, m = over_r * dx, over_r * dy
        else:
            r = math.sqrt(dx * dx + dy * dy)
            if closure:
                outward, d = closure_depth(r, z, depth, poisson)
            else:
                outward, d = contraction_depth(r, z, depth, poisson)
            e = outward * dx / r if r > 0.0 else 0.0
            m = outward * dy / r if r > 0.0 else 0.0
        down += weight * d
        east += weight * e
        north += weight * m
    return down, east, north


@njit(cache=True)
def _full_space(east: float, north: float, below: float, closure: bool, poisson: float) -> tuple[
        float, float, float]:
    """East, north, down per m3 of a point source without the free surface."""
    if closure:
        return crack_full_space(east, north, below, poisson)
    f = -0.25 / math.pi / (east * east + north * north + below * below) ** 1.5
    return f * east, f * north, f * below


@njit(cache=True)
def _image(r2: float, z: float, c: float, closure: bool, poisson: float) -> tuple[float, float]:
    """(outward/r, down) per m3 that the free surface adds: the terms in 1/R2 of `half_space`."""
    s = z + c
    i2 = 1.0 / (r2 + s * s)
    b3 = i2 * math.sqrt(i2)
    b5 = b3 * i2
    if not closure:
        kappa = 3.0 - 4.0 * poisson
        f = -0.25 / math.pi
        return (f * (kappa * b3 - 6.0 * z * s * b5),
                f * (-(kappa * s - 2.0 * z) * b3 - 6.0 * z * s * s * b5))
    m = 1.0 - 2.0 * poisson
    f = -0.125 / (math.pi * (1.0 - poisson))
    b7 = 30.0 * z * c * s * s * b5 * i2
    p5 = 3.0 * s * s + 6.0 * (m * c - z) * s + 6.0 * z * c
    q5 = 3.0 * s * s * (s - 2.0 * (1.0 + m) * c - 2.0 * z) + 18.0 * z * c * s
    return f * (m * b3 + p5 * b5 - b7), f * (-m * (z - c) * b3 + q5 * b5 - s * b7)


@njit(cache=True)
def _near_box(hexa: np.ndarray, box: np.ndarray, x: float, y: float, z: float, closure: bool,
              poisson: float, tolerance: float) -> tuple[float, float, float]:
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
        added = _in_parts(hexa, x, y, z, closure, poisson, tolerance, _IMAGE)
        return down + added[0], east + added[1], north + added[2]
    return down, east, north


@njit(cache=True)
def _near_hexahedron(hexa: np.ndarray, x: float, y: float, z: float, closure: bool, poisson: float,
                     tolerance: float) -> tuple[float, float, float]:
    """Full-space part and image part, each cut as finely as it needs."""
    own = _in_parts(hexa, x, y, z, closure, poisson, tolerance, _FULL_SPACE)
    added = _in_parts(hexa, x, y, z, closure, poisson, tolerance, _IMAGE)
    return own[0] + added[0], own[1] + added[1], own[2] + added[2]


@njit(cache=True)
def _in_parts(hexa: np.ndarray, x: float, y: float, z: float, closure: bool, poisson: float,
              tolerance: float, kernel: int) -> tuple[float, float, float]:
    """A hexahedron cut in eight where the kernel's singularity is near: at the target, for the
    image at the target's mirror place above the ground."""
    singular = -z if kernel == _IMAGE else z
    stack = np.empty((7 * _SPLITS + 8, 8, 3))
    level = np.empty(stack.shape[0], dtype=np.int64)
    stack[0] = hexa
    level[0] = 0
    size = 1
    total = volume_of(hexa)
    reach = _middle(hexa)[1]
    allowed = tolerance * total / (reach * reach)  # the twist that does not matter, m
    down = east = north = 0.0
    while size > 0:
        size -= 1
        part = stack[size].copy()
        depth = level[size]
        centre, reach = _middle(part)
        gap = math.sqrt((x - centre[0]) ** 2 + (y - centre[1]) ** 2 + (singular - centre[2]) ** 2)
        order = _order(gap, reach, tolerance)
        share = volume_of(part) / total
        if order <= MAX_ORDER or (kernel == _IMAGE and depth == _SPLITS):
            d, e, m = _by_points(part, min(order, MAX_ORDER), x, y, z, closure, poisson, kernel)
        elif kernel == _FULL_SPACE and (depth == _SPLITS or _bulge(part) <= allowed):
            d, e, m = _exact_full_space(part, x, y, z, closure, poisson)
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
def _bulge(hexa: np.ndarray) -> float:
    """How far a bilinear face lies from the four triangles about its centre, at most, m."""
    largest = 0.0
    for face in range(6):
        a, b, c, d = _FACES[face]
        twist = hexa[a] - hexa[b] + hexa[c] - hexa[d]
        largest = max(largest, math.sqrt((twist**2).sum()) / 16.0)
    return largest


@njit(cache=True)
def _exact_full_space(hexa: np.ndarray, x: float, y: float, z: float, closure: bool,
                      poisson: float) -> tuple[float, float, float]:
    point = np.array([x, y, z])
    if closure:
        moved = crack_hexahedron_full_space(hexa, point, poisson)
    else:
        moved = 0.25 / math.pi * hexahedron_attraction(hexa, point)
    volume = volume_of(hexa)
    return moved[2] / volume, moved[0] / volume, moved[1] / volume
