"""How finely each cell is sampled, so that a sum over points stands for the finite cell."""

from __future__ import annotations

import math

import numpy as np
from numba import njit

from subside.earth.quadrature import gauss_reach
from subside.errors import InputError

__all__ = ["GAUSS_NODES", "GAUSS_WEIGHTS", "MAX_ORDER", "box_rule", "surface_rule"]

MAX_ORDER = 8
"""Largest Gauss-Legendre order; beyond it a cell is cut into panels."""
_HALVINGS = 12
"""A direction is cut into 2**12 panels at most: such a cell has far too many points for any use."""

GAUSS_NODES = np.zeros((MAX_ORDER + 1, MAX_ORDER))
GAUSS_WEIGHTS = np.zeros((MAX_ORDER + 1, MAX_ORDER))
for _n in range(1, MAX_ORDER + 1):
    GAUSS_NODES[_n, :_n], GAUSS_WEIGHTS[_n, :_n] = np.polynomial.legendre.leggauss(_n)
    GAUSS_NODES[_n, :_n] = 0.5 + 0.5 * GAUSS_NODES[_n, :_n]
    GAUSS_WEIGHTS[_n, :_n] *= 0.5


def surface_rule(corners: np.ndarray, tolerance: float, gradient: bool) -> np.ndarray:
    """Gauss orders and panels of each cell for targets at the surface.

    Safe to call from several threads at once, and they do not wait for each other.

    Parameters
    ----------
    corners : array (n, 8, 3)
        x, y, depth below the surface, m.
    tolerance : float
        Allowed error of one cell's field over that field's own largest value.
    gradient : bool
        Whether that holds for the horizontal derivatives too, which need more points.

    Returns
    -------
    array of int16 (n, 6)
        Orders along the cell's three directions, then the panels along each.

    Raises
    ------
    InputError
        A corner that is not a number, a cell without size at the surface, tolerance not above zero.
    """
    rule = np.empty((corners.shape[0], 6), dtype=np.int16)
    wrong = _rule_of_corners(rule, np.asarray(corners, dtype=float), *_reach(tolerance, gradient))
    if wrong >= 0:
        x, y = corners[wrong, :, :2].mean(axis=0)
        raise _no_rule(x, y, corners[wrong, :, 2].min())
    return rule


def box_rule(boxes: np.ndarray, tolerance: float, gradient: bool) -> np.ndarray:
    """`surface_rule` of upright boxes, without making corners of them.

    Parameters
    ----------
    boxes : array (n, 7)
        x, y, top, bottom, dx, dy, azimuth in m and degrees.
    tolerance, gradient
        As in `surface_rule`.

    Returns
    -------
    array of int16 (n, 6)
        Orders along the box's x, its y, and down, then the panels along each.

    Raises
    ------
    InputError
        As `surface_rule`.
    """
    rule = np.empty((boxes.shape[0], 6), dtype=np.int16)
    wrong = _rule_of_boxes(rule, np.asarray(boxes, dtype=float), *_reach(tolerance, gradient))
    if wrong >= 0:
        raise _no_rule(*boxes[wrong, :3])
    return rule


def _reach(tolerance: float, gradient: bool) -> tuple[np.ndarray, np.ndarray]:
    """Largest half-size over depth for each order, horizontal and vertical."""
    quantity = "gradient" if gradient else "displacement"
    return (gauss_reach(MAX_ORDER, tolerance, "horizontal", quantity),
            gauss_reach(MAX_ORDER, tolerance, "vertical", quantity))


def _no_rule(x: float, y: float, top: float) -> InputError:
    return InputError(f"a cell near x = {x:.0f} m, y = {y:.0f} m reaches up to {top:g} m below the "
                      "ground or seabed: it must have a place and a size, and lie below it.")


