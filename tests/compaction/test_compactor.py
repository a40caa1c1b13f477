"""The compactor: any cutting into legs and blocks, releases, fields in time, what it refuses."""

from __future__ import annotations

import pickle
from concurrent.futures import ThreadPoolExecutor
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from law_cases import BAR, LAWS
from made_up_blocks import STIFF, ByDate, dataset, expected_strain, falling, made, run, table, years

from subside.compaction import apply
from subside.errors import InputError, PluginError
from subside.timeline import TimeAxis

NAMES = [law.name for law in LAWS]
AXIS = TimeAxis(years(0, 1, 2, 4, 5), years(0, 0.5, 2, 3, 4.5, 5))


@st.composite
def runs(draw: Any) -> Any:
    """Dates, pressure, legs, blocks of cells."""
    steps, cells = draw(st.integers(2, 7)), draw(st.integers(1, 9))
    gaps = draw(st.lists(st.sampled_from([0.1, 0.5, 1.0, 3.0]), min_size=steps - 1,
                         max_size=steps - 1))
    pressure_dates = np.concatenate([[0.0], np.cumsum(gaps)])
    output = draw(st.lists(st.floats(0, 1), min_size=1, max_size=6))
    some = draw(st.lists(st.sampled_from(list(pressure_dates)), max_size=4))
    axis = TimeAxis(years(*pressure_dates),
                    years(*np.unique([*np.array(output) * pressure_dates[-1], *some])))
    cuts = draw(st.sets(st.integers(1, steps - 1)))
    owner = np.array(draw(st.lists(st.integers(0, 2), min_size=cells, max_size=cells)))
    parts = [np.flatnonzero(owner == n) for n in range(3)]
    return (axis, falling(steps, cells, draw(st.integers(0, 99))), [0, *sorted(cuts), steps],
            [part for part in parts if part.size])


@pytest.mark.parametrize("name", NAMES)
@settings(max_examples=40, deadline=None)
@given(runs(), st.sampled_from([1.0, 0.7]), st.integers(1, 4), st.integers(1, 16))
def test_legs_and_blocks_change_nothing(name: str, case: Any, biot: float, piece: int,
                                        values: int) -> None:
    """Against the law's own `strain` over the whole history on the union of dates."""
    axis, pressure, legs, parts = case
    cells = dataset(pressure.shape[1])
    compactor, blocks = made([table(name, biot=biot)], cells, axis)
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(apply, "_CELLS", piece)
        patch.setattr(apply, "_VALUES", values)
        _, cut = run(compactor, pressure, legs, parts)
    _, whole = run(compactor, pressure, [0, legs[-1]], [np.arange(pressure.shape[1])])
    assert cut.strain is not None
    np.testing.assert_array_equal(cut.strain, whole.strain)
    wanted = expected_strain(blocks[0], axis, pressure)
    largest = np.abs(wanted).max()
    np.testing.assert_allclose(cut.strain, wanted, rtol=0, atol=1e-10 * largest)
    np.testing.assert_allclose(cut.volume_lost, wanted * cells["volume"].values, rtol=0,
                               atol=1e-10 * largest * 2000)
    assert np.isfinite(cut.volume_lost).all()


def test_two_laws_in_one_block_of_cells() -> None:
    """Regions that alternate from cell to cell, each with its law, against each law alone."""
    region = np.arange(12) % 3
    cells = dataset(12, region, ("A", "B", "C"))
    pressure = falling(5, 12)
    compactor, blocks = made([table("bilinear", regions=["B"]), table("isotach", regions=["C"]),
                              table("linear")], cells, AXIS)
    _, got = run(compactor, pressure, [0, 2, 5], [np.arange(7), np.arange(7, 12)])
    assert got.strain is not None
    for block in blocks:
        np.testing.assert_allclose(got.strain[:, block.cells],
                                   expected_strain(block, AXIS, pressure), rtol=1e-12, atol=1e-18)


def test_zero_at_the_start_and_each_output_date_once() -> None:
    compactor, _ = made([table("isotach")], dataset(3), AXIS)
    assert [compactor.output_range(a, b) for a, b in ((0, 1), (1, 2), (2, 4), (4, 5))] == [
        (0, 1), (1, 2), (2, 4), (4, 6)]
    states, got = run(compactor, falling(5, 3), [0, 1, 2, 4, 5], [np.arange(3)])
    assert (got.volume_lost[0] == 0.0).all()
    assert got.volume_lost.shape == (6, 3)
    assert states[0].rows == 5
    # no output date in a leg: nothing is given, and nothing forgotten
    late = TimeAxis(AXIS.pressure, AXIS.pressure[-1:])
    compactor, _ = made([table("isotach")], dataset(3), late)
    _, last = run(compactor, falling(5, 3), [0, 1, 2, 4, 5], [np.arange(3)])
    np.testing.assert_allclose(last.volume_lost[0], got.volume_lost[-1], rtol=1e-9)


# -- how much of it is which source ------------------------------------------------------------


