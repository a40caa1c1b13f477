"""Point sources in a half-space: they are elastic, free at the surface, and right on the axis."""

from __future__ import annotations

import numpy as np
import pytest

from subside.earth import half_space
from subside.errors import InputError

NU = 0.23
G = 0.7
LAME = 2.0 * G * NU / (1.0 - 2.0 * NU)


def field(source, point, depth, nu=NU):
    """Cartesian displacement at `point` of a source on the axis."""
    x, y, z = point
    r = np.hypot(x, y)
    outward, downward = half_space.displacement(source, r, z, depth, nu, G)
    unit = np.array([x, y]) / r if r > 0 else np.zeros(2)
    return np.array([*(float(outward) * unit), float(downward)])


def jacobian(source, point, depth, step):
    """J[i, j] = d u_j / d x_i by fourth-order central differences, downward only at the surface."""
    rows = []
    for axis in range(3):
        e = np.zeros(3)
        e[axis] = step

        def u(n, e=e):
            return field(source, np.asarray(point) + n * e, depth)

        if axis == 2 and point[2] < 2 * step:  # one-sided
            rows.append(
                (-25 * u(0) + 48 * u(1) - 36 * u(2) + 16 * u(3) - 3 * u(4)) / (12 * step)
            )
        else:
            rows.append((8 * (u(1) - u(-1)) - (u(2) - u(-2))) / (12 * step))
    return np.array(rows)


def stress(source, point, depth, step=1e-3):
    j = jacobian(source, point, depth, step)
    return LAME * np.trace(j) * np.eye(3) + G * (j + j.T)


@pytest.mark.parametrize("source", half_space.SOURCES)
@pytest.mark.parametrize("point", [(0.6, 0.3, 0.7), (0.2, -0.4, 1.6), (1.5, 1.0, 0.3)])
def test_equilibrium(source, point):
    """Navier's equation (balance of momentum): div sigma = 0 away from the source."""
    step = 4e-3
    divergence = np.zeros(3)
    largest = 0.0
    for axis in range(3):
        e = np.zeros(3)
        e[axis] = step
        rows = [stress(source, np.add(point, n * e), 1.0)[axis] for n in (-2, -1, 1, 2)]
        divergence += (8 * (rows[2] - rows[1]) - (rows[3] - rows[0])) / (12 * step)
        largest = max(largest, np.abs(rows).max())
    assert np.abs(divergence).max() < 2e-5 * largest


@pytest.mark.parametrize("source", half_space.SOURCES)
@pytest.mark.parametrize("x", [0.1, 0.8, 3.0])
def test_surface_is_free_of_traction(source, x):
    s = stress(source, (x, 0.2, 0.0), 1.0)
    inside = np.abs(stress(source, (x, 0.2, 0.6), 1.0)).max()
    assert np.abs(s[2]).max() < 1e-7 * inside


@pytest.mark.parametrize(
    ("source", "moment"),
    [
        # An implosion of moment M per m3 (M = lambda + 2 G) on all axes is the contraction;
        ("contraction", lambda j: (LAME + 2 * G) * np.trace(j)),
        # lambda on all axes and 2 G on the vertical is the closing horizontal crack.
        ("closure", lambda j: LAME * np.trace(j) + 2 * G * j[2, 2]),
    ],
)
def test_reciprocity_with_a_buried_force(source, moment):
    """Betti: downward motion at A by a source at B = -moment : strain at B by a force at A."""
    a_depth, b_depth, x = 0.4, 1.3, 0.9
    _, downward = half_space.displacement(source, x, a_depth, b_depth, NU)
    strain = jacobian("vertical_force", (x, 0.0, b_depth), a_depth, 1e-3)
    assert -moment(strain) == pytest.approx(float(downward), rel=1e-8)


@pytest.mark.parametrize("source", half_space.SOURCES)
@pytest.mark.parametrize("z", [0.0, 0.4, 1.7])
def test_gradient_is_the_derivative(source, z):
    r = np.array([0.05, 0.3, 2.0, 40.0])
    step = 1e-3 * r
    by_radius, over_radius, down = half_space.gradient(source, r, z, 1.0, NU, G)

    def u(n):
        return np.array(half_space.displacement(source, r + n * step, z, 1.0, NU, G))

    slope = (8 * (u(1) - u(-1)) - (u(2) - u(-2))) / (12 * step)
    np.testing.assert_allclose(by_radius, slope[0], rtol=1e-8, atol=1e-12)
    np.testing.assert_allclose(down, slope[1], rtol=1e-8, atol=1e-12)
    np.testing.assert_allclose(over_radius, u(0)[0] / r, rtol=1e-13)


