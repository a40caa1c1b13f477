"""The exact box: against its own point sources, at singular places, far, thin, cut in pieces."""

from __future__ import annotations

import box_arrays
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from subside.earth import box, box_formulas, half_space
from subside.errors import InputError

NU = 0.22
GAUSS = np.polynomial.legendre.leggauss(64)

BOXES = [
    (0.5, 2.5, -1.0, 2.0, 1.0, 1.5),  # beside and above
    (-1.0, 1.5, -1.0, 1.2, 0.8, 1.0),  # below the point
    (-0.5, 0.4, -0.2, 0.7, 1.0, 4.0),  # a column
    (5.0, 6.0, 7.0, 8.5, 2.0, 3.0),  # rather far
    (0.3, 0.5, 1.0, 1.2, 3.0, 3.01),  # small and thin: Gauss points
    (-1.0, 1.2, -1.0, 0.8, 1.0, 1.02),  # wide and thin: Gauss sheets
]


def points(span, nodes=GAUSS):
    x, w = nodes
    axes = [(0.5 * (a + b) + 0.5 * (b - a) * x, 0.5 * (b - a) * w) for a, b in
            zip(span[::2], span[1::2], strict=True)]
    xyz = np.stack(np.meshgrid(*(a[0] for a in axes), indexing="ij"), -1)
    weights = np.einsum("i,j,k->ijk", *(a[1] for a in axes))
    return xyz, weights


def summed(source, span, z=0.0):
    """Displacement at (0, 0, z) of a box of point sources, by 64^3 Gauss points."""
    xyz, weights = points(span)
    r = np.hypot(xyz[..., 0], xyz[..., 1])
    outward, downward = half_space.displacement(source, r, z, xyz[..., 2], NU)
    return np.array(
        [-(weights * outward * xyz[..., i] / r).sum() for i in (0, 1)]
        + [(weights * downward).sum()]
    )


@pytest.mark.parametrize("span", BOXES)
def test_box_is_the_sum_of_its_points(span):
    exact = np.array(box.box_surface(*span, NU))
    np.testing.assert_allclose(exact[:3], summed("contraction", span), rtol=1e-12)
    np.testing.assert_allclose(exact[3:], summed("closure", span), rtol=1e-12)


@pytest.mark.parametrize("span", BOXES)
@pytest.mark.parametrize("z", [0.0, 0.3, 0.6, 20.0])
def test_box_at_depth_is_the_sum_of_its_points(span, z):
    deeper = (*span[:4], span[4] + 0.5, span[5] + 0.5)
    exact = np.array(box.box_depth(*deeper, z, NU))
    expected = summed("contraction", deeper, z)
    np.testing.assert_allclose(exact, expected, rtol=1e-10, atol=1e-12 * abs(expected).max())


@pytest.mark.parametrize("span", BOXES)
def test_surface_is_the_limit_of_depth(span):
    np.testing.assert_allclose(
        box.box_depth(*span, 0.0, NU), box.box_surface(*span, NU)[:3], rtol=1e-11
    )


@pytest.mark.parametrize("span", BOXES)
def test_gradient_is_the_derivative(span):
    step = 1e-3

    def u(dx, dy):
        x0, x1, y0, y1, top, bottom = span
        return np.array(box.box_surface(x0 - dx, x1 - dx, y0 - dy, y1 - dy, top, bottom, NU))

    def slope(dx, dy):
        return (8 * (u(dx, dy) - u(-dx, -dy)) - (u(2 * dx, 2 * dy) - u(-2 * dx, -2 * dy))) / 12

    by_x, by_y = slope(step, 0) / step, slope(0, step) / step
    expected = [by_x[0], by_y[1], by_x[1], by_x[2], by_y[2], by_x[3], by_y[4], by_x[4], by_x[5],
                by_y[5]]
    exact = np.array(box.box_surface_gradient(*span, NU))
    np.testing.assert_allclose(exact, expected, atol=1e-9 * np.abs(exact).max())


