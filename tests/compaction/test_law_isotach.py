"""The rate-type law against closed forms and an independent stiff solver."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st
from law_cases import BAR, YEAR, cut_paths, history_of, paths, rock_of
from scipy.integrate import solve_ivp

from subside.api import InputError
from subside.compaction.isotach import Isotach
from subside.compaction.isotach_step import mild_steps, other_steps


def stiff_solver(years: Any, drop: Any, rock: Any) -> np.ndarray:
    """The law in the form of Pruiksma et al. 2015: e = e_s + e_d, implicit Runge-Kutta (Radau).

    Unknown is the secular strain e_s itself, in bars and years, at rtol 1e-10.
    """
    ca, cd = rock.reference_compressibility * BAR, rock.direct_compressibility * BAR
    s0, b = rock.initial_effective_stress / BAR, rock.rate_exponent
    reference = rock.reference_stress_rate * YEAR / BAR
    geological = (rock.geological_stress_rate or rock.reference_stress_rate) * YEAR / BAR
    previous = rock.previous_stress_rise / BAR
    start = ca * (geological / reference) ** -b * (s0 + previous) - cd * previous
    secular, rise = start, np.asarray(drop) / BAR
    strain = [0.0]
    for now in range(1, len(years)):
        length = years[now] - years[now - 1]
        slope = (rise[now] - rise[now - 1]) / length

        def rate(t: float, unknown: Any, at: float = rise[now - 1], slope: float = slope) -> Any:
            stress = s0 + at + slope * t
            total = unknown + cd * (stress - s0)
            return (total / stress - cd) * reference * (total / (stress * ca)) ** (-1 / b)

        solution = solve_ivp(rate, (0.0, length), [secular], method="Radau", rtol=1e-10,
                             atol=1e-15)
        assert solution.success
        secular = solution.y[0, -1]
        strain.append(secular + cd * rise[now] - start)
    return np.array(strain)


RAMP_YEARS = np.array([0, 2, 5, 10, 15, 20, 30, 35, 40, 50, 60.0])
RAMP = 10 * BAR * np.minimum(RAMP_YEARS, 30)
TABLES = {
    # strain x 1e3 at RAMP_YEARS; computed independently, two routes (stiff solver, RK4)
    0.02: [0.100008, 0.250080, 0.501688, 0.768544, 1.093237, 1.878026, 1.972591, 2.021412,
           2.079965, 2.117557],
    0.01: [0.10002, 0.25164, 0.60786, 1.05700, 1.50777, 2.40932, 2.49434, 2.52668, 2.56211,
           2.58376],
}


@pytest.mark.parametrize("b", [0.02, 0.01])
def test_ramp_and_hold(b: float) -> None:
    strain = Isotach().strain(history_of(RAMP_YEARS, RAMP), rock_of(Isotach, rate_exponent=b))
    # half a unit of the last printed digit
    digits = 6 if b == 0.02 else 5
    assert strain[1:, 0] * 1e3 == pytest.approx(TABLES[b], rel=0, abs=0.55 * 10.0**-digits)
    assert strain[:, 0] == pytest.approx(
        stiff_solver(RAMP_YEARS, RAMP, rock_of(Isotach, rate_exponent=b)), rel=1e-7, abs=1e-12)


ROCKS = st.fixed_dictionaries({
    "rate_exponent": st.sampled_from([0.005, 0.01, 0.02, 0.05, 0.1]),
    "direct_compressibility": st.sampled_from([0.0, 1e-11, 5e-11, 7e-11]),
    "reference_stress_rate": st.sampled_from([1e-5, 3e-4, 1e-1]).map(lambda r: r * BAR / YEAR),
    "geological_stress_rate": st.sampled_from([None, 1e-4 * BAR / YEAR]),
    "initial_effective_stress": st.sampled_from([100 * BAR, 300 * BAR]),
    "previous_stress_rise": st.sampled_from([0.0, 30 * BAR]),
})


@settings(max_examples=40, deadline=None)
@given(paths(), ROCKS)
def test_any_history_against_the_stiff_solver(path: Any, values: dict[str, Any]) -> None:
    """Hours to ten years a step, holds, unloading and injection, b .005 to .1."""
    rock = rock_of(Isotach, **values)
    strain = Isotach().strain(history_of(*path), rock)[:, 0]
    expected = stiff_solver(*path, rock)
    # both errors are shares of the strain counted from zero stress, about 3e-3
    assert strain == pytest.approx(expected, rel=1e-6, abs=3e-9)


@settings(max_examples=60, deadline=None)
@given(cut_paths(), ROCKS)
@example((np.array([0, 30.0]), np.array([0, 300 * BAR]), np.array([0, 15, 30.0]),
          np.array([0, 150, 300 * BAR]) * np.array([1, BAR, 1]), np.array([0, 2])), {})
def test_cutting_steps_changes_nothing(cut: Any, values: dict[str, Any]) -> None:
    years, drop, finer, drop_finer, where = cut
    rock = rock_of(Isotach, **values)
    coarse = Isotach().strain(history_of(years, drop), rock)[:, 0]
    fine = Isotach().strain(history_of(finer, drop_finer), rock)[where, 0]
    assert fine == pytest.approx(coarse, rel=1e-6, abs=3e-9)


@pytest.mark.parametrize("rate", [1e-3, 10.0, 1e4])
def test_constant_rate_from_zero_stress(rate: float) -> None:
    """e = Ca (R/r_ref)^-b s' exactly (de Waal 1986): started on that line it stays on it."""
    rock = rock_of(Isotach, initial_effective_stress=0.01 * BAR,
                   geological_stress_rate=rate * BAR / YEAR)
    years = np.array([0, 1, 1.001, 7, 40.0]) / rate
    strain = Isotach().strain(history_of(years, years * rate * 10 * BAR / 10), rock)[:, 0]
    expected = 1e-10 * (rate / 3.156e-4) ** -0.02 * years * rate * BAR
    assert strain == pytest.approx(expected, rel=1e-10)


