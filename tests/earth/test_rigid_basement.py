"""A layer on a rigid basement: kernels by propagation, limits, volume, far field."""

from __future__ import annotations

import time

import numpy as np
import pytest
from scipy.linalg import expm

from subside.earth import half_space, rigid_basement
from subside.earth.half_space import SOURCES
from subside.errors import InputError


def half_space_kernels(source, d, nu):
    e = np.exp(-d)
    return {
        "contraction": (2 * (1 - nu) * e, 2 * (1 - nu) * e),
        "closure": ((1 + d) * e, d * e),
        "vertical_force": ((2 * (1 - nu) + d) * e, (1 - 2 * nu + d) * e),
    }[source]


def propagated(source, c, k, nu):
    """W (down) and U (inward) at wavenumber 1 by the matrix exponential of the order-0/1 system
    U' = W + T/G, W' = (S - lam U)/M, S' = -T, T' = 4G(lam+G)/M U + lam/M S (Haskell 1953)."""
    g = 1.7
    lam = 2 * g * nu / (1 - 2 * nu)
    m = lam + 2 * g
    system = np.array(
        [[0, 1, 0, 1 / g], [-lam / m, 0, 1 / m, 0], [0, 0, 0, -1],
         [4 * g * (lam + g) / m, 0, lam / m, 0]]
    )
    jump = {
        "contraction": [0, -1, 0, 2 * g], "closure": [0, -1, 0, 0], "vertical_force": [0, 0, -1, 0]
    }[source]
    below = expm(system * (k - c))
    through = below @ expm(system * c)
    u, w = np.linalg.solve(through[:2, :2], -(below @ jump)[:2])
    scale = 2 * g if source == "vertical_force" else 1.0
    return w * scale, -u * scale


@pytest.mark.parametrize("source", SOURCES)
@pytest.mark.parametrize(
    ("c", "k", "nu"), [(1, 2, 0.25), (0.3, 3, 0.1), (1, 1.0005, 0.4), (0.7, 4, 0.0), (5, 6, 0.45)]
)
def test_kernels_against_propagation(source, c, k, nu):
    """Two routes: closed form here, numerical propagation there."""
    difference = rigid_basement.kernel_difference(source, np.float64(k), np.float64(c), nu)
    total = np.add(difference, half_space_kernels(source, c, nu))
    np.testing.assert_allclose(total, propagated(source, c, k, nu), rtol=1e-11, atol=1e-13)


def test_kernels_do_not_overflow():
    for source in SOURCES:
        k = np.array([800.0, 1e6])
        w, u = rigid_basement.kernel_difference(source, k, np.float64(700.0), 0.2)
        assert np.isfinite(w).all() and np.isfinite(u).all()


@pytest.mark.parametrize("source", SOURCES)
def test_far_basement_is_the_half_space(source):
    r = np.array([0.0, 0.5, 3.0, 1000.0])
    shear = 0.4
    near = half_space.displacement(source, r, 0.0, 1.0, 0.25, shear)
    far = rigid_basement.displacement(source, r, 1.0, 0.25, 1e6, shear)
    # what remains is of the order c/k of the peak for volumes squared, for the force once
    limit = 3e-6 if source == "vertical_force" else 1e-10
    np.testing.assert_allclose(far, near, atol=limit)
    assert np.abs(np.subtract(far, near)).max() > 0


@pytest.mark.parametrize("source", SOURCES)
@pytest.mark.parametrize("k", [1.0005, 1.3, 4.0])
@pytest.mark.parametrize("nu", [0.0, 0.25, 0.499])
def test_the_field_dies_off_exponentially(source, k, nu):
    """As exp(-y r/k), y from 0.74 (nu near 0.5) to 1.19 (nu 0); the cut at 55 k cuts nothing."""
    r = np.array([0.0, 12.0, 24.0, 54.999, 55.001, 900.0]) * k
    outward, downward = rigid_basement.displacement(source, r, 1.0, nu, k, 0.4)
    peak = float(half_space.displacement(source, 0.0, 0.0, 1.0, nu, 0.4)[1])
    size = np.maximum(np.abs(outward), np.abs(downward)) / peak
    assert size[1] < 3e-3
    assert size[2] < 3e-7
    assert size[3] < 1e-12
    assert size[4] == size[5] == 0.0


