"""A rectangular box of uniform strain in a homogeneous half-space, exactly.

Displacements are per unit strain: a box of compaction strain e gives e times these numbers
(its strength is e times its volume). Axes are the box's own x and y and depth; the box spans
x0..x1, y0..y1 **relative to the observation point** and top..bottom in depth, so the point of
observation sits at x = y = 0. Displacements are positive along +x, +y and down.

Surface: contraction is (1-nu)/pi int (x, y, z)/R^3 dV and closure 3/(2 pi) int (x, y, z) z^2/R^5
dV (the point sources of `half_space`, summed). At depth, with phi and phi2 the Newtonian
potentials of the box and of its mirror image above the surface,

    u_i = e/(4 pi) [phi,i + (3-4nu) phi2,i + 2z phi2,iz - 2(3-4nu) d_iz phi2,z]

(Sharma 1956, Z. angew. Math. Phys. 7:428; Geertsma 1973). All of it is closed; see `box_formulas`.
Corner sums lose digits where a box is far or thin, as (distance/size)^3. So a box that is small
against its distance is summed over Gauss points, and one that is thin against its distance over
Gauss sheets, both to rounding: the relative accuracy is about 1e-13 at any distance and thickness
(shown in the tests).
"""

from __future__ import annotations

from math import pi, sqrt

from numba import njit

from subside.earth.box_formulas import (
    COMPILED,
    GAUSS_NODES,
    GAUSS_WEIGHTS,
    atan_ratio,
    attraction,
    edge_log,
    order_for,
    sheet_gradient_sums,
    sheet_sums,
    surface_gradient_sums,
    surface_sums,
)
from subside.earth.half_space import contraction_depth

__all__ = [
    "box_depth",
    "box_surface",
    "box_surface_gradient",
    "sheet_surface",
]

_FAR = 0.1  # largest half-size over distance below which Gauss points reach rounding
_THIN = 0.05  # half-thickness over nearest distance below which Gauss sheets reach rounding


@njit(**COMPILED)
def sheet_surface(x0, x1, y0, y1, depth, nu):  # type: ignore[no-untyped-def]
    """Surface displacement [1/m per m] of a thin flat rectangle, per unit e h.

    Parameters
    ----------
    x0, x1, y0, y1 : float [m]
        Its sides, relative to the point of observation.
    depth : float [m]
        Down from the surface; zero is the limit from below.
    nu : float [-]

    Returns
    -------
    ux, uy, uz, ux, uy, uz : float
        Of contraction, then of closure [m per (unit strain times m)].
    """
    a = 0.5 * (x1 - x0)
    b = 0.5 * (y1 - y0)
    x = 0.5 * (x0 + x1)
    y = 0.5 * (y0 + y1)
    f = (1.0 - nu) / pi
    if max(a, b) < _FAR * sqrt(x * x + y * y + depth * depth):
        gx, gy, gz, cx, cy, cz = _surface_points(x, a, y, b, depth, 0.0)
    else:
        gx, gy, gz, cx, cy, cz = sheet_sums(x0, x1, y0, y1, depth)
    return f * gx, f * gy, f * gz, cx / pi, cy / pi, cz / pi


@njit(**COMPILED)
def box_surface(x0, x1, y0, y1, top, bottom, nu):  # type: ignore[no-untyped-def]
    """Surface displacement of a box, per unit strain.

    Parameters
    ----------
    x0, x1, y0, y1 : float [m]
        Its sides, relative to the point of observation.
    top, bottom : float [m]
        Depths, 0 <= top < bottom. The point may lie on a box that reaches the surface.
    nu : float [-]

    Returns
    -------
    ux, uy, uz, ux, uy, uz : float
        Of contraction, then of closure [m per unit strain].
    """
    a, b, t, x, y, z, far, thin = _placed(x0, x1, y0, y1, top, bottom)
    f = (1.0 - nu) / pi
    if far:
        gx, gy, gz, cx, cy, cz = _surface_points(x, a, y, b, z, t)
    elif thin > 0.0:
        gx, gy, gz, cx, cy, cz = 0.0, 0.0, 0.0, 0.0, 0.0, 0.0
        n = order_for(t, thin)
        for k in range(n):
            w = t * GAUSS_WEIGHTS[n, k]
            s = sheet_sums(x0, x1, y0, y1, z + t * GAUSS_NODES[n, k])
            gx += w * s[0]
            gy += w * s[1]
            gz += w * s[2]
            cx += w * s[3]
            cy += w * s[4]
            cz += w * s[5]
    else:
        gx, gy, gz, cx, cy, cz = surface_sums(x0, x1, y0, y1, top, bottom)
    return f * gx, f * gy, f * gz, cx / pi, cy / pi, cz / pi


