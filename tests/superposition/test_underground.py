"""Targets below the ground: near, inside and on cells, of every shape, for both kinds of source.

The reference cuts the body into many small ones whose own forms are checked elsewhere: at any
place only a few of them are near, so it errs far less than the body it stands for.
"""

from __future__ import annotations

import numpy as np
import pytest
from sources import as_hexahedra, boxes, by_volume, hexahedra, parts_of, solve, targets

from subside.earth.half_space import closure_depth, contraction_depth
from subside.superposition import underground

SOURCES = ["contraction", "closure"]
TOLERANCE = 1e-5
BOX = (0.0, 0.0, 1000.0, 1030.0, 120.0, 80.0)
"""x, y, top, bottom, dx, dy: a cell of usual size, depth exaggerated least."""


def difference(got: np.ndarray, wanted: np.ndarray) -> float:
    return float(np.abs(got - wanted).max() / np.abs(wanted).max())


def split_box(box: tuple[float, ...], n: int) -> np.ndarray:
    """n^3 equal boxes with the azimuth of the whole."""
    x, y, top, bottom, dx, dy, azimuth = box
    t = (np.arange(n) + 0.5) / n - 0.5
    u, v, w = (a.ravel() for a in np.meshgrid(t * dx, t * dy, (np.arange(n) + 0.0) / n))
    c, s = np.cos(np.radians(azimuth)), np.sin(np.radians(azimuth))
    height = (bottom - top) / n
    own_top = top + w * (bottom - top)
    ones = np.ones(u.size)
    return np.column_stack([x + u * c + v * s, y - u * s + v * c, own_top, own_top + height,
                            ones * dx / n, ones * dy / n, ones * azimuth])


def places(box: tuple[float, ...]):
    """Inside, on every kind of face, on edges and corners, near and far, in the box's own axes."""
    x, y, top, bottom, dx, dy, azimuth = box
    own = np.array([[0, 0, .5], [.2, -.3, .25], [0, 0, 0], [.1, .2, 1], [.5, .1, .4], [-.2, .5, .7],
                    [.5, .5, .5], [.5, .1, 0], [.5, -.5, 0], [-.5, .5, 1], [.6, .3, .5],
                    [0, 0, -.8], [1.3, 0, .5], [2.5, 1.5, -2], [-8, 3, 4]])
    u, v = own[:, 0] * dx, own[:, 1] * dy
    c, s = np.cos(np.radians(azimuth)), np.sin(np.radians(azimuth))
    return targets(x + u * c + v * s, y - u * s + v * c, top + own[:, 2] * (bottom - top))


@pytest.mark.parametrize("source", SOURCES)
@pytest.mark.parametrize("shape", ["box", "hexahedron"])
@pytest.mark.parametrize("box", [(*BOX, 0.0), (*BOX, 35.0),
                                 (10.0, -5.0, 90.0, 140.0, 60.0, 70.0, -110.0)])
def test_body_is_the_sum_of_its_parts(source: str, shape: str, box: tuple[float, ...]) -> None:
    where = places(box)
    whole = boxes(box)
    got = solve(whole if shape == "box" else as_hexahedra(whole), source, where,
                tolerance=TOLERANCE)
    wanted = solve(boxes(*split_box(box, 4)), source, where, tolerance=1e-8)
    assert np.isfinite(got).all()
    assert difference(got, wanted) < 0.1 * TOLERANCE


@pytest.mark.parametrize("source", SOURCES)
def test_twisted_hexahedron_is_the_sum_of_its_parts(source: str) -> None:
    """A dipping cell whose top and bottom are warped by a third of its thickness."""
    cell = np.array([[0, 0, 1000], [100, 5, 1020], [95, 100, 1030], [0, 90, 1010],
                     [3, 0, 1010], [103, 0, 1030], [100, 100, 1045], [0, 100, 1020.0]])
    where = targets([50, 50, 50, 30, 0, 97.5, 180], [50, 50, 50, 20, 0, 50, -60],
                    [1019, 1010, 1028, 1010, 1000, 1025, 1000])
    fine = parts_of(cell[None], 3)
    wanted = solve(hexahedra(fine), source, where, moment=by_volume(fine), tolerance=1e-7)
    got = solve(hexahedra(cell), source, where, tolerance=TOLERANCE)
    assert difference(got, wanted) < 0.1 * TOLERANCE