@pytest.mark.parametrize("source", half_space.SOURCES)
def test_gradient_on_the_axis(source):
    """At r = 0 both horizontal strains are equal and the ground is level."""
    by_radius, over_radius, down = half_space.gradient(source, 0.0, 0.3, 1.0, NU, G)
    outward, _ = half_space.displacement(source, 1e-6, 0.3, 1.0, NU, G)
    assert by_radius == over_radius
    assert float(over_radius) == pytest.approx(float(outward) * 1e6, rel=1e-9)
    assert down == 0.0


@pytest.mark.parametrize("r", [0.0, 0.7, 30.0])
def test_surface_kernels_are_the_depth_kernels_at_zero(r):
    c = 1.3
    for name, arguments in (
        ("contraction", (NU,)), ("closure", ()), ("vertical_force", (NU, G))
    ):
        surface = getattr(half_space, f"{name}_surface")(r, c, *arguments)
        at_zero = half_space.displacement(name, r, 0.0, c, NU, G)
        np.testing.assert_allclose(surface, at_zero, rtol=1e-12, atol=1e-15)
        slope = getattr(half_space, f"{name}_surface_gradient")(r, c, *arguments)
        at_zero = half_space.gradient(name, r, 0.0, c, NU, G)
        np.testing.assert_allclose(slope, at_zero, rtol=1e-12, atol=1e-15)
    # The compiled kernels and their array form are the same arithmetic.
    compiled = half_space.closure_depth(r, 0.4, c, NU)
    np.testing.assert_allclose(compiled, half_space.displacement("closure", r, 0.4, c, NU))


@pytest.mark.parametrize("source", ["contraction", "closure"])
def test_jump_across_the_source(source):
    """A crack of volume 1 takes 1 out between the planes just above and below it; so does, by its
    uniaxial definition, a wide layer of nuclei: the flux through the two planes differs by 1."""
    x, w = np.polynomial.legendre.leggauss(400)
    t = 0.5 * (x + 1.0)  # r = h t/(1-t) reaches infinity
    h = 1e-4
    r = h * t / (1.0 - t)
    area = 2 * np.pi * r * h / (1.0 - t) ** 2 * 0.5 * w
    inside = r < 1e4
    above = half_space.displacement(source, r[inside], 1.0 - h, 1.0, NU)[1] @ area[inside]
    below = half_space.displacement(source, r[inside], 1.0 + h, 1.0, NU)[1] @ area[inside]
    assert above - below == pytest.approx(1.0, rel=2e-3)


@pytest.mark.parametrize("source", ["contraction", "closure"])
def test_volume_ratio_by_integration(source):
    x, w = np.polynomial.legendre.leggauss(200)
    t = 0.5 * (x + 1.0)
    r = t / (1.0 - t)
    downward = half_space.displacement(source, r, 0.0, 1.0, NU)[1]
    volume = (2 * np.pi * r / (1.0 - t) ** 2 * downward) @ (0.5 * w)
    assert volume == pytest.approx(half_space.volume_ratio(source, NU), rel=1e-10)


def test_contraction_is_matched_release():
    """Closure alone against contraction at nu: the rest of the nucleus is horizontal and its bowl
    volume is 1 - 2 nu."""
    both = half_space.volume_ratio("contraction", 0.3) - half_space.volume_ratio("closure", 0.3)
    assert both == pytest.approx(1 - 2 * 0.3)


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"source": "contracion"}, ["contracion", "Did you mean 'contraction'"]),
        ({"radius": 0.0, "observation_depth": 1000.0}, ["on a point source", "finite cell"]),
        ({"poisson_ratio": 0.5}, ["0.5", "below 0.5"]),
        ({"source_depth": -5.0}, ["source depth", "-5 m"]),
        ({"observation_depth": np.nan}, ["observation depth", "nan m"]),
        ({"source": "vertical_force"}, ["shear modulus"]),
        ({"source": "vertical_force", "shear_modulus": 0.0}, ["shear modulus", "0 Pa"]),
    ],
)
def test_bad_input(change, words):
    arguments = {
        "source": "contraction", "radius": 100.0, "observation_depth": 0.0,
        "source_depth": 1000.0, "poisson_ratio": 0.25,
    } | change
    with pytest.raises(InputError) as error:
        half_space.displacement(**arguments)
    for word in words:
        assert word in str(error.value)


def test_a_force_has_no_bowl_volume():
    with pytest.raises(InputError, match="no finite volume"):
        half_space.volume_ratio("vertical_force", 0.25)
