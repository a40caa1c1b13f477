"""The compiled rule is the slow one, cell by cell, and boxes need no corners for it."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from subside.earth.quadrature import _BOUND, gauss_order, gauss_reach
from subside.errors import InputError
from subside.grid.geometry import corners_of_boxes
from subside.superposition.rule import MAX_ORDER, box_rule, surface_rule


def slow_order(half, distance, tolerance, direction, quantity):
    """The least n that keeps 3 factor n^power rho^-2n below the tolerance, found from below."""
    factor, power = _BOUND[direction, quantity]
    with np.errstate(divide="ignore"):
        delta = distance / half
    decay = 2.0 * (np.arcsinh(delta) if direction == "horizontal" else np.arccosh(1.0 + delta))
    wanted = np.log(3.0 * factor / tolerance)
    order = np.ones(delta.shape, dtype=np.int64)
    while True:
        need = np.maximum(np.ceil((wanted + power * np.log(order)) / decay), 1.0).astype(np.int64)
        if (need <= order).all():
            return order
        order = np.maximum(order, need)


def slow_rule(corners, tolerance, gradient):
    """The rule in whole-array steps, straight from the bound."""
    along = [corners[:, [1, 2, 5, 6]] - corners[:, [0, 3, 4, 7]],
             corners[:, [3, 2, 7, 6]] - corners[:, [0, 1, 4, 5]]]
    half = [0.5 * np.linalg.norm(edge, axis=2).max(axis=1) for edge in along]
    top = corners[:, :, 2].min(axis=1)
    half.append(0.5 * (corners[:, :, 2].max(axis=1) - top))
    top = np.maximum(top, 1e-6 * np.max(half, axis=0))
    quantity = "gradient" if gradient else "displacement"
    rule = np.ones((corners.shape[0], 6), dtype=np.int64)
    lean = 0.5 * np.linalg.norm(corners[:, 4:, :2] - corners[:, :4, :2], axis=2).max(axis=1)
    for direction in range(3):
        panels = np.ones(corners.shape[0], dtype=np.int64)
        for _ in range(12):
            word = "vertical" if direction == 2 else "horizontal"
            order = slow_order(half[direction] / panels, top, tolerance, word, quantity)
            if direction == 2:
                order = np.maximum(order, slow_order(lean / panels, top, tolerance, "horizontal",
                                                     quantity))
            too_many = order > MAX_ORDER
            if not too_many.any():
                break
            panels[too_many] *= 2
        rule[:, direction] = np.minimum(order, MAX_ORDER)
        rule[:, 3 + direction] = panels
    return rule


def invented_boxes(count: int, seed: int) -> np.ndarray:
    """Tops from 30 cm to 10 km, from pins to fields 30 km wide, any azimuth."""
    rng = np.random.default_rng(seed)
    size = 10 ** rng.uniform(-1.0, 4.5, (3, count))
    top = 10 ** rng.uniform(-0.5, 4.0, count)
    place = rng.uniform(-1e4, 1e4, (2, count))
    return np.column_stack([*place, top, top + 0.1 * size[2], size[0], size[1],
                            rng.uniform(-180, 180, count)])


@settings(max_examples=40, deadline=None)
@given(st.integers(0, 2**32 - 1), st.floats(1e-11, 1e-2), st.booleans())
def test_rule_of_corners_is_the_slow_one(seed, tolerance, gradient) -> None:
    rng = np.random.default_rng(seed)
    boxes = invented_boxes(300, seed)
    corners = corners_of_boxes(*boxes.T)
    corners += rng.normal(0.0, 0.2, corners.shape) * boxes[:, None, 4:5]  # leaning and twisted too
    corners[:, :, 2] += np.maximum(-corners[:, :, 2].min(axis=1), 0.0)[:, None]
    assert np.array_equal(surface_rule(corners, tolerance, gradient),
                          slow_rule(corners, tolerance, gradient))


@settings(max_examples=40, deadline=None)
@given(st.integers(0, 2**32 - 1), st.floats(1e-11, 1e-2), st.booleans())
def test_rule_of_boxes_is_that_of_their_corners(seed, tolerance, gradient) -> None:
    boxes = invented_boxes(300, seed)
    boxes[::7, 2] = 0.0  # these reach the surface
    # corners at 10 km carry rounding of 1e-12 m: sizes that lie on a step by chance are none here
    assert np.array_equal(box_rule(boxes, tolerance, gradient),
                          slow_rule(corners_of_boxes(*boxes.T), tolerance, gradient))


@pytest.mark.parametrize("direction", ["horizontal", "vertical"])
@pytest.mark.parametrize("quantity", ["displacement", "gradient"])
def test_reach_is_where_the_order_steps(direction, quantity) -> None:
    """Just below it n points do, just above it n + 1 are needed; by the slow search."""
    for tolerance in (1e-3, 1e-6, 1e-9):
        reach = gauss_reach(20, tolerance, direction, quantity)
        assert (np.diff(reach) > 0).all()
        n = np.arange(1, 21)
        for ratio, order in ((reach * (1 - 1e-9), n), (reach * (1 + 1e-9), n + 1)):
            assert np.array_equal(slow_order(ratio, 1.0, tolerance, direction, quantity), order)
            assert np.array_equal(gauss_order(ratio, 1.0, tolerance, direction, quantity), order)


@pytest.mark.parametrize("column", [0, 2, 4])
def test_cell_without_a_place_or_size_is_refused(column) -> None:
    boxes = invented_boxes(5, 0)
    boxes[3, column] = np.nan
    if column > 0:
        with pytest.raises(InputError, match=r"a cell near x = .* must have a place and a size"):
            box_rule(boxes, 1e-4, False)
    with pytest.raises(InputError, match=r"a cell near x = .* must have a place and a size"):
        surface_rule(corners_of_boxes(*boxes.T), 1e-4, False)
    point = np.zeros((1, 7))
    with pytest.raises(InputError, match=r"x = 0 m, y = 0 m reaches up to 0 m"):
        box_rule(point, 1e-4, False)


def test_threads_do_not_wait_for_each_other() -> None:
    """The rule of a large array lets another thread of Python run meanwhile."""
    import threading
    import time

    boxes = np.repeat(invented_boxes(1000, 1), 3000, axis=0)
    box_rule(boxes[:10], 1e-6, True)
    stop, beats = threading.Event(), []

    def beat() -> None:
        while not stop.is_set():
            beats.append(time.perf_counter())
            time.sleep(0.001)

    thread = threading.Thread(target=beat)
    thread.start()
    started = time.perf_counter()
    box_rule(boxes, 1e-6, True)
    ended = time.perf_counter()
    stop.set()
    thread.join()
    assert sum(started < moment < ended for moment in beats) >= 3
