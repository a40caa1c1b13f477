"""Compiled sums of many point sources at a few targets: a half-space, or any other earth.

Points come in chunks that stay in cache, as arrays of x, y, depth and strength; the loops over
them have no branches and no stores, or short ones, so that the compiler turns them into vector
code. Lengths are relative to a place and a depth of the chunk's own, so that single precision
loses no digits to large coordinates and no power of a distance leaves its range.
"""

from __future__ import annotations

import numpy as np
from numba import njit

__all__ = ["add_half_space", "add_series", "mix_series"]

# Sums may be reordered (vectors need it); NaN and infinity keep their meaning.
_FAST = {"contract", "reassoc", "nsz"}


@njit(cache=True, nogil=True, fastmath=_FAST, error_model="numpy")
def _inverse_root(r2, half):  # type: ignore[no-untyped-def]
    """1/sqrt(r2): a single-precision guess and one step of Newton's method, exact to 1e-14 in
    double precision at half the price of a root and a division there."""
    guess = np.float32(1.0) / np.sqrt(np.float32(r2))
    return guess * (half + half + half - half * r2 * guess * guess)


@njit(cache=True, nogil=True, fastmath=_FAST, error_model="numpy")
def add_half_space(total: np.ndarray, x: np.ndarray, y: np.ndarray, d: np.ndarray, w: np.ndarray,
                   tx: np.ndarray, ty: np.ndarray, closure: bool) -> None:
    """Add the field of points in a homogeneous half-space, without its constant factor.

    With R the distance, u = f (dx, dy, -d) where f is -1/R^3 of contraction, -d^2/R^5 of closure
    (factors (1-nu)/pi and 3/(2 pi)); derivatives follow from df/d(R^2) = -k/2 f/R^2, k = 3 or 5.

    Parameters
    ----------
    total : array (component, target) of float64
        3 components, or 8 with the derivatives.
    x, y, d, w : array (point,)
        Place, depth, strength; all of one precision, as the targets `tx, ty (target,)`.
    """
    if total.shape[0] == 3:
        _displacement(total, x, y, d, w, tx, ty, closure)
    else:
        _with_gradient(total, x, y, d, w, tx, ty, closure)


@njit(cache=True, nogil=True, fastmath=_FAST, error_model="numpy")
def _displacement(total, x, y, d, w, tx, ty, closure):  # type: ignore[no-untyped-def]
    half, none = x.dtype.type(0.5), x.dtype.type(0.0)
    for t in range(tx.size):
        down, east, north = none, none, none
        if closure:
            for j in range(x.size):
                dx, dy = tx[t] - x[j], ty[t] - y[j]
                d2 = d[j] * d[j]
                g = _inverse_root(dx * dx + dy * dy + d2, half)
                g2 = g * g
                f = w[j] * d2 * g * g2 * g2
                down += f * d[j]
                east -= f * dx
                north -= f * dy
        else:
            for j in range(x.size):
                dx, dy = tx[t] - x[j], ty[t] - y[j]
                g = _inverse_root(dx * dx + dy * dy + d[j] * d[j], half)
                f = w[j] * g * g * g
                down += f * d[j]
                east -= f * dx
                north -= f * dy
        total[0, t] += down
        total[1, t] += east
        total[2, t] += north


@njit(cache=True, nogil=True, fastmath=_FAST, error_model="numpy")
def _with_gradient(total, x, y, d, w, tx, ty, closure):  # type: ignore[no-untyped-def]
    half, none = x.dtype.type(0.5), x.dtype.type(0.0)
    k = x.dtype.type(5.0 if closure else 3.0)
    for t in range(tx.size):
        down, east, north = none, none, none
        slope_east, slope_north = none, none
        strain_east, strain_north, shear = none, none, none
        for j in range(x.size):
            dx, dy = tx[t] - x[j], ty[t] - y[j]
            d2 = d[j] * d[j]
            g = _inverse_root(dx * dx + dy * dy + d2, half)
            g2 = g * g
            f = w[j] * g * g2
            if closure:
                f = f * d2 * g2
            down += f * d[j]
            east -= f * dx
            north -= f * dy
            bend = k * f * g2
            slope_east -= bend * d[j] * dx
            slope_north -= bend * d[j] * dy
            strain_east += bend * dx * dx - f
            strain_north += bend * dy * dy - f
            shear += bend * dx * dy
        total[0, t] += down
        total[1, t] += east
        total[2, t] += north
        total[3, t] += slope_east
        total[4, t] += slope_north
        total[5, t] += strain_east
        total[6, t] += strain_north
        total[7, t] += shear


@njit(cache=True, nogil=True, fastmath=_FAST, error_model="numpy")
def mix_series(pieces: np.ndarray, point: int, share: np.ndarray, terms: np.ndarray) -> None:
    """The series `pieces[point]` from the shares of the depth nodes.

    `terms (node, functions x terms)` are those of a `radial_series.RadialSeries`, one function
    after the other.
    """
    pieces[point] = 0
    for n in range(share.size):
        part = pieces.dtype.type(share[n])
        for k in range(terms.shape[1]):
            pieces[point, k] += part * terms[n, k]


