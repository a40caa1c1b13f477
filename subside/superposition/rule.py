"""How finely each cell is sampled, so that a sum over points stands for the finite cell."""

from __future__ import annotations

import numpy as np

from subside.earth.quadrature import gauss_order

__all__ = ["GAUSS_NODES", "GAUSS_WEIGHTS", "MAX_ORDER", "surface_rule"]

MAX_ORDER = 8
"""Largest Gauss-Legendre order; beyond it a cell is cut into panels."""

GAUSS_NODES = np.zeros((MAX_ORDER + 1, MAX_ORDER))
GAUSS_WEIGHTS = np.zeros((MAX_ORDER + 1, MAX_ORDER))
for _n in range(1, MAX_ORDER + 1):
    GAUSS_NODES[_n, :_n], GAUSS_WEIGHTS[_n, :_n] = np.polynomial.legendre.leggauss(_n)
    GAUSS_NODES[_n, :_n] = 0.5 + 0.5 * GAUSS_NODES[_n, :_n]
    GAUSS_WEIGHTS[_n, :_n] *= 0.5


def surface_rule(corners: np.ndarray, tolerance: float, gradient: bool) -> np.ndarray:
    """Gauss orders and panels of each cell for targets at the surface.

    Parameters
    ----------
    corners : array (n, 8, 3)
        Depth below the surface, m.
    tolerance : float
        Allowed error of one cell's field over that field's own largest value.
    gradient : bool
        Whether that holds for the horizontal derivatives too, which need more points.

    Returns
    -------
    array of int (n, 6)
        Orders along the cell's three directions, then the panels along each.
    """
    along = [corners[:, [1, 2, 5, 6]] - corners[:, [0, 3, 4, 7]],
             corners[:, [3, 2, 7, 6]] - corners[:, [0, 1, 4, 5]]]
    half = [0.5 * np.linalg.norm(edge, axis=2).max(axis=1) for edge in along]
    top = corners[:, :, 2].min(axis=1)
    thickness = corners[:, :, 2].max(axis=1) - top
    half.append(0.5 * thickness)
    # a cell that reaches the surface has no such rule: this one has far too many points
    top = np.maximum(top, 1e-6 * np.max(half, axis=0))
    quantity = "gradient" if gradient else "displacement"
    rule = np.ones((corners.shape[0], 6), dtype=np.int64)
    pillars = corners[:, 4:, :2] - corners[:, :4, :2]
    lean = 0.5 * np.linalg.norm(pillars, axis=2).max(axis=1)
    for direction in range(3):
        panels = np.ones(corners.shape[0], dtype=np.int64)
        for _ in range(12):
            word = "vertical" if direction == 2 else "horizontal"
            order = gauss_order(half[direction] / panels, top, tolerance, word, quantity)
            if direction == 2:  # going down a leaning pillar is going sideways too
                order = np.maximum(order, gauss_order(lean / panels, top, tolerance, "horizontal",
                                                      quantity))
            too_many = order > MAX_ORDER
            if not too_many.any():
                break
            panels[too_many] *= 2
        rule[:, direction] = np.minimum(order, MAX_ORDER)
        rule[:, 3 + direction] = panels
    return rule
