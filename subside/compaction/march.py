"""How any law goes over a range of dates, whatever it offers.

A built-in law offers `march`, the same as `Law.advance` over several dates at once. A law that
only goes date by date is asked for each pair of dates in turn; a law that offers `strain` alone
needs its whole history at once.
"""

from __future__ import annotations

from abc import abstractmethod
from collections.abc import Mapping
from typing import Any

import numpy as np

from subside.api import History, Law, Rock

__all__ = ["Marching", "march"]


class Marching(Law):
    """A law that takes several dates at once, from whatever it remembers.

    Not offered to plug-ins: what `march` saves over `advance` is the cost of a call per date.
    """

    @abstractmethod
    def march(self, state: Any, time: np.ndarray, rise: np.ndarray,
              rock: Rock) -> tuple[Any, np.ndarray]:
        """What to remember and the strain (n, cell) at ``time[1:]``.

        Parameters
        ----------
        state
            From `Law.start`, or from the march that ended at ``time[0]``.
        time : array (n + 1,)
            Seconds since the start.
        rise : array (n + 1, cell)
            Rise of vertical effective stress, Pa, at those times.
        rock : Rock
        """

    def advance(
        self, state: Any, t0: float, t1: float, rise0: np.ndarray, rise1: np.ndarray,
        fields: Mapping[str, tuple[np.ndarray, np.ndarray]], rock: Rock,
    ) -> tuple[Any, np.ndarray]:
        """What to remember and the strain (cell,) at `t1`; see `Law.advance`."""
        state, strain = self.march(state, np.array([t0, t1]), np.stack([rise0, rise1]), rock)
        return state, strain[0]

    def strain(self, history: History, rock: Rock) -> np.ndarray:
        """Uniaxial strain (nt, cell), shortening positive, zero at the start."""
        strain = np.zeros(history.stress_rise.shape)
        strain[1:] = self.march(self.start(rock), history.time, history.stress_rise, rock)[1]
        return strain


def march(law: Law, state: Any, time: np.ndarray, rise: np.ndarray,
          fields: Mapping[str, np.ndarray], rock: Rock) -> tuple[Any, np.ndarray]:
    """`Marching.march` for a law that goes by date; `fields` are (cell,) or (n + 1, cell)."""
    if isinstance(law, Marching):
        return law.march(state, time, rise, rock)
    strain = np.empty((time.size - 1, rise.shape[1]))
    for now in range(1, time.size):
        pairs = {name: (values, values) if values.ndim == 1 else (values[now - 1], values[now])
                 for name, values in fields.items()}
        state, reached = law.advance(state, float(time[now - 1]), float(time[now]),
                                     rise[now - 1], rise[now], pairs, rock)
        if np.shape(reached) != strain[now - 1].shape:
            raise ValueError(f"advance() returned strain of shape {np.shape(reached)}; (cell,) = "
                             f"{strain[now - 1].shape} is expected")
        strain[now - 1] = reached
    return state, strain
