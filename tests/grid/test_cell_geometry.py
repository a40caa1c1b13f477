"""Volume and centroid of hexahedra against closed forms, and by symmetry and cutting."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

from subside.grid.geometry import CORNER_PLACES, corners_of_boxes, hexahedra, mirrored

CUBE = CORNER_PLACES[None].copy()

# the unit cube with each corner moved by up to a quarter: never folded as a whole
bent_cubes = arrays(float, (1, 8, 3), elements=st.floats(-0.25, 0.25)).map(lambda d: CUBE + d)


def trilinear(corners, places):
    """X(s, t, u) written as the plain sum of the definition."""
    result = np.zeros((len(places), 3))
    for corner, at in zip(corners, CORNER_PLACES, strict=True):
        weight = np.prod(np.where(at > 0, places, 1 - places), axis=1)
        result += weight[:, None] * corner
    return result


def test_unit_cube():
    cube = hexahedra(CUBE)
    assert cube.volume[0] == pytest.approx(1.0, rel=1e-15)
    assert cube.centroid[0] == pytest.approx([0.5, 0.5, 0.5], rel=1e-15)
    assert cube.least_jacobian[0] == pytest.approx(1.0, rel=1e-15)


def test_affine_image_has_the_determinant_as_volume():
    # source: |det A|, and the centroid maps along
    a = np.array([[120.0, -35.0, 4.0], [20.0, 80.0, -6.0], [3.0, 5.0, 12.0]])
    shift = np.array([5.6e5, 5.9e6, 2900.0])
    found = hexahedra(CUBE @ a.T + shift)
    assert found.volume[0] == pytest.approx(np.linalg.det(a), rel=1e-9)
    assert found.centroid[0] == pytest.approx(a @ [0.5, 0.5, 0.5] + shift, rel=1e-12)


def test_pyramid_is_a_third_of_its_prism():
    # top face shrunk to a point above the middle: V = A h / 3, centroid h/4 above the base
    corners = CUBE.copy()
    corners[0, :4] = [0.5, 0.5, 0.0]
    found = hexahedra(corners)
    assert found.volume[0] == pytest.approx(1 / 3, rel=1e-14)
    assert found.centroid[0] == pytest.approx([0.5, 0.5, 0.75], rel=1e-14)


def test_wedge_that_pinches_out():
    # thickness falls linearly from 1 to 0 along x: V = 1/2, centroid x = 1/3, depth = 1 - 1/3
    corners = CUBE.copy()
    corners[0, [1, 2], 2] = 1.0
    found = hexahedra(corners)
    assert found.volume[0] == pytest.approx(0.5, rel=1e-14)
    assert found.centroid[0] == pytest.approx([1 / 3, 0.5, 2 / 3], rel=1e-14)
    assert found.least_jacobian[0] == pytest.approx(0.0, abs=1e-15)


def test_thickness_linear_both_ways():
    # bottom at 1 + s t: V = 1 + 1/4; int s (1 + s t) = 1/2 + 1/6 = 2/3; int (1 + s t)^2 / 2 = 29/36
    corners = CUBE.copy()
    corners[0, 6, 2] = 2.0
    found = hexahedra(corners)
    assert found.volume[0] == pytest.approx(5 / 4, rel=1e-14)
    assert found.centroid[0] == pytest.approx([8 / 15, 8 / 15, 29 / 45], rel=1e-14)


@given(bent_cubes)
@settings(max_examples=40, deadline=None)
def test_centroid_and_volume_against_a_rule_of_high_order(corners):
    # source: 5-point Gauss-Legendre along each axis, exact to degree 9
    node, weight = np.polynomial.legendre.leggauss(5)
    node, weight = (node + 1) / 2, weight / 2
    places = np.array(np.meshgrid(node, node, node)).reshape(3, -1).T
    weights = np.prod(np.array(np.meshgrid(weight, weight, weight)).reshape(3, -1), axis=0)
    h = 1e-3  # the map is linear along each axis: central differences are exact
    edges = [(trilinear(corners[0], places + h * e) - trilinear(corners[0], places - h * e))
             / (2 * h) for e in np.eye(3)]
    density = np.linalg.det(np.stack(edges, axis=1)) * weights
    found = hexahedra(corners)
    assert found.volume[0] == pytest.approx(density.sum(), rel=1e-10, abs=1e-10)
    moment = density @ trilinear(corners[0], places)
    assert found.centroid[0] * found.volume[0] == pytest.approx(moment, rel=1e-10, abs=1e-10)


@given(bent_cubes)
@settings(max_examples=40, deadline=None)
def test_cutting_at_the_midplanes_keeps_volume_and_moment(corners):
    parts = np.concatenate([
        trilinear(corners[0], 0.5 * (CORNER_PLACES + shift))[None] for shift in CORNER_PLACES])
    whole, pieces = hexahedra(corners), hexahedra(parts)
    assert pieces.volume.sum() == pytest.approx(whole.volume[0], rel=1e-12)
    assert pieces.volume @ pieces.centroid == pytest.approx(
        whole.volume[0] * whole.centroid[0], rel=1e-11, abs=1e-12)


@given(bent_cubes, st.floats(0, 6.28), arrays(float, 3, elements=st.floats(-1e3, 1e3)))
@settings(max_examples=40, deadline=None)
def test_rotation_and_translation(corners, angle, shift):
    c, s = np.cos(angle), np.sin(angle)
    turn = np.array([[c, -s, 0], [s, c, 0], [0, 0, 1]])
    before, after = hexahedra(corners), hexahedra(corners @ turn.T + shift)
    assert after.volume[0] == pytest.approx(before.volume[0], rel=1e-9)
    assert after.centroid[0] == pytest.approx(turn @ before.centroid[0] + shift, abs=1e-9)
    assert after.least_jacobian[0] == pytest.approx(before.least_jacobian[0], abs=1e-9)


def test_blocks_do_not_show():
    # more cells than one block, each stretched differently
    n = 40_000
    corners = np.repeat(CUBE, n, axis=0)
    corners[:, :, 2] *= np.arange(1, n + 1)[:, None]
    assert hexahedra(corners).volume == pytest.approx(np.arange(1, n + 1))


def test_a_thread_of_thickness_is_zero_and_a_centimetre_is_not():
    thin = CUBE * [100.0, 100.0, 1e-9] + [5e5, 5.8e6, 2000.0]
    bed = CUBE * [100.0, 100.0, 0.01] + [5e5, 5.8e6, 2000.0]
    assert hexahedra(thin).zero[0]
    assert not hexahedra(bed).zero[0]
    assert hexahedra(bed).volume[0] == pytest.approx(100.0, rel=1e-6)


def test_mirrored_turns_the_sign_only():
    corners = CUBE * [100.0, 50.0, 10.0]
    before = hexahedra(corners)
    after = hexahedra(mirrored(corners.copy()))
    assert after.volume[0] == -before.volume[0]
    assert after.centroid[0] == pytest.approx(before.centroid[0])


def test_twisted_at_one_corner_only():
    # corner 1 pulled past the diagonal of the top face: volume stays positive, its Jacobian not
    corners = CUBE.copy()
    corners[0, 1, :2] = [0.3, 0.7]
    found = hexahedra(corners)
    assert found.volume[0] > 0
    assert found.least_jacobian[0] < 0


def test_box_turned_by_azimuth():
    # own y to the east at 90 degrees: dx lies along the south, dy along the east
    corners = corners_of_boxes(*(np.array([v]) for v in (10.0, 20.0, 100.0, 105.0, 4.0, 8.0, 90.0)))
    assert corners[0, 0] == pytest.approx([6.0, 22.0, 100.0])
    assert corners[0, 1] == pytest.approx([6.0, 18.0, 100.0])
    assert corners[0, 2] == pytest.approx([14.0, 18.0, 100.0])
    assert corners[0, 7] == pytest.approx([14.0, 22.0, 105.0])


@given(st.floats(1, 500), st.floats(1, 500), st.floats(0.1, 50), st.floats(-720, 720))
@settings(max_examples=40, deadline=None)
def test_box_volume_and_centre(dx, dy, dz, azimuth):
    # source: dx dy (bottom - top)
    corners = corners_of_boxes(*(np.array([v]) for v in (3e5, 6e6, 900.0, 900.0 + dz, dx, dy,
                                                         azimuth)))
    found = hexahedra(corners)
    assert found.volume[0] == pytest.approx(dx * dy * dz, rel=1e-6)
    assert found.centroid[0] == pytest.approx([3e5, 6e6, 900 + dz / 2], rel=1e-9)
