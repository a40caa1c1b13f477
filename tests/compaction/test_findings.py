"""What a run says about its strains, gathered block by block."""

from __future__ import annotations

import pickle
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from law_cases import BAR
from made_up_blocks import SOFT, STIFF, dataset, falling, made, run, table, years

from subside.compaction.findings import Findings
from subside.timeline import TimeAxis

AXIS = TimeAxis(years(0, 1, 2, 4, 5), years(0, 1, 4))
MODULUS = 0.75 * 10e9 / (1.25 * 0.5)  # (1-nu) E / ((1+nu)(1-2nu)), Pa


def said(tables: Any, pressure: np.ndarray, *, cells: Any = None, earth: Any = STIFF,
         legs: Any = (0, 5), parts: Any = None, axis: TimeAxis = AXIS) -> list[str]:
    count = pressure.shape[1]
    compactor, _ = made(tables, cells if cells is not None else dataset(count), axis, earth=earth)
    states, _ = run(compactor, pressure, legs, parts or [np.arange(count)])
    return compactor.warnings(pickle.loads(pickle.dumps(state.findings)) for state in states)


def soft(factor: float, **more: Any) -> Any:
    """A linear law of `factor` times the compressibility of the host."""
    return table("linear", **{"uniaxial_compressibility": factor / MODULUS,
                              "unloading_compressibility": factor / MODULUS} | more)


@pytest.mark.parametrize(("factor", "word"), [(0.45, "stiffer"), (0.55, None), (1.9, None),
                                              (2.1, "softer")])
def test_a_reservoir_unlike_its_host(factor: float, word: str | None) -> None:
    texts = said([soft(factor)], falling(5, 3))
    assert len(texts) == (word is not None)
    if word:
        assert f"{factor:.2g} times 1/M of the host: the reservoir is {word} than" in texts[0]
        assert not said([soft(factor, horizontal_release="own")], falling(5, 3))
        assert not said([soft(factor)], falling(5, 3), earth=SOFT)


def test_cells_that_hardly_fell_do_not_count() -> None:
    """Below a tenth of the largest fall of the law's cells, wherever that cell is stored. Half the
    cells fall by 100 bar and are 3 times as soft as the host; the others fall by 9 or 11 bar and
    are as stiff as it. With the first 11 bar counted the median of 3, 3, 1, 1, 1 is 1."""
    factor = np.array([3, 3, 1, 1, 1.0])
    cells = dataset(5, soft=(factor / MODULUS, "1/Pa"))
    law = table("linear", uniaxial_compressibility={"field": "soft"},
                unloading_compressibility={"field": "soft"})
    for little, warned in ((9.0, True), (11.0, False)):
        fall = np.array([100, 100, little, little, little]) * BAR
        pressure = 300 * BAR - np.linspace(0, 1, 5)[:, None] * fall
        for parts in ([np.arange(5)], [np.array([2, 3]), np.array([4]), np.array([0, 1])]):
            texts = said([law], pressure, cells=cells, parts=parts)
            assert any("3 times 1/M" in text for text in texts) == warned


def test_it_is_judged_at_the_last_output_date() -> None:
    """At 39 bar 0.5e-5 1/bar x M = 0.6; at 150 bar, one date later, (40 x 0.5 + 110 x 3)/150 x 1e-5
    1/bar x M = 2.8."""
    pressure = 300 * BAR - np.array([[0], [10], [20], [39], [150.0]]) * BAR
    assert not said([table("bilinear")], pressure, legs=(0, 2, 3, 5))
    later = TimeAxis(AXIS.pressure, AXIS.pressure)
    for legs in ((0, 5), (0, 2, 4, 5)):
        texts = said([table("bilinear")], pressure, legs=legs, axis=later)
        assert len(texts) == 1 and "is 2.8 times 1/M" in texts[0]


def test_the_alarm_names_the_largest_strain_and_its_cell() -> None:
    """500 bar x 1.1e-5 1/bar = 0.55 %."""
    pressure = np.full((5, 4), 600 * BAR)
    pressure[2:, 2] -= 500 * BAR  # reached at the output date of 4 years
    pressure[4:, 1] -= 550 * BAR  # after the last output date
    pressure[3, 3] -= 470 * BAR
    for parts in ([np.arange(4)], [np.array([3]), np.array([0, 2]), np.array([1])]):
        texts = said([table("linear")], pressure, earth=SOFT, parts=parts)
        assert len(texts) == 1
        assert texts[0].startswith("strain reaches 0.55 % in (cell=102); sandstone")
    pressure[2:, 2] += 60 * BAR  # 440 bar: 0.48 %, and the other cell 0.52 %
    assert "0.52 % in (cell=103)" in said([table("linear")], pressure, earth=SOFT)[0]
    pressure[3, 3] += 20 * BAR  # 450 bar: 0.495 %
    assert not said([table("linear")], pressure, earth=SOFT)


@settings(max_examples=30, deadline=None)
@given(st.permutations(range(8)), st.lists(st.integers(0, 3), min_size=8, max_size=8),
       st.sampled_from([(0, 5), (0, 1, 3, 5), (0, 2, 4, 5)]))
def test_blocks_order_and_legs_change_no_word(order: list[int], owner: list[int],
                                              legs: Any) -> None:
    region = np.arange(8) % 2
    cells = dataset(8, region, ("A", "B"))
    pressure = 500 * BAR - 3.5 * (300 * BAR - falling(5, 8))
    pressure[:, 5] = pressure[:, 2]  # as large a strain in two cells
    tables = [soft(3.0, regions=["A"]), soft(0.3, regions=["B"])]
    whole = said(tables, pressure, cells=cells)
    assert len(whole) >= 2
    parts = [np.array([c for c in range(8) if owner[c] == n]) for n in set(owner)]
    parts = [parts[n] for n in sorted(range(len(parts)), key=lambda n: order[n])]
    assert said(tables, pressure, cells=cells, legs=legs, parts=parts) == whole


def test_equal_strains_merge_to_the_first_date_then_the_lowest_cell() -> None:
    found = [Findings(0.01, 2, 3), Findings(0.01, 1, 9), Findings(0.01, 1, 7), Findings()]
    for shuffled in (found, found[::-1]):
        whole = Findings.together(shuffled)
        assert (whole.strain, whole.date, whole.cell) == (0.01, 1, 7)
