"""The rate-type law in isotach form: strain depends on how fast the stress grows.

With e the strain counted from zero stress, s' the effective stress and R = ds'/dt::

    de/dt = Cd R + (e/s' - Cd) r_ref [e / (s' Ca)]^(-1/b)

At a constant rate R from zero stress e = Ca (R/r_ref)^(-b) s'. How it is integrated: see
`isotach_step`.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from subside.api import InputError, Parameter, Rock
from subside.compaction.isotach_step import mild_steps, other_steps
from subside.compaction.march import Marching

__all__ = ["Isotach"]

_YEAR = 365.25 * 86400.0


class Isotach(Marching):
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

    def start(self, rock: Rock) -> np.ndarray:
        """ln z at the start: scalar or (cell,)."""
        whole = rock.reference_compressibility * rock.initial_effective_stress
        return np.asarray(np.log(_strain_at_start(rock) / whole) / rock.rate_exponent)

    def march(self, state: np.ndarray, time: np.ndarray, rise: np.ndarray,
              rock: Rock) -> tuple[np.ndarray, np.ndarray]:
        """ln z (cell,) and the strain (n, cell); see `Marching.march`.

        Raises
        ------
        InputError
            Where injection lifts the effective stress to zero or below, or time stands still.
        """
        stress = np.add(rock.initial_effective_stress, rise, order="C")
        _check_time(time)
        _check_stress(stress, rise, time)
        cells = rise.shape[1]
        reference = _per_cell(rock.reference_compressibility, cells)
        exponent = _per_cell(rock.rate_exponent, cells)
        creep = (np.asarray(_per_cell(rock.direct_compressibility, cells) / reference), exponent,
                 _per_cell(rock.reference_stress_rate, cells))
        at_start = _per_cell(_strain_at_start(rock), cells)
        log_z, strain = np.array(_per_cell(state, cells)), np.empty((time.size - 1, cells))
        after = np.empty(cells)
        for now in range(1, time.size):
            change = (stress[now - 1], stress[now], time[now] - time[now - 1])
            mild_steps(log_z, *creep, *change, after)
            other_steps(log_z, *creep, *change, after)
            log_z, after = after, log_z
            strain[now - 1] = reference * stress[now] * np.exp(exponent * log_z) - at_start
        return log_z, strain

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
