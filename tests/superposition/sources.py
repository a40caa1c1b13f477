"""Bodies, unit sources and solutions for the tests of superposition."""

from __future__ import annotations

from typing import Any

import numpy as np

from subside.earth_models import HalfSpace
from subside.grid.geometry import corners_of_boxes
from subside.superposition.direct import Direct
from subside.superposition.hexahedron import octant_of, volume_of
from subside.superposition.interface import DISPLACEMENT, GRADIENT, Bodies, Targets

EARTH = HalfSpace(poisson_ratio=0.25)


def boxes(*rows: Any) -> Bodies:
    """x, y, top, bottom, dx, dy, azimuth."""
    table = np.asarray(rows, dtype=float)
    return Bodies(len(table), lambda index: corners_of_boxes(*table[index].T),
                  lambda index: table[index])


def hexahedra(corners: np.ndarray) -> Bodies:
    corners = np.asarray(corners, dtype=float).reshape(-1, 8, 3)
    return Bodies(len(corners), lambda index: corners[index])


def as_hexahedra(bodies: Bodies) -> Bodies:
    return hexahedra(bodies.corners(np.arange(bodies.count)))


def parts_of(corners: np.ndarray, times: int) -> np.ndarray:
    """Every hexahedron cut in eight at its trilinear midplanes, `times` times."""
    for _ in range(times):
        corners = np.array([octant_of(c, n) for c in corners for n in range(8)])
    return corners


def by_volume(corners: np.ndarray) -> np.ndarray:
    """One unit of moment spread evenly over hexahedra, (1, cell)."""
    volume = np.array([volume_of(c) for c in corners])
    return (volume / volume.sum())[None, :]


def targets(x: Any, y: Any = 0.0, depth: Any = 0.0) -> Targets:
    return Targets(*(np.array(a, dtype=float) for a in np.broadcast_arrays(
        np.atleast_1d(np.asarray(x, float)), y, depth)))


def solve(bodies: Bodies, source: str, where: Targets, *, moment: Any = None, earth: Any = EARTH,
          tolerance: float = 1e-6, gradient: bool = False) -> np.ndarray:
    """(component, target) of one unit of moment, or of the moment (1, cell) given."""
    if moment is None:
        moment = np.full((1, bodies.count), 1.0 / bodies.count)
    fields = Direct().solve(bodies, {source: moment}, where, earth, tolerance=tolerance,
                            gradient=gradient)
    return np.array([fields[n][0] for n in DISPLACEMENT + (GRADIENT if gradient else ())])