@pytest.mark.parametrize("source", SOURCES)
@pytest.mark.parametrize("shape", ["box", "hexahedron"])
def test_wide_shallow_body_seen_from_below_the_ground(source: str, shape: str) -> None:
    """Half-width over depth = 10: the image is as near as the body (a fixed number of image points
    misses it by half)."""
    box = (0.0, 0.0, 100.0, 110.0, 2000.0, 2000.0, 0.0)
    body = boxes(box) if shape == "box" else as_hexahedra(boxes(box))
    x = (np.arange(40) + 0.5) * 50.0 - 1000.0
    gx, gy = (a.ravel() for a in np.meshgrid(x, x))
    fine = boxes(*np.column_stack([gx, gy, *np.broadcast_arrays(
        100.0, 110.0, 50.0, 50.0, 0.0, gx)[:5]]))
    where = targets([0, 333, 990, 1000, 1005, 1500], 7.0, [50, 105, 95, 105, 5, 60])
    wanted = solve(fine, source, where, tolerance=1e-7)
    assert difference(solve(body, source, where, tolerance=TOLERANCE), wanted) < 0.1 * TOLERANCE


@pytest.mark.parametrize("source", SOURCES)
@pytest.mark.parametrize("shape", ["box", "hexahedron"])
@pytest.mark.parametrize("tolerance", [1e-3, 1e-5])
def test_nothing_jumps_where_the_method_changes(source: str, shape: str, tolerance: float) -> None:
    """Along a line from inside to far away every step of the order is crossed: the second
    differences of a smooth curve stay smooth, a jump shows at once. Outside the body only."""
    body = boxes((*BOX, 20.0))
    body = body if shape == "box" else as_hexahedra(body)
    run = np.linspace(1.0, 6.0, 4001)
    where = targets(75.0 * run, 40.0 * run, 1015.0 + 30.0 * run)
    coarse = solve(body, source, where, tolerance=tolerance)
    exact = solve(body, source, where, tolerance=1e-9)
    error = np.abs(coarse - exact).max(axis=0)
    assert error.max() < 0.1 * tolerance * np.abs(exact).max()
    assert error.max() > 0  # the two did take different ways


@pytest.mark.parametrize("source", SOURCES)
@pytest.mark.parametrize("shape", ["box", "hexahedron"])
def test_surface_is_the_limit_from_below(source: str, shape: str) -> None:
    """Depth 0 goes through another module than depth 1e-6 m."""
    body = boxes((0, 0, 200.0, 260.0, 150.0, 90.0, 30.0))
    body = body if shape == "box" else as_hexahedra(body)
    x = np.linspace(-400, 900, 14)
    surface = solve(body, source, targets(x, 50.0, 0.0), tolerance=1e-8)
    below = solve(body, source, targets(x, 50.0, 1e-6), tolerance=1e-8)
    # the field changes by 1e-6 m over some 100 m in between
    assert difference(below, surface) < 1e-7


@pytest.mark.parametrize("source", SOURCES)
def test_continuous_across_a_face_sideways(source: str) -> None:
    """A body of finite thickness has no jump; sideways through a face, and at a corner."""
    body = boxes((*BOX, 0.0))
    for x, y, z in [(60.0, 10.0, 1012.0), (60.0, 40.0, 1000.0), (60.0, -40.0, 1030.0)]:
        near = solve(body, source, targets([x - 1e-6, x, x + 1e-6], y, z))
        assert np.ptp(near, axis=1).max() < 1e-5 * np.abs(near).max()


@pytest.mark.parametrize("nu", [0.0, 0.25, 0.49])
def test_full_space_and_image_make_the_half_space(nu: float) -> None:
    """The image terms are those of the closed forms in `half_space`, which Okada (1992) and
    Mindlin and Cheng (1950) check."""
    for r, z, c in [(0.3, 0.4, 1.0), (2.0, 0.0, 1.0), (0.7, 3.0, 1.2)]:
        for closure, kernel in ((True, closure_depth), (False, contraction_depth)):
            full = underground._full_space(r, 0.0, z - c, closure, nu)
            over_r, down = underground._image(r * r, z, c, closure, nu)
            assert (full[0] + r * over_r, full[2] + down) == pytest.approx(
                kernel(r, z, c, nu), rel=1e-12)


def test_two_strengths_inside_a_body() -> None:
    """g nucleus + (1-g) crack: roof minus floor of a wide thin body is its closure e h for any g
    (the uniaxial strain of a wide slab)."""
    body = boxes((0, 0, 1000.0, 1010.0, 4000.0, 4000.0, 0.0))
    where = targets([0.0, 0.0], 0.0, [1000.0, 1010.0])
    for share in (0.0, 0.4, 1.0):
        fields = share * solve(body, "contraction", where) \
            + (1 - share) * solve(body, "closure", where)
        shortening = (fields[0, 0] - fields[0, 1]) * 4000.0**2
        # edges 200 thicknesses away take (2/pi) h/a = 0.3 % of it
        assert shortening == pytest.approx(1.0, rel=5e-3)
