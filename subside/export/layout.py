"""How variables and attributes of a result lie in its file.

The layout is chosen for what readers do with it: cell centres in float64 with standard names, axes
and units; a grid mapping named by every map variable; maps in float32 with one fill value and no
packing; no attribute that could contradict the coordinates.
"""

from __future__ import annotations

import datetime
from collections.abc import Hashable, Mapping
from importlib import metadata
from typing import Any, NamedTuple

import netCDF4
import numpy as np
import xarray as xr

from subside.errors import InputError
from subside.export.axes import is_map
from subside.export.grid_mapping import axis_unit, grid_mapping, projected_crs
from subside.names import CAUTIONS, RESULT_VARIABLES

__all__ = ["FILL", "LAYOUT", "NOT_CARRIED", "Placing", "create_map", "placing_of",
           "put_attributes", "write_dimensions", "write_globals", "write_variable"]

FILL = np.float32(-9999.0)
LAYOUT = "subside result 1"
# Written anew each time, or held by the variables x, y and crs.
NOT_CARRIED = ("Conventions", "history", "crs_wkt", "xy_unit", "file_layout", "crs_note")
_NO_CRS = ("none: the input names no coordinate reference system; x and y are as the input gave "
           "them")
_POSITIONS = {"point_x", "point_y", "max_subsidence_x", "max_subsidence_y", "max_uplift_x",
              "max_uplift_y", "well_x", "well_y"}
_CHUNK = 256
_DAY = np.timedelta64(86_400_000, "ms")
_SMALLER: dict[str, Any] = {"zlib": True, "complevel": 1, "shuffle": True}


class Placing(NamedTuple):
    """Where x and y lie: the attributes of the grid mapping (None: no CRS) and their unit."""

    mapping: dict[str, Any] | None
    xy_unit: str


def placing_of(attributes: Mapping[str, Any]) -> Placing:
    """The placing that a result's attributes `crs_wkt` and `xy_unit` tell.

    Raises
    ------
    InputError
        If the CRS cannot be written so that a GIS would read it, or the unit is not its own.
    """
    text = str(attributes.get("crs_wkt", ""))
    if not text:
        return Placing(None, str(attributes.get("xy_unit", "m")))
    crs = projected_crs(text)
    unit = axis_unit(crs)
    said = attributes.get("xy_unit", unit)
    if said != unit:
        raise InputError(f"x and y are said to be in '{said}' but those of the CRS '{crs.name}' "
                         f"are in '{unit}'; give coordinates in the unit of the CRS.")
    return Placing(grid_mapping(crs), unit)


def write_globals(
    file: netCDF4.Dataset, given: Mapping[Any, Any], has_crs: bool,
    created: datetime.datetime | None,
) -> None:
    """The file's own attributes: what every result says, what this one says, one line of history.

    Parameters
    ----------
    given : mapping
        The attributes of the result.
    created : datetime or None
        The moment that `history` tells; None: now.
    """
    try:
        version = metadata.version("subside")
    except metadata.PackageNotFoundError:
        version = "(not installed)"
    moment = created or datetime.datetime.now(datetime.UTC)
    line = f"{moment.strftime('%Y-%m-%dT%H:%M:%SZ')} written by subside {version}"
    attributes: dict[str, Any] = {
        # The file keeps to both; some checkers look for one of them only.
        "Conventions": "CF-1.11 CF-1.8",
        "title": "land subsidence",
        "institution": "not stated",
        "source": f"subside {version}",
        "references": "none given",
        "comment": " ".join(CAUTIONS),
        "file_layout": LAYOUT,
    }
    attributes |= {str(key): value for key, value in given.items()
                   if key not in NOT_CARRIED and value is not None and value != ""}
    earlier = str(given.get("history", "")).strip()
    attributes["history"] = f"{earlier}\n{line}" if earlier else line
    if not has_crs:
        attributes["crs_note"] = _NO_CRS
    put_attributes(file, attributes)


