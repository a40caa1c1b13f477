"""Closing cracks: Okada (1985), BSSA 75:1135, coded here from the paper's point formulas, and the
general-purpose triangular dislocations of `cutde` (Nikkhoo & Walter 2015)."""

from __future__ import annotations

import cutde.halfspace as cutde
import numpy as np
import pytest

from subside.earth import box, half_space

NU = 0.25


def okada_point_tensile(x, y, d, dip, nu=NU):
    """Okada (1985) eq. 10: surface displacement (x, y, up) of a point tensile source of potency 1.

    (0, 0, -d) is the source, strike along x, dip in degrees, opening positive.
    """
    sin, cos = np.sin(np.radians(dip)), np.cos(np.radians(dip))
    r = np.sqrt(x * x + y * y + d * d)
    q = y * sin - d * cos
    a = 1 - 2 * nu  # mu/(lambda + mu)
    i1 = a * y * (1 / (r * (r + d) ** 2) - x * x * (3 * r + d) / (r**3 * (r + d) ** 3))
    i2 = a * x * (1 / (r * (r + d) ** 2) - y * y * (3 * r + d) / (r**3 * (r + d) ** 3))
    i3 = a * x / r**3 - i2
    i5 = a * (1 / (r * (r + d)) - x * x * (2 * r + d) / (r**3 * (r + d) ** 2))
    common = 3 * q * q / r**5
    return np.array(
        [common * x - i3 * sin**2, common * y - i1 * sin**2, common * d - i5 * sin**2]
    ) / (2 * np.pi)


def test_the_formula_coded_here():
    """x 2, y 3, d 4, dip 70: the value of Okada 1985 eq. 10 (computed independently)."""
    np.testing.assert_allclose(
        okada_point_tensile(2.0, 3.0, 4.0, 70.0),
        [-0.00035716334, 0.00035310855, -0.00020068127],
        rtol=1e-7,
    )


@pytest.mark.parametrize(("x", "y", "d"), [(2.0, 3.0, 4.0), (0.1, -0.2, 1.0), (30.0, 5.0, 2.0)])
def test_closure_is_a_horizontal_crack_that_closes(x, y, d):
    opening = okada_point_tensile(x, y, d, 0.0)
    r = np.hypot(x, y)
    outward, downward = half_space.closure_surface(r, d)
    np.testing.assert_allclose(
        [outward * x / r, outward * y / r, downward], [-opening[0], -opening[1], opening[2]],
        rtol=1e-12,
    )


def test_three_cracks_are_a_nucleus():
    """Three orthogonal unit cracks equal a nucleus of dV = (1+nu)/(1-nu) (Okada 1985, 1992)."""
    x, y, d = 2.0, 3.0, 4.0
    total = okada_point_tensile(x, y, d, 0.0) + okada_point_tensile(x, y, d, 90.0)
    turned = okada_point_tensile(y, -x, d, 90.0)  # strike along y
    total += np.array([-turned[1], turned[0], turned[2]])
    np.testing.assert_allclose(total, [0.005095574307, 0.00764336146, 0.01019114861], rtol=1e-9)
    outward, downward = half_space.contraction_surface(np.hypot(x, y), d, NU)
    dv = (1 + NU) / (1 - NU)
    r = np.hypot(x, y)
    np.testing.assert_allclose(
        dv * np.array([-outward * x / r, -outward * y / r, downward]), total, rtol=1e-12
    )


# Against cutde --------------------------------------------------------------------------------


def rectangle(centre, along, across):
    """Two triangles of a rectangle, corners centre ± along ± across, (east, north, up)."""
    c, a, b = (np.asarray(v, dtype=float) for v in (centre, along, across))
    p = [c - a - b, c + a - b, c + a + b, c - a + b]
    return [[p[0], p[1], p[2]], [p[0], p[2], p[3]]]


def closing(points, triangles, amounts, nu):
    """Displacement (east, north, down) at points (x, y, depth) of cracks that close."""
    obs = np.asarray(points, dtype=float) * [1, 1, -1]
    slips = np.zeros((len(triangles), 3))
    slips[:, 2] = -np.asarray(amounts)
    moved = cutde.disp_free(obs, np.array(triangles), slips, nu)
    return moved * [1, 1, -1]


