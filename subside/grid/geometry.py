"""Cells as trilinear hexahedra and as boxes: volume, centroid, Jacobians at the corners.

A hexahedron is the image of the unit cube under ``X(s, t, u) = sum_c N_c(s, t, u) X_c``, with
``N_c`` the product of ``s`` or ``1 - s`` (and so on) that is one at corner c. Corners 0 to 3 go
round the top face, 4 to 7 lie below them. ``det(dX/d(s, t, u))`` has degree 2 in each of s, t, u
and the first moment ``X det`` degree 3, so two Gauss points along each axis, exact to degree 3,
give volume and centroid without quadrature error.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from subside.grid.body_pass import measure
from subside.grid.threads import spread

__all__ = ["ABSURD", "CORNER_PLACES", "Hexahedra", "corners_of_boxes", "hexahedra", "mirrored"]

CORNER_PLACES = np.array([
    [0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0],
    [0, 0, 1], [1, 0, 1], [1, 1, 1], [0, 1, 1],
], dtype=float)
"""(s, t, u) of the eight corners."""

ABSURD = 1e8  # m: no map reaches so far
# A bed thinner than 1e-7 of its width holds nothing; the second part is the noise of coordinates.
_THIN, _NOISE = 1e-7, 1e-10


@dataclass(frozen=True)
class Hexahedra:
    """Measures of hexahedra, signed: positive where the corners go round counter-clockwise seen
    from above and the bottom lies below the top.

    Attributes
    ----------
    volume : array (n,)
        m3.
    centroid : array (n, 3)
        Centre of volume, m; the mean of the corners where the volume is zero.
    least_jacobian : array (n,)
        Smallest of the eight corner Jacobians times the sign of the volume, m3.
    zero : array (n,) of bool
        No volume but for rounding (a bed thinner than 1e-7 of its width).
    scale : array (n,)
        Largest extent of a cell, cubed, m3: what a Jacobian is compared with.
    drop : array (n,)
        Depths of the bottom corners minus depths of the top corners, summed, m.
    missing : array (n,) of bool
        A corner has no coordinate, or one beyond 1e8 m; the other measures then mean nothing.
    """

    volume: np.ndarray
    centroid: np.ndarray
    least_jacobian: np.ndarray
    zero: np.ndarray
    scale: np.ndarray
    drop: np.ndarray
    missing: np.ndarray


def hexahedra(corners: np.ndarray) -> Hexahedra:
    """Volume, centroid and least corner Jacobian of trilinear hexahedra.

    Parameters
    ----------
    corners : array (n, 8, 3)
        x, y, depth (positive down) in m.

    Returns
    -------
    Hexahedra
        Exact but for rounding.
    """
    n = len(corners)
    corners = np.ascontiguousarray(corners, dtype=float)
    found = Hexahedra(np.empty(n), np.empty((n, 3)), np.empty(n), np.empty(n, bool), np.empty(n),
                      np.empty(n), np.empty(n, bool))

    def part(start: int, stop: int) -> None:
        measure(corners, _THIN, _NOISE, ABSURD, start, stop, found.volume, found.centroid,
                found.least_jacobian, found.zero, found.scale, found.drop, found.missing)

    spread(part, n, least=20_000)
    return found


def mirrored(corners: np.ndarray) -> np.ndarray:
    """The same hexahedra (n, 8, 3) with each face gone round the other way, in place."""
    for first, second in ((1, 3), (5, 7)):
        kept = corners[:, first].copy()
        corners[:, first] = corners[:, second]
        corners[:, second] = kept
    return corners


def corners_of_boxes(
    x: np.ndarray, y: np.ndarray, top: np.ndarray, bottom: np.ndarray,
    dx: np.ndarray, dy: np.ndarray, azimuth: np.ndarray,
) -> np.ndarray:
    """Corners (n, 8, 3) of boxes: x, y, depth in m.

    Parameters
    ----------
    x, y : array (n,)
        Centre, m.
    top, bottom : array (n,)
        Depth, positive down, m.
    dx, dy : array (n,)
        Lengths along the box's own x and y, m.
    azimuth : array (n,)
        Degrees clockwise from grid north to the box's own y.
    """
    x, y, top, bottom, dx, dy, azimuth = np.broadcast_arrays(x, y, top, bottom, dx, dy, azimuth)
    angle = np.radians(azimuth)
    cosine, sine = np.cos(angle), np.sin(angle)
    corners = np.empty((x.size, 8, 3))
    for n, (s, t, u) in enumerate(CORNER_PLACES):
        along, up = (s - 0.5) * dx, (t - 0.5) * dy
        corners[:, n, 0] = x + along * cosine + up * sine
        corners[:, n, 1] = y - along * sine + up * cosine
        corners[:, n, 2] = bottom if u else top
    return corners