def put_attributes(target: Any, attributes: Mapping[str, Any]) -> None:
    """Attributes; text as UTF-8 characters, which every reader of NetCDF takes."""
    for key, value in attributes.items():
        if isinstance(value, str):
            value = value.encode("utf-8")
        elif isinstance(value, (bool, np.bool_)):
            value = np.int8(value)
        elif isinstance(value, (int, np.integer)):
            value = np.int32(value) if abs(int(value)) < 2**31 else float(value)
        target.setncattr(key, value)


def write_dimensions(file: netCDF4.Dataset, sizes: Mapping[Hashable, int]) -> None:
    """The dimensions that the file does not have yet."""
    for name, size in sizes.items():
        if name not in file.dimensions:
            # Time is the record dimension: CF wants it first then, whatever follows.
            file.createDimension(str(name), None if name == "time" else size)


def create_map(
    file: netCDF4.Dataset, name: str, data: xr.DataArray, placing: Placing
) -> netCDF4.Variable:
    """A map variable without values yet; of `data` only dimensions, sizes and attributes count."""
    dims = tuple(str(dim) for dim in data.dims)
    chunks = (*(1 for _ in dims[:-2]), *(min(_CHUNK, size) for size in data.shape[-2:]))
    variable = file.createVariable(name, "f4", dims, fill_value=FILL, chunksizes=chunks, **_SMALLER)
    variable.set_auto_maskandscale(False)
    put_attributes(variable, _attributes(name, data, placing))
    return variable


def write_variable(file: netCDF4.Dataset, name: str, data: xr.DataArray, placing: Placing) -> None:
    """A variable that is not a map, with its values."""
    dims = tuple(str(dim) for dim in data.dims)
    attributes = _attributes(name, data, placing)
    if data.dtype.kind in "OUST":
        variable = file.createVariable(name, str, dims)
        put_attributes(variable, attributes)
        variable[...] = np.asarray(data.values, dtype=object)
        return
    options: dict[str, Any] = {}
    if "time" in dims:  # the library's own choice for a record dimension is far too large
        options["chunksizes"] = tuple(min(1024, n) for n in data.shape)
    if data.size > 1024 and name not in ("x", "y", "time"):
        options |= _SMALLER
    if data.dtype.kind == "f" and "time" in dims:
        variable = file.createVariable(name, "f8", dims, fill_value=np.nan, **options)
    else:
        variable = file.createVariable(name, "f8" if data.dtype.kind in "fM" else "i4", dims,
                                       **options)
    variable.set_auto_maskandscale(False)
    put_attributes(variable, attributes)
    variable[...] = _days(data.values) if data.dtype.kind == "M" else data.values


def _days(times: np.ndarray) -> np.ndarray:
    return (times.astype("datetime64[ms]") - np.datetime64(0, "ms")) / _DAY


def _attributes(name: str, data: xr.DataArray, placing: Placing) -> dict[str, Any]:
    given = {str(key): value for key, value in data.attrs.items() if value is not None}
    if name in ("x", "y"):
        return given | {"axis": name.upper(), "units": placing.xy_unit,
                        "standard_name": f"projection_{name}_coordinate",
                        "long_name": f"{name} of the pixel centre"}
    if data.dtype.kind == "M":
        fixed = {"units": "days since 1970-01-01", "calendar": "proleptic_gregorian",
                 "units_metadata": "leap_seconds: none"}
        if name == "time":
            fixed |= {"standard_name": "time", "axis": "T", "long_name": "date"}
        return given | fixed
    known = RESULT_VARIABLES.get(name)
    default: dict[str, Any] = {}
    if known is not None:
        unit = placing.xy_unit if name in _POSITIONS else known.unit
        default = {"units": unit, "long_name": known.long_name}
        if known.comment:
            default["comment"] = known.comment
    elif "long_name" not in given:
        default["long_name"] = name.replace("_", " ")
    attributes = default | given
    if data.dtype.kind in "OUST":
        attributes.pop("units", None)
        return attributes
    attributes.setdefault("units", "1")
    dims = tuple(str(dim) for dim in data.dims)
    if placing.mapping is not None and is_map(dims):
        attributes["grid_mapping"] = "crs"
    labels = [f"{dim}_name" for dim in dims if f"{dim}_name" in data.coords]
    if labels:
        attributes["coordinates"] = " ".join(labels)
    return attributes
