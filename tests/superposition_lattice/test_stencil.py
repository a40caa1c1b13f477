"""Stencils against what defines them, and their bound against the worst that is seen."""

from __future__ import annotations

import numpy as np
import pytest

from subside.superposition.stencil import RATIOS, WIDTHS, Stencil, coarsest


@pytest.mark.parametrize("width", WIDTHS)
def test_constants_are_carried_exactly(width: int) -> None:
    offset = np.linspace(-0.5, 0.5, 23)
    weights = Stencil.of(width, 10.0).weights(offset)
    # weights sum to one: definition
    assert weights.sum(axis=1) == pytest.approx(np.ones(23), abs=1e-12)


@pytest.mark.parametrize("width", WIDTHS)
def test_weights_mirror(width: int) -> None:
    stencil = Stencil.of(width, 12.0)
    offset = np.array([0.1, 0.37])
    mirrored = stencil.weights(-offset)[:, ::-1]
    assert stencil.weights(offset) == pytest.approx(mirrored, abs=1e-9)


def test_a_long_wave_passes() -> None:
    symbol = Stencil.of(8, 10.0).symbol(np.array([0.0, 0.1, 0.3]), np.array([-0.4, 0.0, 0.25]))
    assert np.abs(symbol - 1.0).max() < 2e-6
    # a wave of two nodes is not carried between the nodes: the symbol must tell
    short = Stencil.of(8, 10.0).symbol(np.array([np.pi]), np.array([0.25]))
    assert abs(short[0, 0] - 1.0) > 0.05


def test_bounds_fall_with_width_and_ratio() -> None:
    table = np.array([[Stencil.of(w, r).bounds for r in RATIOS] for w in WIDTHS])
    assert (np.diff(table, axis=0) < 0).all()
    assert (np.diff(table, axis=1) < 0).all()


def test_least_squares_beats_lagrange() -> None:
    """At equal width the class exp(-k d) is carried better than by polynomial interpolation."""
    stencil = Stencil.of(6, 10.0)
    nodes = np.arange(6) - 2.5
    offset = 0.5 * np.cos(np.pi * (np.arange(11) + 0.5) / 11)
    lagrange = np.stack([np.prod([(offset - b) / (a - b) for b in nodes if b != a], axis=0)
                         for a in nodes], axis=1)
    powers = np.vander(offset, 11)
    rival = Stencil(10.0, np.linalg.solve(powers, lagrange).T)
    assert stencil.bounds[0] < 0.6 * rival.bounds[0]


def test_coarsest_keeps_the_bound_and_gives_up_honestly() -> None:
    for tolerance in (1e-3, 1e-5, 1e-7):
        stencil = coarsest(12, tolerance, False)
        assert stencil is not None and stencil.bounds[0] <= tolerance
        coarser = [r for r in RATIOS if r < stencil.ratio]
        assert not coarser or Stencil.of(12, coarser[-1]).bounds[0] > tolerance
    assert coarsest(4, 1e-9, False) is None


@pytest.mark.parametrize(("width", "ratio"), [(4, 12.0), (6, 10.0), (8, 8.0)])
@pytest.mark.parametrize("power", [1, 2])
def test_bound_is_above_the_error_of_a_point_source(width: int, ratio: float, power: int) -> None:
    """One source of the field integral exp(-k d) k J0(k r) dk = d/R^3, or its slope.

    Spread by the stencil in both directions at many offsets, seen at many places; computed
    independently of the solver. The bound must hold, and not be empty (a hundred times too large).
    """
    stencil = Stencil.of(width, ratio)
    nodes = np.arange(width) - 0.5 * (width - 1)
    place = np.linspace(-3 * ratio, 3 * ratio, 61)
    x, y = np.meshgrid(place, place)

    def field(sx: float, sy: float) -> np.ndarray:
        r3 = ((x - sx) ** 2 + (y - sy) ** 2 + ratio**2) ** 1.5
        if power == 1:
            return ratio**3 / r3  # over its peak
        return (x - sx) * ratio**4 / r3 ** (5 / 3) * 3 / 0.8587

    worst = 0.0
    for tx, ty in ((0.0, 0.0), (0.5, 0.5), (0.5, 0.0), (0.25, 0.4), (0.1, 0.3)):
        wx, wy = stencil.weights(np.array([tx]))[0], stencil.weights(np.array([ty]))[0]
        spread = sum(wy[a] * wx[b] * field(nodes[b], nodes[a])
                     for a in range(width) for b in range(width))
        worst = max(worst, float(np.abs(spread - field(tx, ty)).max()))
    bound = stencil.bounds[power - 1]
    assert 0.01 * bound < worst < bound
