"""Few targets: pillars brought together on depth nodes, then one matrix product."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from lattice_cases import cell_pieces, error_of, pillar_field, streamed, wells

from subside.earth_models import HalfSpace, RigidBasement
from subside.superposition import bands
from subside.superposition.bands import Task, make_bands
from subside.superposition.census import take_census
from subside.superposition.direct import Direct
from subside.superposition.interface import Bodies, Targets
from subside.superposition.stencil import Stencil

EARTH = HalfSpace(poisson_ratio=0.25)
POINTS = wells(25, 3000.0)


@pytest.fixture
def by_pillars(monkeypatch: pytest.MonkeyPatch) -> None:
    """Every band that is not too hard goes by pillars."""
    monkeypatch.setattr(bands, "_cheapest", lambda *_: (0.0, "pillars"))


def _kept(bodies: Bodies, moments: dict[str, np.ndarray], targets: Targets, earth: object,
          tolerance: float, gradient: bool = False) -> None:
    steps = next(iter(moments.values())).shape[0]
    field, job = streamed(bodies, moments, targets, earth, tolerance=tolerance, gradient=gradient,
                          check=[steps - 1])
    assert job.method == "pillars" and "in pillars" in job.notes[0]
    truth = Direct().solve(bodies, moments, targets, earth, tolerance=0.01 * tolerance,
                           gradient=gradient)
    assert error_of(field, truth) <= tolerance
    assert job.accepts(job.error())


@pytest.mark.parametrize("gradient", [False, True])
@pytest.mark.parametrize("tolerance", [1e-4, 1e-6])
@pytest.mark.parametrize("shape", [
    {"boxes": True}, {}, {"dip": 0.08}, {"dip": 0.05, "depth": 350.0, "thickness": 60.0},
    {"boxes": True, "depth": 300.0, "size": 350.0, "thickness": 40.0}])
def test_within_the_tolerance(by_pillars: None, shape: dict, tolerance: float,
                              gradient: bool) -> None:
    _kept(*pillar_field(**shape), POINTS, EARTH, tolerance, gradient)


def test_over_a_rigid_basement(by_pillars: None) -> None:
    earth = RigidBasement(poisson_ratio=0.3, basement_depth=4000.0)
    _kept(*pillar_field(dip=0.05, columns=4, rows=3), POINTS, earth, 1e-5, True)


@pytest.mark.parametrize("flat", [0, 1, 2, 3])
def test_level_cells_below_and_above_dipping_ones(by_pillars: None, flat: int) -> None:
    """Alone in a piece, the level ones are brought together by a shorter way."""
    bodies, moments = pillar_field(dip=0.08)
    level = np.arange(bodies.count) // 30 == flat

    def corners(index: np.ndarray) -> np.ndarray:
        out = bodies.corners(index)
        for face in (slice(0, 4), slice(4, 8)):
            out[level[index], face, 2] = out[level[index], face, 2].mean(axis=1, keepdims=True)
        return out

    mixed = replace(bodies, corners=corners)
    _kept(mixed, moments, POINTS, EARTH, 1e-6)
    whole, _ = streamed(mixed, moments, POINTS, EARTH)
    parts, _ = streamed(mixed, moments, POINTS, EARTH,
                        pieces=[np.flatnonzero(level), np.flatnonzero(~level)])
    # the area's share of a place is not quite its share of a dipping cell's volume
    assert error_of(parts, whole) < 1e-6


@pytest.mark.parametrize("boxes", [False, True])
def test_pieces_order_legs_and_shares(by_pillars: None, boxes: bool) -> None:
    bodies, moments = pillar_field(dip=0.06, boxes=boxes, steps=5)
    whole, _ = streamed(bodies, moments, POINTS, EARTH)
    parts, _ = streamed(bodies, moments, POINTS, EARTH, cuts=[1, 4], shares=3,
                        pieces=cell_pieces(bodies.count, 19, 2))
    assert error_of(parts, whole) < 1e-12


@pytest.mark.parametrize(("targets", "pillars", "way"), [
    (300, 40.0, "pillars"), (300, 1.0, "plain"), (250_000, 40.0, Stencil)])
def test_when_it_is_the_cheapest(targets: int, pillars: float, way: object) -> None:
    bodies, _ = pillar_field(columns=40, rows=40, layers=6, boxes=True)
    census = take_census(bodies, 1e-5, False)
    task = Task(60, 3, 1, targets, (-8e3, 8e3), (-8e3, 8e3), True, pillars, True)
    found = [band.way for band in make_bands(census, task, [Stencil.of(8, 10.0)], 1e-5)]
    assert all(w == way if isinstance(way, str) else isinstance(w, Stencil) for w in found)
