"""A hexahedral cell of uniform strain, as it lies in a corner-point grid.

Each face, bilinear between its four corners, is fanned into four triangles about its centre: exact
where the face is plane, and with the same volume as the trilinear cell where it is twisted. The
Newtonian attraction of the 24-faced body is the sum over its faces of -n int dS/R, and for a
triangle int dS/R is a sum of edge logarithms less the height times the solid angle (Wilton et al.
1984, IEEE Trans. Antennas Propag. 32:276; solid angle: van Oosterom & Strackee 1983, IEEE Trans.
Biomed. Eng. 30:125). It is continuous everywhere, and finite on faces, edges and corners.

Corners are (x, y, depth) [m]: the four of the top going round, then the four below them in the
same order. Going round either way, or top and bottom exchanged, gives the same answer. Far away
the sum over faces loses digits as (distance/size)^2: 5e-10 at 1000 sizes.
"""

from __future__ import annotations

from math import atan2, sqrt

import numpy as np
from numba import njit

from subside.earth.box_formulas import COMPILED, edge_log

__all__ = ["hexahedron_attraction"]

# Corners of each face, all turning the same way seen from outside.
_FACES = np.array(
    [[0, 1, 2, 3], [7, 6, 5, 4], [0, 4, 5, 1], [1, 5, 6, 2], [2, 6, 7, 3], [3, 7, 4, 0]]
)


@njit(**COMPILED)
def hexahedron_attraction(corners, point):  # type: ignore[no-untyped-def]
    """Gradient of int dV'/|x-x'| over a hexahedron, at any point.

    Parameters
    ----------
    corners : ndarray (8, 3) [m]
    point : ndarray (3,) [m]

    Returns
    -------
    ndarray (3,) [m]
        Points toward the body from outside; zero for a body without volume.
    """
    total = np.zeros(3)
    ring = np.empty((4, 3))
    centre = np.empty(3)
    spokes = np.empty((4, 3))
    rim = np.empty((4, 3))
    volume = 0.0
    for face in range(6):
        for axis in range(3):
            centre[axis] = 0.0
            for n in range(4):
                ring[n, axis] = corners[_FACES[face, n], axis] - point[axis]
                centre[axis] += 0.25 * ring[n, axis]
        for n in range(4):
            spokes[n, 0], spokes[n, 1], spokes[n, 2] = _edge(centre, ring[n])
            rim[n, 0], rim[n, 1], rim[n, 2] = _edge(ring[n], ring[(n + 1) % 4])
        for n in range(4):
            m = (n + 1) % 4
            volume += _add_triangle(
                centre,
                ring[n],
                ring[m],
                spokes[n, 0] + rim[n, 0] - spokes[m, 0],
                spokes[n, 1] + rim[n, 1] - spokes[m, 1],
                spokes[n, 2] + rim[n, 2] - spokes[m, 2],
                total,
            )
    if volume < 0.0:  # the faces were counted turning inward
        for axis in range(3):
            total[axis] = -total[axis]
    return total


@njit(**COMPILED)
def _edge(a, b):  # type: ignore[no-untyped-def]
    """(a x e) int dl/R along the edge from a to b with direction e, seen from the origin.

    The other way round it changes sign. Its component along a face's normal is the distance to
    the edge's line, in the face and outward, times int dl/R.
    """
    ex, ey, ez = b[0] - a[0], b[1] - a[1], b[2] - a[2]
    length = sqrt(ex * ex + ey * ey + ez * ez)
    if length == 0.0:
        return 0.0, 0.0, 0.0
    ex /= length
    ey /= length
    ez /= length
    cx = a[1] * ez - a[2] * ey
    cy = a[2] * ex - a[0] * ez
    cz = a[0] * ey - a[1] * ex
    side2 = cx * cx + cy * cy + cz * cz
    if side2 < 1e-290:  # on the line of the edge the distance is zero
        return 0.0, 0.0, 0.0
    near = a[0] * ex + a[1] * ey + a[2] * ez
    far = near + length
    # Distances to the ends made from the same numbers: a corner at the origin then stays finite.
    near_end = sqrt(near * near + side2)
    far_end = sqrt(far * far + side2)
    integral = edge_log(near, near_end, far, far_end, side2)
    return cx * integral, cy * integral, cz * integral


@njit(**COMPILED)
def _add_triangle(p, q, s, mx, my, mz, total):  # type: ignore[no-untyped-def]
    """Add -n int dS/R of triangle p q s, seen from the origin, to `total`.

    `mx, my, mz` is the sum of the `_edge` moments round it. Returns three times the signed volume
    of the tetrahedron with the origin.
    """
    ux, uy, uz = q[0] - p[0], q[1] - p[1], q[2] - p[2]
    vx, vy, vz = s[0] - p[0], s[1] - p[1], s[2] - p[2]
    nx = uy * vz - uz * vy
    ny = uz * vx - ux * vz
    nz = ux * vy - uy * vx
    area2 = sqrt(nx * nx + ny * ny + nz * nz)
    if area2 == 0.0:
        return 0.0
    nx /= area2
    ny /= area2
    nz /= area2
    height = nx * p[0] + ny * p[1] + nz * p[2]
    integral = nx * mx + ny * my + nz * mz
    if height != 0.0:
        rp = sqrt(p[0] * p[0] + p[1] * p[1] + p[2] * p[2])
        rq = sqrt(q[0] * q[0] + q[1] * q[1] + q[2] * q[2])
        rs = sqrt(s[0] * s[0] + s[1] * s[1] + s[2] * s[2])
        below = (
            rp * rq * rs
            + (p[0] * q[0] + p[1] * q[1] + p[2] * q[2]) * rs
            + (q[0] * s[0] + q[1] * s[1] + q[2] * s[2]) * rp
            + (s[0] * p[0] + s[1] * p[1] + s[2] * p[2]) * rq
        )
        integral -= height * 2.0 * atan2(area2 * height, below)
    total[0] -= nx * integral
    total[1] -= ny * integral
    total[2] -= nz * integral
    return 0.5 * area2 * height