def test_a_constant_rate_is_reached_from_any_start() -> None:
    """Loaded a thousandfold at one rate, the rock forgets how it began."""
    years = np.array([0, 1e3 - 1])
    strain = Isotach().strain(history_of(years, years * BAR), rock_of(
        Isotach, initial_effective_stress=BAR, previous_stress_rise=5 * BAR))[-1, 0]
    start = 1e-10 * 6 * BAR - 0.5e-10 * 5 * BAR
    assert strain + start == pytest.approx(1e-10 * (1 / 3.156e-4) ** -0.02 * 1e3 * BAR, rel=1e-9)


def test_without_a_direct_part_the_clock_is_exact() -> None:
    """Cd = 0: z = z0 + r_ref t/(b s') while stress is held, so e = Ca s' (1 + r t/(b s'))^b."""
    rock = rock_of(Isotach, direct_compressibility=0.0, reference_stress_rate=BAR / YEAR)
    strain = Isotach().strain(history_of([0, 10, 1000], [0, 0, 0]), rock)[:, 0]
    expected = 1e-10 * 300 * BAR * ((1 + np.array([0, 10, 1000]) / (0.02 * 300)) ** 0.02 - 1)
    assert strain == pytest.approx(expected, rel=1e-11)


def test_small_exponents_lead_to_the_linear_law() -> None:
    """On the virgin line e/s' - Ca = Ca [(R/r)^-b - 1], which vanishes as b does."""
    history = history_of([0, 30], [0, 300 * BAR])
    off = [abs(Isotach().strain(history, rock_of(Isotach, rate_exponent=b))[-1, 0] - 3e-3)
           for b in (0.004, 0.002, 0.001)]
    assert off[0] / off[1] == pytest.approx(2, rel=0.05)
    assert off[1] / off[2] == pytest.approx(2, rel=0.05)
    assert off[2] < 0.025 * 3e-3


def test_only_the_direct_part_reverses_at_once() -> None:
    """An hour is too short to creep: unloading and injection give back Cd per stress."""
    hour = 1 / 8766
    drop = np.array([0, 200, 50, -100]) * BAR
    years = [0, 20, 20 + hour, 20 + 2 * hour]
    strain = Isotach().strain(history_of(years, drop), rock_of(Isotach))[:, 0]
    assert np.diff(strain)[1:] == pytest.approx([-0.75e-3, -0.75e-3], rel=1e-4)
    injected = Isotach().strain(history_of([0, 10], [0, -100 * BAR]), rock_of(Isotach))[-1, 0]
    assert injected == pytest.approx(-0.5e-3, rel=1e-4)


