"""Pressure grids: files to cell datasets, with every check on the way.

A cell dataset is an `xarray.Dataset` of active cells in SI, depth positive down; see
`subside.names.CELL_VARIABLES`.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    import xarray as xr

    from subside.grid.stream import HeldStream, Stream
    from subside.grid.watch import PressureWatch

__all__ = ["HeldStream", "PressureWatch", "Stream", "edge_depletion", "open_cells", "open_grid",
           "summarise"]


def __getattr__(name: str) -> Any:
    # compiled code is not loaded by those who only ask for --help
    if name in {"Stream", "HeldStream"}:
        from subside.grid import stream

        return getattr(stream, name)
    if name == "PressureWatch":
        from subside.grid.watch import PressureWatch

        return PressureWatch
    raise AttributeError(f"module {__name__!r} has no attribute {name!r}")


def open_grid(
    path: str | Path | Sequence[str | Path],
    *,
    crs: str | None = None,
    accept: Iterable[str] = (),
    surface: float = 0.0,
    initial_pressure: float | str | Mapping[str, str] | None = None,
    fields: Iterable[str] | None = None,
) -> xr.Dataset:
    """Read a pressure grid and check it.

    Parameters
    ----------
    path : str, Path, or a sequence of them
        The file; its ending picks the reader. Of several files, in any order, each continues the
        one before it in time. The first by date says all that does not change in time; the others
        need hold no more than the dates and what changes. The first date of a file may repeat the
        last of the one before, with the same values to 1e-6.
    crs : str, optional
        Coordinate system where the file names none, such as ``"EPSG:32631"``.
    accept : iterable of str
        Names of checks whose errors become warnings, such as ``"lithostatic"``.
    surface : float
        Depth of the ground or seabed in the grid's vertical datum, m, positive down.
    initial_pressure : float, str or {"field": name}, optional
        Absolute pressure before production: Pa or a quantity (``"350 bar"``), the first step
        (``"first"``), or a field of the grid. It
        becomes the variable `initial_pressure`; without it the file's own is kept, if it has one.
    fields : iterable of str, optional
        Further fields to read; all of them when left out.

    Returns
    -------
    xarray.Dataset
        Active cells, SI. `attrs["warnings"]` lists what looked odd or was accepted.

    Raises
    ------
    InputError
        If the file, a cell, or an argument is wrong.
    CannotDo
        If the grid is larger than the machine's memory.
    """
    from subside.grid import opening

    return opening.open_grid(path, crs=crs, accept=accept, surface=surface,
                             initial_pressure=initial_pressure, fields=fields)


def open_cells(
    path: str | Path | Sequence[str | Path],
    *,
    crs: str | None = None,
    accept: Iterable[str] = (),
    surface: float = 0.0,
    initial_pressure: float | str | Mapping[str, str] | None = None,
    fields: Iterable[str] | None = None,
) -> tuple[xr.Dataset, dict[str, Stream]]:
    """Read all of a pressure grid but what changes in time, and check it.

    Parameters
    ----------
    path, crs, accept, surface, initial_pressure, fields
        As in `open_grid`.

    Returns
    -------
    cells : xarray.Dataset
        As `open_grid` gives it, without `pressure` and other variables in time, but with their
        dates as the coordinate `time`.
    streams : dict of str to Stream
        ``"pressure"`` and the other variables in time, to be read block by block.

    Raises
    ------
    InputError
        If the file, a cell, or an argument is wrong. Pressures after the first date are not looked
        at: that is what `PressureWatch` is for.
    CannotDo
        If the grid is larger than the machine's memory.
    """
    from subside.grid import opening

    return opening.open_cells(path, crs=crs, accept=accept, surface=surface,
                              initial_pressure=initial_pressure, fields=fields)


def edge_depletion(cells: xr.Dataset, initial_pressure: Any = None) -> float:
    """See `subside.grid.summary.edge_depletion`."""
    from subside.grid import summary

    return summary.edge_depletion(cells, initial_pressure)


def summarise(cells: xr.Dataset, initial_pressure: Any = None) -> dict[str, Any]:
    """See `subside.grid.summary.summarise`."""
    from subside.grid import summary

    return summary.summarise(cells, initial_pressure)
