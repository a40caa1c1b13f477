"""Pressure grids: files to cell datasets, with every check on the way.

A cell dataset is an `xarray.Dataset` of active cells in SI, depth positive down; see
`subside.names.CELL_VARIABLES`.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from pathlib import Path
from typing import TYPE_CHECKING, Any

from subside.errors import CannotDo, InputError, located

if TYPE_CHECKING:
    import xarray as xr

__all__ = ["edge_depletion", "open_grid", "summarise"]


def open_grid(
    path: str | Path,
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
    path : str or Path
        The file; its ending picks the reader.
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
    from subside.grid.checks import check_accept, run_checks
    from subside.grid.findings import Findings

    path = Path(path)
    with located(str(path)):
        words = check_accept(accept)
    reader = _reader_of(path)
    if fields is not None:
        extra = initial_pressure.values() if isinstance(initial_pressure, Mapping) else ()
        fields = [*fields, *extra]
    options = {"crs": crs, "accept": tuple(sorted(words)), "fields": fields}
    try:
        cells = reader().read(path, options)
        if initial_pressure is not None:
            _set_initial(cells, initial_pressure)
        run_checks(cells, surface, Findings(path, words))
    except MemoryError:
        raise CannotDo(f"{path}: the grid does not fit into the memory that is free; close other "
                       "programs, or keep fewer steps or cells.") from None
    return cells


def _reader_of(path: Path) -> type[Any]:
    from subside.hooks.registry import registry

    found = registry.all("reader").values()
    fitting = [r for r in found if path.suffix.lower() in r.cls.suffixes]
    if len(fitting) > 1:
        raise InputError(f"{path}: files ending in '{path.suffix}' are claimed by several readers, "
                         + ", ".join(f"{r.name} ({r.origin})" for r in fitting)
                         + "; uninstall one of them.")
    if not fitting:
        endings = sorted({s for r in found for s in r.cls.suffixes})
        raise InputError(f"{path}: no reader takes files ending in '{path.suffix}'; the installed "
                         f"ones take {', '.join(endings)}.")
    return fitting[0].cls


def _set_initial(cells: xr.Dataset, wanted: float | str | Mapping[str, str]) -> None:
    import numpy as np

    from subside.grid.fields import require_field
    from subside.names import CELL_VARIABLES
    from subside.units import parse_quantity

    known = CELL_VARIABLES["initial_pressure"]
    if isinstance(wanted, Mapping):
        if set(wanted) != {"field"}:
            raise InputError(f"{cells.attrs['source_file']}: initial_pressure = {dict(wanted)!r}: "
                             "write \"first\", a quantity such as \"350 bar\", or "
                             "{ field = \"initial_pressure\" }.")
        name = wanted["field"]
        values = require_field(cells, name, "Pa", "initial_pressure").values
        if values.ndim != 1:
            raise InputError(f"{cells.attrs['source_file']}: initial_pressure names the field "
                             f"'{name}', which changes in time; it must be static.")
    elif wanted == "first":
        values = cells["pressure"].values[0].copy()
    else:
        with located(str(cells.attrs["source_file"])):
            values = np.full(cells.sizes["cell"],
                             parse_quantity(wanted, "Pa", name="initial_pressure"))
    cells["initial_pressure"] = (known.dims, values,
                                 {"units": known.unit, "long_name": known.long_name})


def edge_depletion(cells: xr.Dataset, initial_pressure: Any = None) -> float:
    """See `subside.grid.summary.edge_depletion`."""
    from subside.grid import summary

    return summary.edge_depletion(cells, initial_pressure)


def summarise(cells: xr.Dataset, initial_pressure: Any = None) -> dict[str, Any]:
    """See `subside.grid.summary.summarise`."""
    from subside.grid import summary

    return summary.summarise(cells, initial_pressure)
