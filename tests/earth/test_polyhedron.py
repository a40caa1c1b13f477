"""The hexahedral cell: equal to the box where it is one, indifferent to the order of corners."""

from __future__ import annotations

import numpy as np
import pytest

from subside.earth import polyhedron
from subside.earth.box_formulas import attraction

NU = 0.3


def box_corners(x0, x1, y0, y1, z0, z1):
    ring = [(x0, y0), (x1, y0), (x1, y1), (x0, y1)]
    return np.array([(*p, z0) for p in ring] + [(*p, z1) for p in ring], dtype=float)


SPAN = (-1.0, 1.0, -0.5, 0.7, 1.0, 2.0)
CELL = box_corners(*SPAN)
PLACES = [
    (0.1, 0.2, 1.4), (3.0, -1.0, 0.5), (0.0, 0.0, 1.0), (1.0, 0.0, 1.5), (1.0, 0.7, 1.5),
    (-1.0, -0.5, 1.0), (1.0, 0.7, 2.0), (1.0, 0.0, 2.0), (0.0, 0.1, 1.5), (1.0, 0.7, 3.0),
    (5.0, 0.7, 1.0), (1.0 + 1e-13, 0.7, 1.2), (0.0, 0.1, 1.0),
]
# A cell with pillars that lean, and corners that make no face plane.
TWISTED = CELL + np.random.default_rng(3).uniform(-0.15, 0.15, (8, 3))

TURNED = {
    "other hand": [0, 3, 2, 1, 4, 7, 6, 5],
    "upside down": [4, 5, 6, 7, 0, 1, 2, 3],
    "started elsewhere": [2, 3, 0, 1, 6, 7, 4, 5],
}


def from_point(span, p):
    return (span[0] - p[0], span[1] - p[0], span[2] - p[1], span[3] - p[1], span[4] - p[2],
            span[5] - p[2])


@pytest.mark.parametrize("place", PLACES)
def test_a_box_attracts_as_a_box(place):
    """Outside, inside, on faces, edges, corners, and on the lines of edges."""
    p = np.array(place)
    got = polyhedron.hexahedron_attraction(CELL, p)
    np.testing.assert_allclose(got, attraction(*from_point(SPAN, p)), atol=2e-14)


@pytest.mark.parametrize("order", TURNED.values(), ids=TURNED.keys())
@pytest.mark.parametrize("cell", [CELL, TWISTED], ids=["box", "twisted"])
def test_the_order_of_corners_does_not_matter(order, cell):
    for place in PLACES:
        p = np.array(place)
        np.testing.assert_allclose(
            polyhedron.hexahedron_attraction(cell[order], p),
            polyhedron.hexahedron_attraction(cell, p),
            atol=1e-13,
        )


def test_turned_in_space():
    """A rotated cell attracts a rotated point the same way: faces that follow no axis."""
    a, b = 0.7, 0.4
    rotation = np.array([[np.cos(a), -np.sin(a), 0], [np.sin(a), np.cos(a), 0], [0, 0, 1]]) @ (
        np.array([[1, 0, 0], [0, np.cos(b), -np.sin(b)], [0, np.sin(b), np.cos(b)]])
    )
    for place in PLACES:
        p = np.array(place)
        got = polyhedron.hexahedron_attraction(CELL @ rotation.T, rotation @ p)
        expected = rotation @ np.array(attraction(*from_point(SPAN, p)))
        # rounding moves the point off an edge by 1e-16, which the field feels as 1e-16 ln
        np.testing.assert_allclose(got, expected, atol=1e-13)


