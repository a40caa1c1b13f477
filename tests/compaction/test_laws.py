"""What every law keeps: causal, cell by cell, indifferent to the cutting of time, and so on."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from law_cases import BAR, LAWS, MPA, YEAR, cut_paths, history_of, paths, rock_of

from subside.api import Law, parse_quantity
from subside.compaction import builtin
from subside.compaction.bilinear import Bilinear
from subside.compaction.linear import Linear

each_law = pytest.mark.parametrize("law", [cls() for cls in LAWS], ids=lambda law: law.name)
each_memory = pytest.mark.parametrize("law", [Linear(), Bilinear()], ids=lambda law: law.name)

YEARS = np.array([0, 1, 2, 4, 8, 9, 20.0])
DROP = np.array([[0, 30, 90, 200, 210, 100, 250], [0, -20, 10, 10, 150, 160, 80],
                 [0, 0, 0, 100, 100, 300, 300]]).T * BAR


@pytest.mark.parametrize("biot", [1.0, 0.7])
@each_law
def test_zero_at_the_start_and_of_the_right_shape(law: Law, biot: float) -> None:
    strain = law.strain(history_of(YEARS, DROP, biot), rock_of(law, biot=biot))
    assert strain.shape == DROP.shape
    assert (strain[0] == 0.0).all()
    assert (strain[-1] > 0.0).all()


@each_law
def test_cells_are_independent_and_a_scalar_is_every_cell(law: Law) -> None:
    rock = rock_of(law)
    together = law.strain(history_of(YEARS, DROP), rock)
    for cell in range(DROP.shape[1]):
        alone = law.strain(history_of(YEARS, DROP[:, cell]), rock)
        assert (together[:, cell] == alone[:, 0]).all()
    spread = {name: np.full(DROP.shape[1], value) for name, value in vars(rock).items()
              if value is not None}
    assert (law.strain(history_of(YEARS, DROP), rock_of(law, **spread)) == together).all()


@each_law
def test_parameters_belong_to_their_cell(law: Law) -> None:
    """Every parameter in turn differs between cells: each cell is as if all had its value."""
    history = history_of(YEARS, DROP)
    rock = rock_of(law, previous_stress_rise=2 * MPA)
    for name, value in vars(rock).items():
        if value is None or name == "biot":
            continue
        values = value * np.array([1.0, 0.9, 0.8])
        mixed = law.strain(history, rock_of(law, **vars(rock) | {name: values}))
        for cell in range(3):
            same = law.strain(history, rock_of(law, **vars(rock) | {name: values[cell]}))
            assert (mixed[:, cell] == same[:, cell]).all(), name


@each_law
def test_causal(law: Law) -> None:
    changed = DROP.copy()
    changed[4:] += 40 * BAR
    rock = rock_of(law)
    before = law.strain(history_of(YEARS, DROP), rock)
    after = law.strain(history_of(YEARS, changed), rock)
    assert (before[:4] == after[:4]).all()
    assert (before[4:] != after[4:]).all()


@each_law
def test_inputs_are_left_alone(law: Law) -> None:
    history = history_of(YEARS, DROP)
    rock = rock_of(law, previous_stress_rise=np.full(3, 2 * MPA))
    rock.previous_stress_rise.flags.writeable = False
    law.strain(history, rock)
    assert (history.stress_rise == DROP).all()
    assert (rock.previous_stress_rise == 2 * MPA).all()


@each_memory
@settings(max_examples=100, deadline=None)
@given(cut_paths(), st.floats(0.3, 1.0), st.floats(0.3, 1.0), st.floats(0, 20))
def test_cutting_steps_changes_nothing(
    law: Law, cut: Any, biot: float, yield_biot: float, previous: float,
) -> None:
    years, drop, finer, drop_finer, where = cut
    rock = rock_of(law, biot=biot, yield_biot=yield_biot, previous_stress_rise=previous * MPA)
    coarse = law.strain(history_of(years, drop, biot), rock)
    fine = law.strain(history_of(finer, drop_finer, biot), rock)
    assert fine[where] == pytest.approx(coarse, rel=1e-11, abs=1e-15)


@each_law
@settings(max_examples=60, deadline=None)
@given(path=paths(lowest=-100), cycle=paths(lowest=-100), previous=st.sampled_from([0, 5 * MPA]))
def test_a_closed_loop_never_gains_height(law: Law, path: Any, cycle: Any, previous: float) -> None:
    """From wherever the path ended, around and back to that pressure: no less strain than before.

    For bilinear and linear nothing at all is left of the loop where it stays below the largest
    stress so far.
    """
    years = np.concatenate([path[0], path[0][-1] + cycle[0][1:], [path[0][-1] + cycle[0][-1] + 1]])
    end = path[1][-1]
    drop = np.concatenate([path[1], cycle[1][1:], [end]])
    rock = rock_of(law, previous_stress_rise=previous)
    strain = law.strain(history_of(years, drop), rock)[:, 0]
    before, after = strain[len(path[0]) - 1], strain[-1]
    assert after >= before - 1e-12
    if law.name != "isotach" and cycle[1].max() <= max(path[1].max(), previous):
        assert after == pytest.approx(before, abs=1e-15)


@each_law
@settings(max_examples=40, deadline=None)
@given(path=paths(), biot=st.floats(0.5, 1.0))
def test_date_by_date_is_the_same(law: Law, path: Any, biot: float) -> None:
    rock = rock_of(law, biot=biot, previous_stress_rise=np.array([0.0, 3 * MPA]))
    history = history_of(path[0], np.stack([path[1], 0.5 * path[1]], axis=1), biot)
    strain = law.strain(history, rock)
    state = law.start(rock)
    for now in range(1, history.time.size):
        step = (history.time[now - 1], history.time[now], history.stress_rise[now - 1],
                history.stress_rise[now], {}, rock)
        kept = np.array(state)
        following, reached = law.advance(state, *step)
        assert (np.array(state) == kept).all()
        assert reached == pytest.approx(strain[now], rel=1e-10, abs=1e-18)
        state = following


@each_law
@given(factor=st.floats(0.01, 10))
@settings(max_examples=20, deadline=None)
def test_linear_in_what_it_says(law: Law, factor: float) -> None:
    rock = rock_of(law, previous_stress_rise=MPA)
    scaled = {name: factor * getattr(rock, name) for name in law.linear_in}
    assert scaled
    history = history_of(YEARS, DROP)
    assert law.strain(history, rock_of(law, **vars(rock) | scaled)) == pytest.approx(
        factor * law.strain(history, rock), rel=1e-9, abs=1e-16 * factor)


@each_law
def test_declarations(law: Law) -> None:
    assert law.name and law.summary and law.source
    names = [p.name for p in law.parameters]
    assert len(set(names)) == len(names)
    assert set(law.linear_in) <= set(names)
    for parameter in law.parameters:
        value = parse_quantity(parameter.example, parameter.unit, name=parameter.name,
                               unit_needed=True)
        parameter.check(value, value, law.name)
        assert parameter.unit_needed == (parameter.unit == "Pa/s")


@each_law
def test_no_cells_are_no_trouble(law: Law) -> None:
    assert law.strain(history_of([0, 1], np.zeros((2, 0))), rock_of(law)).shape == (2, 0)


def test_the_three_are_offered_through_the_hook() -> None:
    assert builtin.subside_compaction_laws() == list(LAWS)
    assert builtin.subside_compaction_laws.subside_impl  # type: ignore[attr-defined]


def test_a_law_that_only_has_strain_says_so() -> None:
    class Plain(Law):
        name = "plain"

        def strain(self, history: Any, rock: Any) -> Any:
            return history.stress_rise

    assert Plain().start(rock_of(Linear())) is None
    with pytest.raises(NotImplementedError, match=r"law 'plain' .*strain"):
        Plain().advance(None, 0.0, YEAR, DROP[0], DROP[1], {}, rock_of(Linear()))