@pytest.mark.parametrize(
    ("reach", "thickness"), [(10, 1), (1e3, 1), (1e6, 1), (3, 1e-4), (1e3, 1e-4), (0.7, 1e-6)]
)
def test_far_and_thin_boxes_keep_their_digits(reach, thickness):
    """Against Gauss points: 1e-12 relative at any distance and thickness. The plain corner sum
    would err by 7e-7 at 1000 sizes for a thickness of a tenth."""
    x, y, z = reach, 0.7 * reach, 1.0 + 0.5 * reach
    span = (x - 0.5, x + 0.5, y - 0.4, y + 0.4, z, z + thickness)
    exact = np.array(box.box_surface(*span, NU))
    expected = np.concatenate([summed("contraction", span), summed("closure", span)])
    np.testing.assert_allclose(exact, expected, rtol=1e-12)
    gradient = np.array(box.box_surface_gradient(*span, NU))
    xyz, weights = points(span)
    r2 = (xyz**2).sum(-1)
    xx = (1 - NU) / np.pi * (weights * (3 * xyz[..., 0] ** 2 / r2 - 1) * r2**-1.5).sum()
    zx = 7.5 / np.pi * (weights * xyz[..., 2] ** 3 * xyz[..., 0] * r2**-3.5).sum()
    assert gradient[0] == pytest.approx(xx, rel=1e-11)
    assert gradient[8] == pytest.approx(zx, rel=1e-11)


def test_far_box_is_a_point():
    """At 1000 sizes the difference from the point kernel is (size/distance)^2 = 1e-6 and no more;
    at 1e5 sizes it is 1e-10."""
    for size in (1e-3, 1e-5):
        h = size / 2
        span = (0.8 - h, 0.8 + h, 0.6 - h, 0.6 + h, 1.0 - h, 1.0 + h)
        exact = np.array(box.box_surface(*span, NU)) / size**3
        out, down = half_space.contraction_surface(1.0, 1.0, NU)
        crack_out, crack_down = half_space.closure_surface(1.0, 1.0)
        expected = [-0.8 * out, -0.6 * out, down, -0.8 * crack_out, -0.6 * crack_out, crack_down]
        np.testing.assert_allclose(exact, expected, rtol=max(2 * size**2, 1e-10))


def test_thin_box_is_a_sheet():
    span = (0.5, 2.5, -1.0, 2.0)
    t = 1e-5
    thin = np.array(box.box_surface(*span, 1.0 - t, 1.0 + t, NU)) / (2 * t)
    np.testing.assert_allclose(thin, box.sheet_surface(*span, 1.0, NU), rtol=1e-9)


def test_sheet_far_away_is_a_point():
    h = 1e-4
    sheet = np.array(box.sheet_surface(0.8 - h, 0.8 + h, 0.6 - h, 0.6 + h, 1.0, NU)) / (4 * h * h)
    out, down = half_space.closure_surface(1.0, 1.0)
    np.testing.assert_allclose(sheet[3:], [-0.8 * out, -0.6 * out, down], rtol=1e-7)


def test_sheets_stacked_are_the_box():
    x, w = np.polynomial.legendre.leggauss(40)
    sheets = box_arrays.sheets_surface(-0.5, 2.0, 0.3, 1.0, 1.5 + 0.5 * x, NU) @ (0.5 * w)
    whole = box.box_surface(-0.5, 2.0, 0.3, 1.0, 1.0, 2.0, NU)
    np.testing.assert_allclose(sheets, whole, rtol=1e-12)


# On the box itself -----------------------------------------------------------------------------

FACE_EDGE_CORNER = [(0, 0, 1.5), (0, 0, 1.0), (1, 0, 1.5), (1, 0, 1.0), (1, 1, 1.3), (1, 1, 2.0),
                    (-1, 0.2, 2.0)]


