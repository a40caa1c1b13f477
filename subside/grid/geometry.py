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

__all__ = ["CORNER_PLACES", "Hexahedra", "corners_of_boxes", "hexahedra", "mirrored"]

CORNER_PLACES = np.array([
    [0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0],
    [0, 0, 1], [1, 0, 1], [1, 1, 1], [0, 1, 1],
], dtype=float)
"""(s, t, u) of the eight corners."""

_BLOCK = 16384  # cells at a time: some 20 MB of temporaries
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
    """

    volume: np.ndarray
    centroid: np.ndarray
    least_jacobian: np.ndarray
    zero: np.ndarray
    scale: np.ndarray


def _shape_functions(places: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Values (p, 8) and derivatives (p, 3, 8) of the N_c at places (p, 3)."""
    at = places[:, None, :]
    factor = np.where(CORNER_PLACES > 0, at, 1.0 - at)  # (p, 8, 3)
    slope = 2.0 * CORNER_PLACES - 1.0
    derivative = np.empty((len(places), 3, 8))
    for axis in range(3):
        others = [n for n in range(3) if n != axis]
        derivative[:, axis] = slope[:, axis] * factor[..., others].prod(-1)
    return factor.prod(-1), derivative


_GAUSS = 0.5 + (CORNER_PLACES - 0.5) / np.sqrt(3.0)
_GAUSS_VALUE, _GAUSS_SLOPE = _shape_functions(_GAUSS)
_CORNER_SLOPE = _shape_functions(CORNER_PLACES)[1]


def _determinants(corners: np.ndarray, slope: np.ndarray) -> np.ndarray:
    """det(dX/d(s, t, u)) of hexahedra (n, 8, 3) at the places of `slope`: (n, p)."""
    edge = np.matmul(slope.reshape(-1, 8), corners).reshape(len(corners), -1, 3, 3)
    a, b, c = edge[..., 0, :], edge[..., 1, :], edge[..., 2, :]
    return (
        a[..., 0] * (b[..., 1] * c[..., 2] - b[..., 2] * c[..., 1])
        - a[..., 1] * (b[..., 0] * c[..., 2] - b[..., 2] * c[..., 0])
        + a[..., 2] * (b[..., 0] * c[..., 1] - b[..., 1] * c[..., 0])
    )


def hexahedra(corners: np.ndarray) -> Hexahedra:
    """Volume, centroid and least corner Jacobian of trilinear hexahedra.

    Parameters
    ----------
    corners : array (n, 8, 3)
        x, y, depth (positive down) in m.

    Returns
    -------
    Hexahedra
        Exact but for rounding; computed in blocks, so temporaries stay small.
    """
    n = len(corners)
    result = Hexahedra(np.empty(n), np.empty((n, 3)), np.empty(n), np.empty(n, bool), np.empty(n))
    for start in range(0, n, _BLOCK):
        part = slice(start, start + _BLOCK)
        _measure(corners[part], result, part)
    return result


def _measure(corners: np.ndarray, result: Hexahedra, part: slice) -> None:
    # Relative to the middle of the cell: northings of 6e6 m would cost seven digits.
    middle = corners.mean(axis=1)
    local = corners - middle[:, None, :]
    weight = _determinants(local, _GAUSS_SLOPE) / 8.0
    volume = weight.sum(axis=1)
    moment = np.matmul(weight[:, None, :], np.matmul(_GAUSS_VALUE, local))[:, 0, :]

    across, down = local[:, 2] - local[:, 0], local[:, 3] - local[:, 1]
    lower_across, lower_down = local[:, 6] - local[:, 4], local[:, 7] - local[:, 5]
    area = 0.25 * np.abs(across[:, 0] * down[:, 1] - across[:, 1] * down[:, 0]
                         + lower_across[:, 0] * lower_down[:, 1]
                         - lower_across[:, 1] * lower_down[:, 0])
    scale = np.ptp(local, axis=1).max(axis=1) ** 3

    zero = np.abs(volume) <= _THIN * area**1.5 + _NOISE * scale
    safe = np.where(zero, 1.0, volume)
    result.volume[part] = volume
    result.centroid[part] = middle + np.where(zero[:, None], 0.0, moment / safe[:, None])
    jacobian = _determinants(local, _CORNER_SLOPE) * np.where(volume < 0, -1.0, 1.0)[:, None]
    result.least_jacobian[part] = jacobian.min(axis=1)
    result.zero[part] = zero
    result.scale[part] = scale


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
