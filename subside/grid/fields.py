"""Further variables of a grid: porosity, net to gross, and whatever a law may ask for."""

from __future__ import annotations

import re
from collections.abc import Iterable
from typing import TYPE_CHECKING

import numpy as np

from subside.errors import InputError, nearest
from subside.grid.layout import GEOMETRY, Layout
from subside.grid.source import Source
from subside.grid.static import Kept
from subside.grid.words import counted, place
from subside.units import same_dimension, scale_to_si

if TYPE_CHECKING:
    import xarray as xr

__all__ = ["DECLARED", "field_names", "field_scale", "read_field", "require_field", "si_unit_of"]

DECLARED = {"porosity": "1", "net_to_gross": "1", "initial_pressure": "Pa"}
"""Fields whose meaning is fixed: static, and their units are needed at once."""

_NOT_FIELDS = GEOMETRY | {"pressure", "time", "active", "region", "k", "j", "i", "cell", "cell_id"}
_SI_UNITS = ("1", "Pa", "1/Pa", "K", "m", "m2", "m3", "s", "Pa/s", "1/s", "m/s", "Pa/m", "kg m-3",
             "m2/s", "kg", "m3/s", "Pa s", "1/m", "N", "J", "W/m/K")


def field_names(source: Source, layout: Layout, wanted: Iterable[str] | None) -> list[str]:
    """Numeric variables on the cells, static or in time, that are no part of the geometry."""
    static = {layout.dims, ("j", "i")} if layout.structured else {layout.dims}
    shapes = static | {("time", *layout.dims)}
    chosen = None if wanted is None else set(wanted) | DECLARED.keys()
    return [
        name for name, variable in source.variables.items()
        if name in DECLARED or (
            name not in _NOT_FIELDS and variable.dimensions in shapes
            and isinstance(variable.dtype, np.dtype) and variable.dtype.kind in "fiu"
            and (chosen is None or name in chosen))
    ]


def si_unit_of(unit: str) -> str:
    """The SI unit that measures the same thing as `unit`.

    Raises
    ------
    InputError
        If the unit is unknown, or of a kind nothing here uses.
    """
    if re.fullmatch(r"(arc)?(deg(rees?)?|°|rad(ians?)?)(_?(north|east|true))?", unit.strip()):
        return "degree"
    scale_to_si(unit, unit)  # an unknown unit says so itself
    for candidate in _SI_UNITS:
        if same_dimension(unit, candidate):
            return candidate
    raise InputError(f"unit '{unit}' is of a kind that no law uses; known kinds are those of "
                     f"{', '.join(_SI_UNITS)}.")


def field_scale(source: Source, name: str) -> tuple[tuple[float, float], dict[str, str]]:
    """`(factor, offset)` to SI of a field, and its attributes.

    A further field without units, or with units nobody knows, keeps its numbers and has no
    ``units``; ``units_problem`` then says why, for `require_field`.
    """
    attributes = {}
    label = source.text(name, "long_name")
    if label:
        attributes["long_name"] = label
    if name in DECLARED:
        unit = DECLARED[name]
        scale = source.unit(name, unit)
    else:
        scale, unit = (1.0, 0.0), ""
        in_file = source.text(name, "units")
        if in_file is None:
            attributes["units_problem"] = "it has no units attribute"
        else:
            try:
                unit = si_unit_of(in_file)
                scale = scale_to_si(in_file, unit)
            except InputError as error:
                attributes["units_problem"] = f"it has units '{in_file}': {error}"
    if unit:
        attributes["units"] = unit
    return scale, attributes


def read_field(kept: Kept, name: str) -> tuple[tuple[str, ...], np.ndarray, dict[str, str]]:
    """`(dims, values, attrs)` of a static field on the kept cells, in SI; see `field_scale`."""
    (factor, offset), attributes = field_scale(kept.source, name)
    values = kept.values(name)
    values *= factor
    values += offset
    return ("cell",), values, attributes


def require_field(cells: xr.Dataset, name: str, si_unit: str, asked_by: str) -> xr.DataArray:
    """A field of the cell dataset that is fit to be used.

    Parameters
    ----------
    name : str
        Variable of the grid file.
    si_unit : str
        The unit it must measure, such as ``"1/Pa"``.
    asked_by : str
        The key or law that asks, for the message.

    Raises
    ------
    InputError
        If there is no such field, its unit is missing, unknown or of another kind, or it has no
        value in an active cell.
    """
    path = cells.attrs.get("source_file", "grid")
    if name not in cells.data_vars:
        names = [str(n) for n, v in cells.data_vars.items() if v.dims[-1:] == ("cell",)]
        raise InputError(f"{path}: {asked_by} asks for the field '{name}', which the grid does "
                         "not have." + nearest(name, names))
    values = cells[name]
    unit = values.attrs.get("units")
    if unit is None:
        problem = values.attrs.get("units_problem", "it has no units attribute")
        raise InputError(f"{path}: {asked_by} uses the field '{name}', but {problem}; give it "
                         f"units = \"{si_unit}\" or another unit of that kind.")
    if unit != si_unit and (not same_dimension(unit, si_unit)
                            or scale_to_si(unit, si_unit) != (1.0, 0.0)):
        raise InputError(f"{path}: {asked_by} needs the field '{name}' in a unit like "
                         f"'{si_unit}', but in the grid it is measured in '{unit}'.")
    finite = np.isfinite(values.values)
    if not finite.all():
        wrong = ~finite if finite.ndim == 1 else ~finite.all(axis=0)
        raise InputError(
            f"{path}: {asked_by} uses the field '{name}', which has no value in "
            f"{counted(int(wrong.sum()))}, first {place(cells, int(np.flatnonzero(wrong)[0]))}; "
            "fill them, or mark those cells inactive.")
    return values
