"""The rate-type law in isotach form: strain depends on how fast the stress grows.

With e the strain counted from zero stress, s' the effective stress and R = ds'/dt::

    de/dt = Cd R + (e/s' - Cd) r_ref [e / (s' Ca)]^(-1/b)

At a constant rate R from zero stress e = Ca (R/r_ref)^(-b) s'. The equation is stiff: the bracket
carries a power of 30 to 200. Two changes of variable take all of the stiffness out. First
z = [e/(s' Ca)]^(1/b), the reference rate over the rate at which the rock now creeps::

    dz/dt = (q/b) (r_ref - R z),     q = 1/s' - Cd/e

Second a clock tau that runs with the creep, d tau = (q/b) dt. While R is constant::

    z(tau)          = z0 exp(-R tau) + r_ref [1 - exp(-R tau)] / R                     exactly
    d tau/d lambda  = [1 - (Cd/Ca) z(tau)^(-b)] / b,   lambda = int dt/s' = ln(s1'/s0') / R

What is left to integrate is the speed of the clock, which only changes with z^b = e/(s' Ca), that
is by a few per cent over most steps: an explicit pair of order 5(4) with error control does it in
one substep per pressure step nearly always.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

import numpy as np
from numba import njit, prange

from subside.api import History, InputError, Law, Parameter, Rock

__all__ = ["Isotach"]

_YEAR = 365.25 * 86400.0
_TOLERANCE = 2e-10
"""Error of one substep, as a share of the strain counted from zero stress."""


class Isotach(Law):
    """Rate-type compaction: slow at first, on after the pressure has stopped falling.

    `start` is soil that has carried s0' + p (p = `previous_stress_rise`) under the geological rate
    r_geo and has then been unloaded elastically by p; the strain reported is counted from there::

        e(0) = Ca (r_geo/r_ref)^(-b) (s0' + p) - Cd p

    Only the direct part reverses on unloading. Soil that is left alone goes on creeping at its
    geological rate, which is next to nothing over the life of a field.
    """

    name = "isotach"
    summary = "rate-type compaction: delay behind depletion, and creep after it"
    source = ("de Waal 1986 (thesis, Delft); Pruiksma et al. 2015, Int. J. Rock Mech. Min. Sci. "
              "78:127")
    parameters = (
        Parameter("reference_compressibility", "1/Pa", "strain over stress of rock loaded from "
                  "zero stress at the reference rate", minimum=0.0, open_minimum=True,
                  maximum=1e-6, example="1e-5 1/bar"),
        Parameter("direct_compressibility", "1/Pa", "strain per stress of the part that follows "
                  "stress at once and reverses with it", minimum=0.0, maximum=1e-6,
                  example="0.5e-5 1/bar"),
        Parameter("rate_exponent", "1", "b: strain falls as the power -b of the rate of loading",
                  minimum=0.001, maximum=0.2, example="0.02"),
        Parameter("reference_stress_rate", "Pa/s", "rate of loading at which the reference "
                  "compressibility was measured", minimum=0.0, open_minimum=True,
                  unit_needed=True, example="3.2e-4 bar/year"),
        Parameter("initial_effective_stress", "Pa", "vertical effective stress at the start",
                  minimum=0.0, open_minimum=True, example="300 bar"),
        Parameter("geological_stress_rate", "Pa/s", "rate of loading before the start (left out: "
                  "the reference rate)", required=False, minimum=0.0, open_minimum=True,
                  unit_needed=True, example="3.2e-4 bar/year"),
    )
    linear_in = ("reference_compressibility", "direct_compressibility")

    def strain(self, history: History, rock: Rock) -> np.ndarray:
        """Uniaxial strain (nt, cell), shortening positive, zero at the start.

        Raises
        ------
        InputError
            Where injection lifts the effective stress to zero or below, or time stands still.
        """
        return _march(self.start(rock), history.time, history.stress_rise, rock)[1]

    def start(self, rock: Rock) -> np.ndarray:
        """ln z at the start: scalar or (cell,)."""
        whole = rock.reference_compressibility * rock.initial_effective_stress
        return np.asarray(np.log(_strain_at_start(rock) / whole) / rock.rate_exponent)

    def advance(
        self, state: np.ndarray, t0: float, t1: float, rise0: np.ndarray, rise1: np.ndarray,
        fields: Mapping[str, tuple[np.ndarray, np.ndarray]], rock: Rock,
    ) -> tuple[np.ndarray, np.ndarray]:
        """ln z and the strain (cell,) at `t1`; see `Law.advance`."""
        log_z, strain = _march(state, np.array([t0, t1]), np.stack([rise0, rise1]), rock)
        return log_z, strain[1]

    def check(self, rock: Rock) -> None:
        """Raise `InputError` where the direct part exceeds the whole, or is equal to it."""
        aged = rock.reference_compressibility * _geological_factor(rock)
        too_much = rock.direct_compressibility >= aged
        excess = np.atleast_1d(too_much)
        if excess.any():
            first = int(np.flatnonzero(excess)[0])
            direct, at_rate = (_per_cell(value, excess.size)[first] * 1e5
                               for value in (rock.direct_compressibility, aged))
            raise InputError(
                f"direct_compressibility = {direct:g} 1/bar is not below the compressibility "
                f"at the geological rate, reference_compressibility x (geological_stress_rate / "
                f"reference_stress_rate)^-rate_exponent = {at_rate:g} 1/bar: nothing would be left "
                "to creep; lower the one or raise the other.",
                cell=first if np.ndim(too_much) else None)


def _geological_factor(rock: Rock) -> Any:
    """(r_geo/r_ref)^-b."""
    if rock.geological_stress_rate is None:
        return 1.0
    return (rock.geological_stress_rate / rock.reference_stress_rate) ** -rock.rate_exponent


def _strain_at_start(rock: Rock) -> Any:
    """e(0), counted from zero stress."""
    previous = rock.previous_stress_rise
    return (rock.reference_compressibility * _geological_factor(rock)
            * (rock.initial_effective_stress + previous) - rock.direct_compressibility * previous)


def _per_cell(value: Any, cells: int) -> np.ndarray:
    return np.ascontiguousarray(np.broadcast_to(value, (cells,)), dtype=float)


def _march(log_z: Any, time: np.ndarray, rise: np.ndarray,
           rock: Rock) -> tuple[np.ndarray, np.ndarray]:
    """ln z (cell,) at the last of `time` and strain (nt, cell), from ln z at the first."""
    stress = rock.initial_effective_stress + rise
    _check_time(time)
    _check_stress(stress, rise, time)
    cells = rise.shape[1]
    end, strain = np.empty(cells), np.zeros(rise.shape)
    _march_cells(
        _per_cell(log_z, cells), _per_cell(rock.reference_compressibility, cells),
        _per_cell(rock.direct_compressibility, cells), _per_cell(rock.rate_exponent, cells),
        _per_cell(rock.reference_stress_rate, cells), _per_cell(_strain_at_start(rock), cells),
        np.array(time, dtype=float), stress, end, strain)
    return end, strain


def _check_time(time: np.ndarray) -> None:
    late = np.flatnonzero(~(np.diff(time) > 0.0))
    if late.size:
        before, after = time[late[0]], time[late[0] + 1]
        raise InputError(
            f"law 'isotach': time must grow from date to date, found {before / _YEAR:g} years "
            f"followed by {after / _YEAR:g} years after the start; remove the doubled date.")


def _check_stress(stress: np.ndarray, rise: np.ndarray, time: np.ndarray) -> None:
    if stress.size and not stress.min() > 0.0:
        now, cell = (int(index[0]) for index in np.nonzero(~(stress > 0.0)))
        raise InputError(
            "the vertical effective stress is "
            f"{stress[now, cell] / 1e5:g} bar {time[now] / _YEAR:g} years after the start "
            f"(initial_effective_stress = {(stress[now, cell] - rise[now, cell]) / 1e5:g} bar, "
            f"change {rise[now, cell] / 1e5:+g} bar), and the law needs it above zero; raise "
            "initial_effective_stress or check the pressure there.", cell=cell)


@njit(parallel=True, cache=True, error_model="numpy")
def _march_cells(
    log_z: np.ndarray, reference: np.ndarray, direct: np.ndarray, exponent: np.ndarray,
    rate: np.ndarray, strain_at_start: np.ndarray, time: np.ndarray, stress: np.ndarray,
    end: np.ndarray, strain: np.ndarray,
) -> None:
    for cell in prange(stress.shape[1]):
        b = exponent[cell]
        y = log_z[cell]
        for now in range(1, time.size):
            y = _advance(y, direct[cell] / reference[cell], b, rate[cell],
                         stress[now - 1, cell], stress[now, cell], time[now] - time[now - 1])
            whole = reference[cell] * stress[now, cell] * math.exp(b * y)
            strain[now, cell] = whole - strain_at_start[cell]
        end[cell] = y


@njit(cache=True, error_model="numpy")
def _advance(y: float, kappa: float, b: float, rate: float, stress0: float, stress1: float,
             seconds: float) -> float:
    """ln z after a linear change of stress; the pair of Dormand & Prince (1980), order 5(4)."""
    slope = (stress1 - stress0) / seconds
    growth = (stress1 - stress0) / stress0
    left = seconds / stress0  # lambda
    if abs(growth) > 1e-14:
        left *= math.log1p(growth) / growth
    # keeps exp(R tau) inside the range of floats, for tau <= lambda/b
    longest = 500.0 * b / abs(slope) if slope != 0.0 else math.inf
    h = min(left, longest)
    while left > 0.0:
        # of this substep's start: r_ref/z0 and (Cd/Ca) z0^-b
        inflow, share = rate * math.exp(-y), kappa * math.exp(-b * y)
        k1 = max(1.0 - share, 0.0) / b
        while True:
            k2 = _clock(h * k1 / 5, h, slope, inflow, b, share)[1]
            k3 = _clock(h * (3 * k1 + 9 * k2) / 40, h, slope, inflow, b, share)[1]
            k4 = _clock(h * (44 / 45 * k1 - 56 / 15 * k2 + 32 / 9 * k3),
                        h, slope, inflow, b, share)[1]
            k5 = _clock(h * (19372 / 6561 * k1 - 25360 / 2187 * k2 + 64448 / 6561 * k3
                             - 212 / 729 * k4), h, slope, inflow, b, share)[1]
            k6 = _clock(h * (9017 / 3168 * k1 - 355 / 33 * k2 + 46732 / 5247 * k3 + 49 / 176 * k4
                             - 5103 / 18656 * k5), h, slope, inflow, b, share)[1]
            tau = h * (35 / 384 * k1 + 500 / 1113 * k3 + 125 / 192 * k4 - 2187 / 6784 * k5
                       + 11 / 84 * k6)
            rise, k7 = _clock(tau, h, slope, inflow, b, share)
            difference = h * max(
                abs(71 / 57600 * k1 - 71 / 16695 * k3 + 71 / 1920 * k4 - 17253 / 339200 * k5
                    + 22 / 525 * k6 - k7 / 40),
                # the pair's own estimate can vanish by chance where the speed bends inside the
                # step; the cubic through four of the stages then does not
                0.02 * abs(tau / h - 1 / 12 * k1 - 10 / 21 * k3 - 5 / 12 * k4 - 1 / 42 * k7))
            # as a share of the strain: de/e = b dz/z
            error = difference * b * abs(inflow * math.exp(-rise) - slope) / _TOLERANCE
            if not error > 1.0:
                break
            h *= max(0.1, 0.9 * error ** -0.2)
        y += rise
        left -= h
        h = min(left, longest, h * min(8.0, 0.9 * max(error, 1e-10) ** -0.2))
    return y


@njit(cache=True, error_model="numpy")
def _clock(tau: float, h: float, slope: float, inflow: float, b: float,
           share: float) -> tuple[float, float]:
    """(ln z/z0, d tau/d lambda) when the clock shows `tau`, z = z0 at 0.

    The clock never runs backwards nor faster than 1/b: a stage of the pair that says so, where the
    speed changes abruptly, is put right.
    """
    tau = min(max(tau, 0.0), h / b)
    x = slope * tau
    # exp(-x), and (1 - exp(-x))/slope without cancellation where x is small, nor in exp(-x) where
    # it is large
    if abs(x) < 1e-12:
        decay, filled = 1.0 - x, tau
    elif abs(x) < 0.5:
        lost = math.expm1(-x)
        decay, filled = 1.0 + lost, -lost / slope
    else:
        decay = math.exp(-x)
        filled = (1.0 - decay) / slope
    rise = math.log(decay + inflow * filled)
    return rise, max(1.0 - share * math.exp(-b * rise), 0.0) / b
