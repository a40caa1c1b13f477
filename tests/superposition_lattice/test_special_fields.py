"""Fields that are hard on a lattice, twenty of each, against the plain sum."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np
import pytest
from lattice_cases import compare, joined, pillar_field, raster, small_field

from subside.earth_models import HalfSpace
from subside.superposition.interface import Bodies

EARTH = HalfSpace(poisson_ratio=0.25)
TARGETS = raster(30, 5000.0)
Invented = tuple[Bodies, dict[str, np.ndarray]]
SEEDS = range(20)


def from_300_m_to_4_km(seed: int) -> Invented:
    depths = (300.0, 650.0, 1300.0, 2500.0, 3900.0)
    return joined([small_field(depth=depth, size=max(depth / 8, 80.0), seed=seed + n, columns=8,
                               rows=6, layers=2, steps=2, throw=0.02 * depth)
                   for n, depth in enumerate(depths)])


def one_at_80_m(seed: int) -> Invented:
    rng = np.random.default_rng(seed)
    lone, moment = small_field(depth=84.0, columns=1, rows=1, layers=1, size=30.0, thickness=2.0,
                               throw=0.0, dip=0.0, steps=2, seed=seed)
    place = np.r_[rng.uniform(-2000.0, 2000.0, 2), 0.0]
    there = replace(lone, corners=lambda index: lone.corners(index) + place)
    # some of them move the ground as much as all the others
    heavy = 10.0 ** rng.uniform(-1.0, 2.0)
    return joined([small_field(seed=seed, layers=2, steps=2),
                   (there, {source: heavy * m for source, m in moment.items()})])


def with_a_hole(seed: int) -> Invented:
    bodies, moments = small_field(columns=14, rows=12, layers=2, steps=2, seed=seed)
    rng = np.random.default_rng(seed)
    row, column = np.unravel_index(np.arange(bodies.count), (2, 12, 14))[1:]
    a, b = rng.integers(2, 6, 2)
    hole = (row > a) & (row < a + 5) & (column > b) & (column < b + 6)
    return bodies, {source: np.where(hole, 0.0, moment) for source, moment in moments.items()}


def rotated(seed: int) -> Invented:
    rng = np.random.default_rng(seed)
    return pillar_field(columns=11, rows=9, layers=3, azimuth=float(rng.uniform(0.0, 180.0)),
                        depth=float(rng.uniform(600.0, 2500.0)), dip=0.05, seed=seed,
                        boxes=seed % 2 == 0, steps=2)


FIELDS = {make.__name__: make for make in (from_300_m_to_4_km, one_at_80_m, with_a_hole, rotated)}


@pytest.mark.parametrize("make", FIELDS.values(), ids=FIELDS)
@pytest.mark.parametrize("seed", SEEDS)
def test_within_a_ten_thousandth(make: Callable[[int], Invented], seed: int) -> None:
    error, solver = compare(*make(seed), TARGETS, EARTH, 1e-4)
    assert error <= 1e-4
    assert solver.achieved_error <= 0.5e-4
    assert not any("refined" in note for note in solver.notes), "the first design held"


@pytest.mark.parametrize("make", FIELDS.values(), ids=FIELDS)
def test_within_a_millionth(make: Callable[[int], Invented]) -> None:
    error, solver = compare(*make(7), TARGETS, EARTH, 1e-6)
    assert error <= 1e-6
    assert solver.achieved_error <= 0.5e-6