def test_a_matched_reservoir_is_one_array() -> None:
    for release in ("matched", 1.0):
        compactor, _ = made([table("linear", horizontal_release=release)], dataset(4), AXIS)
        state = compactor.begin(np.arange(4))
        got = compactor.advance(state, 0, 5, falling(5, 4))
        assert got.contraction is got.volume_lost and got.closure is None and got.strain is None
        assert list(got.moments) == ["contraction"] == list(compactor.sources)


def test_releases() -> None:
    """g e V and (1 - g) e V; "own" is a Dp V / M with M = (1-nu) E / ((1+nu)(1-2nu))."""
    cells = dataset(6, np.arange(6) % 3, ("A", "B", "C"), release=(np.linspace(0.1, 2, 6), "1"))
    pressure = falling(5, 6)
    compactor, _ = made([
        table("linear", regions=["A"], horizontal_release="own", biot=0.8),
        table("linear", regions=["B"], horizontal_release={"field": "release"}),
        table("linear", regions=["C"], horizontal_release=0.25)], cells, AXIS, earth=STIFF)
    assert compactor.sources == ("contraction", "closure")
    _, got = run(compactor, pressure, [0, 3, 5], [np.arange(4), np.arange(4, 6)])
    volume = cells["volume"].values
    drop = np.stack([np.interp(AXIS.output, AXIS.pressure, c) for c in (pressure[0] - pressure).T],
                    axis=1)
    modulus = 0.75 * 10e9 / (1.25 * 0.5)
    assert got.strain is not None and got.closure is not None
    share = {1: cells["release"].values, 2: np.full(6, 0.25)}
    for cell in range(6):
        if cell % 3 == 0:
            wanted = 0.8 * drop[:, cell] * volume[cell] / modulus
        else:
            wanted = share[cell % 3][cell] * got.strain[:, cell] * volume[cell]
        np.testing.assert_allclose(got.contraction[:, cell], wanted, rtol=1e-13)
    np.testing.assert_allclose(got.contraction + got.closure, got.volume_lost, rtol=1e-12,
                               atol=1e-12)


def test_only_net_volume_counts() -> None:
    cells = dataset(2, net_to_gross=([0.5, 0.0], "1"))
    pressure = falling(5, 2)
    _, net = run(made([table("linear")], cells, AXIS)[0], pressure, [0, 5], [np.arange(2)])
    _, gross = run(made([table("linear", apply_net_to_gross=False)], cells, AXIS)[0], pressure,
                   [0, 5], [np.arange(2)])
    np.testing.assert_array_equal(net.volume_lost, gross.volume_lost * [0.5, 0.0])
    np.testing.assert_array_equal(net.strain, gross.strain)


# -- strangers' laws and fields in time --------------------------------------------------------

HEAT = 350.0 + np.array([[0, 1], [2, 2], [4, 8], [4, -8], [10, 0.0]])
STREAM = {"temperature": {"units": "K"}}


def test_a_law_with_strain_alone_gets_the_whole_history() -> None:
    compactor, blocks = made([table("whole-only")], dataset(2), AXIS, streams=STREAM)
    assert compactor.whole_history and compactor.fields == ("temperature",)
    pressure = falling(5, 2)
    _, got = run(compactor, pressure, [0, 5], [np.arange(2)], {"temperature": HEAT})
    wanted = expected_strain(blocks[0], AXIS, pressure, {"temperature": HEAT})
    np.testing.assert_allclose(got.strain, wanted, rtol=1e-13)
    with pytest.raises(ValueError, match="whole history"):
        run(compactor, pressure, [0, 2, 5], [np.arange(2)], {"temperature": HEAT})


@pytest.mark.parametrize("legs", [[0, 1, 2, 5], [0, 3, 4, 5], [0, 5]])
def test_a_law_by_date_gets_fields_in_time_across_legs(legs: list[int]) -> None:
    compactor, blocks = made([table("by-date")], dataset(2), AXIS, streams=STREAM)
    assert not compactor.whole_history
    pressure = falling(5, 2)
    _, got = run(compactor, pressure, legs, [np.arange(2)], {"temperature": HEAT})
    wanted = expected_strain(blocks[0], AXIS, pressure, {"temperature": HEAT})
    np.testing.assert_allclose(got.strain, wanted, rtol=0, atol=1e-12 * np.abs(wanted).max())


def test_a_static_field_is_the_same_on_every_date() -> None:
    cells = dataset(2, temperature=([350.0, 380.0], "K"))
    pressure = falling(5, 2)
    results = [run(made([table(law)], cells, AXIS)[0], pressure, legs, [np.arange(2)])[1].strain
               for law, legs in (("whole-only", [0, 5]), ("by-date", [0, 2, 5]))]
    np.testing.assert_allclose(results[0], results[1], rtol=1e-13)


def test_a_gap_in_a_field_in_time_is_refused() -> None:
    compactor, _ = made([table("by-date")], dataset(2), AXIS, streams=STREAM)
    heat = HEAT.copy()
    heat[3, 1] = np.nan
    with pytest.raises(InputError, match=r"\[compaction\]: law 'by-date': the grid's field "
                                         r"'temperature' has no value in 1 active cell, first "
                                         r"\(cell=101\); fill the gaps"):
        run(compactor, falling(5, 2), [0, 2, 5], [np.arange(2)], {"temperature": heat})


