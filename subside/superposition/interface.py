"""What goes into a superposition and what comes out: arrays in SI, no labels.

A solver is anything with the `solve` of `Solver`; `direct` is the plain sum and the referee.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from typing import Any, Protocol

import numpy as np

__all__ = [
    "DISPLACEMENT", "GRADIENT", "Bodies", "Fields", "Solver", "SolverRecord", "Targets",
]

DISPLACEMENT = ("down", "east", "north")
"""Components of displacement, m: downward, to the east, to the north."""

GRADIENT = ("down_by_east", "down_by_north", "strain_east", "strain_north", "strain_shear")
"""Horizontal derivatives at the surface, 1: slopes of subsidence, and the horizontal strain tensor
(extension positive; `strain_shear` is the tensor's, half the engineering shear strain)."""

Fields = dict[str, np.ndarray]
"""Component name to (nt, target)."""


@dataclass(frozen=True)
class Bodies:
    """The cells as bodies in space; depth is below the ground or seabed.

    Attributes
    ----------
    count : int
        Number of cells.
    corners : callable
        Index array (m,) to corners (m, 8, 3): x, y, depth in m; 4 of the top face going round,
        then the 4 below them.
    boxes : callable or None
        Index array (m,) to (m, 7): x, y, top, bottom, dx, dy, azimuth (m, degrees), when every cell
        is an upright box.
    column : array of int (count,) or None
        Number of the upright pillar each cell stands in: cells of one column have the same outline
        seen from above, all the way down. None: nothing is known of columns.
    """

    count: int
    corners: Callable[[np.ndarray], np.ndarray]
    boxes: Callable[[np.ndarray], np.ndarray] | None = None
    column: np.ndarray | None = None


@dataclass(frozen=True)
class Targets:
    """Where the field is wanted: x, y in m, depth in m below the ground or seabed, each (n,)."""

    x: np.ndarray
    y: np.ndarray
    depth: np.ndarray

    @property
    def at_surface(self) -> np.ndarray:
        """True for targets on the ground or seabed."""
        return np.asarray(self.depth == 0.0)


class Solver(Protocol):
    """One way to add up the sources.

    After `solve`, `name` is the method used, `achieved_error` the error over the largest
    displacement (measured, or the bound of the sampling of cells for the plain sum), and `notes`
    says what was done.
    """

    name: str
    achieved_error: float
    notes: list[str]

    def solve(
        self,
        bodies: Bodies,
        moments: Mapping[str, np.ndarray],
        targets: Targets,
        earth: Any,
        *,
        tolerance: float,
        gradient: bool = False,
        progress: Callable[[float], None] = lambda pairs: None,
    ) -> Fields:
        """The field of all cells at all targets.

        Parameters
        ----------
        bodies : Bodies
        moments : mapping of source kind to array (nt, cell)
            m3 of volume lost, for ``"contraction"`` and ``"closure"``.
        targets : Targets
        earth : EarthModel
        tolerance : float
            Error allowed, relative to the largest displacement.
        gradient : bool
            Also return the `GRADIENT` components (targets at the surface only).
        progress : callable
            Told the number of cell-target pairs done since the last call.
        """
        ...


@dataclass
class SolverRecord:
    """What the solvers of a run did: methods, largest error, notes, each once."""

    methods: list[str] = field(default_factory=list)
    error: float = 0.0
    notes: list[str] = field(default_factory=list)

    def note(self, solver: Solver) -> None:
        """Take down what a solver did last."""
        self.error = max(self.error, solver.achieved_error)
        for kept, new in ((self.methods, [solver.name]), (self.notes, solver.notes)):
            kept += [text for text in new if text not in kept]
