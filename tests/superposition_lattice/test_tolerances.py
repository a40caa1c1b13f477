"""Every tolerance is kept: by movement, slopes, strains and rates, in single precision too."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from lattice_cases import compare, error_of, pillar_field, raster, small_field, streamed

from subside.earth_models import HalfSpace
from subside.superposition import band_pass, summation
from subside.superposition.direct import Direct
from subside.superposition.lattice import Lattice

EARTH = HalfSpace(poisson_ratio=0.25)
TARGETS = raster(24, 4500.0)


@pytest.mark.parametrize("tolerance", [1e-3, 1e-4, 1e-5, 1e-6, 1e-7])
@pytest.mark.parametrize("gradient", [False, True])
def test_every_tolerance_and_the_rate(tolerance: float, gradient: bool) -> None:
    """Movement, slopes, strains relative to the largest of each; rates to the largest rate."""
    bodies, moments = small_field(steps=6)
    solver = Lattice(forced=True)
    field = solver.solve(bodies, moments, TARGETS, EARTH, tolerance=tolerance, gradient=gradient)
    truth = Direct().solve(bodies, moments, TARGETS, EARTH, tolerance=0.01 * tolerance,
                           gradient=gradient)
    assert any("lattice" in note for note in solver.notes)
    assert error_of(field, truth) <= tolerance
    rate, true_rate = ({name: np.diff(values, axis=0) for name, values in some.items()}
                       for some in (field, truth))
    assert error_of(rate, true_rate) <= tolerance
    assert solver.achieved_error <= 0.5 * tolerance


def test_a_coarser_tolerance_has_a_coarser_lattice() -> None:
    bodies, moments = small_field()
    bytes_of = [streamed(bodies, moments, TARGETS, EARTH, tolerance=tolerance)[1].bytes_per_date[0]
                for tolerance in (1e-3, 1e-5, 1e-7)]
    assert bytes_of == sorted(bytes_of) and bytes_of[2] > 2 * bytes_of[0]


def _precisions(monkeypatch: pytest.MonkeyPatch, force: bool | None = None) -> list[bool]:
    """What `add_field` was asked for; `force` replaces it."""
    asked: list[bool] = []
    add_field = band_pass.BandPass.add_field

    def spy(self: Any, result: np.ndarray, sheet: np.ndarray, single: bool) -> None:
        asked.append(single)
        add_field(self, result, sheet, single if force is None else force)

    monkeypatch.setattr(band_pass.BandPass, "add_field", spy)
    return asked


@pytest.mark.parametrize(("tolerance", "steps", "gradient", "single"), [
    (1e-4, 3, False, True), (1e-3, 60, False, True), (1e-4, 3, True, False),
    (1e-5, 3, False, False), (1e-6, 3, False, False), (1e-4, 200, False, False),
])
def test_single_precision_only_where_the_tolerance_allows_it(
        monkeypatch: pytest.MonkeyPatch, tolerance: float, steps: int, gradient: bool,
        single: bool) -> None:
    """1.5e-7 of the largest movement, some ten times that of a rate over many dates."""
    asked = _precisions(monkeypatch)
    bodies, moments = pillar_field(steps=steps, columns=3, rows=3)
    streamed(bodies, moments, raster(6, 3000.0), EARTH, tolerance=tolerance, gradient=gradient)
    assert asked and set(asked) == {single}


@pytest.mark.parametrize("depth", [300.0, 1500.0])
def test_what_single_precision_costs(monkeypatch: pytest.MonkeyPatch, depth: float) -> None:
    """No more than is said, of the movement; the rate errs within its tolerance of 1e-4."""
    bodies, moments = pillar_field(steps=60, depth=depth, columns=9, rows=8)
    pace = np.linspace(0.0, 1.0, 61)[1:, None]
    moments = {source: moment[:1] * pace for source, moment in moments.items()}
    targets = raster(24, 3 * depth)
    with monkeypatch.context() as patch:
        _precisions(patch, force=False)
        double, _ = streamed(bodies, moments, targets, EARTH, tolerance=1e-4)
    asked = _precisions(monkeypatch)
    single, _ = streamed(bodies, moments, targets, EARTH, tolerance=1e-4)
    assert set(asked) == {True}
    assert 0.0 < error_of(single, double) < summation._SINGLE
    rates = ({name: np.diff(values, axis=0) for name, values in some.items()}
             for some in (single, double))
    assert error_of(*rates) < 0.25e-4


def test_each_failed_check_leads_to_a_finer_design(monkeypatch: pytest.MonkeyPatch) -> None:
    """Checks that fail twice: designs for 1, 0.1 and 0.01 of the tolerance, the third stays."""
    accepts, found = summation.Summation.accepts, []

    def doubtful(self: summation.Summation, error: float) -> bool:
        found.append((self._part, self.bytes_per_date[0], error))
        return len(found) > 2 and accepts(self, error)

    monkeypatch.setattr(summation.Summation, "accepts", doubtful)
    bodies, moments = small_field()
    error, solver = compare(bodies, moments, TARGETS, EARTH, 1e-4)
    assert [part for part, _, _ in found] == [1.0, 0.1, 0.01]
    assert found[0][1] < found[1][1] < found[2][1]
    assert error <= 1e-6, "the design for a hundredth of the tolerance keeps it"
    assert solver.achieved_error == found[2][2] and solver.name == "lattice"
    refined = [note for note in solver.notes if "refined" in note]
    assert refined[0] == (f"the check found an error of {found[0][2]:.2g}, more than half the "
                          "tolerance of 0.0001: refined")
    assert len(refined) == 2


def test_the_plain_sum_is_the_last_resort(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(summation.Summation, "accepts", lambda self, error: not self._bands)
    bodies, moments = small_field(steps=1)
    solver = Lattice(forced=True)
    field = solver.solve(bodies, moments, TARGETS, EARTH, tolerance=1e-4)
    truth = Direct().solve(bodies, moments, TARGETS, EARTH, tolerance=1e-4)
    assert error_of(field, truth) < 1e-13
    assert solver.name == "direct" and solver.notes[-1] == "plain sum over all cells"
    assert sum("refined" in note for note in solver.notes) == 3
