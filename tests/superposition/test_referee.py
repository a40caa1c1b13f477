"""The plain sum at a few targets is that of `Direct`, for any cell, source and earth."""

from __future__ import annotations

from functools import cache
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from sources import EARTH, hexahedra, targets

from subside.earth_models import HalfSpace, RigidBasement
from subside.errors import InputError
from subside.grid.geometry import corners_of_boxes
from subside.superposition import referee
from subside.superposition.direct import Direct
from subside.superposition.interface import Bodies, Fields
from subside.superposition.referee import SINGLE_FROM, plain_sum, series_of

GROUPS = (("down", "east", "north"), ("down_by_east", "down_by_north"),
          ("strain_east", "strain_north", "strain_shear"))
RIGID = RigidBasement(poisson_ratio=0.3, basement_depth=3000.0)


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


def as_boxes(table: np.ndarray) -> Bodies:
    return Bodies(len(table), lambda index: corners_of_boxes(*table[index].T),
                  lambda index: table[index])


def invented(count: int, seed: int, wide: float = 1.0) -> np.ndarray:
    """Boxes 600 m to 2.5 km deep over 8 km, any azimuth; `wide` times their usual width."""
    rng = np.random.default_rng(seed)
    top = rng.uniform(600.0, 2500.0, count)
    return np.column_stack([*rng.uniform(-4e3, 4e3, (2, count)) + [[4.5e5], [6.1e6]], top,
                            top + rng.uniform(1.0, 60.0, count),
                            *wide * rng.uniform(50.0, 400.0, (2, count)),
                            rng.uniform(-180.0, 180.0, count)])


def seen_from(count: int, seed: int = 9):
    x, y = np.random.default_rng(seed).uniform(-7e3, 7e3, (2, count))
    return targets(x + 4.5e5, y + 6.1e6)


def moments_of(count: int, dates: int = 2, seed: int = 5) -> dict[str, np.ndarray]:
    rng = np.random.default_rng(seed)
    return {source: rng.uniform(-0.2, 1.0, (dates, count)) for source in ("contraction", "closure")}


def twisted(table: np.ndarray) -> Bodies:
    """The boxes with their corners moved: leaning, dipping, not plane."""
    corners = corners_of_boxes(*table.T)
    shake = np.random.default_rng(1).normal(0.0, 0.05, corners.shape)
    return hexahedra(corners + shake * [1.0, 1.0, 0.2] * table[:, None, 4:5])


def gaps(found: Fields, expected: Fields) -> list[float]:
    """Largest difference over the largest value in each group of components."""
    assert found.keys() == expected.keys()
    return [max(np.abs(found[name] - expected[name]).max() for name in group)
            / max(np.abs(expected[name]).max() for name in group)
            for group in GROUPS if group[0] in expected]


@pytest.mark.parametrize("gradient", [False, True])
@pytest.mark.parametrize("earth", [EARTH, Tabulated(poisson_ratio=0.25)])
@pytest.mark.parametrize("shape", [as_boxes, twisted])
@pytest.mark.parametrize("sampling", [1e-5, 1e-7])
def test_equals_direct(shape, earth, gradient, sampling) -> None:
    """Both precisions, closed forms and series, against points a hundred times more exact."""
    bodies, moments, where = shape(invented(60, 3)), moments_of(60), seen_from(45)
    expected = Direct().solve(bodies, moments, where, EARTH, tolerance=0.1 * sampling,
                              gradient=gradient)
    found = plain_sum(bodies, np.arange(60), moments, where, earth, sampling=sampling,
                      gradient=gradient)
    assert max(gaps(found, expected)) < sampling


def test_equals_direct_over_a_rigid_basement() -> None:
    """Just above it too, where its kernels are least like a half-space's; derivatives as well."""
    table = invented(30, 3)
    table[:, 2] = np.linspace(2000.0, 2880.0, 30)
    table[:, 3] = table[:, 2] + 20.0
    bodies, moments, where = twisted(table), moments_of(30), seen_from(20)
    expected = Direct().solve(bodies, moments, where, RIGID, tolerance=1e-6, gradient=True)
    found = plain_sum(bodies, np.arange(30), moments, where, RIGID, sampling=1e-7, gradient=True)
    assert max(gaps(found, expected)) < 1e-7


