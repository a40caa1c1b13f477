"""The axes of a result: their order, a map a GIS places rightly, and dates that increase."""

from __future__ import annotations

from collections.abc import Hashable

import numpy as np
import xarray as xr

from subside.errors import InputError

__all__ = ["check_map", "check_times", "is_map", "ordered"]

_ORDER = ("region", "cell", "point", "y", "x")


def is_map(dims: tuple[Hashable, ...]) -> bool:
    """Whether a variable with these dimensions is a map, or a stack of them."""
    return dims[-2:] == ("y", "x")


def ordered(result: xr.Dataset) -> xr.Dataset:
    """Dimensions in the order time, others, region, cell, point, y, x; north and west first."""
    if "y" in result.coords and result.sizes["y"] > 1 and result["y"][0] < result["y"][-1]:
        result = result.isel(y=slice(None, None, -1))
    if "x" in result.coords and result.sizes["x"] > 1 and result["x"][0] > result["x"][-1]:
        result = result.isel(x=slice(None, None, -1))
    others = [dim for dim in result.dims if dim not in ("time", *_ORDER)]
    return result.transpose("time", *others, *_ORDER, missing_dims="ignore")


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


def check_times(result: xr.Dataset, where: str) -> None:
    """Raise `InputError` if the coordinate `time` holds no dates, or they do not increase."""
    if "time" not in result.coords:
        return
    times = np.asarray(result["time"].values)
    if not np.issubdtype(times.dtype, np.datetime64) or np.isnat(times).any():
        raise InputError(f"{where}: time holds something that is not a date.")
    late = np.flatnonzero(times[1:] <= times[:-1])
    if late.size:
        raise InputError(f"{where}: times do not increase: {times[late[0] + 1]} comes after "
                         f"{times[late[0]]}.")
