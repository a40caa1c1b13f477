"""The readers that come with the package."""

from __future__ import annotations

from subside.api import Reader, hookimpl
from subside.grid.netcdf import NetcdfGrid

__all__ = ["subside_grid_readers"]


@hookimpl
def subside_grid_readers() -> list[type[Reader]]:
    """Readers of pressure grids."""
    return [NetcdfGrid]
