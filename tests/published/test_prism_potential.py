"""Derivatives of the Newtonian potential of a prism and a hexahedron against `choclo`, which
follows Nagy, Papp & Benedek (2000, 2002), J. Geodesy 74:552 and 76:475."""

from __future__ import annotations

import numpy as np
import pytest
from choclo import prism
from choclo.constants import GRAVITATIONAL_CONST as CONSTANT

from subside.earth import box_formulas, polyhedron

SPAN = (-1.0, 2.0, -0.5, 1.5, 1.0, 1.8)  # x, y, depth
POINTS = [
    (0.3, 0.2, 0.0), (0.3, 0.2, 1.4), (5.0, -3.0, 2.0), (2.0, 0.4, 1.2), (-4.0, 1.5, 1.0),
    (0.5, 0.5, 1.0),
]


def choclo_gravity(point):
    """(x, y, down) attraction for density 1 and no gravitational constant."""
    x, y, z = point
    where = (x, y, -z, *SPAN[:4], -SPAN[5], -SPAN[4], 1.0)
    east, north, up = (getattr(prism, f"gravity_{a}")(*where) for a in "enu")
    return np.array([east, north, -up]) / CONSTANT


@pytest.mark.parametrize("point", POINTS)
def test_attraction(point):
    x, y, z = point
    got = box_formulas.attraction(
        SPAN[0] - x, SPAN[1] - x, SPAN[2] - y, SPAN[3] - y, SPAN[4] - z, SPAN[5] - z
    )
    np.testing.assert_allclose(got, choclo_gravity(point), atol=1e-13)


@pytest.mark.parametrize("point", POINTS)
def test_hexahedron(point):
    ring = [(SPAN[0], SPAN[2]), (SPAN[1], SPAN[2]), (SPAN[1], SPAN[3]), (SPAN[0], SPAN[3])]
    corners = np.array([(*p, SPAN[4]) for p in ring] + [(*p, SPAN[5]) for p in ring])
    got = polyhedron.hexahedron_attraction(corners, np.array(point))
    np.testing.assert_allclose(got, choclo_gravity(point), atol=1e-13)


@pytest.mark.parametrize("point", [p for p in POINTS if p[2] == 0.0] + [(4.0, -3.0, 0.0)])
def test_second_derivatives(point):
    """The strains of the contraction box at the surface are (1-nu)/pi times phi_,ij."""
    x, y, _ = point
    got = box_formulas.surface_gradient_sums(
        SPAN[0] - x, SPAN[1] - x, SPAN[2] - y, SPAN[3] - y, SPAN[4], SPAN[5]
    )[:5]
    where = (x, y, 0.0, *SPAN[:4], -SPAN[5], -SPAN[4], 1.0)
    ee, nn, en, eu, nu = (
        getattr(prism, f"gravity_{a}")(*where) / CONSTANT for a in ("ee", "nn", "en", "eu", "nu")
    )
    np.testing.assert_allclose(got, [ee, nn, en, -eu, -nu], atol=1e-13)
