"""How cells come in pieces and dates in legs changes nothing."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from lattice_cases import (
    cell_pieces,
    compare,
    error_of,
    pillar_field,
    raster,
    small_field,
    streamed,
    wells,
)

from subside.earth_models import HalfSpace
from subside.superposition import summation
from subside.superposition.interface import Bodies, Targets

EARTH = HalfSpace(poisson_ratio=0.25)
TARGETS = raster(13, 4000.0)
SAME = 1e-12
"""Of the largest value: sums in another order."""


def _invented(kind: str, steps: int = 5) -> tuple[Bodies, dict[str, np.ndarray]]:
    if kind == "anywhere":
        return small_field(columns=7, rows=6, steps=steps)
    bodies, moments = pillar_field(dip=0.06, boxes=kind == "boxes", steps=steps)
    return (replace(bodies, column=None) if kind == "no column" else bodies), moments


@settings(max_examples=15, deadline=None)
@given(kind=st.sampled_from(["anywhere", "pillars", "no column", "boxes"]),
       method=st.sampled_from(["lattice", "direct"]), pieces=st.integers(1, 60),
       cuts=st.sets(st.integers(1, 4)), shares=st.integers(1, 4), seed=st.integers(0, 999))
def test_pieces_order_legs_and_shares(kind: str, method: str, pieces: int, cuts: set[int],
                                      shares: int, seed: int) -> None:
    bodies, moments = _invented(kind)
    whole, job = streamed(bodies, moments, TARGETS, EARTH, method=method)
    assert job.method == method
    parts, _ = streamed(bodies, moments, TARGETS, EARTH, method=method, cuts=sorted(cuts),
                        pieces=cell_pieces(bodies.count, pieces, seed), shares=shares)
    for name, values in whole.items():
        assert np.abs(parts[name] - values).max() < SAME * np.abs(values).max(), name


@pytest.mark.parametrize("method", ["lattice", "direct"])
def test_derivatives_and_scattered_targets(method: str) -> None:
    bodies, moments = _invented("pillars")
    targets = wells(60, 3000.0)
    whole, _ = streamed(bodies, moments, targets, EARTH, method=method, gradient=True)
    parts, _ = streamed(bodies, moments, targets, EARTH, method=method, gradient=True,
                        pieces=cell_pieces(bodies.count, 17, 3), cuts=[2, 3], shares=3)
    assert len(whole) == 8
    for name, values in whole.items():
        assert np.abs(parts[name] - values).max() < SAME * np.abs(values).max(), name


def test_targets_below_the_surface_are_in_no_way_special() -> None:
    bodies, moments = _invented("pillars", steps=3)
    depth = np.where(np.arange(TARGETS.x.size) % 9 == 2, 300.0, 0.0)
    targets = Targets(TARGETS.x, TARGETS.y, depth)
    whole, job = streamed(bodies, moments, targets, EARTH)
    assert job.method == "lattice"
    parts, _ = streamed(bodies, moments, targets, EARTH, cuts=[1], shares=2,
                        pieces=cell_pieces(bodies.count, 5, 3))
    assert error_of(parts, whole) < SAME
    truth, _ = streamed(bodies, moments, targets, EARTH, method="direct", tolerance=1e-7)
    assert error_of(whole, truth) <= 1e-5


def test_moments_that_wait_are_summed_before_they_fill_the_memory(
        monkeypatch: pytest.MonkeyPatch) -> None:
    bodies, moments = _invented("pillars")
    whole, _ = streamed(bodies, moments, TARGETS, EARTH, method="direct")
    monkeypatch.setattr(summation, "_WAITING_BYTES", 5000.0)
    seen = []
    plainly = summation.Summation._sum_plainly

    def spy(self: summation.Summation, share: summation.Share) -> None:
        seen.append(sum(m.nbytes for _, some in share.waiting for m in some.values()))
        plainly(self, share)

    monkeypatch.setattr(summation.Summation, "_sum_plainly", spy)
    parts, _ = streamed(bodies, moments, TARGETS, EARTH, method="direct", shares=2,
                        pieces=cell_pieces(bodies.count, 40, 1))
    assert error_of(parts, whole) < SAME
    assert len(seen) > 1 and max(seen) < 10_000


@pytest.mark.parametrize("offset", [(5e5, 5.9e6), (-123_457.0, 6e6), (6e6, -6e6), (1.0, 3.0)])
@pytest.mark.parametrize("kind", ["anywhere", "pillars", "boxes"])
def test_moving_everything_changes_nothing(kind: str, offset: tuple[float, float]) -> None:
    """Places are rounded to 1e-9 m there, a field falls by a part in a few hundred m."""
    bodies, moments = _invented(kind, steps=2)
    east, north = offset
    shift = np.array([east, north, 0.0])
    boxes = bodies.boxes
    moved = replace(
        bodies, corners=lambda index: bodies.corners(index) + shift,
        boxes=(lambda index: boxes(index) + np.r_[shift[:2], np.zeros(5)]) if boxes else None)
    away = Targets(TARGETS.x + east, TARGETS.y + north, TARGETS.depth)
    here, _ = streamed(bodies, moments, TARGETS, EARTH, gradient=True)
    there, _ = streamed(moved, moments, away, EARTH, gradient=True)
    assert error_of(there, here) < 2e-11


@pytest.mark.parametrize("method", ["lattice", "direct"])
def test_linear_in_the_moments(method: str) -> None:
    bodies, moments = _invented("pillars")
    rng = np.random.default_rng(4)
    others = {source: rng.normal(0.0, 300.0, moment.shape) for source, moment in moments.items()}
    mixed = {source: 2.5 * moments[source] - 0.75 * others[source] for source in moments}
    one, two, both = (streamed(bodies, m, TARGETS, EARTH, method=method)[0]
                      for m in (moments, others, mixed))
    for name, values in both.items():
        scale = max(np.abs(f[name]).max() for f in (one, two, both))
        assert np.abs(values - 2.5 * one[name] + 0.75 * two[name]).max() < SAME * 4 * scale, name


@settings(max_examples=15, deadline=None)
@given(depth=st.floats(300.0, 4000.0), width=st.floats(0.05, 0.6), thick=st.floats(0.005, 0.1),
       dip=st.floats(-0.1, 0.1), azimuth=st.floats(0.0, 180.0), boxes=st.booleans(),
       power=st.integers(3, 6), seed=st.integers(0, 999), gradient=st.booleans())
def test_random_pillars_keep_the_tolerance(depth: float, width: float, thick: float, dip: float,
                                           azimuth: float, boxes: bool, power: int, seed: int,
                                           gradient: bool) -> None:
    size = width * depth
    dip = np.clip(dip, -0.3 * depth / (6 * size), 0.3 * depth / (6 * size))
    bodies, moments = pillar_field(depth=depth, size=size, thickness=thick * depth, dip=dip,
                                   azimuth=azimuth, seed=seed, boxes=boxes, steps=2)
    error, solver = compare(bodies, moments, raster(20, 3 * depth + 6 * size), EARTH,
                            10.0**-power, gradient)
    assert error <= 10.0**-power
    assert solver.achieved_error <= 0.5 * 10.0**-power


def test_nothing_lost_at_all() -> None:
    """No cell has a moment, but nobody knew when the lattice was laid out."""
    bodies, moments = _invented("pillars")
    zeros = {source: 0.0 * moment for source, moment in moments.items()}
    field, job = streamed(bodies, zeros, TARGETS, EARTH, cuts=[2], check=(1, 4))
    assert job.method == "lattice"
    assert not any(values.any() for values in field.values())
    assert job.accepts(job.error())


def test_the_check_is_made_at_the_last_date_that_was_kept() -> None:
    """Nothing happens in the first leg, and nothing is kept of the third."""
    bodies, moments = _invented("pillars", steps=6)
    scale = np.array([0.0, 0.0, 0.2, 1.0, 0.5, 0.3])[:, None]
    moments = {source: moment[:1] * scale for source, moment in moments.items()}
    field, job = streamed(bodies, moments, TARGETS, EARTH, cuts=[2, 4], check=(1, 3))
    assert job.keep == () and job._checked is not None
    assert np.array_equal(job._checked.field[:, 0], np.stack([field[n][3] for n in job.names]))
    assert 0.0 < job.error() <= 0.5e-5
    # of a field that is wrong by a part in a thousand of its largest value the check says so
    _, job = streamed(bodies, moments, TARGETS, EARTH, cuts=[2, 4], check=(1, 3))
    job._checked.field[0] += 1e-3 * np.abs(field["down"][3]).max()
    assert job.error() == pytest.approx(1e-3, rel=0.1)
    assert not job.accepts(job.error())


def test_an_empty_leg_is_no_harm() -> None:
    bodies, moments = _invented("pillars", steps=2)
    whole, _ = streamed(bodies, moments, TARGETS, EARTH)
    parts, _ = streamed(bodies, moments, TARGETS, EARTH, cuts=[0, 1, 1])
    assert error_of(parts, whole) < SAME
