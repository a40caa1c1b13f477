"""The check: which targets it takes, what it finds, and what it says of a field that is wrong."""

from __future__ import annotations

import numpy as np
import pytest
from sources import EARTH, hexahedra, targets

from subside.earth_models import RigidBasement
from subside.grid.geometry import corners_of_boxes
from subside.superposition.check import SAMPLING, Check
from subside.superposition.direct import Direct

NAMES = ("down", "east", "north")


def bowl(n: int = 60):
    """A square map and the size of a round bowl on it, deepest at (900, -600)."""
    line = np.linspace(-5e3, 5e3, n)
    x, y = (a.ravel() for a in np.meshgrid(line, line))
    return targets(x, y), np.exp(-((x - 900.0) ** 2 + (y + 600.0) ** 2) / 2e6)


def test_chosen_are_the_deepest_the_shallowest_the_edge_and_every_part() -> None:
    where, size = bowl()
    rough = np.random.default_rng(2).uniform(0.0, 1.0, size.size)
    chosen = Check.choose(size, rough, (-4000.0, 3000.0), where)
    assert chosen.size == np.unique(chosen).size == 200
    x, y = where.x, where.y
    assert size.argmax() in chosen
    assert np.hypot(x + 4000.0, y - 3000.0).argmin() in chosen
    for a in (-5e3, 5e3):
        for b in (-5e3, 5e3):
            assert np.hypot(x - a, y - b).argmin() in chosen
    worst = np.argsort(size * rough)[::-1][:50]
    assert np.isin(worst, chosen).all()
    part = (((y + 5e3) / 10001.0 * 5).astype(int) * 5 + ((x + 5e3) / 10001.0 * 5).astype(int))
    for n in range(25):  # the worst of each part of the map
        inside = np.nonzero(part == n)[0]
        assert inside[(size * rough)[inside].argmax()] in chosen
    assert np.array_equal(chosen, Check.choose(size, rough, (-4000.0, 3000.0), where))


def test_few_targets_are_all_taken_and_the_number_is_kept() -> None:
    where, size = bowl(9)
    assert np.array_equal(Check.choose(size, size, (0.0, 0.0), where), np.arange(81))
    assert Check.choose(size, size, (0.0, 0.0), where, 70).size == 70


def test_fewer_targets_where_a_sum_is_dear() -> None:
    """1.2 million cells of 4 points are worth all 200 in a half-space."""
    assert Check.affordable(4.8e6, EARTH) == 200
    assert 80 <= Check.affordable(2e7, EARTH) < 200
    assert Check.affordable(1e9, EARTH) == Check.affordable(1e8, RigidBasement(
        poisson_ratio=0.3, basement_depth=3e3)) == 80


@pytest.mark.parametrize("tolerance", [1e-4, 1e-6])
def test_finds_what_was_added(tolerance) -> None:
    """Direct passes; a ripple of 3e-4 of the bowl is found as such; parts of cells add up."""
    rng = np.random.default_rng(3)
    top = rng.uniform(900.0, 1500.0, 40)
    bodies = hexahedra(corners_of_boxes(*rng.uniform(-2e3, 2e3, (2, 40)), top, top + 20.0, 300.0,
                                        200.0, 15.0))
    moments = {"contraction": rng.uniform(0.0, 1.0, (2, 40)),
               "closure": rng.uniform(0.0, 1.0, (2, 40))}
    where, _ = bowl(20)
    field = Direct().solve(bodies, moments, where, EARTH, tolerance=1e-8, gradient=True)
    peaks = {name: float(np.abs(values).max()) for name, values in field.items()}
    size = np.abs(np.stack([field[name] for name in NAMES])).max(axis=(0, 1))
    chosen = Check.choose(size, np.ones_like(size), (0.0, 0.0), where, 60)
    parts = [Check.at(chosen, bodies, cells, {s: m[:, cells] for s, m in moments.items()}, where,
                      EARTH, tolerance=tolerance, gradient=True)
             for cells in (np.arange(25), np.arange(25, 40))]
    check = parts[0].with_(parts[1])
    seen = {name: values[:, chosen] for name, values in field.items()}
    assert check.error(seen, peaks) < SAMPLING * tolerance
    for name, group in (("down", NAMES), ("strain_shear", ("strain_east", "strain_north",
                                                           "strain_shear"))):
        peak = max(peaks[other] for other in group)
        spoiled = dict(seen) | {name: seen[name] + 3e-4 * peak * np.sign(np.sin(chosen))}
        assert check.error(spoiled, peaks) == pytest.approx(3e-4, rel=0.01)
    assert check.error(dict(seen) | {"down": seen["down"] * np.nan}, peaks) == np.inf
    grown = {name: 1e6 * values for name, values in seen.items()}  # its own peak excuses nothing
    assert check.error(grown, {name: 1e6 * peak for name, peak in peaks.items()}) > 0.5
