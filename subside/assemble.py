"""From arrays to the labelled result: variables, coordinates, and the record of how it was made."""

from __future__ import annotations

import hashlib
import json
import platform
from dataclasses import dataclass
from importlib import metadata
from pathlib import Path

import numpy as np
import xarray as xr

from subside.compaction.apply import Compaction
from subside.compaction.rock import Block
from subside.errors import PluginError, SubsideError
from subside.export.grid_mapping import axis_unit, projected_crs
from subside.hooks.contracts import EarthModel, Quantity
from subside.hooks.registry import registry
from subside.names import CAUTIONS, RESULT_VARIABLES
from subside.observe.footprint import footprint_matrix
from subside.observe.map import MapGrid
from subside.observe.points import Points
from subside.observe.request import GRADIENT_NAMES, Request
from subside.quantities.bowl import bowl_volume, extremes, volume_above
from subside.scenario import Scenario
from subside.superposition.interface import Bodies, Fields, SolverRecord
from subside.timeline import Timeline

__all__ = ["Parts", "assemble"]


@dataclass(frozen=True)
class Parts:
    """Everything a result is made of."""

    scenario: Scenario
    timeline: Timeline
    blocks: list[Block]
    earth: EarthModel
    bodies: Bodies
    depth: np.ndarray
    points: Points
    request: Request
    grid: MapGrid | None
    compaction: Compaction
    fields: Fields
    region_fields: list[Fields]
    solver: SolverRecord
    edge_depletion: float
    warnings: list[str]

    @property
    def unit(self) -> float:
        """Length of the CRS's own unit in m."""
        return float(self.timeline.cells.attrs["xy_unit_in_m"])


def assemble(parts: Parts) -> xr.Dataset:
    """The result dataset: map, points, cells, regions, volumes, extremes, and its record."""
    result = xr.Dataset(coords={
        "time": parts.timeline.dates.astype("datetime64[ns]"),
        "region_name": ("region", parts.timeline.cells["region_name"].values.astype(str)),
    })
    result.attrs = _record(parts)
    if parts.grid is not None:
        _add_map(result, parts, parts.grid)
    if parts.points.x.size:
        _add_points(result, parts)
    _add_cells(result, parts)
    _add_bowl(result, parts)
    for quantity in parts.request.quantities:
        result[quantity.name] = _computed(quantity, result)
        _describe(result, quantity.name, quantity.unit, quantity.long_name)
    unwanted = [n for n in GRADIENT_NAMES if n in result and n not in parts.request.names]
    return result.drop_vars(unwanted)


def _computed(quantity: Quantity, result: xr.Dataset) -> xr.DataArray:
    """A plug-in's variable; what goes wrong in it is said to be its fault."""
    try:
        return quantity.compute(result).transpose("time", ...)
    except SubsideError:
        raise
    except Exception as error:
        raise PluginError(f"quantity '{quantity.name}' failed with {type(error).__name__}: "
                          f"{error}; leave it out of [output] quantities and tell its author."
                          ) from error


def _describe(result: xr.Dataset, name: str, unit: str = "", long_name: str = "") -> None:
    known = RESULT_VARIABLES.get(name)
    if known is not None:
        # places on the map are in the CRS's own unit, which need not be the metre
        place = name.endswith(("_x", "_y"))
        result[name].attrs.update(units=result.attrs["xy_unit"] if place else known.unit,
                                  long_name=known.long_name)
        if known.comment:
            result[name].attrs["comment"] = known.comment
    else:
        result[name].attrs.update(units=unit, long_name=long_name)


def _put(result: xr.Dataset, name: str, values: np.ndarray) -> None:
    result[name] = (RESULT_VARIABLES[name].dims, values)
    _describe(result, name)


def _add_map(result: xr.Dataset, parts: Parts, grid: MapGrid) -> None:
    result.coords["x"] = grid.x / parts.unit
    result.coords["y"] = grid.y / parts.unit
    steps = parts.timeline.dates.size

    def shaped(values: np.ndarray) -> np.ndarray:
        return values.reshape(steps, *grid.shape)

    fields = parts.fields
    _put(result, "subsidence", shaped(fields["map_down"]))
    _put(result, "displacement_east", shaped(fields["map_east"]))
    _put(result, "displacement_north", shaped(fields["map_north"]))
    half = 0.5 * grid.spacing
    shares = footprint_matrix(parts.bodies, float(grid.x[0]) - half, float(grid.y[0]) + half,
                              grid.spacing, *grid.shape)
    lost = parts.compaction.volume_lost
    _put(result, "compaction", shaped((shares @ lost.T).T / grid.pixel_area))
    if parts.request.gradient:
        for name, component in GRADIENT_NAMES.items():
            _put(result, name, shaped(fields[f"map_{component}"]))
    if parts.region_fields:
        _put(result, "region_subsidence",
             np.stack([shaped(f["down"]) for f in parts.region_fields], axis=1))


def _add_points(result: xr.Dataset, parts: Parts) -> None:
    points = parts.points
    result.coords["point_name"] = ("point", points.name)
    _put(result, "point_x", points.x / parts.unit)
    _put(result, "point_y", points.y / parts.unit)
    _put(result, "point_depth", points.depth)
    _put(result, "point_subsidence", parts.fields["point_down"])
    _put(result, "point_displacement_east", parts.fields["point_east"])
    _put(result, "point_displacement_north", parts.fields["point_north"])


