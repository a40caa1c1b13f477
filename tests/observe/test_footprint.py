"""What pixels take of cells: exact areas and volumes, none lost between the pixels."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import linprog
from scipy.spatial import ConvexHull, HalfspaceIntersection

from subside.grid.geometry import corners_of_boxes
from subside.observe.footprint import (
    Footprints,
    column_sums,
    outline_area,
    outlines_of,
    shape_of_thickness,
)
from subside.superposition.interface import Bodies


def box(x: float, y: float, dx: float, dy: float, azimuth: float = 0.0) -> np.ndarray:
    """The outline (1, 4, 2) of a box."""
    corners = corners_of_boxes(*(np.array([v]) for v in (x, y, 1000.0, 1010.0, dx, dy, azimuth)))
    return corners[:, :4, :2]


def shares(outline: np.ndarray, rows: int = 4, columns: int = 5, spacing: float = 100.0,
           west: float = 0.0, north: float = 400.0) -> np.ndarray:
    """(row, column) of one outline; the map covers x 0 to 500, y 0 to 400."""
    outline = np.asarray(outline, dtype=float).reshape(1, 4, 2)
    matrix = Footprints(outline).shares(west, north, spacing, rows, columns)
    return matrix.toarray()[:, 0].reshape(rows, columns)


def standing(outline: np.ndarray, thickness: np.ndarray) -> np.ndarray:
    """Corners (cell, 8, 3) of upright cells: outlines (cell, 4, 2), thickness (cell, 4) there."""
    outline, thickness = np.asarray(outline, dtype=float), np.asarray(thickness, dtype=float)
    corners = np.empty((len(thickness), 8, 3))
    corners[:, :4, :2] = corners[:, 4:, :2] = outline
    corners[:, :4, 2] = [1000.0, 1020.0, 990.0, 1003.0]  # nothing depends on where the top is
    corners[:, 4:, 2] = corners[:, :4, 2] + thickness
    return corners


def taken(corners: np.ndarray, column: list[int], lost: np.ndarray, rows: int = 4,
          columns: int = 5, spacing: float = 100.0, west: float = 0.0,
          north: float = 400.0) -> np.ndarray:
    """Volume (date, row, column) of the cells' `lost` (date, cell) below each pixel."""
    numbers = np.array(column, dtype=np.int32)
    bodies = Bodies(len(corners), lambda index: corners[index], None, numbers)
    footprints = Footprints.of(bodies)
    names, sums = column_sums(numbers, np.asarray(lost, dtype=float), footprints.shape)
    assert names.tolist() == sorted(set(column))
    matrix = footprints.shares(west, north, spacing, rows, columns)
    return np.stack([matrix @ some.ravel() for some in sums]).reshape(-1, rows, columns)


