"""Writes the pressure grids of the invented fields as CF NetCDF."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import netCDF4
import numpy as np
from pyproj import CRS


def crs_attributes(epsg: int) -> dict[str, object]:
    """Attributes of a CF grid-mapping variable for an EPSG code.

    Scope and area are left out of the WKT: they hold letters outside ASCII and change nothing.
    """
    plain = CRS.from_epsg(epsg).to_json_dict()
    for key in ("scope", "area", "bbox", "usages"):
        plain.pop(key, None)
    return CRS.from_json_dict(plain).to_cf()


class GridFile:
    """An open pressure grid with dims (time, k, j, i) that takes one variable after another."""

    def __init__(self, nc: netCDF4.Dataset, active: np.ndarray) -> None:
        self.nc, self.active = nc, active

    def add(
        self, name: str, kind: str, dims: str, values: np.ndarray, **attributes: object
    ) -> None:
        """Add a variable; `dims` is blank-separated, attributes are written as they come."""
        names = tuple(dims.split())
        for dim, size in zip(names, values.shape, strict=True):
            if dim not in self.nc.dimensions:
                self.nc.createDimension(dim, size)
        compress = {"zlib": True, "complevel": 5, "shuffle": True} if len(names) > 1 else {}
        fill = np.float32(-9999.0) if name == "pressure" else None
        var = self.nc.createVariable(name, kind, names, fill_value=fill, **compress)
        var.setncatts(attributes)
        var[:] = values

    def add_pressure(self, values: np.ndarray, unit: str, parts: int) -> None:
        """Absolute pore pressure (time, k, j, i), rounded to 1/`parts` so that it packs well."""
        rounded = np.where(self.active, np.round(values * parts) / parts, -9999.0)
        self.add(
            "pressure",
            "f4",
            "time k j i",
            rounded,
            units=unit,
            grid_mapping="crs",
            pressure_reference="absolute",
            long_name="pore pressure, absolute",
        )

    def add_flags(
        self, name: str, values: np.ndarray, meanings: list[str], first: int, text: str
    ) -> None:
        """An integer field (k, j, i) whose values, counted from `first`, have names."""
        flags = np.arange(first, first + len(meanings), dtype="i1")
        self.add(
            name,
            "i1",
            "k j i",
            values.astype("i1"),
            long_name=text,
            flag_values=flags,
            flag_meanings=" ".join(meanings),
        )


@contextmanager
def grid_file(
    path: Path, title: str, epsg: int, start: str, days: np.ndarray, active: np.ndarray
) -> Iterator[GridFile]:
    """Open a new pressure grid with its map projection, dates and `active` mask.

    It is written beside `path` and moved there whole when it is complete.
    """
    part = path.with_suffix(".part")
    with netCDF4.Dataset(part, "w", format="NETCDF4") as nc:
        nc.setncatts(
            {
                "Conventions": "CF-1.11",
                "title": title,
                "institution": "none: an invented field",
                "source": "finite-volume flow computation",
                "history": "written by make_pressure.py",
                "references": "README.md beside this file",
                "comment": "Invented demonstration data.",
            }
        )
        nc.createVariable("crs", "i4").setncatts(crs_attributes(epsg))
        grid = GridFile(nc, active)
        grid.add(
            "time",
            "f8",
            "time",
            days,
            units=f"days since {start}",
            standard_name="time",
            calendar="proleptic_gregorian",
            axis="T",
            long_name="time",
        )
        grid.add_flags("active", active, ["inactive", "active"], 0, "1 in cells that count")
        yield grid
    part.replace(path)