def _add_cells(result: xr.Dataset, parts: Parts) -> None:
    """Volumes by region, and cell by cell where asked for."""
    cells = parts.timeline.cells
    lost = parts.compaction.volume_lost
    by_region = np.zeros((lost.shape[0], cells.sizes["region"]))
    for region in range(by_region.shape[1]):
        by_region[:, region] = lost[:, cells["region"].values == region].sum(axis=1)
    _put(result, "region_compaction_volume", by_region)
    if parts.request.by_cell:
        area = _plan_area(parts.bodies)
        _put(result, "cell_compaction", lost / area)
        for name in ("k", "j", "i"):
            if name in cells:
                result[f"cell_{name}"] = ("cell", cells[name].values)
                result[f"cell_{name}"].attrs.update(units="1", long_name=f"{name} of the cell")
        for column, name in enumerate(("x", "y")):
            result[f"cell_{name}"] = ("cell", cells["centroid"].values[:, column] / parts.unit)
            result[f"cell_{name}"].attrs.update(
                units=result.attrs["xy_unit"], long_name=f"{name} of the cell's centre")
        result["cell_depth"] = ("cell", parts.depth)
        result["cell_depth"].attrs.update(
            units="m", long_name="depth of the cell's centre below the ground or seabed")


def _plan_area(bodies: Bodies) -> np.ndarray:
    """Area of each cell seen from above, m2: mean of its top and bottom outline."""
    area = np.empty(bodies.count)
    for start in range(0, bodies.count, 100_000):
        index = np.arange(start, min(start + 100_000, bodies.count))
        corners = bodies.corners(index)
        plan = 0.5 * (corners[:, :4, :2] + corners[:, 4:, :2])
        one, two = plan[:, 2] - plan[:, 0], plan[:, 3] - plan[:, 1]
        area[index] = 0.5 * np.abs(one[:, 0] * two[:, 1] - one[:, 1] * two[:, 0])
    return area


def _add_bowl(result: xr.Dataset, parts: Parts) -> None:
    steps = parts.timeline.dates.size
    moments = parts.compaction.moments
    ratio = {source: parts.earth.volume_ratio(source, parts.depth) for source in moments}
    _put(result, "bowl_volume", bowl_volume(moments, ratio))
    values, x, y = [], [], []
    if "subsidence" in result:
        assert parts.grid is not None
        targets = parts.grid.targets
        values.append(parts.fields["map_down"])
        x.append(targets.x)
        y.append(targets.y)
        area = parts.grid.pixel_area
        _put(result, "bowl_volume_map",
             result["subsidence"].values.reshape(steps, -1).sum(axis=1) * area)
        _put(result, "bowl_volume_1cm", volume_above(result["subsidence"].values, area))
    # an anchor in the rock is not the ground: it counts only where there is nothing else
    ground = parts.points.depth == 0.0
    if ground.any() or not values:
        chosen = ground if ground.any() else ~ground
        values.append(parts.fields["point_down"][:, chosen])
        x.append(parts.points.x[chosen])
        y.append(parts.points.y[chosen])
    found = extremes(np.concatenate(values, axis=1), np.concatenate(x) / parts.unit,
                     np.concatenate(y) / parts.unit)
    for name, numbers in found.items():
        _put(result, name, numbers)


def _record(parts: Parts) -> dict[str, str | float]:
    """Global attributes: what went in, with which versions, and the cautions."""
    scenario = parts.scenario
    cells = parts.timeline.cells
    files = [scenario.grid[0].file, *(p.file for p in scenario.points)]
    used = {b.law.name for b in parts.blocks} | {parts.earth.name}
    used |= {q.name for q in parts.request.quantities}
    plugins = sorted(f"{r.kind} {r.name} of {r.origin} {r.version}".strip()
                     for name in used for r in registry.find(name))
    packages = ("subside", "numpy", "scipy", "xarray", "netCDF4", "numba", "pyproj")
    versions = ", ".join(f"{p} {metadata.version(p)}" for p in packages)
    wkt = str(cells.attrs.get("crs_wkt", ""))
    return {
        "title": scenario.title or scenario.path.stem,
        "crs_wkt": wkt,
        "xy_unit": axis_unit(projected_crs(wkt)) if wkt else "m",
        "grid_name": scenario.grid[0].name,
        "time_start": str(parts.timeline.start),
        "vertical_datum": str(cells.attrs.get("vertical_datum", "")) or "not stated by the grid",
        "scenario": scenario.text,
        "scenario_file": scenario.path.name,
        "input_checksums": json.dumps(
            {scenario.path.name: f"sha256:{scenario.checksum}"}
            | {file: _checksum(scenario.resolve(file)) for file in files}),
        "versions": f"{versions}, python {platform.python_version()}",
        "plugins": "; ".join(plugins),
        "earth_model": parts.earth.name,
        "solver_method": ", ".join(parts.solver.methods),
        "solver_tolerance": scenario.solver.tolerance,
        "solver_error": parts.solver.error,
        "solver_notes": "; ".join(parts.solver.notes),
        "edge_depletion": parts.edge_depletion,
        "warnings": "\n".join(parts.warnings) or "none",
        "cautions": " ".join(CAUTIONS),
    }


def _checksum(path: Path) -> str:
    digest = hashlib.sha256()
    with path.open("rb") as file:
        while block := file.read(1 << 22):
            digest.update(block)
    return f"sha256:{digest.hexdigest()}"
