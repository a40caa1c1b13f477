"""The plain sum at a few targets: each cell is sampled once, threads share the cells.

The same influence functions as `direct`, in another order: there each thread samples every cell
for its own targets, which is right for many targets and slow for two hundred.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

import numpy as np
from numba import njit, prange

from subside.superposition.direct import Direct
from subside.superposition.frame import barycentric
from subside.superposition.interface import DISPLACEMENT, GRADIENT, Bodies, Fields, Targets
from subside.superposition.rule import surface_rule
from subside.superposition.sampled import MANY_POINTS, part_of
from subside.superposition.sampling import points_in, sample_into
from subside.superposition.table import RadialTable
from subside.superposition.tiles import fill_points

__all__ = ["plain_sum"]

_BLOCK = 50_000
_CHUNK = 64


def plain_sum(bodies: Bodies, live: np.ndarray, moments: Mapping[str, np.ndarray],
              targets: Targets, earth: Any, *, sampling: float, gradient: bool) -> Fields:
    """The field at surface targets.

    Parameters
    ----------
    live : array of int
        Cells that lose volume.
    moments : mapping of source to array (nt, cell)
        Few steps.
    sampling : float
        Error of one cell's field, relative to itself, that sampling by points may make.

    Returns
    -------
    Fields
        Component to (nt, target).
    """
    names = DISPLACEMENT + (GRADIENT if gradient else ())
    steps = next(iter(moments.values())).shape[0]
    field = np.zeros((len(names), steps, targets.x.size))
    poisson = earth.homogeneous_poisson_ratio
    tables = {}
    for source in moments:
        if poisson is None:
            table = RadialTable.covering(earth, source, bodies, live, targets, gradient)
            tables[source] = (table.depths, table.weights, table.step, table.coefficients)
        else:
            tables[source] = (np.zeros(0), np.zeros(0), 1.0, np.zeros((0, 1, 1, 4)))
    many = []
    for start in range(0, live.size, _BLOCK):
        cells = live[start:start + _BLOCK]
        corners = bodies.corners(cells)
        rule = surface_rule(corners, sampling, gradient)
        few = rule.prod(axis=1) <= MANY_POINTS
        many.append(cells[~few])
        cells, corners, rule = cells[few], corners[few], rule[few]
        for source, moment in moments.items():
            strength = np.ascontiguousarray(moment[:, cells].T)
            field += _sum(len(names), targets.x, targets.y, corners, rule, strength,
                          source == "closure", poisson or 0.0, *tables[source])
    rest = np.concatenate(many)
    if rest.size:
        plain = Direct().solve(part_of(bodies, rest), {s: m[:, rest] for s, m in moments.items()},
                               targets, earth, tolerance=sampling, gradient=gradient)
        field += np.stack([plain[name] for name in names])
    return dict(zip(names, field, strict=True))


@njit(cache=True, parallel=True)
def _sum(components: int, x: np.ndarray, y: np.ndarray, corners: np.ndarray, rule: np.ndarray,
         moment: np.ndarray, closure: bool, poisson: float, depths: np.ndarray,
         weights: np.ndarray, step: float, coefficients: np.ndarray) -> np.ndarray:
    """(component, time, target) of cells whose `moment` is (cell, time)."""
    most = 1
    for cell in range(rule.shape[0]):
        most = max(most, points_in(rule[cell]))
    total = np.zeros((components, moment.shape[1], x.size))
    for chunk in prange((corners.shape[0] + _CHUNK - 1) // _CHUNK):
        first, last = chunk * _CHUNK, min((chunk + 1) * _CHUNK, corners.shape[0])
        points, edge = np.empty((most, 4)), np.empty((3, 6))
        share = np.empty(depths.size)
        tile = np.zeros((components, last - first, x.size))
        local = np.empty((components, moment.shape[1], x.size))
        for cell in range(first, last):
            count = sample_into(points, corners[cell], rule[cell], edge)
            if depths.size > 0:
                _fill_from_table(tile, cell - first, x, y, points[:count], depths, weights, step,
                                 coefficients, share)
            else:
                fill_points(tile, cell - first, x, y, points[:count], closure, poisson)
        for c in range(components):
            local[c] = np.dot(moment[first:last].T, tile[c])
        total += local
    return total


@njit(cache=True, fastmath={"contract"}, error_model="numpy")
def _fill_from_table(tile: np.ndarray, row: int, x: np.ndarray, y: np.ndarray, points: np.ndarray,
                     depths: np.ndarray, weights: np.ndarray, step: float,
                     coefficients: np.ndarray, share: np.ndarray) -> None:
    """As `tiles` does, but interpolating in depth pair by pair: cheaper for a few targets."""
    functions, intervals = coefficients.shape[1], coefficients.shape[2]
    value = np.empty(5)
    for n in range(points.shape[0]):
        px, py, depth, weight = points[n]
        barycentric(share, depth, depths, weights)
        for t in range(x.size):
            dx, dy = x[t] - px, y[t] - py
            r = math.sqrt(dx * dx + dy * dy)
            place = math.asinh(r / depth) / step
            k = min(int(place), intervals - 1)
            s = place - k
            for f in range(functions):
                value[f] = 0.0
                for d in range(depths.size):
                    c = coefficients[d, f, k]
                    value[f] += share[d] * (((c[0] * s + c[1]) * s + c[2]) * s + c[3])
            east, north = (dx / r, dy / r) if r > 0.0 else (0.0, 0.0)
            scale = weight / (depth * depth)
            tile[0, row, t] += scale * value[1]
            tile[1, row, t] += scale * value[0] * east
            tile[2, row, t] += scale * value[0] * north
            if functions > 2:
                scale /= depth
                bend = value[2] - value[3]
                tile[3, row, t] += scale * value[4] * east
                tile[4, row, t] += scale * value[4] * north
                tile[5, row, t] += scale * (value[3] + bend * east * east)
                tile[6, row, t] += scale * (value[3] + bend * north * north)
                tile[7, row, t] += scale * bend * east * north