@pytest.mark.parametrize("gradient", [False, True])
def test_double_precision_is_exact(gradient) -> None:
    """With the same points as `Direct`, which takes a tenth of its tolerance for them."""
    bodies, moments, where = twisted(invented(60, 3)), moments_of(60), seen_from(45)
    expected = Direct().solve(bodies, moments, where, EARTH, tolerance=1e-6, gradient=gradient)
    found = plain_sum(bodies, np.arange(60), moments, where, EARTH, sampling=1e-7,
                      gradient=gradient)
    assert max(gaps(found, expected)) < 1e-12


@cache
def rigid_series(gradient: bool):
    """One for all examples: the widest and deepest that `invented` makes."""
    table = np.array([[4.5e5, 6.1e6, 599.0, 2570.0, 1e4, 1e4, 0.0]])
    return series_of(RIGID, ["contraction", "closure"], as_boxes(table), np.arange(1),
                     seen_from(50), gradient, SINGLE_FROM)


@settings(max_examples=30, deadline=None)
@given(st.integers(0, 2**32 - 1), st.integers(1, 40), st.booleans(), st.booleans())
def test_single_precision_errs_a_fraction_of_the_least_sampling(seed, count, rigid,
                                                                gradient) -> None:
    """Against double precision with the same points; a field of one cell has no luck to average.

    What it was seen to reach (see `plain_sum`) with a half to spare.
    """
    bodies, where = as_boxes(invented(count, seed)), seen_from(30, seed)
    moments = {s: np.abs(m) for s, m in moments_of(count, 1, seed).items()}
    earth, series = (RIGID, rigid_series(gradient)) if rigid else (EARTH, None)
    fields = []
    for single_from in (SINGLE_FROM, np.inf):
        with pytest.MonkeyPatch.context() as patch:
            patch.setattr(referee, "SINGLE_FROM", single_from)
            fields.append(plain_sum(bodies, np.arange(count), moments, where, earth,
                                    sampling=SINGLE_FROM, gradient=gradient, series=series))
    found = gaps(*fields)
    assert found[0] > 0.0
    assert found[0] < (0.18 if rigid else 0.06) * SINGLE_FROM
    # slopes and strains may be small sums of large parts: one such field was seen to err by 0.26
    assert max(found) < SINGLE_FROM


@pytest.mark.parametrize("shape", [as_boxes, twisted])
@pytest.mark.parametrize("earth", [EARTH, Tabulated(poisson_ratio=0.25)])
def test_cells_far_wider_than_deep(shape, earth) -> None:
    """100 points and more, in chunks that one cell fills."""
    bodies, moments, where = shape(invented(9, 2, wide=12.0)), moments_of(9), seen_from(25)
    expected = Direct().solve(bodies, moments, where, EARTH, tolerance=1e-8)
    found = plain_sum(bodies, np.arange(9), moments, where, earth, sampling=1e-6, gradient=False)
    assert max(gaps(found, expected)) < 1e-6


def test_cell_up_to_the_surface_is_left_to_the_exact_box() -> None:
    table = invented(5, 1)
    table[3, 2] = 0.0
    bodies, where = as_boxes(table), seen_from(20)
    moments = {"contraction": moments_of(5)["contraction"]}
    expected = Direct().solve(bodies, moments, where, EARTH, tolerance=1e-8)
    found = plain_sum(bodies, np.arange(5), moments, where, EARTH, sampling=1e-7, gradient=False)
    assert max(gaps(found, expected)) < 1e-7
    assert np.abs(found["down"]).max() > 0


