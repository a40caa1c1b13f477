"""Shares of cells below pixels: exact areas and volumes, none lost between the pixels."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from subside.grid.geometry import corners_of_boxes
from subside.observe.footprint import footprint_matrix
from subside.superposition.interface import Bodies


def bodies(corners: np.ndarray) -> Bodies:
    corners = np.asarray(corners, dtype=float).reshape(-1, 8, 3)
    return Bodies(len(corners), lambda index: corners[index])


def box(x: float, y: float, dx: float, dy: float, azimuth: float = 0.0) -> np.ndarray:
    return corners_of_boxes(*(np.array([v]) for v in (x, y, 1000.0, 1010.0, dx, dy, azimuth)))


def column(plan, thickness) -> np.ndarray:
    """An upright column on four places with a thickness at each."""
    plan, thickness = np.asarray(plan, float), np.asarray(thickness, float)
    top = np.column_stack([plan, np.full(4, 1000.0)])
    return np.concatenate([top, np.column_stack([plan, 1000.0 + thickness])])


def shares(corners: np.ndarray, rows: int = 4, columns: int = 5, spacing: float = 100.0,
           west: float = 0.0, north: float = 400.0) -> np.ndarray:
    """(row, column) of one cell; the map covers x 0 to 500, y 0 to 400."""
    matrix = footprint_matrix(bodies(corners), west, north, spacing, rows, columns)
    return matrix.toarray()[:, 0].reshape(rows, columns)


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
    got = footprint_matrix(bodies(box(0.0, 0.0, 1.0, 400.0, azimuth)), -250, 250, 500 / 9, 9, 9)
    got = got.toarray().reshape(9, 9)
    along = 199.0 * np.array([np.sin(np.radians(azimuth)), np.cos(np.radians(azimuth))])
    column, row = int((along[0] + 250) // (500 / 9)), int((250 - along[1]) // (500 / 9))
    assert got[row, column] > 0.02
    assert got[row, 8 - column] == 0.0


def test_wedge_is_shared_by_volume() -> None:
    """Thickness from 0 at x = 100 to 10 m at x = 300: the western half holds a quarter (integral of
    a straight line)."""
    plan = [[100, 110], [300, 110], [300, 190], [100, 190]]
    got = shares(column(plan, [0, 10, 10, 0]))
    assert got[2, 1] == pytest.approx(0.25, abs=1e-14)
    assert got[2, 2] == pytest.approx(0.75, abs=1e-14)


def test_trapezium_is_shared_by_volume() -> None:
    """Not a parallelogram: x 100 to 300, half-height 20 m in the west, 40 m in the east, thickness
    linear in x from 5 to 15 m. With s = (x-100)/200: int (40 + 40 s)(5 + 10 s) ds up to 1/2 is
    100 + 75 + 50/3 of 200 + 300 + 400/3."""
    plan = [[100, 130], [300, 110], [300, 190], [100, 170]]
    thickness = [5, 15, 15, 5]
    got = shares(column(plan, thickness))
    western = (100 + 75 + 50 / 3) / (200 + 300 + 400 / 3)
    # the four triangles carry the mean thickness, 10 m, at x = 200, as the straight line does
    assert got[2, 1] == pytest.approx(western, abs=1e-13)
    assert got[2, 2] == pytest.approx(1 - western, abs=1e-13)


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
    """Columns sum to 1 for any quadrilateral and thickness, in pixels from fine to coarse, also
    at coordinates of a million metres; and the sum of map times area is the volume lost."""
    rng = np.random.default_rng(seed)
    square = np.array([[-1, -1], [1, -1], [1, 1], [-1, 1]]) * 100.0 * size
    cells = []
    for _ in range(5):
        plan = square * rng.uniform(0.4, 1.0, (4, 2)) + rng.uniform(-200, 200, 2)
        cells.append(column(plan + (1e6 if huge else 0.0), rng.uniform(0.0, 20.0, 4)))
    far = np.ceil(8 * size + 10) * 100.0
    west, north = (1e6 if huge else 0.0) - far, (1e6 if huge else 0.0) + far
    count = int(2 * far / 100.0)
    matrix = footprint_matrix(bodies(np.array(cells)), west, north, 100.0, count, count)
    assert np.asarray(matrix.sum(axis=0)).ravel() == pytest.approx(1.0, abs=1e-9 if huge else 1e-12)
    lost = rng.uniform(-1.0, 3.0, 5)
    assert (matrix @ lost).sum() == pytest.approx(lost.sum(), rel=1e-8, abs=1e-8)
    assert matrix.min() >= 0.0


def test_more_pixels_than_were_made_room_for() -> None:
    """One cell over ten thousand pixels: the table grows, and keeps what it held."""
    matrix = footprint_matrix(bodies(box(500.0, 500.0, 1000.0, 1000.0)), 0, 1000, 10.0, 100, 100)
    assert matrix.toarray().ravel() == pytest.approx(1e-4, rel=1e-9)


def test_either_hand_and_no_volume() -> None:
    """Corners going round the other way: the same; a cell without thickness: nothing."""
    corners = box(240.0, 190.0, 180.0, 140.0, 15.0)[0]
    assert shares(corners[[0, 3, 2, 1, 4, 7, 6, 5]]) == pytest.approx(shares(corners), abs=1e-15)
    flat = corners.copy()
    flat[4:, 2] = flat[:4, 2]
    assert not shares(flat).any()
    assert footprint_matrix(Bodies(0, lambda index: np.zeros((0, 8, 3))), 0, 0, 1.0, 2,
                            2).shape == (4, 0)
