"""Checks of where the cells lie."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from subside.grid.body_pass import depth_extremes, overlaps
from subside.grid.findings import check
from subside.grid.threads import spread
from subside.grid.words import counted, place

if TYPE_CHECKING:
    import xarray as xr

_TOUCHING = 0.01  # m: beds that overlap by less do so by rounding
_LOCAL = 10_000.0  # m


def depth_range(cells: xr.Dataset) -> tuple[np.ndarray, np.ndarray]:
    """Shallowest and deepest depth (cell,) of each cell, m."""
    if "corners" in cells:
        corners = cells["corners"].values
        low, high = np.empty(len(corners)), np.empty(len(corners))
        spread(lambda a, b: depth_extremes(corners, a, b, low, high), len(corners))
        return low, high
    return cells["top"].values, cells["bottom"].values


@check("elevation-as-depth", "error")
def elevation_as_depth(cells: xr.Dataset, surface: float) -> str | None:
    """Most of the grid above the ground: elevations were declared as depths."""
    median = float(np.median(cells["centroid"].values[:, 2].copy(), overwrite_input=True))
    if median >= min(surface, 0.0):
        return None
    return (f"depths come out negative (median {median:.6g} m, the surface at {surface:g} m); "
            "probably the 'positive' attribute is the wrong one of \"down\" (depth) and \"up\" "
            "(elevation).")


@check("above-surface", "error")
def above_surface(cells: xr.Dataset, surface: float) -> str | None:
    """No cell may reach above the ground or seabed."""
    shallowest, _ = depth_range(cells)
    wrong = shallowest < surface - 1e-6
    if not wrong.any():
        return None
    first = int(np.flatnonzero(wrong)[0])
    return (f"{counted(int(wrong.sum()))} {'reaches' if wrong.sum() == 1 else 'reach'} above the "
            f"surface, first {place(cells, first)}: its top lies at a depth of "
            f"{shallowest[first]:.6g} m, the surface at {surface:g} m; check the depths, the "
            "vertical datum and [earth] surface.")


@check("overlap", "error", acceptable=True)
def overlap(cells: xr.Dataset, surface: float) -> str | None:
    """The bottom of a cell must not lie below the top of the active cell under it."""
    shape = tuple(cells.attrs.get("shape", ()))
    if len(shape) != 3 or shape[0] < 2 or not all(n in cells for n in "kji"):
        return None
    names = [*"kji", *(["corners"] if "corners" in cells else ["top", "bottom"])]
    held = {n: cells[n].values for n in names}
    order = None
    if (held["k"][1:] < held["k"][:-1]).any():  # a reader of another kind
        order = np.argsort(held["k"], kind="stable")
        held = {n: v[order] for n, v in held.items()}
    none = np.empty(0)
    # float32 depths differ by rounding from one face to the next
    count, upper, lower, amount = overlaps(
        held["k"], held["j"], held["i"], *shape[1:], held.get("top", none),
        held.get("bottom", none), held.get("corners", none.reshape(0, 8, 3)), _TOUCHING)
    if not count:
        return None
    if order is not None:
        upper, lower = order[upper], order[lower]
    return (f"{counted(count)} {'overlaps' if count == 1 else 'overlap'} the cell below, "
            f"first {place(cells, int(upper))}: its bottom lies {amount:.6g} m below "
            f"the top of {place(cells, int(lower))}; rock counted twice sinks twice: "
            "correct the layers.")


@check("local-coordinates", "warning")
def local_coordinates(cells: xr.Dataset, surface: float) -> str | None:
    """Coordinates that start near zero are rarely map coordinates."""
    if not cells.attrs.get("crs_wkt") or not _looks_local(cells):
        return None
    return (f"x and y are below 10 km while {_crs_name(cells)} is given; are these local "
            "coordinates? The map would lie in the wrong place.")


def _looks_local(cells: xr.Dataset) -> bool:
    return bool(np.abs(cells["centroid"].values[:, :2]).max() < _LOCAL)


def _crs_name(cells: xr.Dataset) -> str:
    return str(cells.attrs.get("crs_name") or "a coordinate system")


@check("area-of-use", "error", acceptable=True)
def area_of_use(cells: xr.Dataset, surface: float) -> str | None:
    """The middle of the grid must lie in the area its coordinate system is made for.

    One degree of grace: fields at the rim of a zone are mapped in it (common practice, no
    source). Local coordinates have their own warning.
    """
    wkt = cells.attrs.get("crs_wkt")
    if not wkt or _looks_local(cells):
        return None
    from pyproj import CRS, Transformer

    crs = CRS.from_wkt(wkt)
    area = crs.area_of_use
    if area is None and (code := crs.to_authority()):
        area = CRS.from_authority(*code).area_of_use  # a WKT may come without its bounding box
    if area is None or crs.geodetic_crs is None:
        return None
    metres = float(cells.attrs.get("xy_unit_in_m", 1.0))
    x, y = np.median(cells["centroid"].values[:, :2], axis=0) / metres
    # always_xy: easting first whatever the axis order of the system
    to_degrees = Transformer.from_crs(crs, crs.geodetic_crs, always_xy=True)
    lon, lat = to_degrees.transform(x, y)
    west, east = area.west - 1.0, area.east + 1.0
    inside = west <= lon <= east if west <= east else lon >= west or lon <= east
    if np.isfinite([lon, lat]).all() and inside and area.south - 1 <= lat <= area.north + 1:
        return None
    spot = (f"at longitude {lon:.4g}, latitude {lat:.4g}" if np.isfinite([lon, lat]).all()
            else "where it has no longitude and latitude")
    return (f"the middle of the grid (x = {x * metres:.8g} m, y = {y * metres:.8g} m) lies outside "
            f"the area of use of {_crs_name(cells)}, {spot}; the area is {area.west:g} to "
            f"{area.east:g} degrees east, {area.south:g} to {area.north:g} north. Wrong EPSG code, "
            "wrong unit, or x and y swapped?")
