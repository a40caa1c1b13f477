"""The rule for Gauss points is never too low, and not far too high."""

from __future__ import annotations

import box_arrays
import numpy as np
import pytest

from subside.earth import half_space, rigid_basement
from subside.earth.quadrature import gauss_order
from subside.errors import InputError

TOLERANCES = [1e-3, 1e-4, 1e-6, 1e-8]


def gauss_sum(half, top, thickness, orders, gradient, x, y):
    """Box at the origin by Gauss points, seen from (x, y): contraction then closure."""
    nx, ny, nz = orders
    (gx, wx), (gy, wy), (gz, wz) = (np.polynomial.legendre.leggauss(n) for n in (nx, ny, nz))
    sx = half[0] * gx[:, None, None, None] - x
    sy = half[1] * gy[:, None, None] - y
    z = top + 0.5 * thickness * (1 + gz[:, None])
    weight = np.einsum("i,j,k->ijk", half[0] * wx, half[1] * wy, 0.5 * thickness * wz)
    r2 = sx**2 + sy**2 + z**2
    rows = []
    for strength, slope in (
        (0.75 / np.pi * r2**-1.5, 2.25 / np.pi * r2**-2.5),
        (1.5 / np.pi * z**2 * r2**-2.5, 7.5 / np.pi * z**2 * r2**-3.5),
    ):
        if gradient:
            terms = (slope * sx**2 - strength, slope * sy**2 - strength, slope * sx * sy,
                     slope * sx * z, slope * sy * z)
        else:
            terms = (strength * sx, strength * sy, strength * z)
        rows += [np.einsum("ijk,ijkp->p", weight, term) for term in terms]
    return np.array(rows)


@pytest.mark.parametrize("ratio", [0.01, 0.1, 0.5, 1.0, 3.0])
@pytest.mark.parametrize("shape", [(1.0, 1.0, 1.0), (1.0, 0.1, 0.1), (0.3, 1.0, 2.0)])
@pytest.mark.parametrize("quantity", ["displacement", "gradient"])
def test_rule_keeps_its_promise(ratio, shape, quantity):
    """Against the exact box, everywhere on the surface, all three directions together."""
    top = 1.0
    half = ratio * np.array(shape[:2])
    thickness = 2 * ratio * shape[2]
    x, y = (a.ravel() for a in np.meshgrid(
        np.r_[0, np.linspace(0.2, 1.3, 6) * half[0], half[0] + 1, half[0] + 3],
        np.r_[0, np.linspace(0.2, 1.3, 6) * half[1], half[1] + 1],
    ))
    exact_function = (box_arrays.boxes_surface if quantity == "displacement"
                      else box_arrays.boxes_surface_gradient)
    exact = exact_function(
        -half[0] - x, half[0] - x, -half[1] - y, half[1] - y, top, top + thickness, 0.25
    )
    parts = len(exact) // 2
    for tolerance in TOLERANCES:
        orders = [
            int(gauss_order(half[0], top, tolerance, "horizontal", quantity)),
            int(gauss_order(half[1], top, tolerance, "horizontal", quantity)),
            int(gauss_order(0.5 * thickness, top, tolerance, "vertical", quantity)),
        ]
        got = gauss_sum(half, top, thickness, orders, quantity == "gradient", x, y)
        for part in (slice(0, parts), slice(parts, None)):
            error = np.abs(got[part] - exact[part]).max() / np.abs(exact[part]).max()
            assert error < tolerance, (orders, tolerance)


@pytest.mark.parametrize(("ratio", "tolerance"), [(0.1, 1e-6), (1.0, 1e-4), (3.0, 1e-8)])
def test_rule_does_not_waste(ratio, tolerance):
    """Two fifths fewer points already break the tolerance (closure, narrow cell)."""
    n = int(gauss_order(ratio, 1.0, tolerance))
    fewer = int(np.floor(0.6 * n))
    x = np.linspace(0, 1.2 * ratio, 40)
    half = (ratio, 1e-3)
    exact = box_arrays.boxes_surface(-ratio - x, ratio - x, -1e-3, 1e-3, 1.0, 1.0002, 0.25)[3:]
    got = gauss_sum(half, 1.0, 2e-4, (fewer, 1, 1), False, x, 0.0 * x)[3:]
    assert np.abs(got - exact).max() / np.abs(exact).max() > tolerance


def test_rule_holds_over_a_rigid_basement():
    """A line of contraction and closure just above the basement, against many points."""
    half = 1.0
    r = np.linspace(0.0, 3.0, 31)
    for source in ("contraction", "closure"):

        def line(n, source=source):
            g, w = np.polynomial.legendre.leggauss(n)
            outward, downward = rigid_basement.displacement(
                source, np.abs(half * g - r[:, None]), 1.0, 0.25, 1.05
            )
            return np.array([-(outward * np.sign(half * g - r[:, None])) @ w, downward @ w])

        exact = line(80)
        for tolerance in TOLERANCES:
            got = line(int(gauss_order(half, 1.0, tolerance)))
            assert np.abs(got - exact).max() < tolerance * np.abs(exact).max()


def test_values_and_shapes():
    """A flat cell of half-width d/10: rho = 10 + sqrt(101), 21 n rho^-2n <= 1e-6 first at n = 4
    (21*3*20.05^-6 = 9.7e-7 at n = 3, so n = 3 it is); computed by hand."""
    assert gauss_order(0.1, 1.0, 1e-6) == 3
    assert gauss_order(0.0, 1.0, 1e-8) == 1
    table = gauss_order(np.array([0.01, 0.1, 1.0])[:, None], np.array([1.0, 2.0]), 1e-5)
    assert table.shape == (3, 2)
    assert (np.diff(table, axis=0) >= 0).all() and (np.diff(table, axis=1) <= 0).all()


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        ((1.0, 0.0, 1e-3), ["depth of the top", "0 m"]),
        ((-1.0, 1.0, 1e-3), ["half-size", "-1 m"]),
        ((1.0, 1.0, 0.0), ["tolerance"]),
        ((1.0, 1.0, 1e-3, "sideways"), ["sideways", "horizontal"]),
        ((1.0, 1.0, 1e-3, "vertical", "strain"), ["strain", "gradient"]),
    ],
)
def test_bad_input(arguments, words):
    with pytest.raises(InputError) as error:
        gauss_order(*arguments)
    for word in words:
        assert word in str(error.value)


def test_point_kernel_used_here_is_the_half_space():
    """The reference sum above uses the same kernels as `half_space` (nu = 0.25)."""
    got = gauss_sum((1e-4, 1e-4), 1.0, 2e-4, (1, 1, 1), False, np.array([0.6]), np.array([0.0]))
    _, downward = half_space.contraction_surface(0.6, 1.0001, 0.25)
    assert got[2, 0] / 8e-12 == pytest.approx(downward, rel=1e-9)
