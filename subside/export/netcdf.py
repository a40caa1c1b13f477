"""A result as a CF-1.11 NetCDF-4 file that GIS programs place rightly, and back again.

The layout is chosen for what readers do with it: cell centres in float64 with standard names, axes
and units; a grid mapping named by every map variable; maps in float32 with one fill value and no
packing; no attribute that could contradict the coordinates.
"""

from __future__ import annotations

import datetime
from collections.abc import Hashable, Iterator
from contextlib import contextmanager
from importlib import metadata
from pathlib import Path
from typing import Any

import netCDF4
import numpy as np
import xarray as xr

from subside.errors import InputError
from subside.export.atomic import whole
from subside.export.grid_mapping import axis_unit, grid_mapping, projected_crs
from subside.names import CAUTIONS, RESULT_VARIABLES

__all__ = ["check_map", "read_result", "scenario_file_of", "write_result"]

FILL = np.float32(-9999.0)
LAYOUT = "subside result 1"
_ORDER = ("time", "region", "cell", "point", "y", "x")
_NO_CRS = ("none: the input names no coordinate reference system; x and y are as the input gave "
           "them")
_POSITIONS = {"point_x", "point_y", "max_subsidence_x", "max_subsidence_y", "max_uplift_x",
              "max_uplift_y", "well_x", "well_y"}
_CHUNK = 256
_DAY = np.timedelta64(86_400_000, "ms")
# Written anew each time, or held by the variables x, y and crs.
_NOT_CARRIED = ("Conventions", "history", "crs_wkt", "xy_unit", "file_layout", "crs_note")


# -- writing -----------------------------------------------------------------------------------


def write_result(
    result: xr.Dataset, path: str | Path, *, created: datetime.datetime | None = None
) -> None:
    """Write a result as CF-1.11 NetCDF-4, whole or not at all.

    Parameters
    ----------
    result : xarray.Dataset
        Variables as in `subside.names.RESULT_VARIABLES`; coordinates `x`, `y` (pixel centres in the
        CRS's own unit), `time` (datetime64), `point_name`, `region_name`; attributes `crs_wkt`
        (empty: no CRS), `xy_unit`, `title` and any further text. A result without map is allowed.
    path : path
        The file; a missing folder is made.
    created : datetime, optional
        Goes into `history`; now, unless given.

    Raises
    ------
    InputError
        If the map is uneven or smaller than 2 x 2 pixels, a value is infinite, times do not
        increase, or the CRS cannot be written so that a GIS would read it.
    CannotDo
        If the disk is full, the folder not writable, ...
    """
    result = _ordered(result)
    _check(result, Path(path))
    mapping, xy_unit = _crs(result)
    with whole(path) as part:
        try:
            with netCDF4.Dataset(str(part), "w", format="NETCDF4") as file:
                _write_globals(file, result, mapping is not None, created)
                for name, size in result.sizes.items():
                    # Time is the record dimension: CF wants it first then, whatever follows.
                    file.createDimension(str(name), None if name == "time" else size)
                if mapping is not None:
                    _put(file.createVariable("crs", "i4"), mapping)
                for name in result.variables:
                    _write_variable(file, name, result[name], mapping is not None, xy_unit)
        except RuntimeError as error:  # how netCDF4 reports a full disk, among others
            raise OSError(f"{error} (is the disk full?)") from error


def _crs(result: xr.Dataset) -> tuple[dict[str, Any] | None, str]:
    """The grid mapping's attributes (None: no CRS) and the unit of x and y."""
    text = str(result.attrs.get("crs_wkt", ""))
    if not text:
        return None, str(result.attrs.get("xy_unit", "m"))
    crs = projected_crs(text)
    unit = axis_unit(crs)
    said = result.attrs.get("xy_unit", unit)
    if said != unit:
        raise InputError(f"x and y are said to be in '{said}' but those of the CRS '{crs.name}' "
                         f"are in '{unit}'; give coordinates in the unit of the CRS.")
    return grid_mapping(crs), unit


def _ordered(result: xr.Dataset) -> xr.Dataset:
    """Dimensions in the order time, region, cell, point, y, x; north first, west first."""
    if "y" in result.coords and result.sizes["y"] > 1 and result["y"][0] < result["y"][-1]:
        result = result.isel(y=slice(None, None, -1))
    if "x" in result.coords and result.sizes["x"] > 1 and result["x"][0] > result["x"][-1]:
        result = result.isel(x=slice(None, None, -1))
    known = [dim for dim in _ORDER if dim in result.dims]
    others = [dim for dim in result.dims if dim not in _ORDER]
    return result.transpose(*known[:1], *others, *known[1:])


