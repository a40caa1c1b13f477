"""The further result variables a scenario asks for, and what they need."""

from __future__ import annotations

from dataclasses import dataclass

from subside.api import InputError, Quantity
from subside.errors import nearest
from subside.hooks.registry import registry
from subside.names import RESULT_VARIABLES

__all__ = ["GRADIENT_NAMES", "Request", "read_request"]

GRADIENT_NAMES = {
    "slope_east": "down_by_east", "slope_north": "down_by_north",
    "horizontal_strain_east": "strain_east", "horizontal_strain_north": "strain_north",
    "horizontal_strain_shear": "strain_shear",
}
"""Result variables that are components of the solver's gradient."""


@dataclass(frozen=True)
class Request:
    """What `[output] quantities` comes to.

    Attributes
    ----------
    names : tuple of str
        As asked for.
    quantities : tuple of Quantity
        Plug-ins to compute.
    gradient : bool
        Whether the solver must return horizontal derivatives.
    by_region, by_cell : bool
        Whether `region_subsidence`, `cell_compaction` are wanted.
    maps : tuple of str
        Those that exist on a map only.
    """

    names: tuple[str, ...]
    quantities: tuple[Quantity, ...]
    gradient: bool
    by_region: bool
    by_cell: bool
    maps: tuple[str, ...]


def read_request(names: list[str]) -> Request:
    """Look the names up.

    Raises
    ------
    InputError
        For a name that no quantity has.
    """
    offered = registry.all("quantity")
    known = {*offered, *RESULT_VARIABLES}
    for name in names:
        if name not in known:
            raise InputError(f"[output] quantities: '{name}' is not known." + nearest(name, known))
    chosen = tuple(offered[n].cls() for n in names if n in offered)
    needed = {*names, *(need for quantity in chosen for need in quantity.needs)}
    on_map = {name for name, variable in RESULT_VARIABLES.items() if "y" in variable.dims}
    maps = tuple(name for name in names if name in on_map
                 or (name in offered and on_map & set(offered[name].cls.needs)))
    return Request(tuple(names), chosen, bool(needed & set(GRADIENT_NAMES)),
                   "region_subsidence" in names, "cell_compaction" in names, maps)