@pytest.mark.parametrize("place", FACE_EDGE_CORNER)
def test_displacement_on_the_box_is_the_limit_from_around(place):
    """Finite and continuous inside and on faces, edges and corners."""

    def at(x, y, z):
        return np.array(box.box_depth(-1 - x, 1 - x, -1 - y, 1 - y, 1.0, 2.0, z, NU))

    on = at(*place)
    assert np.isfinite(on).all()
    for direction in ((1, 0.3, 0.2), (-0.4, 1, -0.6), (-0.1, -0.7, 1), (0.3, -1, -0.5)):
        near = at(*(np.array(place) + 1e-9 * np.array(direction)))
        np.testing.assert_allclose(near, on, atol=1e-7)


def test_strain_inside_is_uniaxial_for_a_wide_slab():
    """A wide thin box shortens by its own strain e vertically and not at all horizontally."""

    def at(x, z):
        return np.array(box.box_depth(-1e3 - x, 1e3 - x, -1e3, 1e3, 10.0, 12.0, z, 0.25))

    assert (at(0, 11.5)[2] - at(0, 10.5)[2]) == pytest.approx(-1.0, abs=0.02)
    assert abs(at(0.5, 11)[0] - at(-0.5, 11)[0]) < 0.01


@pytest.mark.parametrize("z", [0.6, 1.4, 3.0])
def test_equilibrium_at_depth(z):
    """Navier outside the box; inside too, where the source strain has no gradient."""
    step = 2e-3
    span = (-1.0, 1.0, -0.7, 0.9, 1.0, 2.0)

    def u(p):
        return np.array(box.box_depth(span[0] - p[0], span[1] - p[0], span[2] - p[1],
                                      span[3] - p[1], *span[4:], p[2], NU))

    at = np.array([0.3, 0.2, z])
    second = np.empty((3, 3, 3))
    e = np.eye(3) * step
    for i in range(3):
        for j in range(3):
            second[i, j] = (u(at + e[i] + e[j]) - u(at + e[i] - e[j]) - u(at - e[i] + e[j])
                            + u(at - e[i] - e[j])) / (4 * step**2)
    laplacian = np.einsum("iik->k", second)
    grad_div = np.einsum("ikk->i", second)
    residual = laplacian + grad_div / (1 - 2 * NU)
    assert np.abs(residual).max() < 3e-4 * np.abs(second).max()


def test_outcrop_is_finite():
    """A box that reaches the surface: displacement everywhere, strain except on its edge."""
    for x in (-2.0, -1.0, 0.0):
        assert np.isfinite(box.box_surface(x, x + 2, -1.0, 1.0, 0.0, 0.5, NU)).all()
        assert np.isfinite(box.box_surface(x, x + 2, 0.0, 2.0, 0.0, 0.5, NU)).all()
    middle = np.array(box.box_surface(-1.0, 1.0, -1.0, 1.0, 0.0, 0.5, NU))
    near = np.array(box.box_surface(-1.0, 1.0, -1.0, 1.0, 1e-9, 0.5, NU))
    np.testing.assert_allclose(middle, near, atol=1e-7)
    with pytest.raises(InputError, match="edge of a cell that reaches the surface"):
        box_arrays.boxes_surface_gradient(0.0, 2.0, -1.0, 1.0, 0.0, 0.5, NU)


def test_sheet_at_the_surface_carries_its_own_closure():
    """Seen from just above, a sheet at no depth gives the ground its full contraction (2(1-nu)
    for nuclei, 1 for closure); outside, nothing vertical."""
    on = box.sheet_surface(-1.0, 1.0, -1.0, 1.0, 0.0, NU)
    assert on[2] == pytest.approx(2 * (1 - NU)) and on[5] == pytest.approx(1.0)
    off = box.sheet_surface(2.0, 3.0, -1.0, 1.0, 0.0, NU)
    assert off[2] == pytest.approx(0.0, abs=1e-15) and off[5] == pytest.approx(0.0, abs=1e-15)


# Properties ------------------------------------------------------------------------------------

lengths = st.floats(0.02, 3.0)
places = st.floats(-3.0, 3.0)
shares = st.floats(0.1, 0.9)


