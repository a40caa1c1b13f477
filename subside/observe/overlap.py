"""Overlaps of quadrilaterals with unit squares: areas, and integrals of two directions over them.

A quadrilateral is cut along the lines between rows of squares, and each strip along the lines
between columns (by the rule of Sutherland and Hodgman, Reentrant polygon clipping, Communications
of the ACM 17, 1974, for both sides of a line at once). The area of a piece is the shoelace formula.
The directions s and t of a convex quadrilateral are each -1 to 1,

    place = middle + s E + t F + s t G,

and s, t and s t are integrated over a piece around its edge (Green's theorem), by Gauss points on
each side.
"""

from __future__ import annotations

import numpy as np
from numba import njit

__all__ = ["directions", "is_convex", "jacobian", "overlaps"]

_MOST_CORNERS = 32
"""A quadrilateral, also one that is not convex, crosses a line four times at most: its pieces have
fewer corners than this."""
_ROUNDING = 1e-9
_GAUSS = np.polynomial.legendre.leggauss(6)
_NODES, _WEIGHTS = 0.5 + 0.5 * _GAUSS[0], 0.5 * _GAUSS[1]


@njit(cache=True, nogil=True)
def overlaps(quads: np.ndarray, terms: int, rows: int, columns: int) -> tuple[
        np.ndarray, np.ndarray, np.ndarray]:
    """Of quadrilaterals with the squares of a raster.

    Parameters
    ----------
    quads : array (quad, 4, 2)
        In sides of the squares; square (row, column) begins at x = column, y = row.
    terms : int
        1: areas only; 4: also the integrals of s - <s>, t - <t> and s t, <> being the mean over the
        quadrilateral. They are zero where it is not convex.
    rows, columns : int

    Returns
    -------
    start : array of int (quad + 1,)
        Where the entries of each begin.
    square : array of int (entry,)
        row * columns + column, ascending within a quadrilateral.
    share : array (terms, entry)
        Over the quadrilateral's area.
    """
    start = np.zeros(quads.shape[0] + 1, dtype=np.int64)
    square, share = np.empty(64, dtype=np.int64), np.empty((terms, 64))
    shape = (_MOST_CORNERS, 2)
    south, strip, east, piece, spare = (np.empty(shape), np.empty(shape), np.empty(shape),
                                        np.empty(shape), np.empty(shape))
    integrals = np.empty(3)
    filled = 0
    for c in range(quads.shape[0]):
        south[:4] = quads[c]
        below = 4
        whole = _whole(quads[c])
        first_row, end_row = _span(south, below, 1, rows)
        if whole == 0.0:
            end_row = first_row
        below, south, spare = _without_before(south, below, 1, first_row, spare)
        for row in range(first_row, end_row):
            size, below = _split(south, below, 1, row + 1.0, strip, spare)
            south, spare = spare, south
            first_column, end_column = _span(strip, size, 0, columns)
            if filled + end_column - first_column > square.size:
                square, share = _grown(square, share, filled + end_column - first_column)
            size, strip, east = _without_before(strip, size, 0, first_column, east)
            for column in range(first_column, end_column):
                corners, size = _split(strip, size, 0, column + 1.0, piece, east)
                strip, east = east, strip
                part = abs(_area(piece, corners)) / whole
                if part > 0.0:
                    square[filled], share[0, filled] = row * columns + column, part
                    if terms > 1:
                        _integrate(integrals, piece, corners, quads[c])
                        for n in range(3):
                            share[n + 1, filled] = integrals[n]
                    filled += 1
        start[c + 1] = filled
    return start, square[:filled], share[:, :filled]


@njit(cache=True, nogil=True)
def _whole(quad: np.ndarray) -> float:
    """Area as two triangles, by the diagonal that lies inside.

    Sides that cross, if only by rounding where two corners meet, must not make the whole less than
    its parts.
    """
    one = abs(_area(quad[:3], 3)) + abs(_area(quad[np.array([0, 2, 3])], 3))
    two = abs(_area(quad[1:], 3)) + abs(_area(quad[np.array([0, 1, 3])], 3))
    return min(one, two)


@njit(cache=True, nogil=True)
def _grown(square: np.ndarray, share: np.ndarray, needed: int) -> tuple[np.ndarray, np.ndarray]:
    more_squares = np.empty(2 * needed, dtype=square.dtype)
    more_shares = np.empty((share.shape[0], 2 * needed))
    more_squares[:square.size] = square
    more_shares[:, :square.size] = share
    return more_squares, more_shares


@njit(cache=True, nogil=True)
def _span(polygon: np.ndarray, size: int, axis: int, count: int) -> tuple[int, int]:
    """First square that a polygon touches, and the one after the last, of those there are."""
    if size == 0:
        return 0, 0
    low = high = polygon[0, axis]
    for n in range(1, size):
        low, high = min(low, polygon[n, axis]), max(high, polygon[n, axis])
    # far outside: limited before it becomes an integer
    return (int(np.floor(min(max(low, 0.0), float(count)))),
            int(np.ceil(min(max(high, 0.0), float(count)))))


@njit(cache=True, nogil=True)
def _without_before(polygon: np.ndarray, size: int, axis: int, limit: int, spare: np.ndarray
                    ) -> tuple[int, np.ndarray, np.ndarray]:
    """The polygon without its part off the raster, its size and place, and what is free."""
    if limit > 0:
        return size, polygon, spare
    _, size = _split(polygon, size, axis, 0.0, np.empty_like(spare), spare)
    return size, spare, polygon


