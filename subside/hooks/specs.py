"""The hooks, in the order a run calls them.

Each hook is called once, when something first asks for that kind of plug-in; never inside a loop
over cells. Each returns a list of classes. A module (or package) is a plug-in when an entry point
of the group ``subside`` names it, or when the user names its file with ``--plugin``.
"""

from __future__ import annotations

import pluggy

from subside.hooks.contracts import EarthModel, Exporter, Law, Quantity, Reader

__all__ = ["HOOKS", "hookimpl", "hookspec"]

hookspec = pluggy.HookspecMarker("subside")
hookimpl = pluggy.HookimplMarker("subside")


@hookspec
def subside_grid_readers() -> list[type[Reader]]:  # type: ignore[empty-body]
    """Readers of pressure grids. Called when a grid is opened or plug-ins are listed."""


@hookspec
def subside_compaction_laws() -> list[type[Law]]:  # type: ignore[empty-body]
    """Compaction laws. Called when a scenario's laws are looked up or plug-ins are listed."""


@hookspec
def subside_earth_models() -> list[type[EarthModel]]:  # type: ignore[empty-body]
    """Elastic earths. Called when a scenario's earth is looked up or plug-ins are listed."""


@hookspec
def subside_quantities() -> list[type[Quantity]]:  # type: ignore[empty-body]
    """Further result variables. Called when a scenario asks for one or plug-ins are listed."""


@hookspec
def subside_exporters() -> list[type[Exporter]]:  # type: ignore[empty-body]
    """Writers of other file kinds. Called by ``export`` or when plug-ins are listed."""


HOOKS = {
    "reader": "subside_grid_readers",
    "law": "subside_compaction_laws",
    "earth-model": "subside_earth_models",
    "quantity": "subside_quantities",
    "exporter": "subside_exporters",
}
"""Kind of plug-in to the hook that offers it."""