def stacks(span, nu, order=14):
    """A box of free isotropic strain as three stacks of closing cracks, (triangles, closures)."""
    x0, x1, y0, y1, top, bottom = span
    low, high = np.array([x0, y0, -bottom]), np.array([x1, y1, -top])
    middle, half = 0.5 * (low + high), 0.5 * (high - low)
    nodes, weights = np.polynomial.legendre.leggauss(order)
    free = (1 - nu) / (1 + nu)
    triangles, amounts, is_horizontal = [], [], []
    for axis in range(3):
        b, c = (axis + 1) % 3, (axis + 2) % 3
        for t, w in zip(nodes, weights, strict=True):
            centre = middle + half[axis] * t * np.eye(3)[axis]
            triangles += rectangle(centre, half[b] * np.eye(3)[b], half[c] * np.eye(3)[c])
            amounts += [half[axis] * w * free] * 2
            is_horizontal += [axis == 2] * 2
    return triangles, np.array(amounts), np.array(is_horizontal)


# Points that lie on no triangle's edge lines, where dislocations are singular.
SPAN = (-0.9, 1.1, -0.6, 0.7, 1.0, 1.6)
OUTSIDE = np.array(
    [[0.13, 0.21, 0.0], [1.3, 0.4, 0.0], [-3.1, 2.2, 0.0], [0.33, -0.17, 0.3], [2.4, 0.61, 1.2],
     [0.37, 1.9, 2.7]]
)


@pytest.mark.parametrize("nu", [0.1, 0.25, 0.4])
def test_contraction_box_is_three_stacks_of_closing_cracks(nu):
    triangles, amounts, _ = stacks(SPAN, nu)
    expected = closing(OUTSIDE, triangles, amounts, nu)
    for (x, y, z), moved in zip(OUTSIDE, expected, strict=True):
        span = (SPAN[0] - x, SPAN[1] - x, SPAN[2] - y, SPAN[3] - y, *SPAN[4:])
        got = np.array(box.box_depth(*span, z, nu))
        np.testing.assert_allclose(got, moved, atol=1e-7 * np.abs(expected).max())


@pytest.mark.parametrize("nu", [0.1, 0.4])
def test_closure_box_and_sheet_are_horizontal_cracks(nu):
    triangles, amounts, horizontal = stacks(SPAN, nu)
    chosen = [t for t, h in zip(triangles, horizontal, strict=True) if h]
    scale = (1 + nu) / (1 - nu)  # back to the full strain
    surface = OUTSIDE[:3]
    expected = closing(surface, chosen, amounts[horizontal] * scale, nu)
    depth = 1.3
    one = rectangle((0.1, 0.05, -depth), (1.0, 0, 0), (0, 0.65, 0))
    single = closing(surface, one, [1.0, 1.0], nu)
    for (x, y, _), moved, sheet in zip(surface, expected, single, strict=True):
        span = (SPAN[0] - x, SPAN[1] - x, SPAN[2] - y, SPAN[3] - y)
        np.testing.assert_allclose(box.box_surface(*span, *SPAN[4:], nu)[3:], moved, atol=1e-11)
        np.testing.assert_allclose(box.sheet_surface(*span, depth, nu)[3:], sheet, atol=1e-12)


@pytest.mark.parametrize("nu", [0.1, 0.25, 0.4])
def test_closure_at_depth_is_a_small_crack(nu):
    """closure_depth against a small square crack of cutde: agreement to (size/distance)^2."""
    c, h = 1.1, 2e-3
    one = rectangle((0.0, 0.0, -c), (h, 0, 0), (0, h, 0))
    points = np.array([[0.5, 0.33, 0.2], [0.8, -0.6, 1.0], [0.3, 0.9, 2.5], [1.5, 1.2, 0.0]])
    expected = closing(points, one, [1 / (4 * h * h)] * 2, nu)
    for (x, y, z), moved in zip(points, expected, strict=True):
        r = np.hypot(x, y)
        outward, downward = half_space.closure_depth(r, z, c, nu)
        got = [outward * x / r, outward * y / r, downward]
        np.testing.assert_allclose(got, moved, atol=3e-5 * np.abs(moved).max())