def check_map(result: xr.Dataset, where: str) -> None:
    """Raise `InputError` if the map is smaller than 2 x 2 pixels or not evenly spaced.

    A GIS reads a map as a corner and a step: it would shift an uneven one without a word.
    """
    for name in ("x", "y"):
        if name not in result.dims:
            continue
        if name not in result.coords:
            raise InputError(f"{where}: the map has no coordinate '{name}'.")
        _check_even(np.asarray(result[name].values, np.float64), name, where)


def _check(result: xr.Dataset, path: Path) -> None:
    check_map(result, f"'{path}'")
    if "time" in result.coords:
        times = np.asarray(result["time"].values)
        if not np.issubdtype(times.dtype, np.datetime64) or np.isnat(times).any():
            raise InputError(f"'{path}': time holds something that is not a date.")
        late = np.flatnonzero(times[1:] <= times[:-1])
        if late.size:
            raise InputError(f"'{path}': times do not increase: {times[late[0] + 1]} comes after "
                             f"{times[late[0]]}.")
    for name, variable in result.variables.items():
        if variable.dtype.kind == "f" and bool(np.isinf(variable).any()):
            raise InputError(f"'{path}': {name} is infinite in {int(np.isinf(variable).sum())} "
                             "places; this is not a result.")


def _check_even(values: np.ndarray, name: str, where: str) -> None:
    if values.size < 2:
        raise InputError(f"{where}: the map is one pixel wide along {name}; a GIS needs at least "
                         "2 x 2 pixels. Widen [map] bounds or lessen [map] spacing.")
    step = (values[-1] - values[0]) / (values.size - 1)
    even = values[0] + step * np.arange(values.size)
    # What float64 loses at the size of the coordinates is no unevenness.
    allowed = 1e-6 * abs(step) + 4.0 * np.finfo(np.float64).eps * float(np.abs(values).max())
    worst = int(np.argmax(np.abs(values - even)))
    if not np.isfinite(values).all() or step == 0.0 or abs(values[worst] - even[worst]) > allowed:
        raise InputError(f"{where}: {name} is not evenly spaced: {name}[{worst}] = "
                         f"{values[worst]:.10g}, an even map has {even[worst]:.10g} there; a GIS "
                         "would shift the map.")


def _write_globals(
    file: netCDF4.Dataset, result: xr.Dataset, has_crs: bool, created: datetime.datetime | None
) -> None:
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
    attributes |= {str(key): value for key, value in result.attrs.items()
                   if key not in _NOT_CARRIED and value is not None and value != ""}
    earlier = str(result.attrs.get("history", "")).strip()
    attributes["history"] = f"{earlier}\n{line}" if earlier else line
    if not has_crs:
        attributes["crs_note"] = _NO_CRS
    _put(file, attributes)


def _put(target: Any, attributes: dict[str, Any]) -> None:
    """Attributes; text as UTF-8 characters, which every reader of NetCDF takes."""
    for key, value in attributes.items():
        if isinstance(value, str):
            value = value.encode("utf-8")
        elif isinstance(value, (bool, np.bool_)):
            value = np.int8(value)
        elif isinstance(value, (int, np.integer)):
            value = np.int32(value) if abs(int(value)) < 2**31 else float(value)
        target.setncattr(key, value)


def _write_variable(
    file: netCDF4.Dataset, name: Hashable, data: xr.DataArray, has_crs: bool, xy_unit: str
) -> None:
    name = str(name)
    dims = tuple(str(dim) for dim in data.dims)
    attributes = _attributes(name, data, has_crs, xy_unit)
    if data.dtype.kind in "OUST":
        variable = file.createVariable(name, str, dims)
        _put(variable, attributes)
        variable[...] = np.asarray(data.values, dtype=object)
        return
    is_map = dims[-2:] == ("y", "x")
    options: dict[str, Any] = {}
    if is_map:
        options["chunksizes"] = (*(1 for _ in dims[:-2]),
                                 *(min(_CHUNK, size) for size in data.shape[-2:]))
    elif "time" in dims:  # the library's own choice for a record dimension is far too large
        options["chunksizes"] = tuple(min(1024, n) for n in data.shape)
    if data.size > 1024 and name not in ("x", "y", "time"):
        options |= {"zlib": True, "complevel": 1, "shuffle": True}
    if is_map:
        variable = file.createVariable(name, "f4", dims, fill_value=FILL, **options)
    elif data.dtype.kind == "f" and "time" in dims:
        variable = file.createVariable(name, "f8", dims, fill_value=np.nan, **options)
    else:
        variable = file.createVariable(name, "f8" if data.dtype.kind in "fM" else "i4", dims,
                                       **options)
    variable.set_auto_maskandscale(False)
    _put(variable, attributes)
    if is_map and len(dims) > 2:
        for step in range(data.shape[0]):  # one date at a time: maps may be large
            values = np.asarray(data[step].values, np.float32)
            variable[step] = np.where(np.isnan(values), FILL, values)
    elif is_map:
        values = np.asarray(data.values, np.float32)
        variable[...] = np.where(np.isnan(values), FILL, values)
    else:
        variable[...] = _days(data.values) if data.dtype.kind == "M" else data.values


