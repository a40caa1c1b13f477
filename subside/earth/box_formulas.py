"""Closed corner sums behind the finite box: Newtonian potential of a rectangular prism and sheet.

A box spans a0..a1 in each axis relative to the observation point, which sits at the origin. S is
the signed sum over its corners (+ where an even number of coordinates are the lower ones, for a
sheet; the opposite corner of the box positive). Nagy, Papp & Benedek (2000), J. Geodesy 74:552
give the derivatives of the potential. Here the logarithms of a sum over one edge are taken as one
`log1p`, so that nothing is lost when the box is far along that edge.
"""

from __future__ import annotations

from math import atan, log, log1p, pi, sqrt
from typing import Any

import numpy as np
from numba import njit

__all__ = [
    "COMPILED", "GAUSS_NODES", "GAUSS_WEIGHTS", "LARGEST_ORDER", "atan_ratio", "attraction",
    "edge_log", "order_for", "sheet_gradient_sums", "sheet_sums", "surface_gradient_sums",
    "surface_sums", "times_log",
]

COMPILED: dict[str, Any] = {"cache": True, "fastmath": {"contract"}, "error_model": "numpy"}

LARGEST_ORDER = 16
GAUSS_NODES = np.zeros((LARGEST_ORDER + 1, LARGEST_ORDER))
GAUSS_WEIGHTS = np.zeros((LARGEST_ORDER + 1, LARGEST_ORDER))
for _n in range(1, LARGEST_ORDER + 1):
    GAUSS_NODES[_n, :_n], GAUSS_WEIGHTS[_n, :_n] = np.polynomial.legendre.leggauss(_n)


@njit(**COMPILED)
def order_for(half, distance):  # type: ignore[no-untyped-def]
    """Gauss points over a half-size when the kernel's nearest singularity is `distance` away.

    `distance` is from the centre and above `half`. The error falls as rho^-2n with rho the sum of
    the half-axes of the Bernstein ellipse through the singularity; the least n with rho^-2n below
    1e-17 leaves rounding only. At most `LARGEST_ORDER`, which serves half/distance up to 0.5.
    """
    if half <= 0.0:
        return 1
    x = distance / half
    n = int(39.2 / (2.0 * log(x + sqrt(x * x - 1.0)))) + 1
    return min(n, LARGEST_ORDER)


@njit(**COMPILED)
def atan_ratio(top, bottom):  # type: ignore[no-untyped-def]
    """atan(top/bottom); over zero the mean of both sides, which is 0."""
    if bottom == 0.0:
        return 0.0
    return atan(top / bottom)


@njit(**COMPILED)
def edge_log(a0, d0, a1, d1, side2):  # type: ignore[no-untyped-def]
    """ln((a1 + d1)/(a0 + d0)) along an edge, d_i = sqrt(a_i^2 + side2); +inf on the edge itself."""
    if a0 >= 0.0 or a1 <= 0.0:
        if a1 <= 0.0:
            a0, d0, a1, d1 = -a1, d1, -a0, d0
        return log1p((a1 - a0) * (1.0 + (a0 + a1) / (d0 + d1)) / (a0 + d0))
    return log((a1 + d1) * (d0 - a0) / side2)


@njit(**COMPILED)
def times_log(factor, a0, d0, a1, d1, side2):  # type: ignore[no-untyped-def]
    """factor times `edge_log`; |factor| <= side, so on the edge itself the limit is 0."""
    if side2 < 1e-290:  # below this the ratio inside the logarithm overflows
        return 0.0
    return factor * edge_log(a0, d0, a1, d1, side2)


