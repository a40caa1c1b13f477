"""The regular map: given bounds exactly, an automatic extent that reaches 1 % of the peak."""

from __future__ import annotations

import numpy as np
import pytest

from subside.errors import InputError
from subside.observe.map import plan_map, round_spacing
from subside.scenario import MapTable
from subside.superposition.interface import Targets


def points(*sources: tuple[float, float, float, float]):
    """Subsidence of point sources x, y, depth, strength: strength c^3/R^3."""
    def subsidence_at(where: Targets) -> np.ndarray:
        total = np.zeros(where.x.size)
        for x, y, c, s in sources:
            total += s * c**3 / (np.hypot(where.x - x, where.y - y) ** 2 + c**2) ** 1.5
        return np.abs(total)
    return subsidence_at


def table(**keys) -> MapTable:
    return MapTable.model_validate(keys)


def test_given_bounds_are_the_outer_edges() -> None:
    """Pixel centres half a pixel inside; x ascending, north first."""
    grid = plan_map(table(spacing="250 m", bounds=[1000, 2000, 2000, 3500]), np.zeros(2),
                    np.ones(2), 1000.0, 1.0, points())
    assert grid.shape == (6, 4)
    assert grid.x.tolist() == [1125, 1375, 1625, 1875]
    assert grid.y.tolist() == [3375, 3125, 2875, 2625, 2375, 2125]
    assert grid.pixel_area == 62500.0
    targets = grid.targets
    assert (targets.x[:4] == grid.x).all() and (targets.y[:4] == 3375).all()
    assert targets.at_surface.all()


def test_bounds_are_in_the_unit_of_the_crs() -> None:
    """US survey feet: the spacing stays in metres."""
    foot = 1200 / 3937
    grid = plan_map(table(spacing=100 * foot, bounds=[0, 0, 400, 300]), np.zeros(2), np.ones(2),
                    1000.0, foot, points())
    assert grid.shape == (3, 4)
    assert grid.x / foot == pytest.approx([50, 150, 250, 350])


@pytest.mark.parametrize(("keys", "message"), [
    ({"spacing": "300 m", "bounds": [0, 0, 1000, 900]},
     r"xmax - xmin is 1000 m, which is not a whole multiple of the spacing 300 m"),
    ({"spacing": "300 m", "bounds": [0, 0, 900, 1000]}, r"ymax - ymin is 1000 m"),
    ({"spacing": "300 m", "bounds": [900, 0, 0, 900]}, r"\[xmin, ymin, xmax, ymax\]"),
    ({"spacing": "900 m", "bounds": [0, 0, 900, 900]}, r"1 x 1 pixels; at least 2 x 2"),
    ({"spacing": "1 m", "bounds": [0, 0, 30000, 900]}, r"900 x 30000 pixels; more than 20000"),
])
def test_bounds_that_make_no_map(keys, message: str) -> None:
    with pytest.raises(InputError, match=message):
        plan_map(table(**keys), np.zeros(2), np.ones(2), 1000.0, 1.0, points())


CASES = {
    "one source": ((-50.0, -50.0), (50.0, 50.0), [(0.0, 0.0, 1000.0, 1.0)]),
    "off centre": ((-20000.0, -5000.0), (9000.0, 100.0), [(8900.0, 0.0, 1000.0, 1.0)]),
    "wide": ((0.0, 0.0), (20000.0, 8000.0), [(x, y, 300.0, 1.0) for x in np.arange(0, 20001, 250.0)
                                             for y in np.arange(0, 8001, 250.0)]),
    "a shallow leak over a deep field": (
        (-3000.0, -50.0), (50.0, 50.0), [(0.0, 0.0, 10.0, 0.001), (-3000.0, 0.0, 3000.0, 1.0)]),
    "sinks and rises": ((0.0, 0.0), (4000.0, 10.0), [(0.0, 0.0, 1500.0, 1.0),
                                                     (4000.0, 0.0, 1000.0, -0.7)]),
}


@pytest.mark.parametrize("case", CASES)
@pytest.mark.parametrize("spacing", [None, "100 m"])
def test_automatic_map_reaches_one_per_cent_of_the_peak(case: str, spacing: str | None) -> None:
    low, high, sources = CASES[case]
    subsidence_at = points(*sources)
    keys = {"spacing": spacing} if spacing and case != "a shallow leak over a deep field" else None
    depth = min(s[2] for s in sources)
    grid = plan_map(table(**keys) if keys else None, np.array(low), np.array(high), depth, 1.0,
                    subsidence_at)
    west, east = grid.x[0] - grid.spacing / 2, grid.x[-1] + grid.spacing / 2
    south, north = grid.y[-1] - grid.spacing / 2, grid.y[0] + grid.spacing / 2
    # whole multiples of the spacing, north first
    for edge in (west, east, south, north):
        assert edge / grid.spacing == pytest.approx(round(edge / grid.spacing), abs=1e-9)
    assert (np.diff(grid.x) > 0).all() and (np.diff(grid.y) < 0).all()
    if keys:
        assert grid.spacing == 100.0
    # the peak where we know it: above the sources
    peak = subsidence_at(Targets(*np.array([s[:2] for s in sources]).T, np.zeros(1))).max()
    line = np.linspace(0, 1, 400)
    edges = {
        "west": (np.full(400, west), south + line * (north - south)),
        "east": (np.full(400, east), south + line * (north - south)),
        "south": (west + line * (east - west), np.full(400, south)),
        "north": (west + line * (east - west), np.full(400, north)),
    }
    for name, (x, y) in edges.items():
        assert subsidence_at(Targets(x, y, np.zeros(400))).max() <= 0.0101 * peak, name
    # and not absurdly far: a fifth of its size inwards the ground does move by 1 % somewhere
    inner = subsidence_at(Targets(0.5 * (west + east) + np.array([-.3, .3]) * (east - west),
                                  np.full(2, sources[-1][1]), np.zeros(2)))
    assert inner.max() > 0.01 * peak * 0.9


def test_nothing_moves_and_there_is_a_map_all_the_same() -> None:
    """One depth round the cells."""
    grid = plan_map(table(spacing="100 m"), np.array([0.0, 0.0]), np.array([450.0, 300.0]), 1000.0,
                    1.0, points())
    assert (grid.x[0], grid.x[-1]) == (-950.0, 1450.0)
    assert (grid.y[-1], grid.y[0]) == (-950.0, 1250.0)


@pytest.mark.parametrize(("depth", "extent", "wanted"), [
    (3000.0, 30000.0, 250.0), (2900.0, 0.0, 250.0), (1000.0, 0.0, 100.0), (12.0, 0.0, 1.0),
    (240.0, 0.0, 20.0), (600.0, 0.0, 50.0), (100.0, 40000.0, 100.0), (100.0, 380000.0, 1000.0),
])
def test_round_spacing(depth: float, extent: float, wanted: float) -> None:
    """1, 2, 2.5 or 5 times a power of ten nearest to depth/12, and at most 400-odd pixels."""
    assert round_spacing(depth, extent) == pytest.approx(wanted)
