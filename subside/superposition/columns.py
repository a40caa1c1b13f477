"""Cells that stand above each other in upright pillars: one spreading for a whole pillar.

The cells of a column share their outline seen from above, and so their stencils. Their moments are
first brought together on the depth nodes, then spread once. Where tops and bottoms are level the
outline is averaged into one set of weights; where they dip, each sample place of the outline has
depth shares of its own.
"""

from __future__ import annotations

import numpy as np
from numba import njit

from subside.superposition.frame import barycentric
from subside.superposition.rule import GAUSS_NODES, GAUSS_WEIGHTS
from subside.superposition.stencil import stencil_into

__all__ = ["collapse", "column_starts", "deposit_columns", "is_level", "outline_places"]


def column_starts(column: np.ndarray) -> np.ndarray:
    """Where runs of equal column numbers begin, and the end: (runs + 1,)."""
    return np.concatenate([[0], np.flatnonzero(column[1:] != column[:-1]) + 1, [column.size]])


@njit(cache=True, nogil=True, fastmath={"contract"}, error_model="numpy")
def deposit_columns(lattice: np.ndarray, outline: np.ndarray, top: np.ndarray, bottom: np.ndarray,
                    rule: np.ndarray, start: np.ndarray, strength: np.ndarray, x_origin: float,
                    y_origin: float, spacing: float, coefficients: np.ndarray, depths: np.ndarray,
                    weights: np.ndarray) -> None:
    """Add cells that stand in columns onto the lattice.

    Parameters
    ----------
    lattice : array (row, column * depth node * series)
    outline : array (columns, 4, 2)
        Corners of each column seen from above.
    top, bottom : array (cell, 1) or (cell, 4)
        Depth of level faces, or of their corners.
    rule : array of int (columns, 6)
        The finest that a cell of the column needs.
    start : array of int (columns + 1,)
        Cells of each column.
    strength : array (cell, series)
        Moments, all sources and dates of a cell in one row.
    x_origin, y_origin, spacing, coefficients, depths, weights
        The lattice, the stencil (powers first, nodes last), the depth nodes.
    """
    for col in range(start.size - 1):
        places = outline_places(outline[col], rule[col])
        sums = collapse(places, top, bottom, rule[col], start[col], start[col + 1], strength,
                        depths, weights)
        flat = sums.reshape(sums.shape[0], -1)
        if flat.shape[0] < places.shape[0]:
            _spread(lattice, flat[0], places, x_origin, y_origin, spacing, coefficients)
            continue
        for g in range(flat.shape[0]):
            places[g, 2] = 1.0
            _spread(lattice, flat[g], places[g:g + 1], x_origin, y_origin, spacing, coefficients)


@njit(cache=True, nogil=True, fastmath={"contract"}, error_model="numpy")
def collapse(places: np.ndarray, top: np.ndarray, bottom: np.ndarray, rule: np.ndarray, first: int,
             last: int, strength: np.ndarray, depths: np.ndarray,
             weights: np.ndarray) -> np.ndarray:
    """Moments of the cells `first` to `last` - 1 of one column on the depth nodes.

    Returns
    -------
    array (1 or place, node, series)
        One row where all faces are level, else one for each sample place of the outline.
    """
    nodes, series = depths.size, strength.shape[1]
    level = is_level(top, bottom, first, last)
    count = 1 if level else places.shape[0]
    one, shares = np.empty(nodes), np.empty(nodes)
    sums = np.zeros((count, nodes, series))
    part = np.empty((count, 3))
    for c in range(first, last):
        if level:
            part[0, 0], part[0, 1], part[0, 2] = top[c, 0], bottom[c, 0], 1.0
        else:
            _thicknesses(part, places, top[c], bottom[c])
        for g in range(count):
            _depth_shares(shares, one, part[g, 0], part[g, 1], rule[2], rule[5], depths, weights)
            for d in range(nodes):
                share = part[g, 2] * shares[d]
                for k in range(series):
                    sums[g, d, k] += share * strength[c, k]
    return sums


@njit(cache=True, nogil=True)
def is_level(top: np.ndarray, bottom: np.ndarray, first: int, last: int) -> bool:
    """Whether all faces of some cells are level."""
    for c in range(first, last):
        for n in range(1, top.shape[1]):
            if top[c, n] != top[c, 0] or bottom[c, n] != bottom[c, 0]:
                return False
    return True


