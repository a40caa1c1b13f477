"""Fields of the grid that a law or a parameter asks for, static or in time.

Static fields are variables of the cell dataset. Fields in time come leg by leg; of these the
attributes alone are known beforehand: ``streams[name]["units"]`` is the unit in which their values
will come, ``streams[name]["units_problem"]`` says why there is none.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
import xarray as xr

from subside.errors import InputError, nearest
from subside.units import same_dimension, scale_to_si

__all__ = ["Streams", "field_in_time", "field_of_cells", "place", "scale_of_field"]

Streams = Mapping[str, Mapping[str, Any]]
"""Attributes of each field in time, by name."""

_RESERVED = {"corners", "centroid", "k", "j", "i", "edge", "region", "pressure"}


def scale_of_field(dataset: xr.Dataset, streams: Streams, name: str, si_unit: str | None,
                   where: str) -> tuple[float, float]:
    """`(factor, offset)` that bring a field's values to `si_unit`.

    `si_unit` None: as they are, in the SI unit of whatever they measure (a law that asks for a
    field knows what it needs).

    Raises
    ------
    InputError
        If the grid has no such field, or it has no unit or one of another kind.
    """
    known = [str(v) for v in dataset.data_vars if str(v) not in _RESERVED
             and dataset[v].dims == ("cell",)]
    known += [name for name in streams if name not in _RESERVED]
    if name not in known:
        raise InputError(f"{where}: the grid has no field '{name}'." + nearest(name, known))
    attributes = streams[name] if name in streams else dataset[name].attrs
    unit = attributes.get("units")
    if unit is None:
        problem = attributes.get("units_problem", "it has no units attribute")
        example = f"for example '{si_unit}'" if si_unit else "'1' for a plain number"
        raise InputError(f"{where}: the grid's field '{name}' cannot be used, {problem}; give it "
                         f"units, {example}.")
    si_unit = si_unit or str(unit)
    if not same_dimension(str(unit), si_unit):
        raise InputError(f"{where}: the grid's field '{name}' is in '{unit}', which is not a unit "
                         f"of this parameter (such as '{si_unit}').")
    return scale_to_si(str(unit), si_unit)


def field_of_cells(dataset: xr.Dataset, name: str, si_unit: str | None, where: str,
                   cells: np.ndarray) -> np.ndarray:
    """A static grid field for some cells: (n,), in `si_unit` (see `scale_of_field`).

    Raises
    ------
    InputError
        If the grid has no such field, or it has no unit or one of another kind, or has gaps.
    """
    factor, offset = scale_of_field(dataset, {}, name, si_unit, where)
    values = np.asarray(dataset[name].values[cells], dtype=float)
    values = values * factor + offset
    _refuse_gaps(values, dataset, name, where, cells)
    return values


def field_in_time(values: np.ndarray, dataset: xr.Dataset, streams: Streams, name: str, where: str,
                  cells: np.ndarray) -> np.ndarray:
    """Some dates of a field in time, (dates, n) as they came, ready for a law.

    Raises
    ------
    InputError
        If a value is missing.
    """
    factor, offset = scale_of_field(dataset, streams, name, None, where)
    values = np.asarray(values, dtype=float)
    if (factor, offset) != (1.0, 0.0):
        values = values * factor + offset
    _refuse_gaps(values, dataset, name, where, cells)
    return values


def _refuse_gaps(values: np.ndarray, dataset: xr.Dataset, name: str, where: str,
                 cells: np.ndarray) -> None:
    if np.isfinite(values.sum()):
        return
    bad = ~np.isfinite(values)
    if bad.any():
        wrong = cells[bad.any(axis=0) if bad.ndim > 1 else bad]
        count = f"{wrong.size} active cell{'s' if wrong.size > 1 else ''}"
        raise InputError(f"{where}: the grid's field '{name}' has no value in {count}, first "
                         f"{place(dataset, int(wrong[0]))}; fill the gaps or mark the cells "
                         "inactive.")


def place(dataset: xr.Dataset, cell: int) -> str:
    """Where a cell stands in its file: ``(k=1, j=2, i=3)`` or ``(cell=17)``."""
    names = "kji" if "k" in dataset else ("cell_id",)
    return "(" + ", ".join(f"{n.removesuffix('_id')}={dataset[n].values[cell]}"
                           for n in names) + ")"
