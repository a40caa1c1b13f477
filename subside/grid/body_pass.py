"""Compiled passes over the bodies of cells; every function releases the GIL."""

from __future__ import annotations

import numpy as np
from numba import njit

__all__ = ["depth_extremes", "measure", "measure_boxes", "overlaps"]

_NEAR = 0.5 - 0.5 / np.sqrt(3.0)  # the first Gauss point on 0 to 1
# Corner at s, t, u = 0 or 1, see `subside.grid.geometry.CORNER_PLACES`.
_CORNER = np.array([[[0, 4], [3, 7]], [[1, 5], [2, 6]]])


@njit(cache=True, nogil=True)
def _det(a, i, j, b, k, l, c, m, n):  # type: ignore[no-untyped-def]  # noqa: E741
    """Determinant of the rows a[i, j], b[k, l], c[m, n]."""
    return (a[i, j, 0] * (b[k, l, 1] * c[m, n, 2] - b[k, l, 2] * c[m, n, 1])
            - a[i, j, 1] * (b[k, l, 0] * c[m, n, 2] - b[k, l, 2] * c[m, n, 0])
            + a[i, j, 2] * (b[k, l, 0] * c[m, n, 1] - b[k, l, 1] * c[m, n, 0]))


@njit(cache=True, nogil=True)
def _to_gauss(edge, inner):  # type: ignore[no-untyped-def]
    """Values (2, 2, 3) at the corners of a square to its Gauss points, into `inner`."""
    far = 1.0 - _NEAR
    for a in range(3):
        low0 = far * edge[0, 0, a] + _NEAR * edge[1, 0, a]
        low1 = far * edge[0, 1, a] + _NEAR * edge[1, 1, a]
        high0 = _NEAR * edge[0, 0, a] + far * edge[1, 0, a]
        high1 = _NEAR * edge[0, 1, a] + far * edge[1, 1, a]
        inner[0, 0, a] = far * low0 + _NEAR * low1
        inner[0, 1, a] = _NEAR * low0 + far * low1
        inner[1, 0, a] = far * high0 + _NEAR * high1
        inner[1, 1, a] = _NEAR * high0 + far * high1


@njit(cache=True, nogil=True)
def measure(corners, thin, noise, absurd, start, stop,  # type: ignore[no-untyped-def]
            volume, centroid, least, zero, scale, drop, missing):
    """Measure hexahedra `start` to ``stop - 1``; see `subside.grid.geometry.Hexahedra`."""
    x = np.empty((2, 2, 2, 3))  # corners at s, t, u from the middle of the cell
    middle = np.empty(3)
    along = np.empty((3, 2, 2, 3))  # edges along s, t, u at the corners of the other two
    inner = np.empty((3, 2, 2, 3))  # the same at Gauss points
    lower, upper = np.empty((2, 2, 3)), np.empty((2, 2, 3))
    far = 1.0 - _NEAR
    moment = np.empty(3)
    for n in range(start, stop):
        extent, sound = 0.0, True
        for a in range(3):
            low = high = total = corners[n, 0, a]
            for c in range(1, 8):
                value = corners[n, c, a]
                total += value
                low, high = min(low, value), max(high, value)
                sound = sound and abs(value) < absurd
            sound = sound and abs(corners[n, 0, a]) < absurd  # so written, NaN is not
            extent = max(extent, high - low)
            # relative to the middle of the cell: northings of 6e6 m would cost seven digits
            middle[a] = total / 8.0
            for s in range(2):
                for t in range(2):
                    for u in range(2):
                        x[s, t, u, a] = corners[n, _CORNER[s, t, u], a] - middle[a]
            for p in range(2):
                for q in range(2):
                    along[0, p, q, a] = x[1, p, q, a] - x[0, p, q, a]
                    along[1, p, q, a] = x[p, 1, q, a] - x[p, 0, q, a]
                    along[2, p, q, a] = x[p, q, 1, a] - x[p, q, 0, a]
            moment[a] = 0.0
        for axis in range(3):
            _to_gauss(along[axis], inner[axis])
        _to_gauss(x[:, :, 0], upper)
        _to_gauss(x[:, :, 1], lower)
        total, smallest, largest = 0.0, np.inf, -np.inf
        for s in range(2):
            for t in range(2):
                for u in range(2):
                    at_corner = _det(along[0], t, u, along[1], s, u, along[2], s, t)
                    smallest, largest = min(smallest, at_corner), max(largest, at_corner)
                    weight = _det(inner[0], t, u, inner[1], s, u, inner[2], s, t) / 8.0
                    total += weight
                    down = _NEAR if u == 0 else far
                    for a in range(3):
                        moment[a] += weight * ((1.0 - down) * upper[s, t, a]
                                               + down * lower[s, t, a])
        area = 0.0
        for u in range(2):
            area += ((x[1, 1, u, 0] - x[0, 0, u, 0]) * (x[0, 1, u, 1] - x[1, 0, u, 1])
                     - (x[1, 1, u, 1] - x[0, 0, u, 1]) * (x[0, 1, u, 0] - x[1, 0, u, 0]))
        area = 0.25 * abs(area)
        volume[n] = total
        scale[n] = extent ** 3
        zero[n] = abs(total) <= thin * area * np.sqrt(area) + noise * scale[n]
        least[n] = -largest if total < 0 else smallest
        for a in range(3):
            centroid[n, a] = middle[a] if zero[n] else middle[a] + moment[a] / total
        drop[n] = (corners[n, 4, 2] + corners[n, 5, 2] + corners[n, 6, 2] + corners[n, 7, 2]
                   - corners[n, 0, 2] - corners[n, 1, 2] - corners[n, 2, 2] - corners[n, 3, 2])
        missing[n] = not sound


