"""Pressure grids to break: small, sound, and written with netCDF4."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import netCDF4
import numpy as np

# a block of 3 x 4 x 5 cells of 100 m x 150 m x 20 m, tops at 2000 m, in the middle of UTM zone 31
NK, NJ, NI = 3, 4, 5
DX, DY, DZ, TOP = 100.0, 150.0, 20.0, 2000.0
X0, Y0 = 500_000.0, 5_800_000.0
CELLS = ("k", "j", "i")


def box_values() -> dict[str, np.ndarray]:
    """x, y, top, bottom (k, j, i) in m, depth down."""
    k, j, i = np.meshgrid(np.arange(NK), np.arange(NJ), np.arange(NI), indexing="ij")
    top = TOP + DZ * k
    return {"x": X0 + DX * (i + 0.5), "y": Y0 + DY * (j + 0.5), "top": top, "bottom": top + DZ}


def corner_values() -> np.ndarray:
    """The same cells as corners (k, j, i, 8, 3), top face first, counter-clockwise from above."""
    box = box_values()
    corners = np.empty((NK, NJ, NI, 8, 3))
    for n, (s, t) in enumerate([(-0.5, -0.5), (0.5, -0.5), (0.5, 0.5), (-0.5, 0.5)] * 2):
        corners[..., n, 0] = box["x"] + s * DX
        corners[..., n, 1] = box["y"] + t * DY
        corners[..., n, 2] = box["top"] if n < 4 else box["bottom"]
    return corners


def pressure_values() -> np.ndarray:
    """(3, k, j, i) in bar: near hydrostatic, falling by 20 bar in the middle column."""
    pressure = np.full((3, NK, NJ, NI), 210.0)
    pressure[1, :, 2, 2] -= 10.0
    pressure[2, :, 2, 2] -= 20.0
    pressure[1:] -= 0.1 * np.arange(1, 3)[:, None, None, None]
    return pressure


class Draft:
    """Variables of a file to be: name to [dims, values, attributes]."""

    def __init__(self) -> None:
        self.variables: dict[str, list[Any]] = {
            "time": [("time",), np.array([0.0, 365.0, 730.0]),
                     {"units": "days since 2000-01-01", "calendar": "proleptic_gregorian"}],
            "pressure": [("time", *CELLS), pressure_values(),
                         {"units": "bar", "long_name": "absolute pore pressure"}],
        }

    def add(self, name: str, dims: tuple[str, ...], values: Any, **attributes: Any) -> None:
        self.variables[name] = [dims, np.asarray(values), attributes]

    def drop(self, name: str, attribute: str | None = None) -> None:
        if attribute is None:
            del self.variables[name]
        else:
            del self.variables[name][2][attribute]

    def values(self, name: str) -> np.ndarray:
        return self.variables[name][1]

    def attrs(self, name: str) -> dict[str, Any]:
        return self.variables[name][2]

    def write(self, path: Path, kind: str = "NETCDF4", unlimited: str = "") -> Path:
        with netCDF4.Dataset(path, "w", format=kind) as file:
            for dims, values, _ in self.variables.values():
                for dim, size in zip(dims, np.shape(values), strict=True):
                    if dim not in file.dimensions:
                        file.createDimension(dim, None if dim == unlimited else size)
            for name, (dims, values, attributes) in self.variables.items():
                text = values.dtype.kind in "OU"
                fill = attributes.get("_FillValue")
                variable = file.createVariable(name, str if text else values.dtype, dims,
                                               fill_value=fill)
                variable.setncatts({a: v for a, v in attributes.items() if a != "_FillValue"})
                variable[...] = values.astype(object) if text else values
        return path


def corner_draft() -> Draft:
    """A sound structured grid with corners."""
    draft = Draft()
    draft.add("corners", (*CELLS, "corner", "xyz"), corner_values(), units="m", positive="down",
              vertical_datum="mean sea level")
    return draft


def box_draft() -> Draft:
    """A sound structured grid with boxes, x, y, dx, dy on (j, i)."""
    draft = Draft()
    box = box_values()
    for name in ("x", "y"):
        draft.add(name, ("j", "i"), box[name][0], units="m")
    for name in ("top", "bottom"):
        draft.add(name, CELLS, box[name], units="m", positive="down",
                  vertical_datum="mean sea level")
    draft.add("dx", ("j", "i"), np.full((NJ, NI), DX), units="m")
    draft.add("dy", ("j", "i"), np.full((NJ, NI), DY), units="m")
    return draft


def as_table(draft: Draft) -> Draft:
    """The same cells as a cell table: (k, j, i) becomes cell."""
    table = Draft()
    for name, (dims, values, attributes) in draft.variables.items():
        if dims == ("j", "i"):
            dims, values = CELLS, np.broadcast_to(values, (NK, NJ, NI))
        if "k" in dims:
            at = dims.index("k")
            values = values.reshape(*values.shape[:at], -1, *values.shape[at + 3:])
            dims = (*dims[:at], "cell", *dims[at + 3:])
        table.variables[name] = [dims, values.copy(), dict(attributes)]
    return table


def with_crs(draft: Draft, code: str) -> Draft:
    """Add a grid mapping variable."""
    from pyproj import CRS

    draft.add("crs", (), np.int32(0), crs_wkt=CRS.from_user_input(code).to_wkt("WKT2_2019"))
    draft.attrs("pressure")["grid_mapping"] = "crs"
    return draft

