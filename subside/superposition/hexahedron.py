"""A hexahedron as the trilinear image of the unit cube: places, volume, sample points, parts."""

from __future__ import annotations

import math

import numpy as np
from numba import njit

from subside.superposition.rule import GAUSS_NODES, GAUSS_WEIGHTS

__all__ = ["octant_of", "sample_cell", "volume_of"]


@njit(cache=True)
def _place(corners: np.ndarray, u: float, v: float, w: float, place: np.ndarray) -> float:
    """Trilinear map of (u, v, w) into place[:3]; returns the determinant of its Jacobian."""
    jac = np.zeros((3, 3))
    for axis in range(3):
        c = corners[:, axis]
        top = (1 - u) * (1 - v) * c[0] + u * (1 - v) * c[1] + u * v * c[2] + (1 - u) * v * c[3]
        low = (1 - u) * (1 - v) * c[4] + u * (1 - v) * c[5] + u * v * c[6] + (1 - u) * v * c[7]
        place[axis] = (1 - w) * top + w * low
        jac[0, axis] = ((1 - w) * ((1 - v) * (c[1] - c[0]) + v * (c[2] - c[3]))
                        + w * ((1 - v) * (c[5] - c[4]) + v * (c[6] - c[7])))
        jac[1, axis] = ((1 - w) * ((1 - u) * (c[3] - c[0]) + u * (c[2] - c[1]))
                        + w * ((1 - u) * (c[7] - c[4]) + u * (c[6] - c[5])))
        jac[2, axis] = low - top
    return (jac[0, 0] * (jac[1, 1] * jac[2, 2] - jac[1, 2] * jac[2, 1])
            - jac[0, 1] * (jac[1, 0] * jac[2, 2] - jac[1, 2] * jac[2, 0])
            + jac[0, 2] * (jac[1, 0] * jac[2, 1] - jac[1, 1] * jac[2, 0]))


@njit(cache=True)
def sample_cell(corners: np.ndarray, rule: np.ndarray) -> np.ndarray:
    """Points (x, y, depth) and weights (summing to 1) that stand for a hexahedron, (n, 4).

    `rule` holds Gauss orders along the three directions, then the panels along each.
    """
    total = 1
    for d in range(6):
        total *= rule[d]
    points = np.empty((total, 4))
    row = 0
    volume = 0.0
    # depth runs slowest: the points of a flat cell come in runs of one depth, which a table likes
    for pw in range(rule[5]):
        for qw in range(rule[2]):
            w = (pw + GAUSS_NODES[rule[2], qw]) / rule[5]
            ww = GAUSS_WEIGHTS[rule[2], qw]
            for pu in range(rule[3]):
                for qu in range(rule[0]):
                    u = (pu + GAUSS_NODES[rule[0], qu]) / rule[3]
                    wu = ww * GAUSS_WEIGHTS[rule[0], qu]
                    for pv in range(rule[4]):
                        for qv in range(rule[1]):
                            v = (pv + GAUSS_NODES[rule[1], qv]) / rule[4]
                            weight = wu * GAUSS_WEIGHTS[rule[1], qv]
                            weight *= _place(corners, u, v, w, points[row])
                            points[row, 3] = weight
                            volume += weight
                            row += 1
    for n in range(total):
        points[n, 3] /= volume
    return points


@njit(cache=True)
def volume_of(corners: np.ndarray) -> float:
    """Bulk volume (2 Gauss points a direction are exact), positive for either hand."""
    total = 0.0
    place = np.empty(3)
    low = 0.5 - 0.5 / math.sqrt(3.0)
    for n in range(8):
        u = low if n % 2 == 0 else 1 - low
        v = low if (n // 2) % 2 == 0 else 1 - low
        w = low if n // 4 == 0 else 1 - low
        total += 0.125 * _place(corners, u, v, w, place)
    return abs(total)


@njit(cache=True)
def octant_of(corners: np.ndarray, octant: int) -> np.ndarray:
    """One of the eight parts of a hexahedron cut at its trilinear midplanes."""
    u0, v0, w0 = 0.5 * (octant % 2), 0.5 * ((octant // 2) % 2), 0.5 * (octant // 4)
    part = np.empty((8, 3))
    for n in range(8):
        ring = n % 4
        u = u0 + (0.5 if ring in (1, 2) else 0.0)
        v = v0 + (0.5 if ring in (2, 3) else 0.0)
        w = w0 + (0.5 if n >= 4 else 0.0)
        _place(corners, u, v, w, part[n])
    return part