def by_midpoints(outline: np.ndarray, thickness: np.ndarray, pieces: int) -> np.ndarray:
    """Share of the volume below each pixel (4, 5) of 100 m, from so many pieces a side, each
    counted where its middle is: thickness times the Jacobian of the bilinear outline."""
    outline = np.asarray(outline, dtype=float)
    u, v = np.meshgrid(*2 * [(np.arange(pieces) + 0.5) / pieces], indexing="ij")
    corner = np.stack([(1 - u) * (1 - v), u * (1 - v), u * v, (1 - u) * v], axis=-1)
    by_u = np.stack([v - 1, 1 - v, v, -v], axis=-1) @ outline
    by_v = np.stack([u - 1, -u, u, 1 - u], axis=-1) @ outline
    volume = (corner @ thickness) * (by_u[..., 0] * by_v[..., 1] - by_u[..., 1] * by_v[..., 0])
    x, y = np.moveaxis(corner @ outline, -1, 0)
    share = np.zeros((4, 5))
    np.add.at(share, (((400.0 - y) // 100.0).astype(int), (x // 100.0).astype(int)), volume)
    return share / volume.sum()


def test_box_in_one_pixel_is_all_there() -> None:
    """Row 0 is the northern one."""
    wanted = np.zeros((4, 5))
    wanted[1, 3] = 1.0
    assert shares(box(350.0, 250.0, 60.0, 80.0)) == pytest.approx(wanted, abs=1e-15)


def test_box_over_several_pixels_is_shared_by_area() -> None:
    """x 150 to 330, y 120 to 260: overlaps 50, 100, 30 by 60, 80 m of 180 x 140."""
    got = shares(box(240.0, 190.0, 180.0, 140.0))
    wanted = np.zeros((4, 5))
    wanted[1:3, 1:4] = np.outer([60, 80], [50, 100, 30]) / (180 * 140)
    assert got == pytest.approx(wanted, abs=1e-14)


def test_turned_square_is_shared_by_area() -> None:
    """A square on its corner, diagonal 200 m, centred on the corner of four pixels and then on the
    middle of one: in the second case the pixel cuts four triangles of half diagonal 50 m."""
    side = 200.0 / np.sqrt(2)
    quarter = shares(box(200.0, 200.0, side, side, 45.0))
    assert quarter[1:3, 1:3] == pytest.approx(0.25, abs=1e-14)
    assert quarter.sum() == pytest.approx(1.0, abs=1e-14)
    middle = shares(box(250.0, 250.0, side, side, 45.0))
    # |x| + |y| < 100 beyond x > 50: a triangle of base 100 and height 50 of an area of 20000
    assert middle[1, 2] == pytest.approx(0.5, abs=1e-14)
    for row, col in [(0, 2), (2, 2), (1, 1), (1, 3)]:
        assert middle[row, col] == pytest.approx(2500 / 20000, abs=1e-14)


@pytest.mark.parametrize("azimuth", [30.0, -60.0, 120.0])
def test_azimuth_is_clockwise_from_north(azimuth: float) -> None:
    """A long thin box reaches into the pixel its own y axis points to."""
    got = Footprints(box(0.0, 0.0, 1.0, 400.0, azimuth)).shares(-250, 250, 500 / 9, 9, 9)
    got = got.toarray().reshape(9, 9)
    along = 199.0 * np.array([np.sin(np.radians(azimuth)), np.cos(np.radians(azimuth))])
    column, row = int((along[0] + 250) // (500 / 9)), int((250 - along[1]) // (500 / 9))
    assert got[row, column] > 0.02
    assert got[row, 8 - column] == 0.0


def test_trapezium_is_shared_by_area() -> None:
    """x 100 to 300, half-height 20 m in the west, 40 m in the east: the western half has a mean
    half-height of 25 m of 30."""
    got = shares([[100, 130], [300, 110], [300, 190], [100, 170]])
    assert got[2, 1] == pytest.approx(0.5 * 25 / 30, abs=1e-14)
    assert got[2, 2] == pytest.approx(0.5 * 35 / 30, abs=1e-14)


def test_outline_with_a_notch_is_shared_by_area() -> None:
    """An arrowhead, a triangle of base 80 m and height 200 m less one of height 160 m: 1600 m2.
    East of x = 200 their bases are 40 and 30 m, their heights 100 and 60 m: 1100 m2."""
    got = shares([[100, 110], [300, 150], [100, 190], [260, 150]])
    assert got[2, 2] == pytest.approx(1100 / 1600, abs=1e-14)
    assert got[2, 1] == pytest.approx(500 / 1600, abs=1e-14)


@settings(max_examples=60, deadline=None)
@given(st.integers(0, 2**32 - 1), st.floats(20.0, 400.0))
def test_share_is_the_overlap_of_two_convex_shapes(seed: int, size: float) -> None:
    """Against the intersection of half-planes by the Qhull library."""
    rng = np.random.default_rng(seed)
    angle = np.sort(rng.uniform(0.0, 2 * np.pi, 4) * 0.2 + np.arange(4) * np.pi / 2)
    outline = rng.uniform(0.0, 400.0, 2) + size * np.column_stack([np.cos(angle), np.sin(angle)])
    got = shares(outline)
    hull = ConvexHull(outline)
    for row, column in np.ndindex(got.shape):
        planes = np.vstack([hull.equations, _square(row, column)])
        assert got[row, column] == pytest.approx(_area(planes) / hull.volume, abs=1e-9)


def _square(row: int, column: int) -> list[list[float]]:
    """Half-planes of a pixel of 100 m."""
    west, south = 100.0 * column, 300.0 - 100.0 * row
    return [[-1, 0, west], [1, 0, -west - 100.0], [0, -1, south], [0, 1, -south - 100.0]]


def _corners(planes: np.ndarray) -> np.ndarray:
    """Of the intersection of half-planes a x + b y + c <= 0, in order; none where there is none."""
    lengths = np.hypot(planes[:, 0], planes[:, 1])
    deepest = linprog([0, 0, -1], np.column_stack([planes[:, :2], lengths]), -planes[:, 2],
                      bounds=[(None, None), (None, None), (0, None)])
    if not deepest.success or deepest.x[2] < 1e-6:
        return np.zeros((0, 2))
    found = HalfspaceIntersection(planes, deepest.x[:2]).intersections
    return found[ConvexHull(found).vertices]


def _area(planes: np.ndarray) -> float:
    """Area of the intersection of half-planes."""
    corners = _corners(planes)
    return ConvexHull(corners).volume if len(corners) else 0.0


def test_cell_partly_and_wholly_beside_the_map() -> None:
    """Only the part on the map counts; nothing is moved onto the edge."""
    half = shares(box(0.0, 150.0, 100.0, 50.0))
    assert half[2, 0] == pytest.approx(0.5, abs=1e-14)
    assert half.sum() == pytest.approx(0.5, abs=1e-14)
    for x, y in [(-300.0, 150.0), (900.0, 150.0), (250.0, 900.0), (250.0, -900.0), (1e8, 0.0)]:
        assert not shares(box(x, y, 100.0, 100.0)).any()


def test_cell_larger_than_the_map() -> None:
    """Every pixel its own area of the whole."""
    got = shares(box(250.0, 200.0, 5000.0, 4000.0, 20.0))
    assert got == pytest.approx(100.0**2 / (5000.0 * 4000.0), rel=1e-12)


@settings(max_examples=40, deadline=None)
@given(st.integers(0, 2**32 - 1), st.floats(0.02, 6.0), st.booleans())
def test_nothing_is_lost_under_a_map_that_covers(seed: int, size: float, huge: bool) -> None:
    """Columns sum to 1 for any quadrilateral, in pixels from fine to coarse, also at coordinates
    of a million metres; and the sum of map times area is the volume lost."""
    rng = np.random.default_rng(seed)
    square = np.array([[-1, -1], [1, -1], [1, 1], [-1, 1]]) * 100.0 * size
    outlines = (square * rng.uniform(0.4, 1.0, (5, 4, 2)) + rng.uniform(-200, 200, (5, 1, 2))
                + (1e6 if huge else 0.0))
    far = np.ceil(8 * size + 10) * 100.0
    west, north = (1e6 if huge else 0.0) - far, (1e6 if huge else 0.0) + far
    count = int(2 * far / 100.0)
    matrix = Footprints(outlines).shares(west, north, 100.0, count, count)
    assert np.asarray(matrix.sum(axis=0)).ravel() == pytest.approx(1.0, abs=1e-9 if huge else 1e-12)
    lost = rng.uniform(-1.0, 3.0, 5)
    assert (matrix @ lost).sum() == pytest.approx(lost.sum(), rel=1e-8, abs=1e-8)
    assert matrix.min() >= 0.0 and matrix.has_canonical_format


def test_more_pixels_than_were_made_room_for() -> None:
    """One outline over ten thousand pixels: the table grows, and keeps what it held."""
    matrix = Footprints(box(500.0, 500.0, 1000.0, 1000.0)).shares(0, 1000, 10.0, 100, 100)
    assert matrix.toarray().ravel() == pytest.approx(1e-4, rel=1e-9)


def test_each_outline_has_its_own_column() -> None:
    """Three boxes, the middle one beside the map."""
    outlines = np.concatenate([box(50.0, 350.0, 10.0, 10.0), box(-50.0, 350.0, 10.0, 10.0),
                               box(450.0, 50.0, 10.0, 10.0)])
    got = Footprints(outlines).shares(0.0, 400.0, 100.0, 4, 5).toarray()
    wanted = np.zeros((20, 3))
    wanted[0, 0] = wanted[19, 2] = 1.0
    assert got == pytest.approx(wanted, abs=1e-15)


def test_a_leaning_cell_has_the_mean_of_top_and_bottom_as_outline() -> None:
    """Top at x 100 to 200, bottom 60 m further east: the mean is 130 to 230. The box beside it has
    the outline of one of its two cells."""
    upright = standing(np.repeat(box(350.0, 350.0, 40.0, 40.0), 2, axis=0), np.full((2, 4), 5.0))
    corners = np.concatenate([box(150.0, 150.0, 100.0, 50.0)[0], box(210.0, 150.0, 100.0, 50.0)[0]])
    leaning = np.column_stack([corners, np.repeat([1000.0, 1010.0], 4)])[None]
    cells = np.concatenate([upright[:1], leaning, upright[1:]])
    bodies = Bodies(3, lambda index: cells[index], None, np.array([1, 0, 1]))
    assert outlines_of(bodies, np.array([1]))[0, :, 0] == pytest.approx([130, 230, 230, 130])
    footprints = Footprints.of(bodies)
    assert footprints.shape is None and footprints.outlines.shape == (2, 4, 2)
    got = footprints.shares(0.0, 400.0, 100.0, 4, 5).toarray().reshape(4, 5, 2)
    assert got[2, 1:3, 0] == pytest.approx([0.7, 0.3], abs=1e-14)
    assert got[0, 3, 1] == pytest.approx(1.0, abs=1e-14)
    alone = Footprints.of(Bodies(3, lambda index: cells[index]))
    assert alone.outlines[[0, 2]] == pytest.approx(np.repeat(footprints.outlines[1:], 2, axis=0))


def test_either_hand_and_no_area() -> None:
    """Corners going round the other way: the same; all in one line, or none at all: nothing."""
    outline = box(240.0, 190.0, 180.0, 140.0, 15.0)[0]
    assert shares(outline[[0, 3, 2, 1]]) == pytest.approx(shares(outline), abs=1e-15)
    assert not shares([[100, 100], [200, 200], [300, 300], [200, 200]]).any()
    assert Footprints(np.zeros((0, 4, 2))).shares(0, 0, 1.0, 2, 2).shape == (4, 0)


def test_sides_that_cross_give_no_more_than_the_whole() -> None:
    """A bow tie crossed at x = 200, of triangles of 2000 m2 to the west and 1280 m2 to the east:
    its signed area, 720 m2, is less than either."""
    got = shares([[150, 110], [150, 190], [240, 118], [240, 182]])
    assert got[2, 1] == pytest.approx(got[2, 2] * 2000 / 1280, rel=1e-12)
    assert 0.5 < got.sum() <= 1.0


def test_area_of_outlines() -> None:
    """A box of 180 x 140 m, turned and either way round; a trapezium of 40 and 80 m over 200 m."""
    outline = box(240.0, 190.0, 180.0, 140.0, 15.0)
    trapezium = np.array([[[100.0, 130], [300, 110], [300, 190], [100, 170]]])
    got = outline_area(np.concatenate([outline, outline[:, ::-1], trapezium]))
    assert got == pytest.approx([25200.0, 25200.0, 12000.0], rel=1e-13)


# -- volumes ---------------------------------------------------------------------------------------


def test_wedge_is_shared_by_volume() -> None:
    """x 100 to 300, thickness 2 m in the west and 8 m in the east: the western half has a mean of
    3.5 m of 5 m, so 0.35 of the volume, and half of the area."""
    cell = standing([[[100, 130], [300, 130], [300, 170], [100, 170]]], [[2, 8, 8, 2]])
    got = taken(cell, [0], [[1000.0]])[0]
    assert got[2, 1:3] == pytest.approx([350.0, 650.0], abs=1e-10)
    assert got.sum() == pytest.approx(1000.0, abs=1e-10)


def test_trapezium_is_shared_by_volume() -> None:
    """Half-height 20 + 20 q m and thickness 5 + 10 q m along q from 0 to 1. Up to q the area goes
    as 20 q + 10 q^2, the volume as 100 q + 150 q^2 + 200/3 q^3: halves of 12.5 of 30 (0.417) and of
    95.833 of 316.667 (0.303). The line at q = 1/2 is one of equal s: the Gauss points are exact."""
    outline = [[[100, 130], [300, 110], [300, 190], [100, 170]]]
    assert taken(standing(outline, [[5, 5, 5, 5]]), [0], [[1.0]])[0, 2, 1] == pytest.approx(
        12.5 / 30, abs=1e-14)
    western = (100 / 2 + 150 / 4 + 200 / 24) / (100 + 150 + 200 / 3)
    got = taken(standing(outline, [[5, 15, 15, 5]]), [0], [[1.0]])[0]
    assert got[2, 1:3] == pytest.approx([western, 1 - western], abs=1e-14)


def test_twisted_thickness_on_a_box() -> None:
    """x 0 to 400, y 0 to 400, thickness u v over [0, 1]^2 (one corner is thick): below a quarter
    from u1 to u2 and v1 to v2 lies (u2^2 - u1^2) (v2^2 - v1^2)."""
    cell = standing([[[0, 0], [400, 0], [400, 400], [0, 400]]], [[0, 0, 9, 0]])
    got = taken(cell, [0], [[1.0]])[0]
    edge = np.diff((np.arange(5) / 4) ** 2)
    wanted = np.zeros((4, 5))
    wanted[:, :4] = np.outer(edge[::-1], edge)
    assert got == pytest.approx(wanted, abs=1e-14)


@pytest.mark.parametrize("mirrored", [False, True])
def test_parallelogram_is_exact(mirrored: bool) -> None:
    """Rotated and skew, corners going round either way, thickness bilinear; against the integral
    over each overlap by the formula for moments of triangles (Qhull's vertices; a rule of degree 2
    at the middles of the sides), thickness being of degree 2 in x, y."""
    corner, one, two = np.array([130.0, 120.0]), np.array([190.0, 60.0]), np.array([-40.0, 170.0])
    outline = np.array([corner, corner + one, corner + one + two, corner + two])
    thickness = np.array([1.0, 5.0, 9.0, 2.0])
    order = [0, 3, 2, 1] if mirrored else [0, 1, 2, 3]
    cell = standing([outline[order]], [thickness[order]])
    got = taken(cell, [0], [[1.0]])[0]
    back = np.linalg.inv(np.column_stack([one, two]))

    def height(place: np.ndarray) -> np.ndarray:
        u, v = back @ (place - corner).T
        return ((1 - u) * (1 - v) * thickness[0] + u * (1 - v) * thickness[1]
                + u * v * thickness[2] + (1 - u) * v * thickness[3])

    volume = abs(np.linalg.det([one, two])) * thickness.mean()
    hull = ConvexHull(outline)
    for row, column in np.ndindex(got.shape):
        corners = _corners(np.vstack([hull.equations, _square(row, column)]))
        wanted = 0.0
        for n in range(1, len(corners) - 1):
            a, b, c = corners[0], corners[n], corners[n + 1]
            middles = 0.5 * np.array([a + b, b + c, c + a])
            wanted += 0.5 * abs(np.linalg.det([b - a, c - a])) * height(middles).mean()
        assert got[row, column] == pytest.approx(wanted / volume, abs=1e-12)


@pytest.mark.parametrize("outline", [
    [[110, 130], [330, 90], [370, 290], [150, 230]],
    [[120, 310], [310, 320], [370, 120], [60, 90]],
    [[110, 130], [330, 90], [330, 90], [150, 230]],
], ids=["irregular", "wide in the south", "triangle"])
def test_other_outlines_against_fine_pieces(outline: list[list[float]]) -> None:
    """Half a million pieces, each counted as a whole below one pixel or the next: of some 700 of
    them on a line between pixels, in or out at random, the error is about 2e-5."""
    thickness = np.array([1.0, 5.0, 9.0, 3.0])
    cell = standing([outline], [thickness])
    got = taken(cell, [0], [[1.0]])[0]
    assert got == pytest.approx(by_midpoints(outline, thickness, 700), abs=5e-5)
    even = taken(standing([outline], [[4.0] * 4]), [0], [[1.0]])[0]
    assert np.abs(even - got).max() > 0.01
    assert got.sum() == pytest.approx(1.0, abs=1e-14)


def test_cells_of_a_column_add_up_at_each_date() -> None:
    """A wedge, a wedge the other way and an even cell in one pillar, another pillar between them in
    the order of cells: the shares of each alone, weighted with what it loses."""
    outline = [[100, 130], [300, 130], [300, 170], [100, 170]]
    beside = [[300, 130], [400, 130], [400, 170], [300, 170]]
    cells = standing([outline, beside, outline, outline],
                     [[2, 8, 8, 2], [1, 3, 3, 1], [8, 2, 2, 8], [3, 3, 3, 3]])
    lost = np.array([[1.0, 2.0, 3.0, 4.0], [0.0, 0.0, 0.0, 0.0], [-1.0, 7.0, 10.0, 0.5]])
    got = taken(cells, [0, 1, 0, 0], lost)
    west = lost @ [0.35, 0.0, 0.65, 0.5]
    east = lost @ [0.65, 0.0, 0.35, 0.5]
    assert got[:, 2, 1:4] == pytest.approx(np.column_stack([west, east, lost[:, 1]]), abs=1e-13)
    assert got.sum(axis=(1, 2)) == pytest.approx(lost.sum(axis=1), abs=1e-12)


def test_even_sums_are_those_of_the_cells() -> None:
    """Columns named in no order; only those that occur. No cells, no columns."""
    column = np.array([9, 2, 9, 5, 2], dtype=np.int32)
    lost = np.array([[1.0, 2.0, 4.0, 8.0, 16.0], [-1.0, 0.0, 0.5, 0.0, 3.0]])
    names, sums = column_sums(column, lost)
    assert names.tolist() == [2, 5, 9]
    assert sums[:, 0].tolist() == [[18.0, 8.0, 5.0], [3.0, 0.0, -0.5]]
    names, sums = column_sums(column[:0], lost[:, :0])
    assert names.size == 0 and sums.shape == (2, 1, 0)


def test_boxes_and_even_cells_need_one_term() -> None:
    """Dipping faces do not matter, nor does rounding of depths: only thickness does."""
    outline = box(240.0, 190.0, 180.0, 140.0, 20.0)
    even = standing(outline, [[4.0] * 4]) + 1e-13
    for bodies in (Bodies(1, lambda index: even[index]),
                   Bodies(1, lambda index: even[index], lambda index: np.zeros((index.size, 7)))):
        footprints = Footprints.of(bodies)
        assert footprints.shape is None and footprints.terms == 1
    uneven = standing(outline, [[4.0, 4.0, 4.0, 4.001]])
    four = Footprints.of(Bodies(1, lambda index: uneven[index]))
    assert four.terms == 4
    where = (0.0, 400.0, 100.0, 4, 5)
    first = four.shares(*where)[:, 0]
    assert (first != Footprints(outline).shares(*where)).nnz == 0


def test_a_corner_turned_over_has_no_thickness() -> None:
    """Below zero counts as zero; none at all is shared by area, and so is an arrowhead."""
    outline = [[100, 130], [300, 130], [300, 170], [100, 170]]
    turned = shape_of_thickness(standing([outline] * 2, [[-5, 8, 8, -1], [0, 8, 8, 0]]))
    assert turned[0] == pytest.approx(turned[1])
    assert turned[0] == pytest.approx([1.0, 0.0, 0.0])
    assert not shape_of_thickness(standing([outline], [[-1, -2, -3, -4]])).any()
    arrowhead = [[100, 110], [300, 150], [100, 190], [260, 150]]
    got = taken(standing([arrowhead, outline], [[1, 2, 3, 4], [1, 2, 2, 1]]), [0, 1], [[1.0, 0.0]])
    assert got[0, 2, 2] == pytest.approx(1100 / 1600, abs=1e-14)
    four = Footprints(np.array([arrowhead], dtype=float), np.ones((1, 3)))
    assert not four.shares(0.0, 400.0, 100.0, 4, 5).toarray()[:, 1:].any()


@settings(max_examples=40, deadline=None)
@given(st.integers(0, 2**32 - 1), st.floats(0.02, 6.0), st.booleans(), st.booleans())
def test_no_volume_is_lost_under_a_map_that_covers(seed: int, size: float, huge: bool,
                                                   triangles: bool) -> None:
    """Of wedges on any convex outline or triangle, from fine pixels to coarse, also at coordinates
    of a million metres."""
    rng = np.random.default_rng(seed)
    square = np.array([[-1, -1], [1, -1], [1, 1], [-1, 1]]) * 100.0 * size
    outlines = square * rng.uniform(0.5, 1.0, (5, 4, 2)) + rng.uniform(-200, 200, (5, 1, 2))
    if triangles:
        side = rng.integers(0, 4)
        outlines[:, side] = outlines[:, (side + 1) % 4]
    middle, far = (1e6 if huge else 0.0), np.ceil(8 * size + 10) * 100.0
    cells = standing(outlines + middle, rng.uniform(0.0, 9.0, (5, 4)))
    count = int(2 * far / 100.0)
    lost = rng.uniform(-1.0, 3.0, (2, 5))
    got = taken(cells, list(range(5)), lost, count, count, 100.0, middle - far, middle + far)
    assert got.sum(axis=(1, 2)) == pytest.approx(lost.sum(axis=1), abs=1e-8 if huge else 1e-11)
