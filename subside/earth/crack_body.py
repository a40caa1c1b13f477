"""Boxes and hexahedra that close vertically, in a full space: closing bodies seen from nearby.

A horizontal crack that closes by dV in an unbounded elastic solid moves it by (force dipoles of
Kelvin's solution)::

    u_i = dV { nu/(4 pi (1-nu)) d_i (1/R) + [delta_iz d_z (1/R) - d_i d_z d_z R/(4(1-nu))]/(2 pi) }

For a body of uniform closure the potentials 1/R and R are integrated over it. For an upright box
the third derivatives of the second are, with u, v, w corner minus point and S the signed sum over
the corners, ``-S[w ln(v+R)]``, ``-S[w ln(u+R)]`` and
``-S[u ln(v+R) + v ln(u+R) - 2 w atan(uv/(wR))]``.

For any other body they are minus the sum over its plane faces of n int (1/R - Z^2/R^3) dS, Z the
depth below the target. On a face with normal n at height h from the target, t the part of the
vertical that lies in the face, and for each edge m its outward normal in the face, e its direction,
d its distance and L = int dl/R::

    int Z^2/R^3 dS = h n_z^2 W - 2 h n_z S (t.m) L + t.t J - S (t.m) [(t.m) d L + (t.e) (R1 - R0)]

with W the solid angle, J = int dS/R = S d L - h W, and S the sum over the edges (derived here from
the divergence theorem in the face; agrees with the box).
"""

from __future__ import annotations

import math

import numpy as np
from numba import njit

from subside.earth.box_formulas import edge_log

__all__ = ["crack_box_full_space", "crack_full_space", "crack_hexahedron_full_space"]

# Corners of each face, all turning the same way seen from outside.
_FACES = np.array(
    [[0, 1, 2, 3], [7, 6, 5, 4], [0, 4, 5, 1], [1, 5, 6, 2], [2, 6, 7, 3], [3, 7, 4, 0]]
)


@njit(cache=True)
def crack_full_space(east: float, north: float, below: float, nu: float) -> tuple[
        float, float, float]:
    """Displacement (east, north, down) per m3 closed, at a place relative to the crack.

    Parameters
    ----------
    east, north, below : float
        Target minus source, m; `below` is positive when the target is deeper.
    nu : float
        Poisson's ratio.
    """
    r2 = east * east + north * north + below * below
    r = math.sqrt(r2)
    r3 = r * r2
    # derivatives of 1/R and of R with respect to the target
    common = nu / (4 * math.pi * (1 - nu))
    third_h = -1.0 / r3 + 3 * below * below / (r3 * r2)       # d_x d_z d_z R over x
    third_v = -3.0 / r3 + 3 * below * below / (r3 * r2)       # d_z d_z d_z R over z
    factor = 1.0 / (8 * math.pi * (1 - nu))
    across = -common / r3 - factor * third_h
    down = (-common / r3 - 1.0 / (2 * math.pi * r3) - factor * third_v) * below
    return across * east, across * north, down


@njit(cache=True)
def crack_box_full_space(x0: float, x1: float, y0: float, y1: float, z0: float, z1: float,
                         nu: float) -> tuple[float, float, float]:
    """Displacement (x, y, down) of a box of unit closing strain, in the box's own axes.

    Parameters
    ----------
    x0, x1, y0, y1, z0, z1 : float
        The box relative to the target, m; z down.
    nu : float
        Poisson's ratio.

    Notes
    -----
    Finite everywhere, inside and on faces, edges and corners.
    """
    phi_x = phi_y = phi_z = 0.0
    psi_x = psi_y = psi_z = 0.0
    for a in range(2):
        u = x1 if a else x0
        for b in range(2):
            v = y1 if b else y0
            for c in range(2):
                w = z1 if c else z0
                sign = 1.0 if (a + b + c) % 2 == 1 else -1.0
                r = math.sqrt(u * u + v * v + w * w)
                log_u = _log(u, v, w, r)
                log_v = _log(v, w, u, r)
                log_w = _log(w, u, v, r)
                atan_u = math.atan(v * w / (u * r)) if u * r != 0.0 else 0.0
                atan_v = math.atan(w * u / (v * r)) if v * r != 0.0 else 0.0
                atan_w = math.atan(u * v / (w * r)) if w * r != 0.0 else 0.0
                phi_x -= sign * (v * log_w + w * log_v - u * atan_u)
                phi_y -= sign * (w * log_u + u * log_w - v * atan_v)
                phi_z -= sign * (u * log_v + v * log_u - w * atan_w)
                psi_x -= sign * w * log_v
                psi_y -= sign * w * log_u
                psi_z -= sign * (u * log_v + v * log_u - 2 * w * atan_w)
    common = nu / (4 * math.pi * (1 - nu))
    factor = 1.0 / (8 * math.pi * (1 - nu))
    return (common * phi_x - factor * psi_x, common * phi_y - factor * psi_y,
            (common + 1.0 / (2 * math.pi)) * phi_z - factor * psi_z)


