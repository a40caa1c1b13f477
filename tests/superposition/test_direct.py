"""The plain sum does not depend on how the work is cut, and says what it has done."""

from __future__ import annotations

import numba
import numpy as np
import pytest
from sources import EARTH, as_hexahedra, boxes, solve, targets

from subside.errors import InputError
from subside.superposition import direct
from subside.superposition.direct import Direct
from subside.superposition.interface import DISPLACEMENT, GRADIENT, Bodies, Targets

RNG = np.random.default_rng(3)
N = 300
TABLE = np.column_stack([RNG.uniform(-3000, 3000, (N, 2)), RNG.uniform(800, 1500, N), np.zeros(N),
                         RNG.uniform(50, 400, (N, 2)), RNG.uniform(0, 90, N)])
TABLE[:, 3] = TABLE[:, 2] + RNG.uniform(5, 60, N)
CELLS = boxes(*TABLE)
MOMENTS = {"contraction": RNG.normal(1.0, 0.5, (4, N)), "closure": RNG.normal(0.3, 0.5, (4, N))}
WHERE = targets(RNG.uniform(-6000, 6000, 150), RNG.uniform(-6000, 6000, 150),
                np.where(np.arange(150) % 10 == 0, 500.0, 0.0))
ON_TOP = Targets(WHERE.x, WHERE.y, np.zeros(150))


def field(cells: Bodies = CELLS, moments=MOMENTS, where=WHERE, gradient=False) -> np.ndarray:
    fields = Direct().solve(cells, moments, where, EARTH, tolerance=1e-4, gradient=gradient)
    return np.array([fields[n] for n in DISPLACEMENT + (GRADIENT if gradient else ())])


def same(a: np.ndarray, b: np.ndarray) -> None:
    assert np.abs(a - b).max() < 1e-13 * np.abs(a).max()


def test_blocks_tiles_and_threads_change_nothing(monkeypatch) -> None:
    base = field()
    threads = numba.get_num_threads()
    try:
        numba.set_num_threads(1)
        same(base, field())
    finally:
        numba.set_num_threads(threads)
    monkeypatch.setattr(direct, "_tile_width", lambda *sizes: 7)
    same(base, field())
    monkeypatch.setattr(direct, "max", lambda *values: 11, raising=False)  # cells in a block
    blocks = []
    spied = Bodies(N, lambda index: blocks.append(index.size) or CELLS.corners(index), CELLS.boxes)
    same(base, field(spied))
    assert max(blocks) == 11


def test_order_of_cells_and_targets_changes_nothing() -> None:
    base = field(where=ON_TOP, gradient=True)
    order = RNG.permutation(N)
    turned = boxes(*TABLE[order])
    moved = {source: moment[:, order] for source, moment in MOMENTS.items()}
    same(base, field(turned, moved, ON_TOP, gradient=True))
    back = RNG.permutation(150)
    same(base[..., back], field(where=Targets(*(a[back] for a in (ON_TOP.x, ON_TOP.y,
                                                                   ON_TOP.depth))), gradient=True))


def test_targets_at_depth_and_at_the_surface_do_not_mix() -> None:
    """Each kind alone gives the numbers it has among the others."""
    base = field()
    deep = WHERE.depth > 0
    for chosen in (deep, ~deep):
        alone = Targets(WHERE.x[chosen], WHERE.y[chosen], WHERE.depth[chosen])
        same(base[..., chosen], field(where=alone))


def test_linear_in_the_moments_and_over_the_sources() -> None:
    base = field()
    parts = sum(field(moments={source: moment}) for source, moment in MOMENTS.items())
    same(base, parts)
    same(-2.5 * base, field(moments={s: -2.5 * m for s, m in MOMENTS.items()}))


def test_no_moment_no_field_no_target() -> None:
    still = {"contraction": np.zeros((3, N))}
    assert not field(moments=still).any()
    assert field(where=targets(np.zeros(0))).shape == (3, 4, 0)
    none = Bodies(0, lambda index: np.zeros((0, 8, 3)))
    assert not field(none, {"contraction": np.zeros((2, 0))}).any()


