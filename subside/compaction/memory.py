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
from collections.abc import Callable, Mapping
from typing import Any

import numpy as np

from subside.api import History, InputError, Law, Rock

__all__ = ["MemoryLaw", "refuse"]

Number = Any
"""A float or an array (cell,)."""


class MemoryLaw(Law):
    """A virgin curve, and one line for unloading and reloading below the largest stress."""

    @abstractmethod
    def unloading(self, rock: Rock) -> Number:
        """Compressibility of unloading and reloading, 1/Pa: scalar or (cell,)."""

    @abstractmethod
    def permanent(self, largest: Number, rock: Rock) -> Number:
        """Strain that stays after unloading from `largest` (Pa, yield stress): its C - Cu part."""

    def strain(self, history: History, rock: Rock) -> np.ndarray:
        """Uniaxial strain (nt, cell), shortening positive, zero at the start."""
        strain = np.zeros_like(history.stress_rise, dtype=float)
        largest = self.start(rock)
        for now in range(1, history.time.size):
            largest = self._felt(largest, history.stress_rise[now], rock)
            strain[now] = self._strain(largest, history.stress_rise[now], rock)
        return strain

    def start(self, rock: Rock) -> Number:
        """Largest `yield_biot` x depletion ever felt, Pa: scalar or (cell,)."""
        return rock.previous_stress_rise

    def advance(
        self, state: Number, t0: float, t1: float, rise0: np.ndarray, rise1: np.ndarray,
        fields: Mapping[str, tuple[np.ndarray, np.ndarray]], rock: Rock,
    ) -> tuple[Number, np.ndarray]:
        """The largest stress and the strain (cell,) at `t1`; see `Law.advance`."""
        largest = self._felt(state, rise1, rock)
        return largest, self._strain(largest, rise1, rock)

    @staticmethod
    def _felt(largest: Number, rise: np.ndarray, rock: Rock) -> Number:
        return np.maximum(largest, rise * (rock.yield_biot / rock.biot))

    def _strain(self, largest: Number, rise: np.ndarray, rock: Rock) -> np.ndarray:
        lost = self.permanent(largest, rock) - self.permanent(self.start(rock), rock)
        return np.asarray(self.unloading(rock) * rise + (rock.biot / rock.yield_biot) * lost)


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