def trilinear_points(corners, order):
    x, w = np.polynomial.legendre.leggauss(order)
    u, v, s = np.meshgrid(x, x, x, indexing="ij")
    sign = np.array([[-1, -1, -1], [1, -1, -1], [1, 1, -1], [-1, 1, -1],
                     [-1, -1, 1], [1, -1, 1], [1, 1, 1], [-1, 1, 1]])
    f = [[0.5 * (1 + g[n] * q) for n in range(8)] for g, q in zip(sign.T, (u, v, s), strict=True)]
    shape = [f[0][n] * f[1][n] * f[2][n] for n in range(8)]
    slope = [
        [0.5 * sign[n, a] * f[(a + 1) % 3][n] * f[(a + 2) % 3][n] for n in range(8)]
        for a in range(3)
    ]
    place = np.einsum("nijk,nc->ijkc", shape, corners)
    jacobian = np.linalg.det(np.stack([np.einsum("nijk,nc->ijkc", s, corners) for s in slope], -2))
    return place, jacobian * np.einsum("i,j,k->ijk", w, w, w)


def test_twisted_cell_is_close_to_the_trilinear_one():
    """The same volume, so far away the same pull; near, the fan of flat faces differs a little."""
    place, weight = trilinear_points(TWISTED, 12)
    for p, limit in (((40.0, 10.0, 5.0), 2e-4), ((4.0, 1.0, 0.5), 2e-3)):
        d = place - np.array(p)
        pull = (weight[..., None] * d / np.linalg.norm(d, axis=-1)[..., None] ** 3).sum((0, 1, 2))
        pull *= np.sign(weight.sum())
        got = polyhedron.hexahedron_attraction(TWISTED, np.array(p))
        assert np.abs(got - pull).max() < limit * np.abs(pull).max()
    # flux through a far sphere = -4 pi volume: the leading term of the far pull
    far = np.array([3000.0, 0.0, 1.5])
    pull = -polyhedron.hexahedron_attraction(TWISTED, far)[0]
    volume = pull * (3000.0 - place[..., 0].mean()) ** 2
    assert volume == pytest.approx(abs(weight.sum()), rel=1e-3)


def test_plane_but_slanted_faces_are_exact():
    """A wedge-like cell with plane faces against many Gauss points of the trilinear map."""
    cell = CELL.copy()
    cell[[1, 2, 5, 6], 2] += 0.4  # dips along x
    cell[4:, 0] += 0.3  # pillars lean
    place, weight = trilinear_points(cell, 40)
    for p in ((2.5, 1.0, 0.2), (-2.0, 0.0, 3.0)):
        d = place - np.array(p)
        pull = (weight[..., None] * d / np.linalg.norm(d, axis=-1)[..., None] ** 3).sum((0, 1, 2))
        got = polyhedron.hexahedron_attraction(cell, np.array(p))
        np.testing.assert_allclose(got, pull * np.sign(weight.sum()), rtol=1e-11)


def test_pinched_cell():
    """A cell that wedges out to an edge keeps its volume; one without volume pulls nothing."""
    wedge = CELL.copy()
    wedge[[5, 6], 2] = wedge[[1, 2], 2]
    p = np.array([0.2, 3.0, 0.1])
    both = polyhedron.hexahedron_attraction(wedge, p)
    other = CELL.copy()
    other[[0, 3]] = CELL[[4, 7]]
    both = both + polyhedron.hexahedron_attraction(other, p)
    np.testing.assert_allclose(both, polyhedron.hexahedron_attraction(CELL, p), atol=1e-14)
    flat = CELL.copy()
    flat[4:] = flat[:4]
    assert np.abs(polyhedron.hexahedron_attraction(flat, p)).max() < 1e-15


def test_far_accuracy():
    """The sum over faces loses (distance/size)^2 roundings: 5e-10 at 1000 half-sizes."""
    for distance, limit in ((10, 5e-13), (100, 2e-11), (1000, 3e-9)):
        p = np.array([distance, 0.3 * distance, 0.2 * distance])
        got = polyhedron.hexahedron_attraction(CELL, p)
        place, weight = trilinear_points(CELL, 6)
        d = place - p
        pull = (weight[..., None] * d / np.linalg.norm(d, axis=-1)[..., None] ** 3).sum((0, 1, 2))
        np.testing.assert_allclose(got, pull * np.sign(weight.sum()), rtol=limit)