@pytest.mark.parametrize("b", [0.001, 0.005, 0.02])
@pytest.mark.parametrize("direct", [0.0, 0.5e-10])
def test_a_moment_of_injection_leaves_no_trace(b: float, direct: float) -> None:
    """Stress to a tenth and back within two hours: z passes 10^(1/b), and all of it reverses."""
    years = np.array([0, 1, 2, 20]) / 8766
    rock = rock_of(Isotach, rate_exponent=b, direct_compressibility=direct)
    strain = Isotach().strain(history_of(years, np.array([0, -270, 0, 0]) * BAR), rock)[:, 0]
    assert strain[1] == pytest.approx(-direct * 270 * BAR, rel=1e-8, abs=1e-12)
    # at rest for a day: the geological creep of test_soil_at_rest_hardly_moves
    assert strain[2:] == pytest.approx([0, 0], abs=1e-11)


def test_a_step_that_ends_as_the_rock_yields() -> None:
    """Aged soil reaches its old stress at the very end of one ten-year step: the clock speeds up
    there, and the pair's own error estimate vanishes there by chance, and alone missed 2e-10."""
    rock = rock_of(
        Isotach, rate_exponent=0.005, direct_compressibility=1e-11,
        reference_stress_rate=1e-5 * BAR / YEAR, geological_stress_rate=1e-4 * BAR / YEAR,
        initial_effective_stress=100 * BAR, previous_stress_rise=30 * BAR)
    end = 39.9375 * BAR
    one = Isotach().strain(history_of([0, 10], [0, end]), rock)[-1, 0]
    many = Isotach().strain(history_of(np.linspace(0, 10, 65), np.linspace(0, end, 65)), rock)
    assert one == pytest.approx(many[-1, 0], abs=3e-11)
    assert many[:, 0] == pytest.approx(
        stiff_solver(np.linspace(0, 10, 65), np.linspace(0, end, 65), rock), abs=3e-11)


def test_abrupt_changes_of_rate_stay_finite() -> None:
    """200 bar in an hour, a century of creep, 120 bar in half a year: found by random search, a
    stage of the pair ran backwards here."""
    rock = rock_of(Isotach, rate_exponent=0.005, direct_compressibility=0.9e-10,
                   reference_stress_rate=5.41 * BAR / YEAR)
    years = np.array([0, 1 / 8766, 100 + 1 / 8766, 100 + 2 / 8766, 100.5])
    drop = np.array([0, 210.48898624, 221.31077661, 221.31077661, 340.80443015]) * BAR
    strain = Isotach().strain(history_of(years, drop), rock)[:, 0]
    assert strain == pytest.approx(stiff_solver(years, drop, rock), rel=1e-6, abs=3e-9)


def test_soil_at_rest_hardly_moves() -> None:
    """dz/dt = (1/s' - Cd/e) r_ref/b at z = 1, from the law: e(0) b dz in the first year."""
    strain = Isotach().strain(history_of([0, 1], [0, 0]), rock_of(Isotach))[-1, 0]
    assert strain == pytest.approx(3e-3 * (1 - 0.5) / 300 * 3.156e-4, rel=1e-4)


def test_previous_stress_rise_delays_the_virgin_line() -> None:
    """Until p is reached again the strain is direct only; beyond it the rock is as if never
    unloaded, Cd p above its new start. Independent of the path of geological unloading."""
    rock = rock_of(Isotach, previous_stress_rise=80 * BAR)
    years = np.array([0, 4, 30, 60.0])
    strain = Isotach().strain(history_of(years, np.array([0, 40, 300, 300]) * BAR), rock)[:, 0]
    assert strain[1] == pytest.approx(0.5e-10 * 40 * BAR, rel=1e-4)
    assert strain == pytest.approx(
        stiff_solver(years, np.array([0, 40, 300, 300]) * BAR, rock), rel=1e-7, abs=1e-12)
    # s0' = 300 with p = 80 is s0' = 380 unloaded by 80 bar in a moment
    moment = 1e-6
    other = Isotach().strain(
        history_of([0, moment, 4, 30, 60.0], np.array([0, -80, -40, 220, 220]) * BAR),
        rock_of(Isotach, initial_effective_stress=380 * BAR))[:, 0]
    assert strain[1:] == pytest.approx(other[2:] - other[1], rel=1e-6)


