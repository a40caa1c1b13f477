"""The plain sum at a few targets: every cell sampled once, threads share the cells.

Independent of the lattice: the same influence functions as `direct`, in another order. There each
thread goes through all cells for its own targets, which is right for many targets and slow for two
hundred.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

import numba
import numpy as np
from numba import njit, prange

from subside.superposition.direct import DirectSum
from subside.superposition.frame import barycentric
from subside.superposition.interface import DISPLACEMENT, GRADIENT, Bodies, Fields, Targets
from subside.superposition.point_sums import add_half_space, add_series, mix_series
from subside.superposition.radial_series import RadialSeries
from subside.superposition.rule import box_rule, surface_rule
from subside.superposition.sampling import points_in, sample_into

__all__ = ["SINGLE_FROM", "plain_sum", "series_of"]

SINGLE_FROM = 5e-6
"""Sampling error from which single precision, whose own error is a fraction of it, will do."""
_SERIES = 0.1
"""Error of a kernel's series, as a part of that of the sampling."""
_FINEST_SERIES = 1e-8
_MANY_POINTS = 4096
"""Cells that need more sample points are left to `DirectSum`, which may know an exact integral."""
_BLOCK = 50_000
_ROOM = 512
"""Points in a chunk: with their strengths they fit into the nearest cache."""
_ROOM_SERIES = 128
_VECTORS = 32
"""Targets of a series are filled up to a multiple of this; see `add_series`."""


def plain_sum(bodies: Bodies, cells: np.ndarray, moments: Mapping[str, np.ndarray],
              targets: Targets, earth: Any, *, sampling: float, gradient: bool,
              series: Mapping[str, RadialSeries] | None = None) -> Fields:
    """The field of some cells at surface targets.

    Linear in the cells: results of different cells add up to that of all. Uses all of numba's
    threads, so one call at a time.

    Parameters
    ----------
    cells : array of int (m,)
        Numbers of the cells among the bodies.
    moments : mapping of source to array (date, m)
        m3 of those cells in their order, at a few dates.
    sampling : float
        Error of one cell's field, relative to itself, that sampling by points may make. From
        `SINGLE_FROM` on, single precision is used for the influence functions. Its error was seen
        to reach 2e-7 for displacement and 4e-7 for derivatives in a half-space, 6e-7 and 1.2e-6
        with series (fields of 1 to 10 cells; over the largest value in the group of components).
        Chunks are added up in double precision either way.
    series : mapping of source to RadialSeries, optional
        Kernels of an earth model without closed form that reach all cells, from `series_of`; made
        for these cells when left out.

    Returns
    -------
    Fields
        Component to (date, target).

    Raises
    ------
    InputError
        An earth model whose kernels are not smooth.
    """
    names = DISPLACEMENT + (GRADIENT if gradient else ())
    dates = next(iter(moments.values())).shape[0]
    field = np.zeros((len(names), dates, targets.x.size))
    poisson = earth.homogeneous_poisson_ratio
    if poisson is None and series is None:
        series = series_of(earth, list(moments), bodies, cells, targets, gradient, sampling)
    real = np.zeros(0, dtype=np.float32 if sampling >= SINGLE_FROM else np.float64)
    many = [np.zeros(0, dtype=np.int64)]
    for start in range(0, cells.size, _BLOCK):
        some = cells[start:start + _BLOCK]
        boxes, corners = np.zeros((0, 7)), np.zeros((0, 8, 3))
        if bodies.boxes is not None:
            boxes = np.asarray(bodies.boxes(some), dtype=float)
            rule = box_rule(boxes, sampling, gradient)
        else:
            corners = np.asarray(bodies.corners(some), dtype=float)
            rule = surface_rule(corners, sampling, gradient)
        points = rule.prod(axis=1)
        few = points <= _MANY_POINTS
        if not few.all():
            many.append(start + np.nonzero(~few)[0])
        most = int(points[few].max(initial=0))
        parts = 4 * numba.get_num_threads()
        for source, moment in moments.items():
            strength = np.ascontiguousarray(moment[:, start:start + some.size].T, dtype=float)
            if poisson is not None:
                total = _sum_half_space(len(names), real, targets.x, targets.y, boxes, corners,
                                        rule, few, most, parts, strength, source == "closure")
                factor = 1.5 / math.pi if source == "closure" else (1.0 - poisson) / math.pi
                field += factor * total.transpose(1, 0, 2)
            else:
                assert series is not None
                kernel = series[source]
                terms = kernel.terms.reshape(kernel.depths.size, -1).astype(real.dtype)
                total = _sum_series(len(names), real, targets.x, targets.y, boxes, corners, rule,
                                    few, most, parts, strength, kernel.low, kernel.depths,
                                    kernel.weights, terms)
                field += total.transpose(1, 0, 2)
    rest = np.concatenate(many)
    if rest.size:
        plain = DirectSum(bodies, targets, earth, tolerance=sampling, gradient=gradient,
                          cells=cells[rest])
        plain.add(field, cells[rest], {s: np.ascontiguousarray(moment[:, rest], dtype=float)
                                       for s, moment in moments.items()})
    return dict(zip(names, field, strict=True))


