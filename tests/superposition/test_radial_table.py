"""Kernels by table: equal to the closed forms they come from, and refused where not smooth."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from sources import EARTH, as_hexahedra, boxes, solve, targets

from subside.earth_models import HalfSpace, RigidBasement
from subside.errors import InputError
from subside.superposition.table import RadialTable


class Tabulated(HalfSpace):
    """The half-space through the door of any other earth model."""

    name = "tabulated"

    @property
    def homogeneous_poisson_ratio(self) -> None:
        return None


class Kinked(Tabulated):
    """Jumps at a radius, as no elastic earth does."""

    name = "kinked"

    def displacement(self, source: str, radius: Any, observation_depth: Any, source_depth: Any):
        outward, down = super().displacement(source, radius, observation_depth, source_depth)
        return outward, np.where(np.asarray(radius) > 700.0, 1.5 * down, down)


class Infinite(Tabulated):
    name = "infinite"

    def displacement(self, source: str, radius: Any, observation_depth: Any, source_depth: Any):
        outward, down = super().displacement(source, radius, observation_depth, source_depth)
        return outward, down / np.where(np.asarray(radius) == 0.0, 0.0, 1.0)


CELLS = as_hexahedra(boxes((0, 0, 700, 760, 200, 200, 0), (900, 300, 1500, 1540, 300, 100, 30),
                           (-400, -900, 2500, 2600, 100, 200, 70)))
WHERE = targets([0, 0.0, 10, 900, -400, 4000, -9000], [0, 1e-3, 5, 300, -900, 2000, 100])


@pytest.mark.parametrize("source", ["contraction", "closure"])
def test_table_is_the_closed_form(source: str) -> None:
    """Above cells, on their axes and far away, displacement and derivatives."""
    table = solve(CELLS, source, WHERE, earth=Tabulated(poisson_ratio=0.25), gradient=True)
    closed = solve(CELLS, source, WHERE, earth=EARTH, gradient=True)
    for group in (slice(0, 3), slice(3, 8)):
        assert np.abs(table[group] - closed[group]).max() < 1e-7 * np.abs(closed[group]).max()


@pytest.mark.parametrize("source", ["contraction", "closure"])
def test_rigid_basement_from_shallow_to_just_above_it(source: str) -> None:
    """Small cells at 17 %, 50 % and 99 % of the basement's depth, against the model itself."""
    earth = RigidBasement(poisson_ratio=0.25, basement_depth=3000.0)
    depth = np.array([500.0, 1500.0, 2970.0])
    cells = boxes(*[(0.0, 0.0, d - 0.05, d + 0.05, 0.1, 0.1, 0.0) for d in depth])
    x = np.array([0.0, 20.0, 400.0, 1500.0, 4000.0])
    got = solve(cells, source, targets(x), earth=earth, gradient=True)
    outward, down = (np.mean(a, axis=1) for a in earth.displacement(
        source, x[:, None], np.zeros((5, 1)), depth[None, :]))
    radial, hoop, slope = (np.mean(a, axis=1) for a in earth.gradient(
        source, x[:, None], np.zeros((5, 1)), depth[None, :]))
    assert got[0] == pytest.approx(down, rel=1e-6, abs=1e-7 * down.max())
    assert got[1] == pytest.approx(outward, rel=1e-6, abs=1e-7 * down.max())
    scale = np.abs(radial).max()
    assert got[3] == pytest.approx(slope, rel=1e-6, abs=2e-7 * scale)
    assert got[5] == pytest.approx(radial, rel=1e-6, abs=2e-7 * scale)
    assert got[6] == pytest.approx(hoop, rel=1e-6, abs=2e-7 * scale)
    assert got[[2, 4, 7]] == pytest.approx(0.0, abs=1e-9 * scale)


def test_table_says_how_exact_it_is() -> None:
    """The error it states bounds the error at places of our own choice."""
    table = RadialTable.build(Tabulated(poisson_ratio=0.3), "closure", 400.0, 4000.0, 3e4, True)
    assert 0 < table.error < 1e-8
    depth = np.array([401.0, 1234.5, 3999.0])
    grid = np.linspace(0.0, np.arcsinh(3e4 / 400.0), 777)
    outward, down = Tabulated(poisson_ratio=0.3).displacement(
        "closure", np.sinh(grid)[None, :] * depth[:, None], 0.0, depth[:, None])
    values = table.values(grid, depth)
    assert np.abs(values[:, 1] - down * depth[:, None] ** 2).max() < 2e-8
    assert np.abs(values[:, 0] - outward * depth[:, None] ** 2).max() < 2e-8


def test_one_depth_is_enough_for_cells_of_one_depth() -> None:
    table = RadialTable.build(Tabulated(poisson_ratio=0.25), "contraction", 900.0, 900.0, 5e3,
                              False)
    assert table.error < 1e-8


def test_kernel_that_is_not_smooth_is_refused() -> None:
    with pytest.raises(InputError, match=r"earth model 'kinked': its contraction kernel cannot be "
                                         r"tabulated to 1e-08 \(reached .*\) for sources 700 to "
                                         r"2600 m deep; it must be smooth"):
        solve(CELLS, "contraction", WHERE, earth=Kinked(poisson_ratio=0.25))


def test_kernel_that_is_not_finite_is_refused() -> None:
    with np.errstate(divide="ignore"), pytest.raises(
            InputError, match="earth model 'infinite': its contraction kernel is not finite"):
        solve(CELLS, "contraction", WHERE, earth=Infinite(poisson_ratio=0.25))


def test_nothing_underground_but_in_a_half_space() -> None:
    with pytest.raises(InputError, match=r"'tabulated' gives displacement at the surface only, and "
                                         r"1 points lie below it, the first 12 m deep"):
        solve(CELLS, "contraction", targets([0.0], 0.0, 12.0), earth=Tabulated(poisson_ratio=0.25))
