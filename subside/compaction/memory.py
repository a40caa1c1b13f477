"""Laws that remember one number: the largest stress ever felt.

Where the stress grows beyond its largest value so far, a cell follows its virgin curve; below that
value it unloads and reloads along one straight line. What is lost for good therefore depends on
the largest stress alone::

    strain = Cu s + (biot / yield_biot) [permanent(m) - permanent(m0)]
    m      = largest of m0 and of yield_biot x depletion so far,   m0 = previous_stress_rise
    d permanent / d m = C(m) - Cu

with s = biot x depletion the rise of effective stress, Cu the unloading compressibility and C the
slope of the virgin curve. On a virgin path this is the integral of C(m) ds, continuous where C
changes; a rise below zero (injection first) uses Cu. It is exact for any path and for any cutting
of it into steps, because m of a path that is linear between dates is reached at a date.
Derived here from these two rules.
"""

from __future__ import annotations

from abc import abstractmethod
from collections.abc import Callable
from typing import Any

import numpy as np

from subside.api import InputError, Rock
from subside.compaction.march import Marching

__all__ = ["MemoryLaw", "refuse"]

Number = Any
"""A float or an array (cell,)."""


class MemoryLaw(Marching):
    """A virgin curve, and one line for unloading and reloading below the largest stress."""

    @abstractmethod
    def unloading(self, rock: Rock) -> Number:
        """Compressibility of unloading and reloading, 1/Pa: scalar or (cell,)."""

    @abstractmethod
    def permanent(self, largest: Number, rock: Rock) -> Number:
        """Strain that stays after unloading from `largest` (Pa, yield stress): its C - Cu part."""

    def remembers(self, rock: Rock) -> bool:
        """False where the virgin curve is the line of unloading itself: nothing stays."""
        return True

    def start(self, rock: Rock) -> Number:
        """Largest `yield_biot` x depletion ever felt, Pa: scalar or (cell,)."""
        return rock.previous_stress_rise

    def march(self, state: Number, time: np.ndarray, rise: np.ndarray,
              rock: Rock) -> tuple[Number, np.ndarray]:
        """The largest stress (cell,) and the strain (n, cell); see `Marching.march`."""
        strain = self.unloading(rock) * rise[1:]
        if not self.remembers(rock):
            return state, strain
        ratio = rock.biot / rock.yield_biot
        largest = rise[1:] * (rock.yield_biot / rock.biot)
        for now in range(largest.shape[0]):
            np.maximum(largest[now], state, out=largest[now])
            state = largest[now]
        lost = self.permanent(largest, rock) - self.permanent(self.start(rock), rock)
        lost *= ratio
        strain += lost
        return np.array(state), strain


def refuse(bad: Number, message: Callable[[Callable[[Number], float]], str]) -> None:
    """Raise `InputError` if `bad` (scalar or (cell,)) is true anywhere.

    `message` is given a function that picks the value of the first bad cell from a parameter.
    """
    cells = np.flatnonzero(np.atleast_1d(bad))
    if cells.size:
        first = int(cells[0])
        raise InputError(
            message(lambda value: float(np.broadcast_to(value, np.atleast_1d(bad).shape)[first])),
            cell=first if np.ndim(bad) else None)