@pytest.mark.parametrize("source", SOURCES)
def test_a_source_on_the_base(source):
    """The contraction has its limit there; a force on the welded base moves nothing."""
    d = rigid_basement.displacement(source, [0.0, 0.5], 1.0, 0.25, 1.0, 0.4)[1]
    close = rigid_basement.displacement(source, [0.0, 0.5], 1.0 - 1e-9, 0.25, 1.0, 0.4)[1]
    np.testing.assert_allclose(d, close, atol=1e-8)
    if source == "vertical_force":
        np.testing.assert_allclose(d, 0.0, atol=1e-14)


@pytest.mark.parametrize("source", SOURCES)
@pytest.mark.parametrize("k", [1.001, 1.5, 20.0])
def test_gradient_is_the_derivative(source, k):
    r = np.array([0.0, 0.2, 1.0, 3.0])
    step = 2e-3
    by_radius, over_radius, down = rigid_basement.gradient(source, r, 1.0, 0.2, k, 0.4)

    def u(n):
        x = r + n * step
        sign = np.where(x < 0, -1.0, 1.0)
        out, vertical = rigid_basement.displacement(source, np.abs(x), 1.0, 0.2, k, 0.4)
        return np.array([sign * out, vertical])

    slope = (8 * (u(1) - u(-1)) - (u(2) - u(-2))) / (12 * step)
    np.testing.assert_allclose(by_radius, slope[0], atol=3e-9)
    np.testing.assert_allclose(down, slope[1], atol=3e-9)
    np.testing.assert_allclose(over_radius[1:], u(0)[0][1:] / r[1:], atol=1e-13)
    assert over_radius[0] == pytest.approx(by_radius[0], abs=1e-13)


@pytest.mark.parametrize("source", SOURCES)
@pytest.mark.parametrize("k", [1.02, 2.0, 6.0])
def test_volume_ratio_by_integration(source, k):
    x, w = np.polynomial.legendre.leggauss(400)
    end = 30.0 * k
    r = 0.5 * end * (x + 1.0)
    downward = rigid_basement.displacement(source, r, 1.0, 0.3, k, 0.4)[1]
    volume = (2 * np.pi * r * downward) @ (0.5 * end * w)
    if source == "vertical_force":  # the column below it is shortened by P/M
        uniaxial_modulus = 2 * 0.4 * (1 - 0.3) / (1 - 2 * 0.3)
        assert volume == pytest.approx((k - 1.0) / uniaxial_modulus, abs=1e-9)
        with pytest.raises(InputError, match="no volume of its own"):
            rigid_basement.volume_ratio(source, 0.3)
    else:
        assert volume == pytest.approx(rigid_basement.volume_ratio(source, 0.3), abs=1e-9)


def test_heave_ring_at_low_poisson_ratio():
    """Over a near base at low nu the ground rises in a ring: negative values are physics."""
    r = np.linspace(0.0, 6.0, 200)
    downward = rigid_basement.displacement("contraction", r, 1.0, 0.0, 1.1)[1]
    assert downward.min() < -1e-4 * downward.max()


def test_scattered_pairs_equal_the_table():
    rng = np.random.default_rng(5)
    r, c = rng.uniform(0, 9, 40), rng.uniform(0.2, 2.0, 40)
    pairs = np.array(rigid_basement.displacement("closure", r, c, 0.25, 2.5))
    table = np.array(rigid_basement.displacement("closure", r[:, None], c, 0.25, 2.5))
    np.testing.assert_allclose(pairs, np.einsum("nii->ni", table), atol=1e-14)
    assert pairs.shape == (2, 40) and table.shape == (2, 40, 40)


def test_table_is_fast():
    """400 radii by 16 depths, out to 1000 depths, well below a second (measured 0.06 s)."""
    r = np.r_[0.0, np.geomspace(1e-3, 1e3, 399)]
    c = np.linspace(0.9, 1.1, 16)
    start = time.perf_counter()
    rigid_basement.displacement("contraction", r[:, None], c, 0.25, 1.1005)
    assert time.perf_counter() - start < 1.0


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("contraction", 1.0, 3000.0, 0.25, 2500.0), ["3000 m", "basement at 2500 m"]),
        (("contraction", 1.0, 3000.0, 0.25, -1.0), ["basement depth", "-1 m"]),
        (("collapse", 1.0, 3000.0, 0.25, 4000.0), ["collapse", "closure"]),
    ],
)
def test_bad_input(arguments, words):
    with pytest.raises(InputError) as error:
        rigid_basement.displacement(*arguments)
    for word in words:
        assert word in str(error.value)
    with pytest.raises(InputError):
        rigid_basement.gradient(*arguments)