@njit(cache=True, nogil=True, error_model="numpy")
def _rule_of_corners(rule: np.ndarray, corners: np.ndarray, across: np.ndarray,
                     down: np.ndarray) -> int:
    """Fill `rule`; the number of the first cell that has none, or -1."""
    wrong = -1
    for cell in range(rule.shape[0]):
        along, up, lean, everything = 0.0, 0.0, 0.0, 0.0
        top, bottom = corners[cell, 0, 2], corners[cell, 0, 2]
        for n in range(0, 8, 4):
            along = max(along, _square(corners, cell, n, n + 1),
                        _square(corners, cell, n + 3, n + 2))
            up = max(up, _square(corners, cell, n, n + 3), _square(corners, cell, n + 1, n + 2))
        for n in range(8):
            top, bottom = min(top, corners[cell, n, 2]), max(bottom, corners[cell, n, 2])
            everything += corners[cell, n, 0] + corners[cell, n, 1] + corners[cell, n, 2]
        if not math.isfinite(everything):  # a largest value may hide what is no number
            top = everything
        for n in range(4):
            x = corners[cell, n + 4, 0] - corners[cell, n, 0]
            y = corners[cell, n + 4, 1] - corners[cell, n, 1]
            lean = max(lean, x * x + y * y)
        if not _fill(rule, cell, 0.5 * math.sqrt(along), 0.5 * math.sqrt(up), 0.5 * (bottom - top),
                     0.5 * math.sqrt(lean), top, across, down) and wrong < 0:
            wrong = cell
    return wrong


@njit(cache=True, nogil=True, error_model="numpy")
def _rule_of_boxes(rule: np.ndarray, boxes: np.ndarray, across: np.ndarray,
                   down: np.ndarray) -> int:
    """Fill `rule`; the number of the first box that has none, or -1."""
    wrong = -1
    for cell in range(rule.shape[0]):
        top, bottom = boxes[cell, 2], boxes[cell, 3]
        if not _fill(rule, cell, 0.5 * boxes[cell, 4], 0.5 * boxes[cell, 5], 0.5 * (bottom - top),
                     0.0, top, across, down) and wrong < 0:
            wrong = cell
    return wrong


@njit(cache=True, nogil=True, error_model="numpy")
def _square(corners: np.ndarray, cell: int, a: int, b: int) -> float:
    """The square of an edge's length."""
    x = corners[cell, b, 0] - corners[cell, a, 0]
    y = corners[cell, b, 1] - corners[cell, a, 1]
    z = corners[cell, b, 2] - corners[cell, a, 2]
    return float(x * x + y * y + z * z)


@njit(cache=True, nogil=True, error_model="numpy")
def _fill(rule: np.ndarray, cell: int, along: float, up: float, thick: float, lean: float,
          top: float, across: np.ndarray, down: np.ndarray) -> bool:
    """The rule of one cell from its half-sizes; false if they are no sizes."""
    largest = max(along, up, thick)
    # a cell that reaches the surface has no such rule: this one has far too many points
    distance = max(top, 1e-6 * largest)
    if not (0.0 <= along < np.inf and 0.0 <= up < np.inf and 0.0 <= thick < np.inf
            and 0.0 <= lean < np.inf and distance > 0.0 and -np.inf < top < np.inf):
        return False
    rule[cell, 0], rule[cell, 3] = _order(along / distance, 0.0, across, across)
    rule[cell, 1], rule[cell, 4] = _order(up / distance, 0.0, across, across)
    # going down a leaning pillar is going sideways too
    rule[cell, 2], rule[cell, 5] = _order(thick / distance, lean / distance, down, across)
    return True


@njit(cache=True, nogil=True, error_model="numpy")
def _order(ratio: float, other: float, reach: np.ndarray,
           other_reach: np.ndarray) -> tuple[int, int]:
    """Least order that serves two half-sizes over depth, each with its own reach; panels."""
    panels = 1
    for _ in range(_HALVINGS):
        for n in range(MAX_ORDER):
            if ratio <= reach[n] and other <= other_reach[n]:
                return n + 1, panels
        panels *= 2
        ratio, other = 0.5 * ratio, 0.5 * other
    return MAX_ORDER, panels