@settings(max_examples=60, deadline=None)
@given(places, places, st.floats(0.1, 3.0), lengths, lengths, lengths, shares, st.integers(0, 2))
def test_splitting_changes_nothing(x, y, top, length, width, thickness, share, axis):
    span = np.array([x, x + length, y, y + width, top, top + thickness])
    cut = span[2 * axis] + share * (span[2 * axis + 1] - span[2 * axis])
    low, high = span.copy(), span.copy()
    low[2 * axis + 1] = high[2 * axis] = cut
    for function in (box_arrays.boxes_surface, box_arrays.boxes_surface_gradient):
        whole = function(*span, NU)
        parts = function(*low, NU) + function(*high, NU)
        scale = max(np.abs(function(*low, NU)).max(), np.abs(function(*high, NU)).max())
        np.testing.assert_allclose(parts, whole, atol=2e-12 * scale)
    for z in (0.0, top, top + 0.5 * thickness, top + 2 * thickness):
        whole = box_arrays.boxes_depth(*span, z, NU)
        parts = box_arrays.boxes_depth(*low, z, NU) + box_arrays.boxes_depth(*high, z, NU)
        np.testing.assert_allclose(parts, whole, atol=1e-12 * (1 + np.abs(span).max()))


@settings(max_examples=40, deadline=None)
@given(places, places, st.floats(0.1, 3.0), lengths, lengths, lengths)
def test_mirror_symmetry(x, y, top, length, width, thickness):
    span = (x, x + length, y, y + width, top, top + thickness)
    mirrored = (-x - length, -x, y, y + width, top, top + thickness)
    turned = (y, y + width, x, x + length, top, top + thickness)
    here = box_arrays.boxes_surface(*span, NU)
    scale = np.abs(here).max()
    np.testing.assert_allclose(
        box_arrays.boxes_surface(*mirrored, NU), here * [-1, 1, 1, -1, 1, 1], atol=1e-13 * scale
    )
    np.testing.assert_allclose(
        box_arrays.boxes_surface(*turned, NU), here[[1, 0, 2, 4, 3, 5]], atol=1e-13 * scale
    )
    strain = box_arrays.boxes_surface_gradient(*span, NU)
    swapped = box_arrays.boxes_surface_gradient(*turned, NU)
    np.testing.assert_allclose(
        swapped, strain[[1, 0, 2, 4, 3, 6, 5, 7, 9, 8]], atol=1e-12 * np.abs(strain).max()
    )


def test_attraction_is_harmonic_outside_and_poisson_inside():
    """div grad phi = 0 outside the box and -4 pi inside."""
    step = 1e-3
    for place, expected in (((2.0, 0.5, 0.4), 0.0), ((0.2, -0.3, 0.1), -4 * np.pi)):
        total = 0.0
        for axis in range(3):
            for sign in (1, -1):
                p = np.array(place)
                p[axis] += sign * step
                g = box_formulas.attraction(-1 - p[0], 1 - p[0], -1 - p[1], 1 - p[1],
                                            -0.5 - p[2], 0.5 - p[2])
                total += sign * g[axis] / (2 * step)
        assert total == pytest.approx(expected, abs=1e-5)


@pytest.mark.parametrize(
    ("span", "words"),
    [
        ((1.0, 1.0, 0.0, 1.0, 2.0, 3.0), ["length of a cell along x", "0 m"]),
        ((0.0, 1.0, 1.0, 0.0, 2.0, 3.0), ["length of a cell along y", "-1 m"]),
        ((0.0, 1.0, 0.0, 1.0, -2.0, 3.0), ["depth of the top", "-2 m"]),
        ((0.0, 1.0, 0.0, 1.0, 3.0, 2.0), ["thickness of a cell", "-1 m"]),
        ((0.0, np.nan, 0.0, 1.0, 3.0, 4.0), ["length of a cell along x", "nan m"]),
    ],
)
def test_bad_input(span, words):
    for function in (box_arrays.boxes_surface, box_arrays.boxes_surface_gradient):
        with pytest.raises(InputError) as error:
            function(*span, NU)
        for word in words:
            assert word in str(error.value)
