"""The bilinear law: stiff up to a yield stress, soft beyond it (pore collapse)."""

from __future__ import annotations

from typing import Any

import numpy as np

from subside.api import InputError, Parameter, Rock
from subside.compaction.memory import MemoryLaw, refuse

__all__ = ["Bilinear"]

_CEILING = 1e-6


class Bilinear(MemoryLaw):
    """Compressibility Cm1 up to the yield, Cm2 beyond; the yield follows the largest stress.

    ::

        d strain / d s = Cm1 while largest stress < yield,  Cm2 beyond   (virgin loading)
                       = Cu below the largest stress ever felt           (unloading, reloading)

    Yield and memory are tested on `yield_biot` x depletion; strain grows by biot x depletion and is
    continuous at yield. A `previous_stress_rise` beyond the yield is the yield from then on.
    """

    name = "bilinear"
    summary = "two compressibilities, before and after yield (pore collapse), with rebound"
    source = "common practice, no source; integrated here exactly"
    parameters = (
        Parameter("compressibility_before_yield", "1/Pa", "strain per rise of vertical effective "
                  "stress with no lateral strain, up to the yield", minimum=0.0,
                  maximum=_CEILING, example="2e-5 1/bar"),
        Parameter("compressibility_after_yield", "1/Pa", "the same beyond the yield",
                  minimum=0.0, maximum=_CEILING, example="2e-4 1/bar"),
        Parameter("yield_stress_increase", "Pa", "rise of effective stress above the stress at "
                  "the start at which the rock yields; this or preconsolidation_stress",
                  required=False, minimum=0.0, example="6 MPa"),
        Parameter("preconsolidation_stress", "Pa", "vertical effective stress at which the rock "
                  "yields; needs initial_effective_stress", required=False, minimum=0.0,
                  open_minimum=True, example="38 MPa"),
        Parameter("initial_effective_stress", "Pa", "vertical effective stress at the start; "
                  "goes with preconsolidation_stress", required=False, minimum=0.0,
                  open_minimum=True, example="32 MPa"),
        Parameter("unloading_compressibility", "1/Pa", "strain per stress for unloading and "
                  "reloading below the largest stress ever felt (left out: as before yield)",
                  required=False, minimum=0.0, maximum=_CEILING, example="1e-5 1/bar"),
    )
    linear_in = ("compressibility_before_yield", "compressibility_after_yield",
                 "unloading_compressibility")

    def unloading(self, rock: Rock) -> Any:
        """Cu, or Cm1 where none is given, 1/Pa."""
        if rock.unloading_compressibility is None:
            return rock.compressibility_before_yield
        return rock.unloading_compressibility

    def permanent(self, largest: Any, rock: Rock) -> Any:
        """(Cm1 - Cu) x the part of the largest stress up to yield, (Cm2 - Cu) x the rest."""
        before = np.minimum(largest, _yield_rise(rock))
        unloading = self.unloading(rock)
        return ((rock.compressibility_before_yield - unloading) * before
                + (rock.compressibility_after_yield - unloading) * (largest - before))

    def check(self, rock: Rock) -> None:
        """Raise `InputError` where keys are missing or contradict each other."""
        _check_yield(rock)
        unloading = self.unloading(rock)
        given = rock.unloading_compressibility is not None
        name = "unloading_compressibility" if given else \
            "compressibility_before_yield (also used for unloading)"
        for key in ("compressibility_before_yield", "compressibility_after_yield"):
            virgin = getattr(rock, key)
            refuse(unloading > virgin, lambda at, key=key, virgin=virgin: (  # type: ignore[misc]
                f"{name} = {at(unloading) * 1e5:g} 1/bar is above {key} = {at(virgin) * 1e5:g} "
                "1/bar: the rock would grow higher than it was with every cycle of pressure; give "
                "an unloading_compressibility of at most that."))


def _yield_rise(rock: Rock) -> Any:
    """Rise of effective stress above the start at which the rock yields, Pa."""
    if rock.yield_stress_increase is not None:
        return rock.yield_stress_increase
    return rock.preconsolidation_stress - rock.initial_effective_stress


def _check_yield(rock: Rock) -> None:
    rise, yields = rock.yield_stress_increase, rock.preconsolidation_stress
    initial = rock.initial_effective_stress
    if rise is None and yields is None:
        raise InputError(
            "law 'bilinear' needs to know where the rock yields: give yield_stress_increase (for "
            "example \"6 MPa\", above the stress at the start), or preconsolidation_stress with "
            "initial_effective_stress (for example \"38 MPa\" and \"32 MPa\").")
    if rise is not None and (yields is not None or initial is not None):
        key = "preconsolidation_stress" if yields is not None else "initial_effective_stress"
        raise InputError(
            f"yield_stress_increase = {_bar(rise)} and {key} = "
            f"{_bar(yields if yields is not None else initial)} are both given, and only one can "
            "say where the rock yields; leave out one: yield_stress_increase, or "
            "preconsolidation_stress with initial_effective_stress.")
    if rise is not None:
        return
    if initial is None:
        raise InputError(
            f"preconsolidation_stress = {_bar(yields)} needs initial_effective_stress (for example "
            "\"32 MPa\") to say how far the start is from yield; add it.")
    refuse(yields < initial, lambda at: (
        f"preconsolidation_stress = {at(yields) / 1e5:g} bar is below initial_effective_stress = "
        f"{at(initial) / 1e5:g} bar: the rock has then already felt more than its yield; raise the "
        "one or lower the other (equal: it yields from the start)."))


def _bar(stress: Any) -> str:
    """A stress in words: one value or the range over the cells."""
    low, high = float(np.min(stress)) / 1e5, float(np.max(stress)) / 1e5
    return f"{low:g} bar" if low == high else f"{low:g} to {high:g} bar"