@njit(**COMPILED)
def box_surface_gradient(x0, x1, y0, y1, top, bottom, nu):  # type: ignore[no-untyped-def]
    """Derivatives of `box_surface` by the position of observation, per unit strain.

    Returns
    -------
    exx, eyy, exy, duz_dx, duz_dy : float, for contraction and then again for closure
        [1 per unit strain]; exy = dux/dy = duy/dx. Infinite on the edges of a box whose top is the
        surface itself, as it must be there.
    """
    a, b, t, x, y, z, far, thin = _placed(x0, x1, y0, y1, top, bottom)
    f = (1.0 - nu) / pi
    g = 1.0 / pi
    if far:
        s = _surface_gradient_points(x, a, y, b, z, t)
    elif thin > 0.0:
        s = (0.0, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0)
        n = order_for(t, thin)
        for k in range(n):
            w = t * GAUSS_WEIGHTS[n, k]
            q = sheet_gradient_sums(x0, x1, y0, y1, z + t * GAUSS_NODES[n, k])
            s = (
                s[0] + w * q[0], s[1] + w * q[1], s[2] + w * q[2], s[3] + w * q[3],
                s[4] + w * q[4], s[5] + w * q[5], s[6] + w * q[6], s[7] + w * q[7],
                s[8] + w * q[8], s[9] + w * q[9],
            )
    else:
        s = surface_gradient_sums(x0, x1, y0, y1, top, bottom)
    return (
        f * s[0], f * s[1], f * s[2], f * s[3], f * s[4],
        g * s[5], g * s[6], g * s[7], g * s[8], g * s[9],
    )


@njit(**COMPILED)
def box_depth(x0, x1, y0, y1, z0, z1, z, nu):  # type: ignore[no-untyped-def]
    """Contraction displacement (ux, uy, uz) [m per unit strain] at depth z of a box at z0..z1.

    Finite and right outside, inside, and on faces, edges and corners, where it is continuous.
    """
    a = 0.5 * (x1 - x0)
    b = 0.5 * (y1 - y0)
    t = 0.5 * (z1 - z0)
    x = 0.5 * (x0 + x1)
    y = 0.5 * (y0 + y1)
    h = 0.5 * (z0 + z1)
    distance = sqrt(x * x + y * y + (h - z) * (h - z))
    if max(a, b, t) < _FAR * distance:
        return _depth_points(x, a, y, b, h, t, z, nu, distance)
    kappa = 3.0 - 4.0 * nu
    f = 0.25 / pi
    dx, dy, dz = attraction(x0, x1, y0, y1, z0 - z, z1 - z)
    w0 = -(z1 + z)
    w1 = -(z0 + z)
    mx, my, mz = attraction(x0, x1, y0, y1, w0, w1)
    ux = dx + kappa * mx
    uy = dy + kappa * my
    uz = dz - kappa * mz
    if z > 0.0:
        for i in range(2):
            w = w1 if i else w0
            for j in range(2):
                sign = 2.0 * z if i == j else -2.0 * z
                u = x1 if j else x0
                s2 = u * u + w * w
                ux += sign * edge_log(y0, sqrt(s2 + y0 * y0), y1, sqrt(s2 + y1 * y1), s2)
                v = y1 if j else y0
                s2 = v * v + w * w
                e0 = sqrt(s2 + x0 * x0)
                e1 = sqrt(s2 + x1 * x1)
                uy += sign * edge_log(x0, e0, x1, e1, s2)
                uz -= sign * (atan_ratio(x1 * v, w * e1) - atan_ratio(x0 * v, w * e0))
    return f * ux, f * uy, f * uz


@njit(**COMPILED)
def _placed(x0, x1, y0, y1, top, bottom):  # type: ignore[no-untyped-def]
    """Half-sizes, centre, whether it is far, and its nearest distance if thin (else 0)."""
    a = 0.5 * (x1 - x0)
    b = 0.5 * (y1 - y0)
    t = 0.5 * (bottom - top)
    x = 0.5 * (x0 + x1)
    y = 0.5 * (y0 + y1)
    z = 0.5 * (top + bottom)
    far = max(a, b, t) < _FAR * sqrt(x * x + y * y + z * z)
    gap_x = max(abs(x) - a, 0.0)
    gap_y = max(abs(y) - b, 0.0)
    gap = sqrt(gap_x * gap_x + gap_y * gap_y + z * z)
    return a, b, t, x, y, z, far, gap if t < _THIN * gap else 0.0