@njit(cache=True, nogil=True)
def depth_extremes(corners, start, stop, low, high):  # type: ignore[no-untyped-def]
    """Shallowest and deepest corner (n,) of hexahedra (n, 8, 3)."""
    for n in range(start, stop):
        low[n] = high[n] = corners[n, 0, 2]
        for c in range(1, 8):
            low[n] = min(low[n], corners[n, c, 2])
            high[n] = max(high[n], corners[n, c, 2])


@njit(cache=True, nogil=True)
def measure_boxes(x, y, top, bottom, dx, dy, azimuth,  # type: ignore[no-untyped-def]
                  absurd, thin, volume, centroid, solid, counts, firsts):
    """Measure boxes (n,), and count what is wrong with them.

    Parameters
    ----------
    counts, firsts : array (10,)
        Boxes without x, y, top, bottom, dx, dy, azimuth; with dx or dy not above zero; with the
        bottom above the top: how many, and the first.
    """
    for n in range(len(x)):
        height = bottom[n] - top[n]
        solid[n] = not abs(height) <= thin * np.sqrt(dx[n] * dy[n])
        volume[n] = height * dx[n] * dy[n]
        centroid[n, 0], centroid[n, 1], centroid[n, 2] = x[n], y[n], 0.5 * (top[n] + bottom[n])
        wrong = (
            not abs(x[n]) < absurd, not abs(y[n]) < absurd,  # so written, NaN counts
            not abs(top[n]) < absurd, not abs(bottom[n]) < absurd, not abs(dx[n]) < absurd,
            not abs(dy[n]) < absurd, not abs(azimuth[n]) < absurd, dx[n] <= 0.0, dy[n] <= 0.0,
            solid[n] and height < 0.0)
        for check in range(10):
            if wrong[check]:
                if counts[check] == 0:
                    firsts[check] = n
                counts[check] += 1


@njit(cache=True, nogil=True)
def overlaps(k, j, i, nj, ni, top, bottom, corners, least):  # type: ignore[no-untyped-def]
    """Cells that reach more than `least` below the top of the one under them.

    Parameters
    ----------
    k, j, i : array (n,)
        Places of the cells, k ascending.
    top, bottom : array (n,)
        Depths of boxes; empty where there are corners.
    corners : array (n, 8, 3)
        Empty where there are boxes.

    Returns
    -------
    count, upper, lower, amount
        How many; the first, the one below it, and by how much it overlaps.
    """
    newest = np.full(nj * ni, -1, np.int32)  # deepest cell so far at each j, i
    count, first, under, amount = 0, -1, -1, 0.0
    for n in range(len(k)):
        at = np.int64(j[n]) * ni + i[n]
        above = newest[at]
        newest[at] = n
        if above < 0 or k[above] != k[n] - 1:
            continue
        if len(top):
            most = bottom[above] - top[n]
        else:
            most = -np.inf
            for c in range(4):
                most = max(most, corners[above, c + 4, 2] - corners[n, c, 2])
        if most > least:
            if count == 0 or above < first:
                first, under, amount = above, n, most
            count += 1
    return count, first, under, amount