@njit(**COMPILED)
def attraction(x0, x1, y0, y1, z0, z1):  # type: ignore[no-untyped-def]
    """Gradient (phi_x, phi_y, phi_z) [m] of int dV/|x-x'| of a box, at the origin, anywhere.

    phi_x = -S[y ln(z+R) + z ln(y+R) - x atan(yz/(xR))] and so on round the axes.
    """
    gx = 0.0
    gy = 0.0
    gz = 0.0
    for i in range(2):
        x = x1 if i else x0
        for j in range(2):
            y = y1 if j else y0
            sign = 1.0 if i == j else -1.0
            s2 = x * x + y * y
            e0 = sqrt(s2 + z0 * z0)
            e1 = sqrt(s2 + z1 * z1)
            # one edge along z
            gx -= sign * times_log(y, z0, e0, z1, e1, s2)
            gy -= sign * times_log(x, z0, e0, z1, e1, s2)
            gx += sign * x * (atan_ratio(y * z1, x * e1) - atan_ratio(y * z0, x * e0))
            gy += sign * y * (atan_ratio(x * z1, y * e1) - atan_ratio(x * z0, y * e0))
            gz += sign * (z1 * atan_ratio(x * y, z1 * e1) - z0 * atan_ratio(x * y, z0 * e0))
    for i in range(2):
        z = z1 if i else z0
        for j in range(2):
            sign = 1.0 if i == j else -1.0
            x = x1 if j else x0  # one edge along y
            s2 = x * x + z * z
            e0 = sqrt(s2 + y0 * y0)
            e1 = sqrt(s2 + y1 * y1)
            gx -= sign * times_log(z, y0, e0, y1, e1, s2)
            gz -= sign * times_log(x, y0, e0, y1, e1, s2)
            y = y1 if j else y0  # one edge along x
            s2 = y * y + z * z
            e0 = sqrt(s2 + x0 * x0)
            e1 = sqrt(s2 + x1 * x1)
            gy -= sign * times_log(z, x0, e0, x1, e1, s2)
            gz -= sign * times_log(y, x0, e0, x1, e1, s2)
    return gx, gy, gz


@njit(**COMPILED)
def surface_sums(x0, x1, y0, y1, z0, z1):  # type: ignore[no-untyped-def]
    """Integrals over a box below the surface (z0 >= 0), seen from the surface.

    Returns int (x, y, z)/R^3 and int (3/2)(x z^2, y z^2, z^3)/R^5 [m], the second from
    (3/2) x z^2/R^5 = -(z/2) d/dz (x/R^3) integrated by parts over depth:
    -S[y ln(z+R) - x atan(yz/(xR))]/2 and -S[x ln(y+R) + y ln(x+R) - (z/2) atan(xy/(zR))].
    """
    gx, gy, gz = attraction(x0, x1, y0, y1, z0, z1)
    cx = 0.0
    cy = 0.0
    cz = gz
    for i in range(2):
        x = x1 if i else x0
        for j in range(2):
            y = y1 if j else y0
            sign = 1.0 if i == j else -1.0
            s2 = x * x + y * y
            e0 = sqrt(s2 + z0 * z0)
            e1 = sqrt(s2 + z1 * z1)
            cx -= 0.5 * sign * times_log(y, z0, e0, z1, e1, s2)
            cy -= 0.5 * sign * times_log(x, z0, e0, z1, e1, s2)
            cx += 0.5 * sign * x * (atan_ratio(y * z1, x * e1) - atan_ratio(y * z0, x * e0))
            cy += 0.5 * sign * y * (atan_ratio(x * z1, y * e1) - atan_ratio(x * z0, y * e0))
            cz -= 0.5 * sign * (z1 * atan_ratio(x * y, z1 * e1) - z0 * atan_ratio(x * y, z0 * e0))
    return gx, gy, gz, cx, cy, cz


@njit(**COMPILED)
def surface_gradient_sums(x0, x1, y0, y1, z0, z1):  # type: ignore[no-untyped-def]
    """Derivatives (xx, yy, xy, zx, zy) [-] of the two vectors of `surface_sums`, by the position.

    First vector: -S atan(yz/(xR)), ..., S ln(z+R), S ln(y+R), S ln(x+R); second:
    xx = S[xyz/(R(x^2+z^2)) - atan(yz/(xR))]/2, xy = S[ln(z+R) - z/R]/2,
    zx = S[ln(y+R) + z^2 y/(2R(x^2+z^2))].
    """
    pxx = 0.0
    pyy = 0.0
    pxy = 0.0
    pzx = 0.0
    pzy = 0.0
    cxx = 0.0
    cyy = 0.0
    cxy = 0.0
    czx = 0.0
    czy = 0.0
    for i in range(2):
        x = x1 if i else x0
        for j in range(2):
            y = y1 if j else y0
            sign = 1.0 if i == j else -1.0
            s2 = x * x + y * y
            e0 = sqrt(s2 + z0 * z0)
            e1 = sqrt(s2 + z1 * z1)
            pxy += sign * edge_log(z0, e0, z1, e1, s2)
            for k in range(2):
                z = z1 if k else z0
                e = e1 if k else e0
                s = sign if k else -sign
                pxx -= s * atan_ratio(y * z, x * e)
                pyy -= s * atan_ratio(x * z, y * e)
                if z != 0.0:
                    fx = z / (e * (x * x + z * z))
                    fy = z / (e * (y * y + z * z))
                    cxx += 0.5 * s * x * y * fx
                    cyy += 0.5 * s * x * y * fy
                    cxy -= 0.5 * s * z / e
                    czx += 0.5 * s * z * y * fx
                    czy += 0.5 * s * z * x * fy
    for i in range(2):
        z = z1 if i else z0
        for j in range(2):
            sign = 1.0 if i == j else -1.0
            x = x1 if j else x0
            s2 = x * x + z * z
            pzx += sign * edge_log(y0, sqrt(s2 + y0 * y0), y1, sqrt(s2 + y1 * y1), s2)
            y = y1 if j else y0
            s2 = y * y + z * z
            pzy += sign * edge_log(x0, sqrt(s2 + x0 * x0), x1, sqrt(s2 + x1 * x1), s2)
    return (
        pxx, pyy, pxy, pzx, pzy,
        cxx + 0.5 * pxx, cyy + 0.5 * pyy, cxy + 0.5 * pxy, czx + pzx, czy + pzy,
    )


