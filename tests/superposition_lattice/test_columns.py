"""Pillars spread as a whole are what their cells are one by one."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from lattice_cases import compare, error_of, pillar_field, raster

from subside.earth_models import HalfSpace, RigidBasement
from subside.superposition.columns import column_starts, deposit_columns
from subside.superposition.direct import Direct
from subside.superposition.frame import Axis, chebyshev
from subside.superposition.interface import Bodies
from subside.superposition.lattice import Lattice
from subside.superposition.spread import Bins, deposit_bins, extent_of_points
from subside.superposition.stencil import Stencil

EARTH = HalfSpace(poisson_ratio=0.25)


def _sheets(bodies: Bodies, orders: list[int], width: int) -> tuple[np.ndarray, np.ndarray]:
    """The same cells by columns and by bins: (row, column, depth node, series) both."""
    assert bodies.column is not None
    cells = np.argsort(bodies.column, kind="stable")
    corners, column = bodies.corners(cells), bodies.column[cells]
    rule = np.tile(np.array(orders, dtype=np.int16), (cells.size, 1))
    strength = np.random.default_rng(0).normal(size=(cells.size, 7))
    powers = np.ascontiguousarray(Stencil.of(width, 8.0).coefficients.T)
    x, y = (Axis.around((corners[..., n].min(), corners[..., n].max()), (0.0, 1.0), 93.0, width)
            for n in range(2))
    depths, weights = chebyshev(corners[..., 2].min(), corners[..., 2].max(), 6)
    by_columns, by_bins = np.zeros((2, y.sources, x.sources * 6 * 7))
    start = column_starts(column)
    if bodies.boxes is not None:
        boxes = bodies.boxes(cells)
        top, bottom = boxes[:, 2:3].copy(), boxes[:, 3:4].copy()
    else:
        top, bottom = corners[:, :4, 2].copy(), corners[:, 4:, 2].copy()
    deposit_columns(by_columns, np.ascontiguousarray(corners[start[:-1], :4, :2]), top, bottom,
                    rule[start[:-1]], start, strength, x.origin, y.origin, 93.0, powers, depths,
                    weights)
    bins = Bins.of(extent_of_points(corners, rule), x, y)
    order = bins.order
    deposit_bins(by_bins, strength[order], corners[order], rule[order], bins.row, bins.column,
                 bins.extra_rows, bins.extra_columns, x.origin, y.origin, 93.0, powers, depths,
                 weights)
    return by_columns, by_bins


@pytest.mark.parametrize("orders", [[1, 1, 1, 1, 1, 1], [2, 3, 1, 1, 1, 1], [4, 2, 3, 1, 1, 1],
                                    [3, 5, 2, 2, 1, 2], [8, 8, 2, 1, 2, 3]])
@pytest.mark.parametrize("shape", [
    {"boxes": True}, {}, {"dip": 0.1}, {"dip": 0.1, "azimuth": 71.0, "thickness": 150.0},
    {"azimuth": 0.0, "thickness": 200.0}, {"dip": 0.04, "size": 350.0}])
def test_columns_and_bins_give_the_same_sheet(shape: dict, orders: list[int]) -> None:
    bodies, _ = pillar_field(**shape)
    by_columns, by_bins = _sheets(bodies, orders, 6)
    assert np.abs(by_bins).max() > 0.01
    assert np.abs(by_columns - by_bins).max() < 1e-12 * np.abs(by_bins).max()


@pytest.mark.parametrize("width", [4, 8, 12])
def test_for_stencils_of_every_width(width: int) -> None:
    by_columns, by_bins = _sheets(pillar_field(dip=0.05)[0], [2, 2, 1, 1, 1, 1], width)
    assert np.abs(by_columns - by_bins).max() < 1e-12 * np.abs(by_bins).max()


@pytest.mark.parametrize("gradient", [False, True])
@pytest.mark.parametrize("shape", [
    {"boxes": True}, {}, {"dip": 0.08}, {"dip": 0.05, "depth": 350.0, "thickness": 60.0},
    {"boxes": True, "depth": 300.0, "size": 350.0, "thickness": 40.0, "azimuth": 10.0}])
def test_the_field_of_pillars_is_the_plain_sum(shape: dict, gradient: bool) -> None:
    bodies, moments = pillar_field(**shape)
    targets = raster(20, 3.0 * shape.get("depth", 1200.0))
    error, _ = compare(bodies, moments, targets, EARTH, 1e-6, gradient)
    assert error <= 1e-6
    alone = Lattice(forced=True)
    field = alone.solve(replace(bodies, column=None), moments, targets, EARTH, tolerance=1e-6,
                        gradient=gradient)
    assert any("lattice" in note for note in alone.notes)
    truth = Direct().solve(bodies, moments, targets, EARTH, tolerance=1e-8, gradient=gradient)
    assert error_of(field, truth) <= 1e-6


def test_pillars_over_a_rigid_basement() -> None:
    bodies, moments = pillar_field(dip=0.05, columns=4, rows=3, steps=1)
    earth = RigidBasement(poisson_ratio=0.3, basement_depth=4000.0)
    assert compare(bodies, moments, raster(12, 4000.0), earth, 1e-5)[0] <= 1e-5


def test_cells_alone_in_their_pillar_among_others() -> None:
    """Half of the pillars have one cell left that loses anything: those go by bins."""
    bodies, moments = pillar_field(dip=0.05)
    assert bodies.column is not None
    gone = (np.arange(bodies.count) >= 30) & (bodies.column % 2 == 0)
    moments = {source: np.where(gone, 0.0, moment) for source, moment in moments.items()}
    assert compare(bodies, moments, raster(20, 4000.0), EARTH, 1e-6)[0] <= 1e-6


def test_where_columns_begin() -> None:
    assert column_starts(np.array([4, 4, 2, 7, 7, 7])).tolist() == [0, 2, 3, 6]
    assert column_starts(np.array([5])).tolist() == [0, 1]
