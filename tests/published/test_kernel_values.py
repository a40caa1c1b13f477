"""Elastic kernels against published closed forms and printed values."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.special import ellipe, ellipk

from subside.earth import box, half_space, rigid_basement

NU = 0.25


def disc(field, r, radius=1.0, points=(60, 96)):
    """Integral over a disc (centred on the axis) of `field(distance)`, seen from radius r.

    Returns the vertical (sum) and radial (projected) integrals: Gauss points in radius, equal
    steps in angle (spectrally exact).
    """
    x, w = np.polynomial.legendre.leggauss(points[0])
    s = 0.5 * radius * (x + 1.0)
    angle = 2 * np.pi * (np.arange(points[1]) + 0.5) / points[1]
    dx = r - s[:, None] * np.cos(angle)
    distance = np.hypot(dx, s[:, None] * np.sin(angle))
    outward, downward = field(distance)
    area = (0.5 * radius * w * s * 2 * np.pi / points[1])[:, None]
    return (downward * area).sum(), (outward * dx / distance * area).sum()


def nuclei(c):
    return lambda distance: half_space.displacement("contraction", distance, 0.0, c, NU)


# Mogi (1958), Bull. Earthq. Res. Inst. 36:99, and Geertsma (1973), J. Petrol. Technol. 25:734 ----


def test_point_source():
    """u_z = u_r inward = (1-nu)/(pi 2^1.5) at r = c (exact)."""
    outward, downward = half_space.contraction_surface(1.0, 1.0, NU)
    assert downward == pytest.approx(0.0844046546, rel=1e-8)
    assert outward == pytest.approx(-0.0844046546, rel=1e-8)


def test_point_source_shape():
    """u_r/u_z = r/c; half of the peak at .766 c; steepest .8587 u_z0/c at c/2; largest u_r .3849
    u_z0 at c/sqrt 2 (from the closed form of Mogi 1958)."""
    c = 2000.0
    r = np.linspace(1.0, 3 * c, 200001)
    outward, downward = half_space.displacement("contraction", r, 0.0, c, NU)
    slope = half_space.gradient("contraction", r, 0.0, c, NU)[2]
    peak = half_space.contraction_surface(0.0, c, NU)[1]
    np.testing.assert_allclose(-outward / downward, r / c, rtol=1e-13)
    half = np.sqrt(2 ** (2 / 3) - 1)
    assert half == pytest.approx(0.766, abs=5e-4)
    at_half = half_space.contraction_surface(half * c, c, NU)[1]
    assert at_half / peak == pytest.approx(0.5, rel=1e-12)
    assert np.abs(slope).max() * c / peak == pytest.approx(0.8587, abs=5e-5)
    assert r[np.abs(slope).argmax()] == pytest.approx(c / 2, rel=1e-4)
    assert np.abs(outward).max() / peak == pytest.approx(0.3849, abs=5e-5)
    assert r[np.abs(outward).argmax()] == pytest.approx(c / np.sqrt(2), rel=1e-4)


def test_buried_force():
    """Mindlin (1936), Physics 7:195: nu .25, E 1, c 1, r .7; computed independently, two routes."""
    outward, downward = half_space.vertical_force_surface(0.7, 1.0, NU, 1.0 / 2.5)
    assert downward == pytest.approx(0.35385474777, rel=1e-10)
    assert outward == pytest.approx(-0.10225587983, rel=1e-10)


def test_nucleus_underground():
    """Mindlin & Cheng (1950); r 1, z .5, c 1, dV 1; computed independently (equilibrium and free
    surface verified symbolically)."""
    outward, downward = half_space.contraction_depth(1.0, 0.5, 1.0, NU)
    assert outward == pytest.approx(-0.0652991837, rel=1e-8)
    assert downward == pytest.approx(0.0838434454, rel=1e-8)
    rr, tt, down_by_r = half_space.contraction_depth_gradient(1.0, 0.5, 1.0, NU)
    h = 1e-4
    above = half_space.contraction_depth(1.0, 0.5 - h, 1.0, NU)
    below = half_space.contraction_depth(1.0, 0.5 + h, 1.0, NU)
    out_by_z, down_by_z = np.subtract(below, above) / (2 * h)
    assert rr == pytest.approx(0.0675016, abs=5e-8)
    assert tt == pytest.approx(-0.06529918, abs=5e-9)
    assert down_by_z == pytest.approx(-0.03145605, abs=5e-8)
    assert 0.5 * (down_by_r + out_by_z) == pytest.approx(-0.08038427, abs=5e-8)


# Discs (Geertsma 1973) --------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("eta", "expected"),
    [(0.2, 1.205825797), (0.5, 0.829179607), (1.0, 0.439339828), (2.0, 0.158359214)],
)
def test_disc_centre(eta, expected):
    """2(1-nu)(1 - eta/sqrt(1+eta^2)), Geertsma 1973."""
    value, _ = disc(nuclei(eta), 0.0, points=(80, 4))
    assert value == pytest.approx(expected, rel=1e-8)
    assert value == pytest.approx(2 * (1 - NU) * (1 - eta / np.hypot(1, eta)), rel=1e-11)


@pytest.mark.parametrize(
    ("rho", "eta", "a", "b"),
    [
        (1.0, 1.0, 0.178681159, 0.125151537),
        (0.5, 1.0, 0.2605531222316112, 0.08197734049656896),
        (1.5, 0.5, 0.09500225979582694, 0.20005024776712635),
        (2.0, 1.0, 0.05185272000193551, 0.08849550029670172),
        (0.6, 0.6, 0.4042683535329519, 0.17886121547538508),
    ],
)
def test_disc_functions(rho, eta, a, b):
    """A is the solid angle over 2 pi, B an elliptic integral (Geertsma 1973); values computed
    independently, two routes (Hankel quadrature, elliptic integrals)."""
    vertical, radial = disc(nuclei(eta), rho, points=(80, 256))
    assert vertical / (2 * (1 - NU)) == pytest.approx(a, rel=3e-9)
    assert -radial / (2 * (1 - NU)) == pytest.approx(b, rel=4e-9)
    m = 4 * rho / ((1 + rho) ** 2 + eta**2)
    closed = ((2 - m) * ellipk(m) - 2 * ellipe(m)) / (np.pi * np.sqrt(m * rho))
    assert -radial / (2 * (1 - NU)) == pytest.approx(closed, rel=1e-10)


@pytest.mark.parametrize(
    ("z", "expected"),
    [(0.0, 0.43933983), (0.25, 0.48007705), (0.5, 0.5296814), (0.75, 0.60208393),
     (0.9, 0.65625655), (1.25, -0.20880385), (1.5, -0.12803044), (2.0, -0.031884354)],
)
def test_disc_axis_underground(z, expected):
    """u_z on the axis of a disc R = c = 1 at depth z; closed form, checked by quadrature."""
    x, w = np.polynomial.legendre.leggauss(400)
    s = 0.5 * (x + 1.0)
    downward = half_space.displacement("contraction", s, z, 1.0, NU)[1]
    assert (2 * np.pi * s * downward) @ (0.5 * w) == pytest.approx(expected, abs=6e-9)


def test_jump_across_a_disc_is_its_compaction():
    """The displacement just above less that just below is exactly e h (here 1)."""
    x, w = np.polynomial.legendre.leggauss(400)
    jump = []
    for gap in (0.02, 0.01):
        t = 0.5 * (x + 1.0)
        s = t**3
        weight = 0.5 * w * 3 * t**2 * 2 * np.pi * s
        above = half_space.displacement("contraction", s, 1 - gap, 1.0, NU)[1] @ weight
        below = half_space.displacement("contraction", s, 1 + gap, 1.0, NU)[1] @ weight
        jump.append(above - below)
    assert 2 * jump[1] - jump[0] == pytest.approx(1.0, abs=2e-4)  # to zero gap, linearly


@pytest.mark.parametrize(
    ("profile", "expected", "end"),
    [
        (lambda s: np.log(1 / s), 0.188226406, 1.0),
        (lambda s: 1 - s**2, 0.171572875, 1.0),
        (lambda s: np.exp(-(s**2) / 2), 0.344320458, 12.0),
    ],
    ids=["ln(R/r)", "parabolic", "gaussian"],
)
def test_uneven_pressure(profile, expected, end):
    """Centre of a disc R = c with uneven depletion, times 2(1-nu): exact closed forms."""
    x, w = np.polynomial.legendre.leggauss(200)
    t = 0.5 * (x + 1.0)
    s = end * t**2  # the logarithm at the centre
    downward = half_space.displacement("contraction", s, 0.0, 1.0, NU)[1]
    value = (2 * np.pi * s * profile(s) * downward * end * 2 * t) @ (0.5 * w)
    assert value / (2 * (1 - NU)) == pytest.approx(expected, rel=1e-8)


def test_thick_disc():
    """Disc R = 1 from .9 to 1.1: u_z .088133295 per unit strain (exact); as thin .087867966."""
    x, w = np.polynomial.legendre.leggauss(20)
    value = sum(0.1 * wi * disc(nuclei(1 + 0.1 * xi), 0.0, points=(60, 4))[0]
                for xi, wi in zip(x, w, strict=True))
    assert value == pytest.approx(0.088133295, rel=1e-8)
    assert 0.2 * disc(nuclei(1.0), 0.0, points=(60, 4))[0] == pytest.approx(0.087867966, rel=1e-8)


# Rectangles ------------------------------------------------------------------------------------


def test_rectangle():
    """x .5..2.5, y -1..2 at depth 1, seen from the origin; closed form = quadrature."""
    ux, uy, uz, *_ = box.sheet_surface(0.5, 2.5, -1.0, 2.0, 1.0, NU)
    assert uz == pytest.approx(0.2298678625, rel=1e-9)
    assert ux == pytest.approx(0.2623737807, rel=1e-9)
    assert uy == pytest.approx(0.05907814193, rel=1e-9)


def test_square():
    """Half-width = depth, above the centre: exactly (1-nu) 2/3."""
    assert box.sheet_surface(-1.0, 1.0, -1.0, 1.0, 1.0, NU)[2] == pytest.approx(0.5, rel=1e-14)


def test_strip():
    """Half-width = depth, plane strain: centre .75, edge |u_x| .384225 (Segall 1989, Geology
    17:942, form; exact)."""
    far = 1e6
    assert box.sheet_surface(-1.0, 1.0, -far, far, 1.0, NU)[2] == pytest.approx(0.75, rel=1e-11)
    ux = box.sheet_surface(-2.0, 0.0, -far, far, 1.0, NU)[0]
    assert -ux == pytest.approx(0.384225, abs=5e-7)
    assert -ux == pytest.approx((1 - NU) / np.pi * np.log(5.0), rel=1e-11)
    centre = box.sheet_surface(-1.0, 1.0, -far, far, 1.0, NU)
    # closure: (angle - c d angle/dc)/(2 pi) with angle = 4 atan(a/c), so (pi + 2)/(2 pi)
    assert centre[5] == pytest.approx(0.5 + 1 / np.pi, rel=1e-11)


# Rigid basement (van Opstal 1974, Proc. 3rd Congr. ISRM 2B:1102) --------------------------------


def test_rigid_kernel():
    """alpha 1, c 1, k 2: W .607662189, U .576648416 (closed form = numerical propagation)."""
    w, u = rigid_basement.kernel_difference("contraction", np.float64(2.0), np.float64(1.0), NU)
    half = 2 * (1 - NU) * np.exp(-1.0)
    assert w + half == pytest.approx(0.607662189, rel=1e-8)
    assert u + half == pytest.approx(0.576648416, rel=1e-8)


@pytest.mark.parametrize(
    ("k", "expected"),
    [
        (1.05, [0.7919586052050909, 0.38136266047572187, 0.023764462020319357]),
        (1.1, [0.7484614091629295, 0.37083767121360933, 0.02977285855219359]),
        (1.25, [0.6439353176857638, 0.34331801134234396, 0.044570129383683]),
        (1.5, [0.5386978362422599, 0.3092095218188234, 0.058917318667636144]),
        (2.0, [0.45625981244890823, 0.2728296711456041, 0.06636675965906488]),
        (3.0, [0.4260364431206147, 0.25472359003174916, 0.06514094628993804]),
        (5.0, [0.4276123361858252, 0.2566619020718033, 0.06744893068618667]),
    ],
)
def test_disc_over_rigid_basement(k, expected):
    """Disc R = c = 1, r 0, 1, 2: not monotonic in k (computed independently, Hankel quadrature of
    the closed kernel)."""
    for r, value in zip((0.0, 1.0, 2.0), expected, strict=True):
        got, _ = disc(
            lambda s: rigid_basement.displacement("contraction", s, 1.0, NU, k), r, points=(40, 80)
        )
        assert got == pytest.approx(value, rel=1e-8)
