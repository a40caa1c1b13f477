"""A result as a CF-1.11 NetCDF-4 file that GIS programs place rightly, and back again."""

from __future__ import annotations

import datetime
from pathlib import Path

import numpy as np
import xarray as xr

from subside.export.axes import check_map, is_map, ordered
from subside.export.reader import open_result, read_result, scenario_file_of
from subside.export.writer import ResultWriter

__all__ = ["ResultWriter", "check_map", "open_result", "read_result", "scenario_file_of",
           "write_result"]


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
    result = ordered(result)
    maps = [str(name) for name, data in result.variables.items() if is_map(data.dims)]
    with ResultWriter(path, result, maps, created=created) as writer:
        for name in maps:
            data = result[name]
            if "time" not in data.dims:
                writer.put(name, 0, data.values[np.newaxis])
                continue
            for step in range(data.sizes["time"]):  # one date at a time: maps may be large
                writer.put(name, step, data[step:step + 1].values)
        writer.finish(result)