def test_cells_that_lose_nothing_are_not_asked_for() -> None:
    """Only cells with a moment are read, and each date keeps its own."""
    asked: list[int] = []
    spied = Bodies(N, lambda index: asked.extend(index) or CELLS.corners(index), CELLS.boxes)
    moment = np.zeros((2, N))
    moment[1, 17] = 1.0
    got = field(spied, {"contraction": moment})
    assert set(asked) == {17}
    assert not got[:, 0].any()
    one = boxes(TABLE[17])
    same(got[:, 1], field(one, {"contraction": np.ones((1, 1))})[:, 0])


def test_progress_counts_every_pair_once() -> None:
    done: list[float] = []
    moment = {"contraction": np.where(np.arange(N) < 200, 1.0, 0.0)[None, :]}
    Direct().solve(CELLS, moment, WHERE, EARTH, tolerance=1e-3, progress=done.append)
    assert sum(done) == N * WHERE.x.size


@pytest.mark.parametrize("shape", ["box", "hexahedron"])
def test_exactly_above_a_corner_an_edge_and_the_centre(shape: str) -> None:
    """Nothing singular at the surface: the field there is the mean of its four neighbours."""
    cells = boxes((0, 0, 1000, 1020, 200, 100, 0))
    cells = cells if shape == "box" else as_hexahedra(cells)
    for x, y in [(100.0, 50.0), (100.0, 0.0), (0.0, 0.0)]:
        step = 0.5
        got = solve(cells, "contraction", targets(
            [x, x - step, x + step, x, x], [y, y, y, y - step, y + step]), gradient=True)
        assert np.isfinite(got).all()
        scale = np.abs(got[:3]).max()
        assert np.abs(got[:3, 0] - got[:3, 1:].mean(axis=1)).max() < 1e-6 * scale
        assert np.abs(got[3:, 0] - got[3:, 1:].mean(axis=1)).max() < 1e-6 * scale / 100


def test_gradient_is_the_derivative_of_the_displacement() -> None:
    """Central differences over 1 m at 1 km err by 1e-7 of the slope."""
    x, y = 700.0, -300.0
    points = targets([x, x - 1, x + 1, x, x], [y, y, y, y - 1, y + 1])
    for cells in (boxes((0, 0, 1000, 1200, 300, 200, 40)),
                  boxes((0, 0, 1000, 1010, 30, 30, 0)),
                  as_hexahedra(boxes((0, 0, 1000, 1200, 300, 200, 40)))):
        for source in ("contraction", "closure"):
            f = solve(cells, source, points, tolerance=1e-8, gradient=True)
            by_x, by_y = 0.5 * (f[:3, 2] - f[:3, 1]), 0.5 * (f[:3, 4] - f[:3, 3])
            wanted = [by_x[0], by_y[0], by_x[1], by_y[2], 0.5 * (by_y[1] + by_x[2])]
            assert f[3:, 0] == pytest.approx(wanted, rel=1e-5, abs=1e-5 * np.abs(wanted).max())


def test_gradient_below_the_surface_is_refused() -> None:
    with pytest.raises(InputError, match="tilt and strain are available at the surface only"):
        field(gradient=True)


@pytest.mark.parametrize("shape", ["box", "hexahedron"])
@pytest.mark.parametrize("depth", [0.0, 200.0])
def test_ground_sinks_and_moves_toward_what_contracts(shape: str, depth: float) -> None:
    """Depletion is positive: down above the body, toward it on every side; injection the other
    way round."""
    cells = boxes((0, 0, 1000, 1020, 200, 100, 0))
    cells = cells if shape == "box" else as_hexahedra(cells)
    where = targets([0, 800, -800, 0, 0], [0, 0, 0, 800, -800], depth)
    for source in ("contraction", "closure"):
        down, east, north = solve(cells, source, where)
        assert (down > 0).all()
        assert east[1] < 0 < east[2]
        assert north[3] < 0 < north[4]
        lifted = solve(cells, source, where, moment=np.array([[-1.0]]))
        assert lifted == pytest.approx(-np.array([down, east, north]), rel=1e-14)