@njit(cache=True, nogil=True)
def _split(polygon: np.ndarray, size: int, axis: int, limit: float, before: np.ndarray,
           after: np.ndarray) -> tuple[int, int]:
    """Cut a polygon along a line across an axis; the number of corners of both parts."""
    first = last = 0
    if size == 0:
        return first, last
    a, b = polygon[size - 1, axis], polygon[size - 1, 1 - axis]
    for n in range(size):
        c, d = polygon[n, axis], polygon[n, 1 - axis]
        if (a < limit and c > limit) or (a > limit and c < limit):
            at = b + (limit - a) / (c - a) * (d - b)
            before[first, axis], before[first, 1 - axis] = limit, at
            after[last, axis], after[last, 1 - axis] = limit, at
            first, last = first + 1, last + 1
        if c <= limit:
            before[first, axis], before[first, 1 - axis] = c, d
            first += 1
        if c >= limit:
            after[last, axis], after[last, 1 - axis] = c, d
            last += 1
        a, b = c, d
    return first, last


@njit(cache=True, nogil=True)
def _area(polygon: np.ndarray, size: int) -> float:
    """Signed area, from the first corner so that far places lose no digits."""
    total = 0.0
    for n in range(1, size - 1):
        total += ((polygon[n, 0] - polygon[0, 0]) * (polygon[n + 1, 1] - polygon[0, 1])
                  - (polygon[n + 1, 0] - polygon[0, 0]) * (polygon[n, 1] - polygon[0, 1]))
    return 0.5 * total


@njit(cache=True, nogil=True)
def directions(quad: np.ndarray) -> np.ndarray:
    """E, F, G and the middle of a quadrilateral (4, 2), in rows."""
    e = 0.25 * ((quad[1] - quad[0]) + (quad[2] - quad[3]))
    f = 0.25 * ((quad[3] - quad[0]) + (quad[2] - quad[1]))
    g = 0.25 * ((quad[0] - quad[1]) + (quad[2] - quad[3]))
    middle = quad[0] + e + f - g
    out = np.empty((4, 2))
    out[0], out[1], out[2], out[3] = e, f, g, middle
    return out


@njit(cache=True, nogil=True)
def jacobian(rows: np.ndarray) -> tuple[float, float, float]:
    """j0, j1, j2 in the Jacobian j0 + s j1 + t j2 of the place, from `directions`.

    The area is 4 j0, negative where s, t are left-handed; <s> is j1 / (3 j0), <t> is j2 / (3 j0).
    """
    e, f, g = rows[0], rows[1], rows[2]
    return (e[0] * f[1] - e[1] * f[0], e[0] * g[1] - e[1] * g[0], g[0] * f[1] - g[1] * f[0])


@njit(cache=True, nogil=True)
def is_convex(j0: float, j1: float, j2: float) -> bool:
    """Whether the Jacobian has one sign; it may vanish at corners, as of a triangle."""
    return j0 != 0.0 and abs(j1) + abs(j2) <= (1.0 + _ROUNDING) * abs(j0)


@njit(cache=True, nogil=True)
def _integrate(out: np.ndarray, piece: np.ndarray, size: int, quad: np.ndarray) -> None:
    """Integrals of s - <s>, t - <t> and s t over a piece, over the area of the quadrilateral.

    Each is the integral around the piece of an antiderivative by s, times dt. Neighbours have the
    same Gauss points on the side between them: what one gains there the other loses.
    """
    out[:] = 0.0
    rows = directions(quad)
    e, f, g, middle = rows[0], rows[1], rows[2], rows[3]
    j0, j1, j2 = jacobian(rows)
    if not is_convex(j0, j1, j2):
        return
    mean_s, mean_t = j1 / (3.0 * j0), j2 / (3.0 * j0)
    # antiderivatives are zero on the shorter side across s: it may have no length, but t runs there
    begin = -1.0 if j1 * j0 > 0.0 else 1.0
    for n in range(size):
        ax, ay = piece[n, 0], piece[n, 1]
        dx, dy = piece[(n + 1) % size, 0] - ax, piece[(n + 1) % size, 1] - ay
        for m in range(_NODES.size):
            x, y = ax + _NODES[m] * dx - middle[0], ay + _NODES[m] * dy - middle[1]
            # s and t are roots of quadratics, both with the discriminant Jacobian squared
            skew = x * g[1] - y * g[0]
            along = x * f[1] - y * f[0]
            here = np.copysign(np.sqrt(max((j0 - skew)**2 + 4.0 * j1 * along, 0.0)), j0)
            below_s, below_t = j0 - skew + here, j0 + skew + here
            if here == 0.0 or below_s * j0 <= 0.0 or below_t * j0 <= 0.0:
                continue  # on a side without length, or by rounding beyond it
            s = min(max(2.0 * along / below_s, -1.0), 1.0)
            t = min(max(2.0 * (e[0] * y - e[1] * x) / below_t, -1.0), 1.0)
            dt = _WEIGHTS[m] * ((e[0] + t * g[0]) * dy - (e[1] + t * g[1]) * dx) / here
            one = s - begin
            two, three = one * (s + begin) / 2.0, one * (s * (s + begin) + 1.0) / 3.0
            across = j0 + t * j2
            out[0] += dt * (across * (two - mean_s * one) + j1 * (three - mean_s * two))
            out[1] += dt * (t - mean_t) * (across * one + j1 * two)
            out[2] += dt * t * (across * two + j1 * three)
    out /= 4.0 * j0