def series_of(earth: Any, sources: list[str], bodies: Bodies, cells: np.ndarray, targets: Targets,
              gradient: bool, sampling: float) -> dict[str, RadialSeries]:
    """Kernels of an earth model that reach every one of the cells from every target.

    Raises
    ------
    InputError
        See `RadialSeries.build`.
    """
    low, high = np.full(3, np.inf), np.full(3, -np.inf)
    for start in range(0, cells.size, _BLOCK):
        corners = bodies.corners(cells[start:start + _BLOCK])
        low = np.minimum(low, corners.min(axis=(0, 1)))
        high = np.maximum(high, corners.max(axis=(0, 1)))
    reach = np.hypot(max(high[0] - targets.x.min(), targets.x.max() - low[0]),
                     max(high[1] - targets.y.min(), targets.y.max() - low[1]))
    accuracy = max(_SERIES * sampling, _FINEST_SERIES)
    return {source: RadialSeries.build(earth, source, float(low[2]), float(high[2]), float(reach),
                                       gradient, accuracy) for source in sources}


_BOX = np.array([[-0.5, -0.5, 0.0], [0.5, -0.5, 0.0], [0.5, 0.5, 0.0], [-0.5, 0.5, 0.0],
                 [-0.5, -0.5, 1.0], [0.5, -0.5, 1.0], [0.5, 0.5, 1.0], [-0.5, 0.5, 1.0]])
"""A box of unit lengths about its own place."""


@njit(cache=True, nogil=True, error_model="numpy")
def _points_into(place: np.ndarray, at: int, cell: int, boxes: np.ndarray, corners: np.ndarray,
                 rule: np.ndarray, points: np.ndarray, edge: np.ndarray,
                 known: np.ndarray) -> int:
    """Write a cell's points (rows x, y, depth, weight) from column `at` on; where they end.

    Boxes of one rule have the same points but for place, size and azimuth: `points` holds those
    of the rule last met, which is in `known`.
    """
    if boxes.shape[0] == 0:
        count = sample_into(points, corners[cell], rule[cell], edge)
        for n in range(count):
            for row in range(4):
                place[row, at + n] = points[n, row]
        return int(at + count)
    same = True
    for n in range(6):
        same &= known[n] == rule[cell, n]
    if not same:
        sample_into(points, _BOX, rule[cell], edge)
        known[:] = rule[cell]
    turn = math.radians(boxes[cell, 6])
    cosine, sine = math.cos(turn), math.sin(turn)
    count = points_in(known)
    for n in range(count):
        u, v = points[n, 0] * boxes[cell, 4], points[n, 1] * boxes[cell, 5]
        place[0, at + n] = boxes[cell, 0] + u * cosine + v * sine
        place[1, at + n] = boxes[cell, 1] - u * sine + v * cosine
        place[2, at + n] = boxes[cell, 2] + points[n, 2] * (boxes[cell, 3] - boxes[cell, 2])
        place[3, at + n] = points[n, 3]
    return int(at + count)


@njit(cache=True, nogil=True, error_model="numpy")
def _own_units(p: np.ndarray, t: np.ndarray, place: np.ndarray, count: int, x: np.ndarray,
               y: np.ndarray) -> float:
    """Points (rows x, y, depth) and targets (rows x, y) from the first point, in its depths."""
    unit = place[2, 0]
    for j in range(count):
        p[0, j] = (place[0, j] - place[0, 0]) / unit
        p[1, j] = (place[1, j] - place[1, 0]) / unit
        p[2, j] = place[2, j] / unit
    for j in range(x.size):
        t[0, j] = (x[j] - place[0, 0]) / unit
        t[1, j] = (y[j] - place[1, 0]) / unit
    return float(unit)


