"""The linear law: strain is compressibility times the rise of effective stress."""

from __future__ import annotations

from typing import Any

from subside.api import Parameter, Rock
from subside.compaction.memory import MemoryLaw, refuse

__all__ = ["Linear"]


class Linear(MemoryLaw):
    """Strain = Cm x rise beyond the largest ever felt, Cu x rise below it.

    With m the largest of m0 = `previous_stress_rise` and of the rise s so far (both in the stress
    of memory, `yield_biot` x depletion)::

        strain = Cm (m - m0) + Cu [s - (m - m0)]

    Cm = (1 + nu)(1 - 2 nu) / [(1 - nu) E] is the uniaxial compressibility of an elastic rock.
    """

    name = "linear"
    summary = "strain = uniaxial compressibility x stress rise, with its own slope for rebound"
    source = "Geertsma 1973, J. Pet. Technol. 25:734 (uniaxial compressibility); rebound derived"
    parameters = (
        Parameter("uniaxial_compressibility", "1/Pa", "strain per rise of vertical effective "
                  "stress with no lateral strain, beyond the largest stress ever felt",
                  minimum=0.0, maximum=1e-6, example="1.1e-5 1/bar"),
        Parameter("unloading_compressibility", "1/Pa", "the same for unloading and reloading "
                  "below the largest stress ever felt (left out: no different)",
                  required=False, minimum=0.0, maximum=1e-6, example="0.4e-5 1/bar"),
    )
    linear_in = ("uniaxial_compressibility", "unloading_compressibility")

    def unloading(self, rock: Rock) -> Any:
        """Cu, or Cm where none is given, 1/Pa."""
        if rock.unloading_compressibility is None:
            return rock.uniaxial_compressibility
        return rock.unloading_compressibility

    def remembers(self, rock: Rock) -> bool:
        """Whether unloading differs from loading."""
        return rock.unloading_compressibility is not None

    def permanent(self, largest: Any, rock: Rock) -> Any:
        """(Cm - Cu) x largest stress."""
        return (rock.uniaxial_compressibility - self.unloading(rock)) * largest

    def check(self, rock: Rock) -> None:
        """Raise `InputError` where rebound would exceed compaction."""
        loading, unloading = rock.uniaxial_compressibility, self.unloading(rock)
        refuse(unloading > loading, lambda at: (
            f"unloading_compressibility = {at(unloading) * 1e5:g} 1/bar is above "
            f"uniaxial_compressibility = {at(loading) * 1e5:g} 1/bar: the rock would grow higher "
            "than it was with every cycle of pressure; give at most the same."))