@njit(cache=True)
def _log(a: float, b: float, c: float, r: float) -> float:
    """ln(a + R) up to a term that cancels between the two corners on a line along a.

    asinh(a/hypot(b, c)) is that logarithm minus ln hypot(b, c). On the line itself every factor
    that multiplies it is zero.
    """
    rho = math.sqrt(b * b + c * c)
    if rho < 1e-14 * r or rho == 0.0:
        return 0.0
    return np.arcsinh(a / rho)


@njit(cache=True)
def crack_hexahedron_full_space(corners: np.ndarray, point: np.ndarray, nu: float) -> np.ndarray:
    """Displacement (east, north, down) of a hexahedron of unit closing strain, m.

    Parameters
    ----------
    corners : array (8, 3)
        x, y, depth in m: 4 of the top face going round, then the 4 below them. A twisted face is
        four triangles about its centre, as in `polyhedron`.
    point : array (3,)
        Target: x, y, depth in m.
    nu : float
        Poisson's ratio.

    Notes
    -----
    Finite everywhere, inside and on faces, edges and corners.
    """
    phi = np.zeros(3)
    psi = np.zeros(3)
    triangle = np.empty((3, 3))
    volume = 0.0
    for face in range(6):
        for n in range(4):
            for axis in range(3):
                mean = 0.0
                for k in range(4):
                    mean += 0.25 * corners[_FACES[face, k], axis]
                triangle[0, axis] = mean - point[axis]
                triangle[1, axis] = corners[_FACES[face, n], axis] - point[axis]
                triangle[2, axis] = corners[_FACES[face, (n + 1) % 4], axis] - point[axis]
            volume += _add_triangle(triangle, phi, psi)
    if volume < 0.0:  # the faces were counted turning inward
        phi, psi = -phi, -psi
    common = nu / (4 * math.pi * (1 - nu))
    moved = common * phi - psi / (8 * math.pi * (1 - nu))
    moved[2] += phi[2] / (2 * math.pi)
    return moved


@njit(cache=True)
def _add_triangle(p: np.ndarray, phi: np.ndarray, psi: np.ndarray) -> float:
    """Add -n int dS/R and -n int (1/R - Z^2/R^3) dS of a triangle seen from the origin.

    Returns a number whose sum over the faces has the sign of the volume.
    """
    u, v = p[1] - p[0], p[2] - p[0]
    normal = np.array([u[1] * v[2] - u[2] * v[1], u[2] * v[0] - u[0] * v[2],
                       u[0] * v[1] - u[1] * v[0]])
    area2 = math.sqrt((normal**2).sum())
    if area2 == 0.0:
        return 0.0
    normal /= area2
    height = (normal * p[0]).sum()
    along = -normal[2] * normal
    along[2] += 1.0
    size = np.sqrt((p**2).sum(axis=1))
    angle = 0.0
    if height != 0.0:
        # van Oosterom and Strackee 1983
        below = (size[0] * size[1] * size[2] + (p[0] * p[1]).sum() * size[2]
                 + (p[1] * p[2]).sum() * size[0] + (p[2] * p[0]).sum() * size[1])
        angle = 2.0 * math.atan2(area2 * height, below)
    first = -height * angle
    edges = across = 0.0
    for n in range(3):
        a, b = p[n], p[(n + 1) % 3]
        edge = b - a
        length = math.sqrt((edge**2).sum())
        if length == 0.0:
            continue
        edge = edge / length
        outward = np.array([edge[1] * normal[2] - edge[2] * normal[1],
                            edge[2] * normal[0] - edge[0] * normal[2],
                            edge[0] * normal[1] - edge[1] * normal[0]])
        tilt = (along * outward).sum()
        distance = (a * outward).sum()
        edges += tilt * (along * edge).sum() * (size[(n + 1) % 3] - size[n])
        near = (a * edge).sum()
        side2 = distance * distance + height * height
        if side2 < 1e-290:  # on the edge's line all that L stands beside is zero
            continue
        logarithm = edge_log(near, math.sqrt(near * near + side2), near + length,
                             math.sqrt((near + length) ** 2 + side2), side2)
        first += distance * logarithm
        edges += tilt * tilt * distance * logarithm
        across += tilt * logarithm
    second = (height * normal[2] ** 2 * angle - 2.0 * height * normal[2] * across
              + (along**2).sum() * first - edges)
    phi -= normal * first
    psi -= normal * (first - second)
    return area2 * height
