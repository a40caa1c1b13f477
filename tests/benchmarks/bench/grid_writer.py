"""Writes an invented field as a pressure grid (NetCDF, zlib 1 + shuffle), in pieces.

A piece holds whole storage chunks, so that each is deflated once and memory stays small.
"""

from __future__ import annotations

import itertools
from collections.abc import Callable, Iterator
from pathlib import Path

import netCDF4
import numpy as np
from pyproj import CRS

from bench.field import Field

__all__ = ["ZLIB", "pieces", "write_grid"]

ZLIB = {"zlib": True, "complevel": 1, "shuffle": True}
_FILL = np.float32(-9999.0)
_EPSG = 32631
_PIECE = 48 << 20  # values; a piece of float64 takes 8 bytes each
_CELL = ("k", "j", "i")


def write_grid(path: Path, field: Field, geometry: str, date_chunks: bool,
               tell: Callable[[float], None] = lambda share: None) -> None:
    """Write a field, whole or not at all.

    Parameters
    ----------
    geometry : str
        ``"boxes"`` (upright, each at the depth of its middle) or ``"corners"``.
    date_chunks : bool
        One date in a chunk of pressure; else the chunks that netCDF4 chooses.
    tell : callable
        Told the share of the pressure that is written, from 0 to 1.
    """
    path.parent.mkdir(parents=True, exist_ok=True)
    part = path.with_suffix(".part")
    with netCDF4.Dataset(part, "w", format="NETCDF4") as file:
        _head(file, field)
        if geometry == "boxes":
            _write_boxes(file, field)
        else:
            _write_corners(file, field)
        _write_regions(file, field)
        chunks = (1, *field.shape) if date_chunks else None
        if date_chunks and field.count * 4 > 64 << 20:  # a chunk has to fit into a cache
            chunks = (1, max(1, (16 << 20) // (field.rows * field.columns)), *field.shape[1:])
        pressure = file.createVariable("pressure", "f4", ("time", *_CELL), fill_value=_FILL,
                                       chunksizes=chunks, **ZLIB)
        pressure.setncatts({"units": "bar", "grid_mapping": "crs",
                            "pressure_reference": "absolute",
                            "long_name": "pore pressure, absolute"})
        pressure.set_auto_maskandscale(False)
        for share, (time, k, j) in pieces(pressure, 3):
            pressure[time, k, j] = field.pressure(time, k, j, float(_FILL))
            tell(share)
    part.replace(path)


def _head(file: netCDF4.Dataset, field: Field) -> None:
    file.setncatts({"Conventions": "CF-1.11", "title": "invented field of the benchmarks",
                    "comment": "Invented; no real place.", "source": f"{field}"})
    for name, size in (("time", field.steps), *zip(_CELL, field.shape, strict=True)):
        file.createDimension(name, size)
    crs = file.createVariable("crs", "i4")
    plain = CRS.from_epsg(_EPSG).to_json_dict()
    for key in ("scope", "area", "bbox", "usages"):  # letters outside ASCII; they change nothing
        plain.pop(key, None)
    crs.setncatts(CRS.from_json_dict(plain).to_cf())
    time = file.createVariable("time", "f8", ("time",))
    time.setncatts({"units": "days since 2000-01-01", "calendar": "proleptic_gregorian",
                    "standard_name": "time"})
    time[:] = np.round(30.4375 * np.arange(field.steps))
    active = file.createVariable("active", "i1", _CELL, **ZLIB)
    active.long_name = "1 in cells that count"
    for k in range(field.layers):
        active[k] = field.is_active


def _write_boxes(file: netCDF4.Dataset, field: Field) -> None:
    east, north, top = field.centres()
    flat = np.ones(east.shape)
    for name, unit, values in (("x", "m", east), ("y", "m", north), ("dx", "m", field.size * flat),
                               ("dy", "m", field.size * flat),
                               ("azimuth", "degree", field.azimuth * flat)):
        variable = file.createVariable(name, "f8", _CELL[1:], **ZLIB)
        variable.units = unit
        variable[:] = values
    for name, below in (("top", 0), ("bottom", 1)):
        variable = file.createVariable(name, "f8", _CELL, **ZLIB)
        variable.setncatts({"units": "m", "positive": "down", "vertical_datum": "mean sea level"})
        for _, (k, j) in pieces(variable, 2):
            layer = np.arange(field.layers)[k] + below
            variable[k, j] = top[j][None] + layer[:, None, None] * field.thickness


def _write_corners(file: netCDF4.Dataset, field: Field) -> None:
    file.createDimension("corner", 8)
    file.createDimension("xyz", 3)
    variable = file.createVariable("corners", "f8", (*_CELL, "corner", "xyz"), **ZLIB)
    variable.setncatts({"units": "m", "positive": "down", "vertical_datum": "mean sea level"})
    number = [np.arange(n) for n in field.shape]
    for _, (k, j) in pieces(variable, 2):
        variable[k, j] = field.corners(number[0][k][:, None, None], number[1][j][None, :, None],
                                       number[2][None, None, :])


def _write_regions(file: netCDF4.Dataset, field: Field) -> None:
    if field.regions == 1:
        return
    variable = file.createVariable("region", "i1", _CELL, **ZLIB)
    variable.setncatts({"long_name": "side of the fault and packet of layers",
                        "flag_values": np.arange(1, field.regions + 1, dtype="i1"),
                        "flag_meanings": " ".join(f"part_{n + 1}" for n in range(field.regions))})
    region = field.region(np.arange(field.layers)) + 1
    for k in range(field.layers):
        variable[k] = np.broadcast_to(region[k], field.shape[1:]).astype("i1")


def pieces(variable: netCDF4.Variable, leading: int
            ) -> Iterator[tuple[float, tuple[slice, ...]]]:
    """Slices over the leading dimensions that cut no chunk, and the share done after each."""
    shape, chunks = variable.shape, variable.chunking()
    if isinstance(chunks, str):
        chunks = [1] * len(shape)
    length = list(chunks[:leading])
    for axis in reversed(range(leading)):  # the last dimensions first: they lie together
        rest = int(np.prod(shape[leading:])) * int(np.prod(length)) // length[axis]
        length[axis] = min(shape[axis], length[axis] * max(1, _PIECE // (rest * length[axis])))
    starts = [range(0, shape[a], length[a]) for a in range(leading)]
    total = int(np.prod([len(s) for s in starts]))
    for done, start in enumerate(itertools.product(*starts), 1):
        yield done / total, tuple(slice(s, min(s + n, shape[a]))
                                  for a, (s, n) in enumerate(zip(start, length, strict=True)))
