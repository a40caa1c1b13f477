"""The readers that come with the package."""

from __future__ import annotations

from subside.grid.netcdf import NetcdfGrid
from subside.hooks.contracts import Reader
from subside.hooks.specs import hookimpl

__all__ = ["subside_grid_readers"]


@hookimpl
def subside_grid_readers() -> list[type[Reader]]:
    """Readers of pressure grids."""
    return [NetcdfGrid]
