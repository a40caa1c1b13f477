"""A result file read back into the form the result had in memory."""

from __future__ import annotations

import os
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import netCDF4
import numpy as np
import xarray as xr
from xarray.backends import BackendArray
from xarray.core import indexing

from subside.errors import InputError
from subside.export.axes import is_map
from subside.export.layout import FILL, LAYOUT, NOT_CARRIED
from subside.export.library import LIBRARY

__all__ = ["open_result", "read_result", "scenario_file_of"]


def read_result(path: str | Path) -> xr.Dataset:
    """Read a result back into the form it had in memory: float64, NaN where nothing is known.

    Raises
    ------
    InputError
        If there is no such file, it is truncated, or it is not a result.
    """
    return open_result(path).load()


def open_result(path: str | Path) -> xr.Dataset:
    """A result as `read_result` gives it, but each map is read when its values are asked for.

    So a result larger than the memory can be walked through date by date,
    ``result["subsidence"][step].values``; what was read is not kept. Any thread may ask. The file
    is open only while values are read, so it may be moved or replaced meanwhile.

    Raises
    ------
    InputError
        As `read_result`; and, where values are asked for, if the file is no longer the one that
        was opened.
    """
    path = Path(path)
    with _opened(path) as file:
        return _read(file, path)


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
        with LIBRARY, netCDF4.Dataset(str(path), "r") as file:
            if getattr(file, "file_layout", "") != LAYOUT:
                raise InputError(f"'{path}' is a NetCDF file but not a result of `subside run` "
                                 f"(its attribute file_layout is not '{LAYOUT}').")
            yield file
    except (OSError, RuntimeError, ValueError) as error:
        raise InputError(f"'{path}' cannot be read as a NetCDF result: {error}. It may be "
                         "truncated or of another kind; make it again with `subside run`."
                         ) from error


def _read(file: netCDF4.Dataset, path: Path) -> xr.Dataset:
    variables: dict[str, xr.Variable] = {}
    for name, variable in file.variables.items():
        if name == "crs":
            continue
        if is_map(variable.dimensions):
            data = indexing.LazilyIndexedArray(_Map(path, name, variable.shape))
            variables[name] = xr.Variable(variable.dimensions, data, _attributes(variable))
        else:
            variables[name] = _read_variable(variable)
    attributes: dict[str, Any] = {
        key: file.getncattr(key) for key in file.ncattrs()
        if key not in NOT_CARRIED or key == "history"
    }
    attributes["crs_wkt"] = file["crs"].crs_wkt if "crs" in file.variables else ""
    attributes["xy_unit"] = next((file[name].units for name in ("x", "point_x")
                                  if name in file.variables), "m")
    result = xr.Dataset(variables, attrs=attributes)
    return result.set_coords([n for n, v in variables.items() if v.dtype.kind in "OUT"])


def _attributes(variable: netCDF4.Variable) -> dict[str, Any]:
    return {key: variable.getncattr(key) for key in variable.ncattrs()
            if key not in ("_FillValue", "grid_mapping", "coordinates")}


def _read_variable(variable: netCDF4.Variable) -> xr.Variable:
    """A variable that is not a map, with its values."""
    attributes = _attributes(variable)
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
    return xr.Variable(variable.dimensions, values, attributes)


class _Map(BackendArray):
    """A map variable of a result file that is not open."""

    dtype = np.dtype(np.float64)

    def __init__(self, path: Path, name: str, shape: tuple[int, ...]) -> None:
        self._path = path.absolute()
        self._name = name
        self.shape = shape
        self._file = _identity(path)

    def __getitem__(self, key: indexing.ExplicitIndexer) -> np.ndarray:
        return indexing.explicit_indexing_adapter(key, self.shape, indexing.IndexingSupport.OUTER,
                                                  self._values)

    def _values(self, key: tuple[Any, ...]) -> np.ndarray:
        with _opened(self._path) as file:
            if _identity(self._path) != self._file:
                raise InputError(f"'{self._path}' has changed since it was opened; open it again.")
            variable = file[self._name]
            variable.set_auto_maskandscale(False)
            values = np.asarray(variable[key]).astype(np.float64)
        values[values == FILL] = np.nan
        return values


def _identity(path: Path) -> tuple[int, int, int]:
    state = os.stat(path)
    return state.st_ino, state.st_size, state.st_mtime_ns
