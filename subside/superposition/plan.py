"""Chooses the method of superposition and foretells its work."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from subside.errors import InputError, nearest
from subside.superposition.interface import Bodies, Fields, Solver, Targets

__all__ = ["Auto", "Plan", "make_plan"]

_METHODS = ("direct", "lattice")
_PAIRS_WORTH_A_LATTICE = 1e8
"""Cell-target pairs below which the plain sum takes a second at most."""
_TARGETS_WORTH_A_LATTICE = 400
"""The check of a lattice is itself a plain sum at about 200 targets."""


@dataclass(frozen=True)
class Plan:
    """What a run is about to do.

    Attributes
    ----------
    method : str
        The solver's name.
    pairs : float
        Cell-target pairs.
    memory_bytes : float
        Predicted peak, without the interpreter and libraries.
    chosen : str
        The scenario's word: ``"auto"`` or a method's name.
    """

    method: str
    pairs: float
    memory_bytes: float
    chosen: str = "direct"

    def solver(self) -> Solver:
        """The solver itself; compiled code is loaded only now.

        With ``"auto"`` it chooses anew for each set of targets it is given.
        """
        return Auto() if self.chosen == "auto" else _solver(self.method)


class Auto:
    """The cheaper of the plain sum and the lattice, for each set of targets.

    Attributes
    ----------
    name : str
        ``"auto"``, and after `solve` the method that was used.
    achieved_error : float
        Of the last `solve`: see the solvers.
    notes : list of str
        What the last `solve` did.
    """

    def __init__(self) -> None:
        self.name = "auto"
        self.achieved_error = 0.0
        self.notes: list[str] = []

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
        """See `subside.superposition.interface.Solver`."""
        solver = _solver(_cheaper(bodies.count, int(targets.at_surface.sum())))
        field = solver.solve(bodies, moments, targets, earth, tolerance=tolerance,
                             gradient=gradient, progress=progress)
        self.name = solver.name
        self.achieved_error, self.notes = solver.achieved_error, solver.notes
        return field


def _solver(method: str) -> Solver:
    if method == "direct":
        from subside.superposition.direct import Direct

        return Direct()
    from subside.superposition.lattice import Lattice

    return Lattice()


def _cheaper(cells: int, targets: int) -> str:
    """A first look at the size; `Lattice` leaves single bands to the plain sum by closer costs."""
    large = float(cells) * targets >= _PAIRS_WORTH_A_LATTICE
    return "lattice" if large and targets >= _TARGETS_WORTH_A_LATTICE else "direct"


def make_plan(method: str, cells: int, targets: int, steps: int, components: int,
              sources: int) -> Plan:
    """Choose by the scenario's word and the size of the job.

    Parameters
    ----------
    method : str
        ``"auto"`` or a method's name.
    cells, targets, steps, components, sources : int
        Size of the job; `components` of the field wanted, `sources` kinds of moments.

    Raises
    ------
    InputError
        Unknown method.
    """
    if method not in ("auto", *_METHODS):
        raise InputError(f"[solver] method = '{method}' is not known."
                         + nearest(method, ("auto", *_METHODS)))
    used = _cheaper(cells, targets) if method == "auto" else method
    # a tile of influences, or moments and spectra on the lattice and what is kept of each cell
    work = 8.0 * components * 64 * 2048 * 4 if used == "direct" else 1.0e9 + 90.0 * cells
    memory = 8.0 * steps * (cells * (3 + sources) + targets * components * 2) + work
    return Plan(used, float(cells) * targets * sources, memory, method)
