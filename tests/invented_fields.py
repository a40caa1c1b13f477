"""Small grids and scenarios written to disk, so that tests go the way a user goes."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import netCDF4
import numpy as np
from pyproj import CRS

BAR = 1e5
X0, Y0 = 500_000.0, 5_900_000.0
"""Where the invented fields lie in EPSG:32631."""


def _time_and_crs(file: netCDF4.Dataset, years: list[float], epsg: int | None) -> None:
    file.createDimension("time", len(years))
    time = file.createVariable("time", "f8", ("time",))
    time.units = "days since 2000-01-01"
    time[:] = 365.25 * np.asarray(years, dtype=float)
    if epsg:
        crs = file.createVariable("crs", "i4")
        crs.setncatts({k: v for k, v in CRS.from_epsg(epsg).to_cf().items() if v is not None})


def _put(file: netCDF4.Dataset, name: str, dims: tuple[str, ...], values: Any,
         **attributes: Any) -> None:
    values = np.asarray(values)
    kind = "i4" if np.issubdtype(values.dtype, np.integer) else "f8"
    variable = file.createVariable(name, kind, dims)
    variable.setncatts(attributes)
    variable[:] = values


def _common(file: netCDF4.Dataset, dims: tuple[str, ...], pressure_bar: Any,
            region: Any, names: str, fields: dict[str, tuple[Any, str]]) -> None:
    grid_mapping = {"grid_mapping": "crs"} if "crs" in file.variables else {}
    _put(file, "pressure", ("time", *dims), pressure_bar, units="bar", comment="absolute",
         **grid_mapping)
    if region is not None:
        _put(file, "region", dims, region, flag_meanings=names,
             flag_values=np.unique(region).astype("i4"))
    for name, (values, unit) in fields.items():
        extra = ("time",) if np.ndim(values) > len(dims) else ()
        _put(file, name, (*extra, *dims), values, units=unit)


def write_boxes(
    path: Path, x: Any, y: Any, top: Any, bottom: Any, dx: Any, dy: Any, pressure_bar: Any, *,
    azimuth: Any = 0.0, years: list[float] | None = None, region: Any = None, names: str = "",
    epsg: int | None = 32631, fields: dict[str, tuple[Any, str]] | None = None,
    positive: str = "down",
) -> Path:
    """A cell table of boxes; `pressure_bar` is (time, cell)."""
    x = np.atleast_1d(np.asarray(x, dtype=float))
    with netCDF4.Dataset(path, "w") as file:
        pressure_bar = np.asarray(pressure_bar, dtype=float).reshape(-1, x.size)
        _time_and_crs(file, years or list(range(pressure_bar.shape[0])), epsg)
        file.createDimension("cell", x.size)
        sign = 1.0 if positive == "down" else -1.0
        for name, values in (("x", x), ("y", y), ("dx", dx), ("dy", dy)):
            _put(file, name, ("cell",), np.broadcast_to(np.asarray(values, float), x.shape),
                 units="m")
        for name, values in (("top", top), ("bottom", bottom)):
            _put(file, name, ("cell",),
                 sign * np.broadcast_to(np.asarray(values, float), x.shape), units="m",
                 positive=positive, vertical_datum="mean sea level")
        _put(file, "azimuth", ("cell",), np.broadcast_to(np.asarray(azimuth, float), x.shape),
             units="degree")
        _common(file, ("cell",), pressure_bar, region, names, fields or {})
    return path


def write_corners(
    path: Path, corners: np.ndarray, pressure_bar: Any, *, years: list[float] | None = None,
    region: Any = None, names: str = "", epsg: int | None = 32631,
    fields: dict[str, tuple[Any, str]] | None = None,
) -> Path:
    """A cell table of hexahedra; corners (cell, 8, 3) with depth down."""
    with netCDF4.Dataset(path, "w") as file:
        pressure_bar = np.asarray(pressure_bar, dtype=float).reshape(-1, corners.shape[0])
        _time_and_crs(file, years or list(range(pressure_bar.shape[0])), epsg)
        for name, size in (("cell", corners.shape[0]), ("corner", 8), ("xyz", 3)):
            file.createDimension(name, size)
        _put(file, "corners", ("cell", "corner", "xyz"), corners, units="m", positive="down",
             vertical_datum="mean sea level")
        _common(file, ("cell",), pressure_bar, region, names, fields or {})
    return path


def write_points(path: Path, x: Any, y: Any, depth: Any = None) -> Path:
    """A points file P0, P1, ..."""
    lines = ["name,x,y" + (",depth" if depth is not None else "")]
    for n, (px, py) in enumerate(zip(x, y, strict=True)):
        tail = f",{depth[n]!r}" if depth is not None else ""
        lines.append(f"P{n},{float(px)!r},{float(py)!r}{tail}")
    path.write_text("\n".join(lines) + "\n")
    return path


SCENARIO = """\
title = "invented"
[grid]
file = "{grid}"
[compaction]
{law}
[earth]
{earth}
{more}
"""

LINEAR = 'law = "linear"\nuniaxial_compressibility = "1e-5 1/bar"'
HALF_SPACE = 'model = "half-space"\npoisson_ratio = 0.25'


def write_scenario(folder: Path, *, grid: str = "grid.nc", law: str = LINEAR,
                   earth: str = HALF_SPACE, more: str = "", name: str = "scenario.toml") -> Path:
    """A scenario file beside its grid."""
    path = folder / name
    path.write_text(SCENARIO.format(grid=grid, law=law, earth=earth, more=more))
    return path


def disc_corners(radius: float, depth: float, thickness: float, n: int) -> np.ndarray:
    """A flat disc of n x n hexahedra, (n*n, 8, 3), round X0, Y0, centred on `depth`.

    The rim is a polygon of 4n sides with the area of the circle; between the corners it leaves the
    circle by pi^2/(32 n^2) of the radius, with alternating sign.
    """
    t = np.linspace(-1, 1, n + 1)
    u, v = np.meshgrid(t, t)
    # rings of the square become circles, evenly divided along each side
    ring = np.maximum(np.abs(u), np.abs(v))
    with np.errstate(divide="ignore", invalid="ignore"):
        along = np.where(np.abs(u) >= np.abs(v), v / np.abs(u), u / np.abs(v))
    angle = np.nan_to_num(along) * np.pi / 4
    x = np.where(np.abs(u) >= np.abs(v), np.sign(u) * np.cos(angle), np.sin(angle)) * ring
    y = np.where(np.abs(u) >= np.abs(v), np.sin(angle), np.sign(v) * np.cos(angle)) * ring
    sides = 4 * n
    x, y = (a * radius * np.sqrt(2 * np.pi / (sides * np.sin(2 * np.pi / sides))) for a in (x, y))
    plan = np.stack([x, y], axis=-1)
    quads = np.stack([plan[:-1, :-1], plan[:-1, 1:], plan[1:, 1:], plan[1:, :-1]], axis=2)
    quads = quads.reshape(-1, 4, 2) + [X0, Y0]
    corners = np.empty((quads.shape[0], 8, 3))
    corners[:, :4, :2] = corners[:, 4:, :2] = quads
    corners[:, :4, 2] = depth - thickness / 2
    corners[:, 4:, 2] = depth + thickness / 2
    return corners
