"""Chooses the method of superposition and foretells its work."""

from __future__ import annotations

from dataclasses import dataclass

from subside.errors import InputError, nearest
from subside.superposition.interface import Solver

__all__ = ["Plan", "make_plan"]

_METHODS = ("direct",)


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
    """

    method: str
    pairs: float
    memory_bytes: float

    def solver(self) -> Solver:
        """The solver itself; compiled code is loaded only now."""
        from subside.superposition.direct import Direct

        return Direct()


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
    tile = 8.0 * components * 64 * 2048 * 4
    memory = 8.0 * steps * (cells * (3 + sources) + targets * components * 2) + tile
    return Plan("direct", float(cells) * targets * sources, memory)