@njit(**COMPILED)
def _surface_points(x, a, y, b, z, t):  # type: ignore[no-untyped-def]
    """`surface_sums` (or, with t = 0, `sheet_sums`) of a far box, by Gauss points."""
    distance = sqrt(x * x + y * y + z * z)
    nx = order_for(a, distance)
    ny = order_for(b, distance)
    nz = order_for(t, distance)
    thickness = t if t > 0.0 else 0.5  # weights of one point add up to 2
    gx = 0.0
    gy = 0.0
    gz = 0.0
    cx = 0.0
    cy = 0.0
    cz = 0.0
    for k in range(nz):
        w = z + t * GAUSS_NODES[nz, k]
        for j in range(ny):
            v = y + b * GAUSS_NODES[ny, j]
            weight_jk = thickness * GAUSS_WEIGHTS[nz, k] * b * GAUSS_WEIGHTS[ny, j]
            for i in range(nx):
                u = x + a * GAUSS_NODES[nx, i]
                i2 = 1.0 / (u * u + v * v + w * w)
                p = weight_jk * a * GAUSS_WEIGHTS[nx, i] * i2 * sqrt(i2)
                q = 1.5 * p * w * w * i2
                gx += p * u
                gy += p * v
                gz += p * w
                cx += q * u
                cy += q * v
                cz += q * w
    return gx, gy, gz, cx, cy, cz


@njit(**COMPILED)
def _surface_gradient_points(x, a, y, b, z, t):  # type: ignore[no-untyped-def]
    """`surface_gradient_sums` of a far box, by Gauss points."""
    distance = sqrt(x * x + y * y + z * z)
    nx = order_for(a, distance)
    ny = order_for(b, distance)
    nz = order_for(t, distance)
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
    for k in range(nz):
        w = z + t * GAUSS_NODES[nz, k]
        for j in range(ny):
            v = y + b * GAUSS_NODES[ny, j]
            weight_jk = t * GAUSS_WEIGHTS[nz, k] * b * GAUSS_WEIGHTS[ny, j]
            for i in range(nx):
                u = x + a * GAUSS_NODES[nx, i]
                i2 = 1.0 / (u * u + v * v + w * w)
                p = weight_jk * a * GAUSS_WEIGHTS[nx, i] * i2 * sqrt(i2)
                p3 = 3.0 * p * i2
                pxx += p3 * u * u - p
                pyy += p3 * v * v - p
                pxy += p3 * u * v
                pzx += p3 * u * w
                pzy += p3 * v * w
                q = 1.5 * p * w * w * i2
                q5 = 5.0 * q * i2
                cxx += q5 * u * u - q
                cyy += q5 * v * v - q
                cxy += q5 * u * v
                czx += q5 * u * w
                czy += q5 * v * w
    return pxx, pyy, pxy, pzx, pzy, cxx, cyy, cxy, czx, czy


@njit(**COMPILED)
def _depth_points(x, a, y, b, h, t, z, nu, distance):  # type: ignore[no-untyped-def]
    """`box_depth` of a far box, by Gauss points."""
    nx = order_for(a, distance)
    ny = order_for(b, distance)
    nz = order_for(t, distance)
    ux = 0.0
    uy = 0.0
    uz = 0.0
    for k in range(nz):
        c = h + t * GAUSS_NODES[nz, k]
        for j in range(ny):
            v = y + b * GAUSS_NODES[ny, j]
            weight_jk = t * GAUSS_WEIGHTS[nz, k] * b * GAUSS_WEIGHTS[ny, j]
            for i in range(nx):
                u = x + a * GAUSS_NODES[nx, i]
                weight = weight_jk * a * GAUSS_WEIGHTS[nx, i]
                r = sqrt(u * u + v * v)
                outward, downward = contraction_depth(r, z, c, nu)
                if r > 0.0:
                    # the source is at (u, v): outward points from it to the origin
                    ux -= weight * outward * u / r
                    uy -= weight * outward * v / r
                uz += weight * downward
    return ux, uy, uz
