"""Which method a run takes."""

from __future__ import annotations

import numpy as np
import pytest
from lattice_cases import error_of, raster, small_field, wells

from subside.earth_models import HalfSpace
from subside.errors import InputError
from subside.superposition.bands import worth_it
from subside.superposition.direct import Direct
from subside.superposition.lattice import Lattice
from subside.superposition.plan import METHODS, refuse_method
from subside.superposition.summation import Summation

EARTH = HalfSpace(poisson_ratio=0.25)


@pytest.mark.parametrize(("cells", "targets", "dates", "more"), [
    (1000, 10_000, 10, False), (100_000, 65_536, 10, True), (2_000_000, 300, 10, False),
    (2_000_000, 300, 60, True), (100_000, 300, 60, False),
])
def test_whether_more_than_the_plain_sum_is_considered(cells: int, targets: int, dates: int,
                                                       more: bool) -> None:
    assert worth_it(cells, targets, dates) == more


@pytest.mark.parametrize(("method", "taken"), [("direct", "direct"), ("lattice", "lattice"),
                                               ("auto", "direct")])
def test_a_named_method_is_obeyed(method: str, taken: str) -> None:
    bodies, moments = small_field(steps=1)
    job = Summation(bodies, list(moments), raster(12, 4000.0), EARTH, tolerance=1e-4,
                    gradient=False, steps=1, method=method)
    assert job.method == taken
    assert ("plain sum over all cells" in job.notes) == (taken == "direct")


def test_other_methods_are_refused() -> None:
    for method in METHODS:
        refuse_method(method)
    with pytest.raises(InputError, match="lattice"):
        refuse_method("latice")


def test_auto_chooses_for_each_set_of_targets() -> None:
    bodies, moments = small_field(columns=40, rows=30, steps=1)
    auto = Lattice()
    auto.solve(bodies, moments, wells(20, 3000.0), EARTH, tolerance=1e-4)
    assert auto.name == "direct"
    targets = raster(180, 9000.0)
    field = auto.solve(bodies, moments, targets, EARTH, tolerance=1e-3)
    assert auto.name == "lattice"
    assert auto.achieved_error <= 1e-3 and auto.notes
    truth = Direct().solve(bodies, moments, wells(20, 3000.0), EARTH, tolerance=1e-4)
    few = auto.solve(bodies, moments, wells(20, 3000.0), EARTH, tolerance=1e-3)
    assert error_of(few, truth) <= 1e-3
    assert field["down"].shape == (1, 180 * 180)


def test_a_summation_says_what_it_will_need() -> None:
    """Bytes of a date: a sheet (row, column, node, source) of doubles, and three maps."""
    bodies, moments = small_field(steps=2)
    targets = raster(20, 4000.0)
    job = Summation(bodies, list(moments), targets, EARTH, tolerance=1e-4, gradient=False, steps=2,
                    method="lattice")
    job.begin(2)
    share = job.share()
    job.add(share, np.arange(bodies.count), moments)
    of_share, of_result = job.bytes_per_date
    assert of_share * 2 == sum(sheet.nbytes for sheet in share.sheets if sheet is not None)
    assert of_result == 8.0 * 3 * targets.x.size
    assert job.fixed_bytes > 0.0
    plain = Summation(bodies, list(moments), targets, EARTH, tolerance=1e-4, gradient=True, steps=2,
                      method="direct")
    assert plain.bytes_per_date == (8.0 * 8 * targets.x.size,) * 2
