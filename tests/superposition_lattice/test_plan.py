"""Which method a run takes."""

from __future__ import annotations

import pytest
from lattice_cases import error_of, raster, small_field, wells

from subside.earth_models import HalfSpace
from subside.errors import InputError
from subside.superposition.direct import Direct
from subside.superposition.lattice import Lattice
from subside.superposition.plan import Auto, make_plan


@pytest.mark.parametrize(("cells", "targets", "method"), [
    (1000, 10_000, "direct"), (100_000, 65_536, "lattice"), (2_000_000, 300, "direct"),
])
def test_auto_takes_the_cheaper(cells: int, targets: int, method: str) -> None:
    plan = make_plan("auto", cells, targets, 10, 3, 1)
    assert plan.method == method
    assert isinstance(plan.solver(), Auto)


def test_a_named_method_is_obeyed() -> None:
    assert isinstance(make_plan("direct", 10**6, 10**6, 1, 3, 1).solver(), Direct)
    assert isinstance(make_plan("lattice", 10, 10, 1, 3, 1).solver(), Lattice)
    with pytest.raises(InputError, match="lattice"):
        make_plan("latice", 1, 1, 1, 3, 1)


def test_auto_chooses_for_each_set_of_targets() -> None:
    bodies, moments = small_field(columns=40, rows=30, steps=1)
    earth, auto = HalfSpace(poisson_ratio=0.25), Auto()
    auto.solve(bodies, moments, wells(20, 3000.0), earth, tolerance=1e-4)
    assert auto.name == "direct"
    targets = raster(180, 9000.0)
    field = auto.solve(bodies, moments, targets, earth, tolerance=1e-3)
    assert auto.name == "lattice"
    assert auto.achieved_error <= 1e-3 and auto.notes
    truth = Direct().solve(bodies, moments, wells(20, 3000.0), earth, tolerance=1e-4)
    few = auto.solve(bodies, moments, wells(20, 3000.0), earth, tolerance=1e-3)
    assert error_of(few, truth) <= 1e-3
    assert field["down"].shape == (1, 180 * 180)
