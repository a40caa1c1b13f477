"""Closing bodies in a full space: boxes and hexahedra against points, dislocations, each other."""

from __future__ import annotations

import cutde.fullspace as cutde
import numpy as np
import pytest
from sources import boxes

from subside.earth.crack_body import (
    crack_box_full_space,
    crack_full_space,
    crack_hexahedron_full_space,
)
from subside.earth.half_space import closure_depth
from subside.superposition.hexahedron import sample_cell, volume_of

POISSON = [0.0, 0.25, 0.49]
BOX = (-0.7, 0.5, -0.4, 0.9, -0.3, 0.2)
"""x0, x1, y0, y1, z0, z1 of a box round the origin."""


def seen_from(place, nu: float, box=BOX) -> np.ndarray:
    x, y, z = place
    return np.array(crack_box_full_space(box[0] - x, box[1] - x, box[2] - y, box[3] - y,
                                         box[4] - z, box[5] - z, nu))


def corners_of(box=BOX) -> np.ndarray:
    x0, x1, y0, y1, z0, z1 = box
    ring = [(x0, y0), (x1, y0), (x1, y1), (x0, y1)]
    return np.array([(*xy, z) for z in (z0, z1) for xy in ring])


def by_points(place, nu: float, order: int = 24, box=BOX) -> np.ndarray:
    t, w = np.polynomial.legendre.leggauss(order)
    axes = [(0.5 * (a + b) + 0.5 * (b - a) * t, 0.5 * (b - a) * w)
            for a, b in zip(box[::2], box[1::2], strict=True)]
    total = np.zeros(3)
    for x, wx in zip(*axes[0], strict=True):
        for y, wy in zip(*axes[1], strict=True):
            for z, wz in zip(*axes[2], strict=True):
                total += wx * wy * wz * np.array(
                    crack_full_space(place[0] - x, place[1] - y, place[2] - z, nu))
    return total


@pytest.mark.parametrize("nu", POISSON)
@pytest.mark.parametrize(("r", "h"), [(3.0, 4.0), (0.0, 2.0), (2.0, 0.0), (1.0, -5.0)])
def test_point_is_the_half_space_far_below_the_surface(nu: float, r: float, h: float) -> None:
    """The image of a crack 1e6 away is 1e-12 of its field; `closure_depth` is checked by Okada."""
    depth = 1e6
    outward, down = closure_depth(r, depth + h, depth, nu)
    east, north, own_down = crack_full_space(0.6 * r, 0.8 * r, h, nu)
    assert (0.6 * east + 0.8 * north, own_down) == pytest.approx((outward, down), abs=3e-12)
    assert 0.8 * east - 0.6 * north == pytest.approx(0.0, abs=1e-15)


@pytest.mark.parametrize("nu", POISSON)
@pytest.mark.parametrize("place", [(2.0, 1.5, 1.0), (0.0, 0.0, -2.0), (-3.0, 0.1, 0.0)])
def test_box_is_the_sum_of_its_points(nu: float, place) -> None:
    """24 Gauss points a direction, at more than its own size away: rounding."""
    assert seen_from(place, nu) == pytest.approx(by_points(place, nu), rel=1e-11, abs=1e-14)


@pytest.mark.parametrize("nu", POISSON)
def test_hexahedron_of_a_box_is_the_box_everywhere(nu: float) -> None:
    """Outside, inside, on faces, edges and corners: two formulas, one body."""
    corners = corners_of()
    places = [*np.random.default_rng(1).uniform(-1.5, 1.5, (20, 3)), *corners,
              *(0.5 * (corners[a] + corners[b]) for a, b in [(0, 1), (1, 5), (4, 7)]),
              corners[:4].mean(axis=0), corners[[0, 1, 4, 5]].mean(axis=0),
              0.3 * corners[0] + 0.7 * corners[1]]
    for place in places:
        box = seen_from(place, nu)
        assert np.isfinite(box).all()
        assert crack_hexahedron_full_space(corners, np.array(place), nu) == pytest.approx(
            box, rel=1e-11, abs=1e-13)


def test_hexahedron_is_the_sum_of_its_points() -> None:
    """A leaning frustum (plane faces, none parallel to an axis) by 24^3 Gauss points."""
    corners = corners_of()
    corners[:4, :2] *= 0.6
    corners = corners @ np.array([[1.0, 0.2, 0.1], [-0.3, 0.9, 0.25], [0.4, -0.2, 1.1]])
    place = np.array([1.3, 1.1, -0.9])
    points = sample_cell(corners, np.array([8, 8, 8, 3, 3, 3]))
    total = volume_of(corners) * sum(
        w * np.array(crack_full_space(*(place - [x, y, z]), 0.25)) for x, y, z, w in points)
    assert crack_hexahedron_full_space(corners, place, 0.25) == pytest.approx(total, rel=1e-9)
    mirrored = corners[[3, 2, 1, 0, 7, 6, 5, 4]]
    assert crack_hexahedron_full_space(mirrored, place, 0.25) == pytest.approx(
        crack_hexahedron_full_space(corners, place, 0.25), rel=1e-12)


@pytest.mark.parametrize("nu", POISSON)
def test_roof_minus_floor_of_a_thin_box_is_its_closure(nu: float) -> None:
    """The jump across a crack is what it closes by (definition)."""
    thin = (-1.0, 1.0, -1.0, 1.0, -1e-4, 1e-4)
    roof = seen_from((0.1, 0.2, -1e-4), nu, thin)
    floor = seen_from((0.1, 0.2, 1e-4), nu, thin)
    assert roof[2] - floor[2] == pytest.approx(2e-4, rel=1e-3)
    assert roof[:2] == pytest.approx(floor[:2], abs=1e-9)


@pytest.mark.parametrize("nu", [0.0, 0.25, 0.49])
def test_box_is_a_stack_of_dislocations(nu: float) -> None:
    """A closing box is a stack of closing rectangles: triangular dislocations of cutde, 24 Gauss
    sheets. Triangular dislocations in a full space: Nikkhoo and Walter (2015)."""
    place = np.array([[1.4, -0.6, 0.7], [0.2, 0.1, 1.1]])
    t, w = np.polynomial.legendre.leggauss(24)
    x0, x1, y0, y1, z0, z1 = BOX
    total = np.zeros((2, 3))
    for z, weight in zip(0.5 * (z0 + z1) + 0.5 * (z1 - z0) * t, 0.5 * (z1 - z0) * w, strict=True):
        # cutde has z up; slips are strike, dip, tensile (opening)
        ring = np.array([[x0, y0, -z], [x1, y0, -z], [x1, y1, -z], [x0, y1, -z]])
        triangles = np.array([ring[[0, 1, 2]], ring[[0, 2, 3]]])
        slips = np.array([[0.0, 0.0, -1.0]] * 2)
        total += weight * cutde.disp_free(place * [1, 1, -1], triangles, slips, nu)
    for n in range(2):
        assert seen_from(place[n], nu) == pytest.approx(total[n] * [1, 1, -1], rel=1e-8)


def test_box_from_the_corner_table_is_what_the_solver_uses() -> None:
    """The corner order of `corners_of` is that of the grid's boxes."""
    grid = boxes([-0.1, 0.25, 5.0, 5.5, 1.2, 1.3, 0.0]).corners(np.arange(1))[0]
    place = np.array([0.3, 0.1, 4.0])
    own = corners_of() + np.array([0.0, 0.0, 5.3])
    assert crack_hexahedron_full_space(grid, place, 0.25) == pytest.approx(
        crack_hexahedron_full_space(own, place, 0.25), rel=1e-12)
