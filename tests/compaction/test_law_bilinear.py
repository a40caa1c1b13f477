"""The bilinear law against closed forms."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from law_cases import BAR, MPA, history_of, rock_of

from subside.api import InputError
from subside.compaction.bilinear import Bilinear
from subside.compaction.linear import Linear


def _strain(drop_mpa: Any, biot: float = 1.0, **values: Any) -> Any:
    drop = np.array(drop_mpa, dtype=float) * MPA
    rock = rock_of(Bilinear, biot=biot, **values)
    return Bilinear().strain(history_of(np.arange(drop.size), drop, biot), rock)[:, 0]


COLLAPSE: dict[str, Any] = {
    "compressibility_before_yield": 5e-11, "compressibility_after_yield": 1e-10,
    "yield_stress_increase": 5 * MPA, "unloading_compressibility": None,
}


def test_pore_collapse() -> None:
    """5e-5 x 5 + 1e-4 x 15 (1/MPa x MPa) = 1.75e-3: by arithmetic, in one step and in many."""
    assert _strain([0, 20], **COLLAPSE)[-1] == pytest.approx(1.75e-3, rel=1e-13)
    assert _strain(np.linspace(0, 20, 38), **COLLAPSE)[-1] == pytest.approx(1.75e-3, rel=1e-13)


def test_yield_follows_the_largest_stress() -> None:
    """After 20 MPa: back by 5e-5 per MPa, again by 5e-5 to 20, then 1e-4. By arithmetic."""
    strain = _strain([0, 20, 8, 20, 25, 0, -4], **COLLAPSE)
    assert strain * 1e3 == pytest.approx([0, 1.75, 1.15, 1.75, 2.25, 1.0, 0.8], rel=1e-12)


def test_unloading_value_holds_before_yield_too() -> None:
    """Up 4 by .5e-4, down 4 by .3e-4, injected 2 by .3e-4, up 4 and 1 more. By arithmetic."""
    strain = _strain([0, 4, 0, -2, 4, 5])
    assert strain * 1e4 == pytest.approx([0, 2.0, 0.8, 0.2, 2.0, 2.5], rel=1e-12)


@pytest.mark.parametrize(("previous", "expected"), [
    # Cu .3e-4, Cm1 .5e-4, Cm2 3e-4 per MPa, yield 6 MPa, depletion 10 MPa: by arithmetic
    (0.0, 6 * 0.5e-4 + 4 * 3e-4),
    (4.0, 4 * 0.3e-4 + 2 * 0.5e-4 + 4 * 3e-4),
    (8.0, 8 * 0.3e-4 + 2 * 3e-4),
    (12.0, 10 * 0.3e-4),
])
def test_previous_stress_rise(previous: float, expected: float) -> None:
    strain = _strain([0, 10], previous_stress_rise=previous * MPA)
    assert strain[-1] == pytest.approx(expected, rel=1e-12)


def test_yield_follows_yield_biot_and_strain_follows_biot() -> None:
    """Yield at 5 MPa of depletion (yield_biot 1), strain .8 x (5e-5 x 5 + 1e-4 x 15)."""
    strain = _strain([0, 5, 20], 0.8, yield_biot=1.0, **COLLAPSE)
    assert strain == pytest.approx([0, 0.8 * 2.5e-4, 0.8 * 1.75e-3], rel=1e-12)
    # with yield_biot .5 it yields at 10 MPa of depletion
    strain = _strain([0, 10, 20], 0.8, yield_biot=0.5, **COLLAPSE)
    assert strain == pytest.approx([0, 0.8 * 5e-4, 0.8 * 1.5e-3], rel=1e-12)


def test_continuous_at_yield() -> None:
    strain = _strain([0, 5 - 1e-9, 5 + 1e-9], 0.7, yield_biot=0.9999, **COLLAPSE)
    assert strain[2] - strain[1] == pytest.approx(0, abs=1e-12)


def test_preconsolidation_is_yield_above_the_start() -> None:
    values = COLLAPSE | {"yield_stress_increase": None, "preconsolidation_stress": 37 * MPA,
                         "initial_effective_stress": 32 * MPA}
    assert _strain([0, 20], **values)[-1] == pytest.approx(1.75e-3, rel=1e-12)


def test_equal_compressibilities_are_the_linear_law() -> None:
    drop = np.array([0, 30, 120, 60, -20, 200, 90]) * BAR
    history = history_of(np.arange(7), drop)
    bilinear = Bilinear().strain(history, rock_of(
        Bilinear, compressibility_before_yield=2e-10, compressibility_after_yield=2e-10,
        unloading_compressibility=0.7e-10))
    linear = Linear().strain(history, rock_of(
        Linear, uniaxial_compressibility=2e-10, unloading_compressibility=0.7e-10))
    assert bilinear == pytest.approx(linear, rel=1e-12, abs=1e-18)


@pytest.mark.parametrize(("values", "said"), [
    ({"yield_stress_increase": None}, r"yield_stress_increase .*or preconsolidation_stress with "
                                      r"initial_effective_stress"),
    ({"preconsolidation_stress": 38e6},
     r"yield_stress_increase = 60 bar and preconsolidation_stress = 380 bar are both given"),
    ({"initial_effective_stress": np.array([30e6, 32e6])},
     r"yield_stress_increase = 60 bar and initial_effective_stress = 300 to 320 bar"),
    ({"yield_stress_increase": None, "preconsolidation_stress": 38e6},
     r"preconsolidation_stress = 380 bar needs initial_effective_stress"),
    ({"yield_stress_increase": None, "initial_effective_stress": 38e6},
     r"give yield_stress_increase"),
    ({"yield_stress_increase": None, "preconsolidation_stress": np.array([38e6, 29e6]),
      "initial_effective_stress": 32e6},
     r"preconsolidation_stress = 290 bar is below initial_effective_stress = 320 bar"),
    ({"unloading_compressibility": 0.6e-10},
     r"unloading_compressibility = 6e-06 1/bar is above compressibility_before_yield = 5e-06"),
    ({"unloading_compressibility": None, "compressibility_after_yield": 0.4e-10},
     r"compressibility_before_yield \(also used for unloading\) = 5e-06 1/bar is above "
     r"compressibility_after_yield = 4e-06 1/bar"),
])
def test_contradictions_are_refused(values: dict[str, Any], said: str) -> None:
    with pytest.raises(InputError, match=said):
        Bilinear().check(rock_of(Bilinear, **values))


def test_sound_rocks_pass() -> None:
    Bilinear().check(rock_of(Bilinear))
    Bilinear().check(rock_of(Bilinear, yield_stress_increase=np.array([0.0, 5e6])))
    Bilinear().check(rock_of(Bilinear, yield_stress_increase=None, unloading_compressibility=None,
                             preconsolidation_stress=32e6, initial_effective_stress=32e6))