@pytest.mark.parametrize(("streams", "more", "said"), [
    ({"temperature": {"units_problem": "it has units 'hot'"}}, {},
     "'temperature' cannot be used, it has units 'hot'"),
    ({"temperatur": {"units": "K"}}, {}, "no field 'temperature'. Did you mean 'temperatur'?"),
    (STREAM | {"heat": {"units": "1"}}, {"biot": {"field": "heat"}}, "'heat' changes with time"),
])
def test_fields_in_time_are_checked_before_they_come(streams: Any, more: Any, said: str) -> None:
    with pytest.raises(InputError) as caught:
        made([table("by-date", **more)], dataset(2), AXIS, streams=streams)
    assert said in str(caught.value)


def test_strain_that_is_no_number_names_the_cell(monkeypatch: pytest.MonkeyPatch) -> None:
    def nothing(self: Any, state: Any, t0: Any, t1: Any, rise0: Any, rise1: Any, fields: Any,
                rock: Any) -> Any:
        return state, np.where(np.arange(rise1.size) == 1, np.nan, 0.0)

    monkeypatch.setattr(ByDate, "advance", nothing)
    compactor, _ = made([table("by-date")], dataset(5, temperature=(np.zeros(5), "K")), AXIS)
    with pytest.raises(InputError, match=r"law 'by-date' gives no finite strain in \(cell=103\)"):
        run(compactor, falling(5, 5), [0, 2, 5], [np.arange(2, 5)])


def test_strain_of_another_shape_is_the_laws_fault(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(ByDate, "advance", lambda self, state, *_: (state, np.zeros((2, 5))))
    compactor, _ = made([table("by-date")], dataset(5, temperature=(np.zeros(5), "K")), AXIS)
    with pytest.raises(PluginError, match=r"by-date' failed .*shape \(2, 5\)"):
        run(compactor, falling(5, 5), [0, 2, 5], [np.arange(5)])


# -- states ------------------------------------------------------------------------------------


@pytest.mark.parametrize("name", NAMES)
def test_a_state_travels(name: str) -> None:
    """Pickled between legs, with a compactor that was: the same numbers."""
    pressure = falling(5, 6)
    compactor, _ = made([table(name)], dataset(6), AXIS)
    _, whole = run(compactor, pressure, [0, 2, 5], [np.arange(6)])
    state = compactor.begin(np.arange(6))
    compactor.advance(state, 0, 2, pressure[:2])
    there, state = pickle.loads(pickle.dumps((compactor, state)))
    got = there.advance(state, 2, 5, pressure[2:])
    np.testing.assert_array_equal(got.volume_lost, whole.volume_lost[2:])


def test_rows_must_follow_each_other() -> None:
    compactor, _ = made([table("linear")], dataset(2), AXIS)
    state = compactor.begin(np.arange(2))
    with pytest.raises(ValueError, match="from row 0"):
        compactor.advance(state, 1, 3, falling(2, 2))
    with pytest.raises(ValueError, match="2 cells"):
        compactor.advance(state, 0, 3, falling(3, 4))


def test_pressure_may_be_single_precision_and_is_left_alone() -> None:
    pressure = falling(5, 4).astype(np.float32)
    pressure.flags.writeable = False
    compactor, _ = made([table("bilinear")], dataset(4), AXIS)
    _, got = run(compactor, pressure, [0, 2, 5], [np.arange(4)])
    _, wanted = run(compactor, pressure.astype(float), [0, 5], [np.arange(4)])
    np.testing.assert_array_equal(got.volume_lost, wanted.volume_lost)


@pytest.mark.parametrize("name", NAMES)
def test_threads_change_nothing(name: str) -> None:
    pressure = falling(5, 3000)
    compactor, _ = made([table(name)], dataset(3000), AXIS)
    parts = np.array_split(np.arange(3000), 4)

    def through(part: np.ndarray) -> np.ndarray:
        state = compactor.begin(part)
        return np.concatenate([compactor.advance(state, a, b, pressure[a:b, part]).volume_lost
                               for a, b in ((0, 2), (2, 5))])

    with ThreadPoolExecutor(4) as pool:
        together = np.concatenate(list(pool.map(through, parts)), axis=1)
    _, alone = run(compactor, pressure, [0, 5], [np.arange(3000)])
    np.testing.assert_array_equal(together, alone.volume_lost)


def test_by_hand() -> None:
    """1000 m3 x 100 bar x 1.1e-5 1/bar = 1.1 m3."""
    compactor, _ = made([table("linear")], dataset(1), TimeAxis(years(0, 1), years(1)))
    got = compactor.advance(compactor.begin(np.arange(1)), 0, 2,
                            np.array([[300 * BAR], [200 * BAR]]))
    assert got.volume_lost[0, 0] == pytest.approx(1.1, rel=1e-12)