@pytest.mark.parametrize("earth", [EARTH, Tabulated(poisson_ratio=0.25)])
def test_parts_add_up(earth) -> None:
    """Moments are those of the given cells, in any order; all may share one set of series."""
    bodies, moments, where = as_boxes(invented(50, 4)), moments_of(50), seen_from(33)
    everything = np.arange(50)
    series = None if earth is EARTH else series_of(earth, ["contraction", "closure"], bodies,
                                                   everything, where, False, 1e-7)
    whole = plain_sum(bodies, everything, moments, where, earth, sampling=1e-7, gradient=False,
                      series=series)
    total = {name: np.zeros_like(values) for name, values in whole.items()}
    for cells in (np.array([7, 3, 41]), np.setdiff1d(everything, [3, 7, 41])[::-1]):
        part = plain_sum(bodies, cells, {s: m[:, cells].astype(np.float32).astype(float)
                                         for s, m in moments.items()}, where, earth,
                         sampling=1e-7, gradient=False, series=series)
        for name, values in part.items():
            total[name] += values
    assert max(gaps(total, whole)) < 1e-7  # moments went through single precision
    none = plain_sum(bodies, everything[:0], {s: m[:, :0] for s, m in moments.items()}, where,
                     EARTH, sampling=1e-7, gradient=True)
    assert all((values == 0.0).all() and values.shape == (2, 33) for values in none.values())


@pytest.mark.parametrize("source", ["contraction", "closure"])
def test_series_is_the_closed_form(source) -> None:
    """On the axis and 400 km away; up to d^2/R^2 = v^4 for contraction, v^8 for closure."""
    earth = Tabulated(poisson_ratio=0.25)
    bodies = as_boxes(np.array([[0, 0, 700.0, 760, 200, 200, 0],
                                [900, 300, 2500, 2540, 300, 99, 30]]))
    where = targets([0, 0.0, 10, 900, -4e5], [0, 1e-3, 5, 300, 100])
    moments = {source: np.ones((1, 2))}
    series = series_of(earth, [source], bodies, np.arange(2), where, True, 1e-7)[source]
    assert series.terms.shape[1:] == (4, 5 if source == "contraction" else 9)
    found = plain_sum(bodies, np.arange(2), moments, where, earth, sampling=1e-7, gradient=True)
    closed = plain_sum(bodies, np.arange(2), moments, where, EARTH, sampling=1e-7, gradient=True)
    assert max(gaps(found, closed)) < 1e-8
    for name, values in closed.items():  # far away too, where all is small
        group = next(group for group in GROUPS if name in group)
        scale = max(abs(closed[other][0, 4]) for other in group)
        assert abs(found[name][0, 4] - values[0, 4]) < 1e-6 * scale


@pytest.mark.parametrize("accuracy", [1e-4, 1e-6, 1e-8])
def test_series_keeps_the_error_it_states(accuracy) -> None:
    """Rigid basement, at places of our own choice, over each function's largest value."""
    from subside.superposition.radial_series import RadialSeries, _functions

    series = RadialSeries.build(RIGID, "closure", 400.0, 2900.0, 3e4, True, accuracy)
    assert 0.0 < series.error < accuracy
    v = np.linspace(series.low, 0.999, 301)
    depth = np.array([401.0, 1234.5, 2899.0])
    truth = _functions(RIGID, "closure", v, depth, True)
    gap = np.abs(series.values(v, depth) - truth).max(axis=(0, 2)) / np.abs(truth).max(axis=(0, 2))
    assert gap.max() < 2 * accuracy


def test_kernel_that_is_not_smooth_is_refused() -> None:
    bodies = as_boxes(invented(3, 0))
    with pytest.raises(InputError, match=r"earth model 'kinked': its contraction kernel cannot be "
                                         r"put as a series to 1e-06 \(reached .*\) for sources"):
        plain_sum(bodies, np.arange(3), {"contraction": np.ones((1, 3))}, seen_from(5),
                  Kinked(poisson_ratio=0.25), sampling=1e-5, gradient=False)