@njit(cache=True, nogil=True, fastmath=_FAST, error_model="numpy")
def add_series(total: np.ndarray, count: int, p: np.ndarray, w: np.ndarray, tx: np.ndarray,
               ty: np.ndarray, pieces: np.ndarray, functions: int, low: float,
               work: np.ndarray) -> None:
    """As `add_half_space` for any earth, all factors included.

    Here the inner loops are over targets, since a point's series is the same for all of them. A
    number of targets that vectors divide (of 32) is much the fastest.

    Parameters
    ----------
    total : array (date, component, target) of float64
    count : int
        Points in use; arrays may be longer.
    p : array (3, point)
        x, y, depth.
    w : array (date, point)
    pieces : array (point, functions x terms)
        Series at each point's depth, from `mix_series`.
    functions : int
        2, or 4 with the derivatives, of 4 n + 1 terms each.
    low : float
        Where the series begin.
    work : array (9, target)
        Scratch of the points' precision.
    """
    half = p.dtype.type(0.5)
    stretch, shift = p.dtype.type(4.0 / (1.0 - low)), p.dtype.type(2.0 * (1.0 + low) / (1.0 - low))
    dx, dy, g, double = work[0], work[1], work[2], work[3]
    outward, down, bend, slope, other = work[4], work[5], work[6], work[7], work[8]
    size = pieces.shape[1] // functions
    for j in range(count):
        _places(dx, dy, g, double, tx, ty, p[0, j], p[1, j], p[2, j], half, stretch, shift)
        _clenshaw(outward, other, double, pieces, j, 0 * size, size, half)
        _clenshaw(down, other, double, pieces, j, 1 * size, size, half)
        if functions > 2:
            _clenshaw(bend, other, double, pieces, j, 2 * size, size, half)
            _clenshaw(slope, other, double, pieces, j, 3 * size, size, half)
        for s in range(w.shape[0]):
            _add_movement(total, s, w[s, j], dx, dy, g, outward, down)
            if functions > 2:
                _add_slopes(total, s, w[s, j] / p[2, j], dx, dy, g, slope)
                _add_strain(total, s, w[s, j], w[s, j] / p[2, j], dx, dy, g, outward, bend)


@njit(cache=True, nogil=True, fastmath=_FAST, error_model="numpy")
def _places(dx, dy, g, double, tx, ty, x, y, d, half, stretch, shift):  # type: ignore[no-untyped-def]
    """Offsets, 1/R, and twice the place in the series."""
    for t in range(tx.size):
        dx[t] = tx[t] - x
        dy[t] = ty[t] - y
    for t in range(tx.size):
        g[t] = _inverse_root(dx[t] * dx[t] + dy[t] * dy[t] + d * d, half)
    for t in range(tx.size):
        double[t] = stretch * np.sqrt(d * g[t]) - shift


@njit(cache=True, nogil=True, fastmath=_FAST, error_model="numpy")
def _clenshaw(value, other, double, pieces, j, at, size, half):  # type: ignore[no-untyped-def]
    """A Chebyshev series, whose terms begin at `at`, at half of `double`; four terms a pass."""
    last = at + size - 1
    if size == 1:
        value[:] = pieces[j, at]
        return
    c0, c1, c2, c3 = pieces[j, last], pieces[j, last - 1], pieces[j, last - 2], pieces[j, last - 3]
    for t in range(value.size):
        z = double[t]
        a = c1 + z * c0
        b = c2 + z * a - c0
        other[t] = b
        value[t] = c3 + z * b - a
    for k in range(last - 4, at, -4):
        c0, c1, c2, c3 = pieces[j, k], pieces[j, k - 1], pieces[j, k - 2], pieces[j, k - 3]
        for t in range(value.size):
            z, b = double[t], other[t]
            b = c0 + z * value[t] - b
            a = c1 + z * b - value[t]
            b = c2 + z * a - b
            other[t] = b
            value[t] = c3 + z * b - a
    c0 = pieces[j, at]
    for t in range(value.size):
        value[t] = c0 + half * double[t] * value[t] - other[t]


@njit(cache=True, nogil=True, fastmath=_FAST, error_model="numpy")
def _add_movement(total, s, w, dx, dy, g, outward, down):  # type: ignore[no-untyped-def]
    for t in range(g.size):
        total[s, 0, t] += w * g[t] * g[t] * down[t]
    for t in range(g.size):
        f = w * g[t] * g[t] * g[t] * outward[t]
        total[s, 1, t] += f * dx[t]
        total[s, 2, t] += f * dy[t]


@njit(cache=True, nogil=True, fastmath=_FAST, error_model="numpy")
def _add_slopes(total, s, w, dx, dy, g, slope):  # type: ignore[no-untyped-def]
    for t in range(g.size):
        f = w * g[t] * g[t] * g[t] * slope[t]
        total[s, 3, t] += f * dx[t]
        total[s, 4, t] += f * dy[t]


@njit(cache=True, nogil=True, fastmath=_FAST, error_model="numpy")
def _add_strain(total, s, w, w_over_d, dx, dy, g, outward, bend):  # type: ignore[no-untyped-def]
    for t in range(g.size):
        g3 = g[t] * g[t] * g[t]
        across, bent = w * g3 * outward[t], w_over_d * g3 * g[t] * bend[t]
        total[s, 5, t] += across + bent * dx[t] * dx[t]
        total[s, 6, t] += across + bent * dy[t] * dy[t]
        total[s, 7, t] += bent * dx[t] * dy[t]