@njit(cache=True, nogil=True, error_model="numpy")
def outline_places(outline: np.ndarray, rule: np.ndarray) -> np.ndarray:
    """Sample places of an outline: x, y, share of the area (sums to one), u, v."""
    one, two, one_panels, two_panels = int(rule[0]), int(rule[1]), int(rule[3]), int(rule[4])
    along, across = one * one_panels, two * two_panels
    places = np.empty((along * across, 5))
    total = 0.0
    for a in range(along):
        u = (a // one + GAUSS_NODES[one, a % one]) / one_panels
        for b in range(across):
            v = (b // two + GAUSS_NODES[two, b % two]) / two_panels
            n = a * across + b
            slope = np.empty((2, 2))
            for axis in range(2):
                c0, c1, c2, c3 = (outline[0, axis], outline[1, axis], outline[2, axis],
                                  outline[3, axis])
                places[n, axis] = (1 - v) * ((1 - u) * c0 + u * c1) + v * ((1 - u) * c3 + u * c2)
                slope[axis, 0] = (1 - v) * (c1 - c0) + v * (c2 - c3)
                slope[axis, 1] = (1 - u) * (c3 - c0) + u * (c2 - c1)
            places[n, 2] = (GAUSS_WEIGHTS[one, a % one] * GAUSS_WEIGHTS[two, b % two]
                            * (slope[0, 0] * slope[1, 1] - slope[0, 1] * slope[1, 0]))
            places[n, 3], places[n, 4] = u, v
            total += places[n, 2]
    for n in range(places.shape[0]):
        places[n, 2] /= total
    return places


@njit(cache=True, nogil=True, error_model="numpy")
def _thicknesses(part: np.ndarray, places: np.ndarray, top: np.ndarray,
                 bottom: np.ndarray) -> None:
    """Top, bottom and share of the volume at each sample place of a cell, into part (place, 3)."""
    total = 0.0
    for g in range(part.shape[0]):
        u, v = places[g, 3], places[g, 4]
        part[g, 0] = ((1 - v) * ((1 - u) * top[0] + u * top[1])
                      + v * ((1 - u) * top[3] + u * top[2]))
        part[g, 1] = ((1 - v) * ((1 - u) * bottom[0] + u * bottom[1])
                      + v * ((1 - u) * bottom[3] + u * bottom[2]))
        part[g, 2] = places[g, 2] * (part[g, 1] - part[g, 0])
        total += part[g, 2]
    for g in range(part.shape[0]):
        part[g, 2] /= total


@njit(cache=True, nogil=True, error_model="numpy")
def _depth_shares(shares: np.ndarray, one: np.ndarray, top: float, bottom: float, order: int,
                  panels: int, depths: np.ndarray, weights: np.ndarray) -> None:
    """Shares of the depth nodes, averaged over the Gauss points between two depths."""
    shares[:] = 0.0
    order, panels = int(order), int(panels)
    for n in range(order * panels):
        w = (n // order + GAUSS_NODES[order, n % order]) / panels
        barycentric(one, top + w * (bottom - top), depths, weights)
        for d in range(shares.size):
            shares[d] += GAUSS_WEIGHTS[order, n % order] / panels * one[d]


@njit(cache=True, nogil=True, fastmath={"contract"}, error_model="numpy")
def _spread(lattice: np.ndarray, sums: np.ndarray, places: np.ndarray, x_origin: float,
            y_origin: float, spacing: float, coefficients: np.ndarray) -> None:
    """Add one column's sums (node * series) with the stencils of its places, averaged."""
    width, span = coefficients.shape[1], sums.size
    low_x, high_x, low_y, high_y = np.inf, -np.inf, np.inf, -np.inf
    for n in range(places.shape[0]):
        low_x, high_x = min(low_x, places[n, 0]), max(high_x, places[n, 0])
        low_y, high_y = min(low_y, places[n, 1]), max(high_y, places[n, 1])
    left = int(np.floor((low_x - x_origin) / spacing))
    down = int(np.floor((low_y - y_origin) / spacing))
    wide = width + int(np.floor((high_x - x_origin) / spacing)) - left
    tall = width + int(np.floor((high_y - y_origin) / spacing)) - down
    footprint = np.zeros((tall, wide))
    wx, wy = np.empty(width), np.empty(width)
    for n in range(places.shape[0]):
        place_x, place_y = (places[n, 0] - x_origin) / spacing, (places[n, 1] - y_origin) / spacing
        whole_x, whole_y = np.floor(place_x), np.floor(place_y)
        stencil_into(wx, coefficients, place_x - whole_x - 0.5)
        stencil_into(wy, coefficients, place_y - whole_y - 0.5)
        right, up = int(whole_x) - left, int(whole_y) - down
        for a in range(width):
            for b in range(width):
                footprint[up + a, right + b] += places[n, 2] * wy[a] * wx[b]
    for a in range(tall):
        line = lattice[down + a]
        for b in range(wide):
            share, at = footprint[a, b], (left + b) * span
            for k in range(span):
                line[at + k] += share * sums[k]
