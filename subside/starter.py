"""A small working scenario of its own to start from: an invented two-part gas field.

Pressure here is a plain decline formula, there to be replaced by a flow simulation.
"""

from __future__ import annotations

from pathlib import Path

import netCDF4
import numpy as np
from pyproj import CRS

from subside.errors import CannotDo, InputError

__all__ = ["write_starter"]

_SCENARIO = """\
title = "Starter field"

[grid]
file = "pressure.nc"

[compaction]
law = "linear"
uniaxial_compressibility = { by_region = { north = "1.2e-5 1/bar", south = "0.9e-5 1/bar" } }

[earth]
model = "half-space"
poisson_ratio = 0.25

[map]
spacing = "250 m"

[points]
file = "benchmarks.csv"

[survey]
file = "levelling.csv"

[output]
file = "results/bowl.nc"
quantities = ["tilt", "horizontal_strain_major"]
"""

_BENCHMARKS = """\
name,x [m],y [m]
B1,500500,5900500
B2,501500,5901000
B3,503000,5902500
B4,498000,5899000
"""

_LEVELLING = """\
point,x [m],y [m],date,kind,value [mm],sigma [mm]
B1,500500,5900500,2000-06-01,height,1520.0,2.0
B2,501500,5901000,2000-06-01,height,1834.0,2.0
B3,503000,5902500,2000-06-01,height,2011.0,2.0
B1,500500,5900500,2006-06-01,height,1508.6,2.0
B2,501500,5901000,2006-06-01,height,1825.5,2.0
B3,503000,5902500,2006-06-01,height,2004.1,2.0
B1,500500,5900500,2012-06-01,height,1503.9,2.0
B2,501500,5901000,2012-06-01,height,1819.0,2.0
B3,503000,5902500,2012-06-01,height,2003.8,2.0
"""


def write_starter(folder: Path) -> list[Path]:
    """Write grid, scenario, benchmarks and survey into a folder, which is made.

    Raises
    ------
    InputError
        If one of the files is there already; nothing is written then.
    CannotDo
        If the folder cannot be written.
    """
    texts = {"scenario.toml": _SCENARIO, "benchmarks.csv": _BENCHMARKS,
             "levelling.csv": _LEVELLING}
    files = [folder / name for name in ("pressure.nc", *texts)]
    there = [f for f in files if f.exists()]
    if there:
        raise InputError(f"'{there[0]}' exists; nothing was written. Choose an empty folder.")
    if folder.exists() and not folder.is_dir():
        raise InputError(f"'{folder}' is a file, a folder is needed.")
    try:
        folder.mkdir(parents=True, exist_ok=True)
        _write_grid(files[0])
        for name, text in texts.items():
            (folder / name).write_text(text, encoding="utf-8")
    except OSError as error:
        raise CannotDo(f"folder '{folder}' cannot be written: {error.strerror or error}.") from None
    return files


def _write_grid(path: Path) -> None:
    layers, rows, columns = 3, 16, 20
    size, thickness = 400.0, 30.0
    x = 496_200.0 + size * np.arange(columns)
    y = 5_898_000.0 + size * np.arange(rows)
    grid_x, grid_y = np.meshgrid(x, y)
    dome = 2800.0 + ((grid_x - x.mean()) ** 2 + (grid_y - y.mean()) ** 2) / 2e5
    top = dome[None] + thickness * np.arange(layers)[:, None, None]
    years = np.arange(0, 21)
    region = np.where(grid_y > y.mean(), 1, 2)
    final = np.where(region == 1, 180.0, 120.0)
    inside = np.exp(-(((grid_x - x.mean()) / 2400.0) ** 4 + ((grid_y - y.mean()) / 1900.0) ** 4))
    initial = 0.1 * (top + 0.5 * thickness) + 30.0
    decline = 1.0 - np.exp(-years / 7.0)
    pressure = initial[None] - decline[:, None, None, None] * (final * inside)[None, None]
    with netCDF4.Dataset(path, "w") as file:
        for name, count in (("time", years.size), ("k", layers), ("j", rows), ("i", columns)):
            file.createDimension(name, count)
        crs = file.createVariable("crs", "i4")
        crs.setncatts({k: v for k, v in CRS.from_epsg(32631).to_cf().items() if v is not None})

        def put(name: str, dims: tuple[str, ...], values: np.ndarray, **attributes: object) -> None:
            kind = "i4" if np.issubdtype(values.dtype, np.integer) else "f8"
            variable = file.createVariable(name, kind, dims, zlib=True)
            variable.setncatts(attributes)
            variable[:] = values

        put("time", ("time",), 365.25 * years, units="days since 1995-01-01",
            calendar="proleptic_gregorian", standard_name="time")
        put("x", ("j", "i"), grid_x, units="m")
        put("y", ("j", "i"), grid_y, units="m")
        put("dx", ("j", "i"), np.full_like(grid_x, size), units="m")
        put("dy", ("j", "i"), np.full_like(grid_x, size), units="m")
        put("top", ("k", "j", "i"), top, units="m", positive="down",
            vertical_datum="mean sea level")
        put("bottom", ("k", "j", "i"), top + thickness, units="m", positive="down",
            vertical_datum="mean sea level")
        put("region", ("j", "i"), region, flag_values=np.array([1, 2], dtype="i4"),
            flag_meanings="north south")
        put("porosity", ("k", "j", "i"), np.full(top.shape, 0.2), units="1")
        put("pressure", ("time", "k", "j", "i"), pressure, units="bar",
            comment="absolute", grid_mapping="crs")
