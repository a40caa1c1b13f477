"""The labelled result: its frame, the numbers of each date, and the record of how it was made."""

from __future__ import annotations

import json
import platform
from dataclasses import dataclass, field
from importlib import metadata

import numpy as np
import xarray as xr

from subside.export.grid_mapping import axis_unit, projected_crs
from subside.hooks.registry import registry
from subside.job import Job
from subside.maps import Numbers, map_names
from subside.names import CAUTIONS, RESULT_VARIABLES
from subside.observe.footprint import outline_area, outlines_of
from subside.observe.map import MapGrid
from subside.quantities.bowl import extremes
from subside.superposition.interface import Fields

__all__ = ["Gathered", "add_numbers", "describe", "frame_of", "record_of"]


@dataclass
class Gathered:
    """What the legs gave beside the maps, date after date.

    Attributes
    ----------
    lost_by_region : list of array (date, region)
    bowl : list of array (date,)
        m3.
    cells : list of (cells, volume lost (date, m))
        By leg, where it is wanted: a list of these for each leg.
    points : list of Fields
        Component to (date, point).
    """

    lost_by_region: list[np.ndarray] = field(default_factory=list)
    bowl: list[np.ndarray] = field(default_factory=list)
    cells: list[list[tuple[np.ndarray, np.ndarray]]] = field(default_factory=list)
    points: list[Fields] = field(default_factory=list)


def frame_of(job: Job, grid: MapGrid | None) -> xr.Dataset:
    """Coordinates, and the maps to come as variables without values."""
    frame = xr.Dataset(coords={
        "time": job.timeline.dates.astype("datetime64[ns]"),
        "region_name": ("region", job.cells["region_name"].values.astype(str)),
    })
    wkt = str(job.cells.attrs.get("crs_wkt", ""))
    frame.attrs = {"crs_wkt": wkt, "xy_unit": axis_unit(projected_crs(wkt)) if wkt else "m",
                   "time_start": str(job.timeline.start)}
    if grid is None:
        return frame
    frame.coords["x"] = grid.x / job.unit
    frame.coords["y"] = grid.y / job.unit
    known = {quantity.name: quantity for quantity in job.request.quantities}
    for name in map_names(job.request):
        dims = RESULT_VARIABLES[name].dims if name in RESULT_VARIABLES else ("time", "y", "x")
        shape = tuple(frame.sizes[dim] for dim in dims)
        frame[name] = (dims, np.broadcast_to(np.float32(np.nan), shape))
        quantity = known.get(name)
        describe(frame, name, *((quantity.unit, quantity.long_name) if quantity else ()))
    return frame


def describe(result: xr.Dataset, name: str, unit: str = "", long_name: str = "") -> None:
    """Unit, meaning and sign of a variable of the result."""
    known = RESULT_VARIABLES.get(name)
    if known is None:
        result[name].attrs.update(units=unit, long_name=long_name)
        return
    # places on the map are in the CRS's own unit, which need not be the metre
    place = name.endswith(("_x", "_y"))
    result[name].attrs.update(units=result.attrs["xy_unit"] if place else known.unit,
                              long_name=known.long_name)
    if known.comment:
        result[name].attrs["comment"] = known.comment


def add_numbers(result: xr.Dataset, job: Job, gathered: Gathered,
                numbers: Numbers | None) -> None:
    """Everything that is no map: points, volumes, extremes, cells."""
    if gathered.points:
        _add_points(result, job, gathered.points)
    _put(result, "region_compaction_volume", np.concatenate(gathered.lost_by_region))
    if job.request.by_cell:
        _add_cells(result, job, gathered.cells)
    _put(result, "bowl_volume", np.concatenate(gathered.bowl))
    if numbers is not None:
        _put(result, "bowl_volume_map", np.concatenate(numbers.volume))
        _put(result, "bowl_volume_1cm", np.concatenate(numbers.volume_1cm))
    for name, values in _extremes(result, job, numbers).items():
        _put(result, name, values)


def _put(result: xr.Dataset, name: str, values: np.ndarray) -> None:
    result[name] = (RESULT_VARIABLES[name].dims, values)
    describe(result, name)