@njit(**COMPILED)
def sheet_sums(x0, x1, y0, y1, z):  # type: ignore[no-untyped-def]
    """The integrands of `surface_sums` over a horizontal rectangle at depth z, closed form [-].

    int x/R^3 = -S ln(y+R), int z/R^3 = S atan(xy/(zR)) (the solid angle);
    int (3/2) x z^2/R^5 = -S z^2 y/(2R(x^2+z^2)),
    int (3/2) z^3/R^5 = [solid angle + S xyz (R^2+z^2)/(R(x^2+z^2)(y^2+z^2))]/2.
    At z = 0 the solid angle is its limit from below: 2 pi under the rectangle, pi on a side.
    """
    gx = 0.0
    gy = 0.0
    angle = 0.0
    cx = 0.0
    cy = 0.0
    extra = 0.0
    z2 = z * z
    for i in range(2):
        x = x1 if i else x0
        sx = x * x + z2
        gx -= (1.0 if i else -1.0) * edge_log(y0, sqrt(sx + y0 * y0), y1, sqrt(sx + y1 * y1), sx)
        y = y1 if i else y0
        sy = y * y + z2
        gy -= (1.0 if i else -1.0) * edge_log(x0, sqrt(sy + x0 * x0), x1, sqrt(sy + x1 * x1), sy)
        for j in range(2):
            y = y1 if j else y0
            sy = y * y + z2
            sign = 1.0 if i == j else -1.0
            e = sqrt(sx + y * y)
            if z == 0.0:
                angle += sign * 0.5 * pi * np.sign(x * y)
                continue
            angle += sign * atan(x * y / (z * e))
            cx -= sign * 0.5 * z2 * y / (e * sx)
            cy -= sign * 0.5 * z2 * x / (e * sy)
            extra += sign * x * y * z * (e * e + z2) / (e * sx * sy)
    return gx, gy, angle, cx, cy, 0.5 * (angle + extra)


@njit(**COMPILED)
def sheet_gradient_sums(x0, x1, y0, y1, z):  # type: ignore[no-untyped-def]
    """Derivatives (xx, yy, xy, zx, zy) [1/m] of the two vectors of `sheet_sums`, z > 0."""
    z2 = z * z
    pxx = 0.0
    pyy = 0.0
    pxy = 0.0
    pzx = 0.0
    pzy = 0.0
    cxx = 0.0
    cyy = 0.0
    cxy = 0.0
    czx = 0.0
    czy = 0.0
    for i in range(2):
        x = x1 if i else x0
        sx = x * x + z2
        for j in range(2):
            y = y1 if j else y0
            sign = 1.0 if i == j else -1.0
            sy = y * y + z2
            e = sqrt(sx + y * y)
            fx = 1.0 / (e * sx)
            fy = 1.0 / (e * sy)
            hx = fx * (1.0 / (e * e) + 2.0 / sx)
            hy = fy * (1.0 / (e * e) + 2.0 / sy)
            pxx -= sign * x * y * fx
            pyy -= sign * x * y * fy
            pxy += sign / e
            pzx -= sign * z * y * fx
            pzy -= sign * z * x * fy
            cxx -= 0.5 * sign * z2 * x * y * hx
            cyy -= 0.5 * sign * z2 * x * y * hy
            cxy += 0.5 * sign * z2 / (e * e * e)
            czx -= 0.5 * sign * z2 * z * y * hx
            czy -= 0.5 * sign * z2 * z * x * hy
    return pxx, pyy, pxy, pzx, pzy, cxx, cyy, cxy, czx, czy
