"""Sample points of many hexahedra, without a memory request for each cell or point."""

from __future__ import annotations

import numpy as np
from numba import njit

from subside.superposition.rule import GAUSS_NODES, GAUSS_WEIGHTS

__all__ = ["points_in", "sample_into"]


@njit(cache=True, nogil=True)
def points_in(rule: np.ndarray) -> int:
    """Number of sample points of a cell, from its Gauss orders and panels."""
    total = 1
    for d in range(6):
        total *= int(rule[d])
    return total


@njit(cache=True, nogil=True, error_model="numpy")
def sample_into(points: np.ndarray, corners: np.ndarray, rule: np.ndarray,
                edge: np.ndarray) -> int:
    """Write a cell's points (x, y, depth, weight; the weights sum to 1) into the first rows.

    Same points as `hexahedron.sample_cell`; here the third direction runs fastest, so that points
    above each other come together.

    Parameters
    ----------
    points : array (at least `points_in(rule)`, 4)
    corners : array (8, 3)
    rule : array of int (6,)
    edge : array (3, 6)
        Scratch: place and derivatives on the top face, and what is added down to the lower face.

    Returns
    -------
    int
        Number of points.
    """
    row = 0
    volume = 0.0
    for k in range(rule[0] * rule[3]):
        panel, q = k // rule[0], k % rule[0]
        u = (panel + GAUSS_NODES[rule[0], q]) / rule[3]
        wu = GAUSS_WEIGHTS[rule[0], q]
        for m in range(rule[1] * rule[4]):
            panel, q = m // rule[1], m % rule[1]
            v = (panel + GAUSS_NODES[rule[1], q]) / rule[4]
            wv = wu * GAUSS_WEIGHTS[rule[1], q]
            for d in range(3):
                _on_face(edge[d], 0, corners[0, d], corners[1, d], corners[2, d], corners[3, d],
                         u, v)
                _on_face(edge[d], 3, corners[4, d], corners[5, d], corners[6, d], corners[7, d],
                         u, v)
                for n in range(3):
                    edge[d, 3 + n] -= edge[d, n]
            for n in range(rule[2] * rule[5]):
                panel, q = n // rule[2], n % rule[2]
                w = (panel + GAUSS_NODES[rule[2], q]) / rule[5]
                for d in range(3):
                    points[row, d] = edge[d, 0] + w * edge[d, 3]
                ux, uy, uz = (edge[0, 1] + w * edge[0, 4], edge[1, 1] + w * edge[1, 4],
                              edge[2, 1] + w * edge[2, 4])
                vx, vy, vz = (edge[0, 2] + w * edge[0, 5], edge[1, 2] + w * edge[1, 5],
                              edge[2, 2] + w * edge[2, 5])
                jacobian = (edge[0, 3] * (uy * vz - uz * vy) + edge[1, 3] * (uz * vx - ux * vz)
                            + edge[2, 3] * (ux * vy - uy * vx))
                weight = wv * GAUSS_WEIGHTS[rule[2], q] * jacobian
                points[row, 3] = weight
                volume += weight
                row += 1
    for n in range(row):
        points[n, 3] /= volume
    return row


@njit(cache=True, nogil=True)
def _on_face(out: np.ndarray, at: int, c0: float, c1: float, c2: float, c3: float, u: float,
             v: float) -> None:
    """Bilinear value on a face, and its derivatives by u and v, into out[at:at + 3]."""
    out[at] = (1 - v) * ((1 - u) * c0 + u * c1) + v * ((1 - u) * c3 + u * c2)
    out[at + 1] = (1 - v) * (c1 - c0) + v * (c2 - c3)
    out[at + 2] = (1 - u) * (c3 - c0) + u * (c2 - c1)