@pytest.mark.parametrize("b", [0.005, 0.02, 0.1])
def test_a_mild_step_is_any_step(b: float) -> None:
    """The series for many cells against the step of one cell, both ways of change and at rest."""
    rng = np.random.default_rng(3)
    n = 4099
    creep = 10.0 ** rng.uniform(-3, 1, n)  # bar/year
    y, kappa = np.log(3e-4 / creep), rng.uniform(0, 0.7, n)
    stress0 = rng.uniform(100, 500, n) * BAR
    stress1 = stress0 * (1 + rng.choice([-0.02, 0.0, 0.001, 0.03], n) * rng.uniform(0, 1, n))
    change = (np.full(n, b), np.full(n, 3e-4 * BAR / YEAR), stress0, stress1, YEAR)
    mild, single = np.empty(n), np.full(n, np.nan)
    mild_steps(y, kappa, *change, mild)
    other_steps(y, kappa, *change, single)
    is_mild = ~np.isnan(mild)
    assert is_mild.mean() > {0.005: 0.2, 0.02: 0.7, 0.1: 0.95}[b]
    # of ln z, so that of the strain from zero stress b times less; no more than the series leave
    # out, as both take the same substep
    assert mild[is_mild] == pytest.approx(single[is_mild], rel=0, abs=2e-12)
    # cells left out of the first are done by the second, and only those
    both = mild.copy()
    other_steps(y, kappa, *change, both)
    assert (both == np.where(is_mild, mild, single)).all()
    # a cell is itself wherever it stands among the others
    for place in (0, 1, 2000, n - 1):
        one = [v[place:place + 1] if isinstance(v, np.ndarray) else v for v in (y, kappa, *change)]
        alone = np.empty(1)
        mild_steps(*one, alone)
        np.testing.assert_array_equal(alone[0], mild[place])


def test_harsh_steps_are_not_mild() -> None:
    """Out of the series' range, or with an error above the tolerance: never a wrong number."""
    rng = np.random.default_rng(4)
    n = 20_000
    args = (rng.uniform(-40, 5, n), rng.uniform(0, 0.99, n), 10 ** rng.uniform(-3, -0.7, n),
            10.0 ** rng.uniform(-9, 1, n) * BAR / YEAR, np.full(n, 200 * BAR),
            200 * BAR * 10 ** rng.uniform(-0.3, 0.3, n), YEAR)
    mild, single = np.empty(n), np.full(n, np.nan)
    mild_steps(*args, mild)
    other_steps(*args, single)
    is_mild = ~np.isnan(mild)
    assert 0.02 < is_mild.mean() < 0.9
    assert args[2][is_mild] * mild[is_mild] == pytest.approx(
        args[2][is_mild] * single[is_mild], rel=0, abs=2e-10)


def test_no_stress_left_is_an_error_with_the_cell() -> None:
    drop = np.zeros((3, 4))
    drop[1, 2] = -310 * BAR
    with pytest.raises(InputError, match=r"-10 bar 1 years.*= 300 bar, change -310 bar.*"
                                         r"raise initial_effective_stress") as caught:
        Isotach().strain(history_of([0, 1, 2], drop), rock_of(Isotach))
    assert caught.value.cell == 2


def test_time_that_stands_still_is_an_error() -> None:
    with pytest.raises(InputError, match=r"time must grow"):
        Isotach().strain(history_of([0, 1, 1], [0, BAR, 2 * BAR]), rock_of(Isotach))


@pytest.mark.parametrize("values", [
    {"direct_compressibility": 1.2e-10},
    {"direct_compressibility": np.array([0.5e-10, 1e-10])},
    {"direct_compressibility": 0.9e-10, "geological_stress_rate": 10 * BAR / YEAR},
])
def test_a_direct_part_above_the_whole_is_refused(values: dict[str, Any]) -> None:
    with pytest.raises(InputError, match=r"direct_compressibility = (1.2e-05|1e-05|9e-06) 1/bar is "
                                         r"not below.* 1/bar: .*raise the other"):
        Isotach().check(rock_of(Isotach, **values))
    Isotach().check(rock_of(Isotach))
