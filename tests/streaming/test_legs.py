"""Legs: all rows once, in order, inside the memory."""

from __future__ import annotations

import os

import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from subside import legs
from subside.errors import CannotDo
from subside.legs import Leg, Needs, default_memory, memory_in_use, plan_legs

IN_USE = 5e8


@pytest.fixture(autouse=True)
def steady(monkeypatch: pytest.MonkeyPatch) -> None:
    """So that the memory of the tests themselves does not matter."""
    monkeypatch.setattr(legs, "memory_in_use", lambda: IN_USE)


@settings(max_examples=300)
@given(rows=st.integers(1, 400), chunk=st.integers(1, 500), room=st.floats(1e6, 1e11),
       fixed=st.floats(0.0, 1e9), per_date=st.floats(0.0, 1e9), whole=st.booleans())
def test_all_rows_once_and_in_order(rows: int, chunk: int, room: float, fixed: float,
                                    per_date: float, whole: bool) -> None:
    needs = Needs(fixed, per_date)
    try:
        plan = plan_legs(needs, rows, chunk, whole, IN_USE + fixed + room)
    except CannotDo:
        # not even the least that a leg must hold
        assert (rows if whole else min(2, rows)) * per_date > room * (1 - 1e-6)
        return
    assert [row for first, last in plan for row in range(first, last)] == list(range(rows))
    assert all(first < last for first, last in plan)
    assert max(last - first for first, last in plan) * per_date <= room * (1 + 1e-6)
    assert not whole or plan == [(0, rows)]
    # of a start between two dates of the file the first row needs both
    assert plan[0][1] >= min(2, rows)


@given(rows=st.integers(3, 300), chunk=st.integers(2, 40), times=st.integers(1, 4),
       at=st.integers(-1, 50))
def test_legs_hold_whole_chunks_where_memory_allows(rows: int, chunk: int, times: int,
                                                    at: int) -> None:
    """Row r is date at + r of the file, whose chunks begin with its first date."""
    per_date = 3e9  # so that nothing but memory decides
    assume(rows > times * chunk + 1)
    plan = plan_legs(Needs(0.0, per_date), rows, chunk, False,
                     IN_USE + (times * chunk + 1.5) * per_date, at)
    assert plan[0][0] == 0 and plan[-1][1] == rows
    assert all((at + last) % chunk == 0 for _, last in plan[:-1])


def test_more_memory_makes_no_more_legs() -> None:
    count = [len(plan_legs(Needs(1e8, 1e8), 240, 1, False, IN_USE + room))
             for room in (4e8, 8e8, 1.6e9, 1e10)]
    assert count == sorted(count, reverse=True)
    # comfort: beyond 300 MB, or 8 dates, a leg gains nothing from being longer
    assert count[-1] == 240 // 8


@pytest.mark.parametrize(("whole", "needed"), [(False, 0.5 + 1.0 + 2 * 0.4),
                                               (True, 0.5 + 1.0 + 60 * 0.4)])
def test_what_does_not_fit_is_said_in_numbers(whole: bool, needed: float) -> None:
    """GB in use, fixed, and for the fewest dates."""
    with pytest.raises(CannotDo) as error:
        plan_legs(Needs(1e9, 4e8), 60, 1, whole, 2e9)
    text = str(error.value)
    assert f"needs about {needed:.3g} GB" in text and "may use 2 GB" in text
    assert "--memory" in text
    assert ("a law needs all dates at once" in text) == whole


def test_the_memory_that_is_taken_where_nothing_is_said(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.undo()
    used, budget = memory_in_use(), default_memory()
    assert 1e7 < used < budget
    assert budget < 2 * float(os.sysconf("SC_PAGE_SIZE")) * os.sysconf("SC_PHYS_PAGES")
    assert plan_legs(Needs(0.0, 1.0), 10, 1, False, None) == [(0, 10)]


def test_no_memory_free_is_an_error_not_a_negative_number(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(legs, "_free_memory", lambda: 0.0)
    assert default_memory() == IN_USE
    with pytest.raises(CannotDo):
        plan_legs(Needs(0.0, 1e6), 10, 1, False, None)


def test_rows_and_steps_of_a_leg() -> None:
    leg = Leg(2, 7, (3, 5))
    assert (leg.rows, leg.steps) == (5, 2)
