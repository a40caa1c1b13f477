"""The linear law against closed forms."""

from __future__ import annotations

import numpy as np
import pytest
from law_cases import BAR, MPA, history_of, rock_of

from subside.api import InputError
from subside.compaction.linear import Linear


@pytest.mark.parametrize(("young", "poisson", "biot", "per_mpa"), [
    # Cm = (1+nu)(1-2nu)/((1-nu)E), Geertsma 1973; the numbers by arithmetic
    (10e9, 0.2, 1.0, 9.000e-5),
    (1e9, 0.3, 0.95, 7.0571e-4),
])
def test_elastic_rock(young: float, poisson: float, biot: float, per_mpa: float) -> None:
    cm = (1 + poisson) * (1 - 2 * poisson) / ((1 - poisson) * young)
    rock = rock_of(Linear, uniaxial_compressibility=cm, unloading_compressibility=None, biot=biot)
    strain = Linear().strain(history_of([0, 1, 2], [0, 1 * MPA, 10 * MPA], biot), rock)
    assert strain[:, 0] == pytest.approx([0.0, per_mpa, 10 * per_mpa], rel=1e-5)


def test_rebound_leaves_the_plastic_part() -> None:
    """Full repressurisation leaves e (1 - Cu/C): closed form."""
    rock = rock_of(Linear, uniaxial_compressibility=1e-10, unloading_compressibility=0.25e-10)
    strain = Linear().strain(history_of([0, 1, 2, 3, 4], np.array([0, 200, 0, 100, 300]) * BAR),
                             rock)
    # 2e-3; 2e-3 (1 - .25); + .25e-5 x 100; 3e-3 back on the virgin line
    assert strain[:, 0] == pytest.approx([0, 2e-3, 1.5e-3, 1.75e-3, 3e-3], rel=1e-12)


def test_without_an_unloading_value_all_comes_back_exactly() -> None:
    rock = rock_of(Linear, unloading_compressibility=None, previous_stress_rise=3 * MPA)
    strain = Linear().strain(history_of([0, 1, 2], [0, 17 * MPA, 0]), rock)
    assert strain[2, 0] == 0.0
    assert strain[1, 0] == 1.1e-10 * 17 * MPA


def test_injection_first_uses_the_unloading_value() -> None:
    strain = Linear().strain(history_of([0, 1, 2, 3], np.array([0, -5, 0, 5]) * MPA),
                             rock_of(Linear))
    assert strain[:, 0] == pytest.approx([0, -2e-4, 0, 5.5e-4], rel=1e-12, abs=1e-18)


def test_previous_stress_rise_is_unloading_up_to_it() -> None:
    rock = rock_of(Linear, previous_stress_rise=4 * MPA)
    strain = Linear().strain(history_of([0, 1, 2], np.array([0, 4, 10]) * MPA), rock)
    # .4e-10 x 4 MPa, then 1.1e-10 x 6 MPa more
    assert strain[:, 0] == pytest.approx([0, 1.6e-4, 8.2e-4], rel=1e-12)


def test_memory_follows_yield_biot_and_strain_follows_biot() -> None:
    """Memory 4 MPa is met at 4/.8 = 5 MPa of depletion; each MPa of depletion strains .5 MPa."""
    rock = rock_of(Linear, biot=0.5, yield_biot=0.8, previous_stress_rise=4 * MPA)
    strain = Linear().strain(history_of([0, 1, 2, 3], np.array([0, 5, 9, 6]) * MPA, 0.5), rock)
    by_hand = np.array([0, 0.4e-4 * 5, 0.4e-4 * 5 + 1.1e-4 * 4, 0.4e-4 * (5 - 3) + 1.1e-4 * 4]) / 2
    assert strain[:, 0] == pytest.approx(by_hand, rel=1e-12)


def test_rebound_above_compaction_is_refused() -> None:
    rock = rock_of(Linear, uniaxial_compressibility=np.array([1e-10, 1e-10]),
                   unloading_compressibility=np.array([1e-10, 2e-10]))
    with pytest.raises(InputError, match=r"unloading_compressibility = 2e-05 1/bar is above "
                                         r"uniaxial_compressibility = 1e-05 1/bar.*at most"):
        Linear().check(rock)
    Linear().check(rock_of(Linear))
    Linear().check(rock_of(Linear, unloading_compressibility=None))