def _add_points(result: xr.Dataset, job: Job, fields: list[Fields]) -> None:
    points = job.points
    result.coords["point_name"] = ("point", points.name)
    _put(result, "point_x", points.x / job.unit)
    _put(result, "point_y", points.y / job.unit)
    _put(result, "point_depth", points.depth)
    for name, part in (("point_subsidence", "down"), ("point_displacement_east", "east"),
                       ("point_displacement_north", "north")):
        _put(result, name, np.concatenate([some[part] for some in fields]))


def _add_cells(result: xr.Dataset, job: Job,
               legs: list[list[tuple[np.ndarray, np.ndarray]]]) -> None:
    cells = job.cells
    area = outline_area(outlines_of(job.bodies, np.arange(job.bodies.count)))
    lost = np.zeros((result.sizes["time"], job.bodies.count))
    first = 0
    for leg in legs:
        steps = leg[0][1].shape[0] if leg else 0
        for numbers, values in leg:
            lost[first:first + steps, numbers] = values
        first += steps
    _put(result, "cell_compaction", lost / area)
    for name in ("k", "j", "i"):
        if name in cells:
            result[f"cell_{name}"] = ("cell", cells[name].values)
            result[f"cell_{name}"].attrs.update(units="1", long_name=f"{name} of the cell")
    for column, name in enumerate(("x", "y")):
        result[f"cell_{name}"] = ("cell", cells["centroid"].values[:, column] / job.unit)
        result[f"cell_{name}"].attrs.update(
            units=result.attrs["xy_unit"], long_name=f"{name} of the cell's centre")
    result["cell_depth"] = ("cell", job.depth)
    result["cell_depth"].attrs.update(
        units="m", long_name="depth of the cell's centre below the ground or seabed")


def _extremes(result: xr.Dataset, job: Job, numbers: Numbers | None) -> dict[str, np.ndarray]:
    """Of map and points together."""
    found: dict[str, np.ndarray] = {}
    if numbers is not None:
        found = {name: np.concatenate([leg[name] for leg in numbers.extremes])
                 for name in numbers.extremes[0]}
    if not job.points.x.size:
        return found
    # an anchor in the rock is not the ground: it counts only where there is nothing else
    ground = job.points.depth == 0.0
    if not ground.any() and found:
        return found
    chosen = ground if ground.any() else ~ground
    here = extremes(result["point_subsidence"].values[:, chosen],
                    job.points.x[chosen] / job.unit, job.points.y[chosen] / job.unit)
    if not found:
        return here
    for name in ("max_subsidence", "max_uplift"):
        larger = here[name] > found[name]
        for part in (name, f"{name}_x", f"{name}_y"):
            found[part] = np.where(larger, here[part], found[part])
    return found


def record_of(job: Job, checksums: dict[str, str], warnings: list[str]) -> dict[str, str | float]:
    """Global attributes: what went in, with which versions, and the cautions."""
    scenario, cells = job.scenario, job.cells
    used = {b.law.name for b in job.blocks} | {job.earth.name}
    used |= {q.name for q in job.request.quantities}
    plugins = sorted(f"{r.kind} {r.name} of {r.origin} {r.version}".strip()
                     for name in used for r in registry.find(name))
    packages = ("subside", "numpy", "scipy", "xarray", "netCDF4", "numba", "pyproj")
    versions = ", ".join(f"{p} {metadata.version(p)}" for p in packages)
    return {
        "title": scenario.title or scenario.path.stem,
        "grid_name": scenario.grid[0].name,
        "vertical_datum": str(cells.attrs.get("vertical_datum", "")) or "not stated by the grid",
        "scenario": scenario.text,
        "scenario_file": scenario.path.name,
        "input_checksums": json.dumps(
            {scenario.path.name: f"sha256:{scenario.checksum}"} | checksums),
        "versions": f"{versions}, python {platform.python_version()}",
        "plugins": "; ".join(plugins),
        "earth_model": job.earth.name,
        "warnings": "\n".join(warnings) or "none",
        "cautions": " ".join(CAUTIONS),
    }

