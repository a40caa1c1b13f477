"""The lattice equals the plain sum within its tolerance, and knows when it does not."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from lattice_cases import compare, error_of, joined, raster, small_field, wells

from subside.earth_models import HalfSpace, RigidBasement
from subside.errors import InputError
from subside.superposition import band_pass, summation
from subside.superposition import lattice as lattice_module
from subside.superposition.direct import Direct
from subside.superposition.interface import Bodies, Targets
from subside.superposition.lattice import Lattice
from subside.superposition.stencil import Stencil

EARTH = HalfSpace(poisson_ratio=0.25)
BASEMENT = RigidBasement(poisson_ratio=0.3, basement_depth=5000.0)


@settings(max_examples=12, deadline=None)
@given(depth=st.floats(300.0, 3000.0), width=st.floats(0.05, 0.5), azimuth=st.floats(0.0, 90.0),
       dip=st.floats(-0.1, 0.1), throw=st.floats(0.0, 0.1), power=st.integers(3, 6),
       seed=st.integers(0, 999), gradient=st.booleans())
def test_random_fields_keep_the_tolerance(depth: float, width: float, azimuth: float, dip: float,
                                          throw: float, power: int, seed: int,
                                          gradient: bool) -> None:
    size = width * depth
    dip = np.clip(dip, -0.4 * depth / (12 * size), 0.4 * depth / (12 * size))
    bodies, moments = small_field(depth=depth, size=size, thickness=0.02 * depth, azimuth=azimuth,
                                  dip=dip, throw=throw * depth, seed=seed, steps=2)
    error, solver = compare(bodies, moments, raster(24, 3 * depth + 6 * size), EARTH,
                            10.0**-power, gradient)
    assert error <= 10.0**-power
    assert solver.achieved_error <= 0.5 * 10.0**-power
    assert len(solver.notes) == 1, "the first design held"


@pytest.mark.parametrize("tolerance", [1e-7, 1e-9])
def test_fine_tolerances(tolerance: float) -> None:
    bodies, moments = small_field()
    assert compare(bodies, moments, raster(20, 5000.0), EARTH, tolerance)[0] <= tolerance


@pytest.mark.parametrize("gradient", [False, True])
def test_scattered_points(gradient: bool) -> None:
    bodies, moments = small_field()
    assert compare(bodies, moments, wells(300, 6000.0), EARTH, 1e-5, gradient)[0] <= 1e-5


@pytest.mark.parametrize("gradient", [False, True])
def test_rigid_basement_through_its_table(gradient: bool) -> None:
    bodies, moments = small_field(columns=8, rows=6, steps=1)
    assert compare(bodies, moments, raster(12, 5000.0), BASEMENT, 1e-5, gradient)[0] <= 1e-5


@settings(max_examples=6, deadline=None)
@given(east=st.floats(-3e6, 3e6), north=st.floats(-3e6, 3e6))
def test_moving_everything_changes_nothing(east: float, north: float) -> None:
    bodies, moments = small_field(steps=1)
    targets = raster(15, 5000.0)
    shift = np.array([east, north, 0.0])
    moved = Bodies(bodies.count, lambda index: bodies.corners(index) + shift)
    away = Targets(targets.x + east, targets.y + north, targets.depth)
    solve = Lattice(forced=True).solve
    here = solve(bodies, moments, targets, EARTH, tolerance=1e-5)
    there = solve(moved, moments, away, EARTH, tolerance=1e-5)
    # places are rounded to 5e-10 m at 3000 km; slope of the bowl over its depth
    assert error_of(there, here) < 1e-10


def test_depths_from_300_m_to_4_km() -> None:
    fields = [small_field(depth=depth, size=max(depth / 8, 100.0), seed=n, columns=8, rows=6)
              for n, depth in enumerate((300.0, 600.0, 1200.0, 2400.0, 4000.0))]
    bodies, moments = joined(fields)
    error, solver = compare(bodies, moments, raster(30, 6000.0), EARTH, 1e-5)
    assert error <= 1e-5
    assert len(solver.notes) > 2, "several bands"


def test_one_cell_at_80_m() -> None:
    lone = small_field(depth=84.0, columns=1, rows=1, layers=1, size=30.0, thickness=2.0, throw=0.0)
    lone = (lone[0], {source: 50 * moment for source, moment in lone[1].items()})
    bodies, moments = joined([small_field(), lone])
    error, solver = compare(bodies, moments, raster(41, 5000.0), EARTH, 1e-5)
    assert error <= 1e-5
    spacing = [float(note.split("spacing ")[1].split(" m")[0]) for note in solver.notes
               if "spacing" in note and not note.startswith("1 cells")]
    assert spacing and min(spacing) > 50.0, "the lone cell does not refine that of the others"


def test_a_hole_of_inactive_cells() -> None:
    bodies, moments = small_field()
    row, column = np.unravel_index(np.arange(bodies.count), (3, 9, 12))[1:]
    hole = (row > 2) & (row < 6) & (column > 3) & (column < 8)
    moments = {source: np.where(hole, 0.0, moment) for source, moment in moments.items()}
    assert compare(bodies, moments, raster(24, 5000.0), EARTH, 1e-6)[0] <= 1e-6


def test_cells_that_lose_and_gain() -> None:
    bodies, moments = small_field()
    sign = np.random.default_rng(8).choice([-1.0, 1.0], bodies.count)
    moments = {source: moment * sign for source, moment in moments.items()}
    assert compare(bodies, moments, raster(24, 5000.0), EARTH, 1e-5)[0] <= 1e-5


def test_a_map_beside_the_field() -> None:
    bodies, moments = small_field()
    targets = raster(20, 2000.0)
    targets = Targets(targets.x + 11e3, targets.y - 8e3, targets.depth)
    assert compare(bodies, moments, targets, EARTH, 1e-4)[0] <= 1e-4


@pytest.mark.parametrize("source", ["contraction", "closure"])
@pytest.mark.parametrize("gradient", [False, True])
def test_one_cell_alone(source: str, gradient: bool) -> None:
    """The hardest case of a stencil: no other cells whose errors cancel its own."""
    for seed in range(4):
        bodies, moments = small_field(columns=1, rows=1, layers=1, size=50.0, depth=1000.0,
                                      azimuth=20.0 * seed, dip=0.01 * seed, steps=1)
        place = np.random.default_rng(seed).uniform(0.0, 500.0, 3) * [1.0, 1.0, 0.0]
        moved = Bodies(1, lambda index, b=bodies, p=place: b.corners(index) + p)
        error, _ = compare(moved, {source: moments[source]}, raster(40, 1500.0), EARTH, 1e-4,
                           gradient)
        assert error <= 1e-4


def test_the_order_of_cells_and_targets_does_not_matter() -> None:
    bodies, moments = small_field(steps=2)
    targets = raster(15, 5000.0)
    rng = np.random.default_rng(2)
    cells, places = rng.permutation(bodies.count), rng.permutation(targets.x.size)
    solve = Lattice(forced=True).solve
    field = solve(bodies, moments, targets, EARTH, tolerance=1e-5)
    mixed = solve(
        Bodies(bodies.count, lambda index: bodies.corners(cells[index])),
        {source: moment[:, cells] for source, moment in moments.items()},
        Targets(targets.x[places], targets.y[places], targets.depth[places]), EARTH, tolerance=1e-5)
    assert error_of(mixed, {name: values[:, places] for name, values in field.items()}) < 1e-13


def test_steps_do_not_know_of_each_other(monkeypatch: pytest.MonkeyPatch) -> None:
    bodies, moments = small_field(steps=7)
    targets = raster(15, 5000.0)
    whole = Lattice(forced=True).solve(bodies, moments, targets, EARTH, tolerance=1e-5)
    monkeypatch.setattr(band_pass, "_SPECTRA", 1.2e4)  # two dates at a time
    monkeypatch.setattr(lattice_module, "_PIECE", 50)
    blocks = Lattice(forced=True).solve(bodies, moments, targets, EARTH, tolerance=1e-5)
    assert error_of(blocks, whole) < 1e-13


def test_nothing_lost_means_nothing_moves() -> None:
    bodies, moments = small_field()
    solver = Lattice(forced=True)
    field = solver.solve(bodies, {s: 0 * m for s, m in moments.items()}, raster(9, 3000.0), EARTH,
                         tolerance=1e-4)
    assert all((values == 0.0).all() for values in field.values())


def test_targets_below_the_surface_go_to_the_plain_sum() -> None:
    bodies, moments = small_field(steps=1, columns=6, rows=5)
    targets = raster(14, 4000.0)
    depth = np.where(np.arange(targets.x.size) % 20 == 3, 500.0, 0.0)
    targets = Targets(targets.x, targets.y, depth)
    error, solver = compare(bodies, moments, targets, EARTH, 1e-4)
    assert error <= 1e-4
    assert "plain sum for 10 targets below the surface" in solver.notes
    with pytest.raises(InputError, match="surface only"):
        solver.solve(bodies, moments, targets, EARTH, tolerance=1e-4, gradient=True)


def test_a_box_too_shallow_to_sample_is_left_to_the_exact_integral() -> None:
    box = np.array([[0.0, 0.0, 0.5, 3.0, 400.0, 400.0, 20.0], [0.0, 0.0, 1500.0, 1520.0, 400.0,
                                                              400.0, 20.0]])
    from subside.grid.geometry import corners_of_boxes

    bodies = Bodies(2, lambda index: corners_of_boxes(*box[index].T),
                    lambda index: box[index].copy())
    moments = {"contraction": np.array([[1.0, 400.0]])}
    error, solver = compare(bodies, moments, raster(20, 2000.0), EARTH, 1e-4)
    assert error <= 1e-4
    assert any("plain sum" in note for note in solver.notes)


def test_progress_ends_at_all_pairs() -> None:
    bodies, moments = small_field()
    targets = raster(20, 4000.0)
    told: list[float] = []
    Lattice(forced=True).solve(bodies, moments, targets, EARTH, tolerance=1e-4,
                               progress=told.append)
    assert sum(told) == pytest.approx(2 * bodies.count * targets.x.size)
    assert min(told) >= 0.0


def _broken(factor: float, times: int):
    """A `coarsest` whose stencils are wrong in one weight, the first `times` calls."""
    calls = []

    def coarsest(width: int, tolerance: float, gradient: bool) -> Stencil | None:
        stencil = Stencil.of(width, 10.0)
        calls.append(width)
        if len(calls) > times:
            return stencil
        wrong = stencil.coefficients.copy()
        wrong[width // 2] *= factor
        return Stencil(10.0, wrong)

    return coarsest


def test_the_check_catches_a_broken_stencil_and_falls_back(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(summation, "coarsest", _broken(1.002, 1000))
    bodies, moments = small_field()
    targets = raster(24, 5000.0)
    solver = Lattice(forced=True)
    field = solver.solve(bodies, moments, targets, EARTH, tolerance=1e-4)
    truth = Direct().solve(bodies, moments, targets, EARTH, tolerance=1e-6)
    assert error_of(field, truth) <= 1e-4
    assert sum("refined" in note for note in solver.notes) == 3
    assert solver.notes[-1] == "plain sum over all cells"
    assert solver.name == "direct"


def test_a_failed_check_refines_first(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(summation, "coarsest", _broken(1.002, 5))
    bodies, moments = small_field()
    solver = Lattice(forced=True)
    solver.solve(bodies, moments, raster(24, 5000.0), EARTH, tolerance=1e-3)
    assert sum("refined" in note for note in solver.notes) == 1
    assert solver.achieved_error <= 1e-3
    assert not any("plain sum" in note for note in solver.notes)


def test_a_result_that_is_not_a_number_fails_the_check(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(summation, "coarsest", _broken(float("nan"), 1000))
    bodies, moments = small_field(steps=1)
    solver = Lattice(forced=True)
    field = solver.solve(bodies, moments, raster(20, 5000.0), EARTH, tolerance=1e-4)
    assert all(np.isfinite(values).all() for values in field.values())
    assert solver.notes[-1] == "plain sum over all cells"