def _days(times: np.ndarray) -> np.ndarray:
    return (times.astype("datetime64[ms]") - np.datetime64(0, "ms")) / _DAY


def _attributes(name: str, data: xr.DataArray, has_crs: bool, xy_unit: str) -> dict[str, Any]:
    given = {str(key): value for key, value in data.attrs.items() if value is not None}
    if name in ("x", "y"):
        return given | {"axis": name.upper(), "units": xy_unit,
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
        unit = xy_unit if name in _POSITIONS else known.unit
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
    if has_crs and data.dims[-2:] == ("y", "x"):
        attributes["grid_mapping"] = "crs"
    labels = [f"{dim}_name" for dim in data.dims if f"{dim}_name" in data.coords]
    if labels:
        attributes["coordinates"] = " ".join(labels)
    return attributes


# -- reading -----------------------------------------------------------------------------------


def read_result(path: str | Path) -> xr.Dataset:
    """Read a result back into the form it had in memory: float64, NaN where nothing is known.

    Raises
    ------
    InputError
        If there is no such file, it is truncated, or it is not a result.
    """
    with _opened(Path(path)) as file:
        return _read(file)


def scenario_file_of(path: Path) -> str:
    """The scenario a result was made from, as its attribute `scenario_file` tells.

    Raises
    ------
    InputError
        As `read_result`.
    """
    with _opened(path) as file:
        return str(getattr(file, "scenario_file", ""))


@contextmanager
def _opened(path: Path) -> Iterator[netCDF4.Dataset]:
    if not path.is_file():
        raise InputError(f"result file '{path}' does not exist; make it with `subside run`.")
    try:
        with netCDF4.Dataset(str(path), "r") as file:
            if getattr(file, "file_layout", "") != LAYOUT:
                raise InputError(f"'{path}' is a NetCDF file but not a result of `subside run` "
                                 f"(its attribute file_layout is not '{LAYOUT}').")
            yield file
    except (OSError, RuntimeError, ValueError) as error:
        raise InputError(f"'{path}' cannot be read as a NetCDF result: {error}. It may be "
                         "truncated or of another kind; make it again with `subside run`."
                         ) from error


def _read(file: netCDF4.Dataset) -> xr.Dataset:
    variables: dict[str, xr.Variable] = {}
    for name, variable in file.variables.items():
        if name != "crs":
            variables[name] = _read_variable(variable)
    attributes: dict[str, Any] = {
        key: file.getncattr(key) for key in file.ncattrs()
        if key not in _NOT_CARRIED or key == "history"
    }
    attributes["crs_wkt"] = file["crs"].crs_wkt if "crs" in file.variables else ""
    attributes["xy_unit"] = next((file[name].units for name in ("x", "point_x")
                                  if name in file.variables), "m")
    result = xr.Dataset(variables, attrs=attributes)
    return result.set_coords([n for n, v in variables.items() if v.dtype.kind in "OUT"])


def _read_variable(variable: netCDF4.Variable) -> xr.Variable:
    attributes = {key: variable.getncattr(key) for key in variable.ncattrs()
                  if key not in ("_FillValue", "grid_mapping", "coordinates")}
    if variable.dtype is str:
        return xr.Variable(variable.dimensions, np.asarray(variable[...], dtype=object).astype(str),
                           attributes)
    variable.set_auto_maskandscale(False)
    values = np.asarray(variable[...])
    if str(attributes.get("units", "")).startswith("days since"):
        for key in ("units", "calendar", "units_metadata"):
            attributes.pop(key, None)
        values = (np.round(values * 86_400_000.0).astype("int64").astype("datetime64[ms]")
                  .astype("datetime64[ns]"))
    elif values.dtype == np.float32:
        values = np.where(values == FILL, np.nan, values.astype(np.float64))
    return xr.Variable(variable.dimensions, values, attributes)