@njit(cache=True, nogil=True, error_model="numpy")
def _give_back(result: np.ndarray, own: np.ndarray, unit: float) -> None:
    """Add sums in a chunk's own units (date, component, target), and empty them."""
    for s in range(own.shape[0]):
        for c in range(own.shape[1]):
            scale = 1.0 / (unit * unit) if c < 3 else 1.0 / (unit * unit * unit)
            for j in range(result.shape[2]):
                result[s, c, j] += scale * own[s, c, j]
            own[s, c, :] = 0.0


@njit(cache=True, parallel=True, error_model="numpy")
def _sum_half_space(components: int, real: np.ndarray, x: np.ndarray, y: np.ndarray,
                    boxes: np.ndarray, corners: np.ndarray, rule: np.ndarray, few: np.ndarray,
                    most: int, parts: int, moment: np.ndarray, closure: bool) -> np.ndarray:
    """(date, component, target), but for the constant factor, of the cells that are `few`."""
    dates = moment.shape[1]
    total = np.zeros((dates, components, x.size))
    room = max(_ROOM, most)
    for part in prange(parts):
        first, last = part * rule.shape[0] // parts, (part + 1) * rule.shape[0] // parts
        place, strength = np.empty((4, room)), np.empty((dates, room))
        points, edge = np.empty((most, 4)), np.empty((3, 6))
        known = np.zeros(6, dtype=rule.dtype)
        p, w = np.empty((3, room), dtype=real.dtype), np.empty(room, dtype=real.dtype)
        t = np.empty((2, x.size), dtype=real.dtype)
        local, own = np.zeros((dates, components, x.size)), np.zeros((dates, components, x.size))
        count = 0
        for cell in range(first, last + 1):
            full = cell == last or (few[cell] and count + points_in(rule[cell]) > room)
            if full and count > 0:
                unit = _own_units(p, t, place, count, x, y)
                for s in range(dates):
                    for j in range(count):
                        w[j] = strength[s, j]
                    add_half_space(own[s], p[0, :count], p[1, :count], p[2, :count], w[:count],
                                   t[0], t[1], closure)
                _give_back(local, own, unit)
                count = 0
            if cell < last and few[cell]:
                end = _points_into(place, count, cell, boxes, corners, rule, points, edge, known)
                for s in range(dates):
                    for j in range(count, end):
                        strength[s, j] = place[3, j] * moment[cell, s]
                count = end
        total += local
    return total


@njit(cache=True, parallel=True, error_model="numpy")
def _sum_series(components: int, real: np.ndarray, x: np.ndarray, y: np.ndarray,
                boxes: np.ndarray, corners: np.ndarray, rule: np.ndarray, few: np.ndarray,
                most: int, parts: int, moment: np.ndarray, low: float, depths: np.ndarray,
                weights: np.ndarray, terms: np.ndarray) -> np.ndarray:
    """(date, component, target) of the cells that are `few`, by radial series."""
    dates = moment.shape[1]
    total = np.zeros((dates, components, x.size))
    room = max(_ROOM_SERIES, most)
    padded = -(-x.size // _VECTORS) * _VECTORS  # the targets at the end stand for nothing
    for part in prange(parts):
        first, last = part * rule.shape[0] // parts, (part + 1) * rule.shape[0] // parts
        place = np.empty((4, room))
        points, edge = np.empty((most, 4)), np.empty((3, 6))
        known = np.zeros(6, dtype=rule.dtype)
        p, w = np.empty((3, room), dtype=real.dtype), np.empty((dates, room), dtype=real.dtype)
        t, work = np.zeros((2, padded), dtype=real.dtype), np.empty((9, padded), dtype=real.dtype)
        pieces = np.empty((room, terms.shape[1]), dtype=real.dtype)
        share = np.empty(depths.size)
        local, own = np.zeros((dates, components, x.size)), np.zeros((dates, components, padded))
        count = 0
        for cell in range(first, last + 1):
            full = cell == last or (few[cell] and count + points_in(rule[cell]) > room)
            if full and count > 0:
                unit = _own_units(p, t, place, count, x, y)
                add_series(own, count, p, w, t[0], t[1], pieces, 2 if components == 3 else 4, low,
                           work)
                _give_back(local, own, unit)
                count = 0
            if cell < last and few[cell]:
                end = _points_into(place, count, cell, boxes, corners, rule, points, edge, known)
                for j in range(count, end):
                    if j > count and place[2, j] == place[2, j - 1]:  # as in a box of one layer
                        pieces[j] = pieces[j - 1]
                    else:
                        barycentric(share, place[2, j], depths, weights)
                        mix_series(pieces, j, share, terms)
                    for s in range(dates):
                        w[s, j] = place[3, j] * moment[cell, s]
                count = end
        total += local
    return total
