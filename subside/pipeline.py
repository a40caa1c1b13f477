"""The main job: read, compact, superpose, observe, write. Reading the code starts here.

`prepare` checks everything without computing; `run` does the job.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import partial
from pathlib import Path

import numpy as np
import xarray as xr

from subside.assemble import Parts, assemble
from subside.compaction.apply import Compaction, compact
from subside.compaction.rock import Block, assign_blocks, place
from subside.earth_setup import make_earth
from subside.errors import InputError, located
from subside.export.grid_mapping import axis_unit, grid_mapping, projected_crs
from subside.grid import open_grid
from subside.grid.geometry import corners_of_boxes
from subside.grid.summary import cut_off_text, edge_depletion
from subside.hooks.contracts import EarthModel
from subside.hooks.registry import registry
from subside.observe.map import MapGrid, plan_map, refuse_size, round_spacing
from subside.observe.points import Points, read_points
from subside.observe.request import Request, read_request
from subside.progress import Progress
from subside.result_file import ResultFile
from subside.scenario import Scenario, load_scenario
from subside.superposition.interface import Bodies, Fields, SolverRecord, Targets
from subside.superposition.plan import Plan, make_plan
from subside.survey.overlay import read_survey
from subside.timeline import Timeline, make_timeline

__all__ = ["Job", "prepare", "run"]


@dataclass
class Job:
    """A scenario made ready: everything read and checked, nothing computed."""

    scenario: Scenario
    timeline: Timeline
    blocks: list[Block]
    earth: EarthModel
    bodies: Bodies
    depth: np.ndarray
    points: Points
    request: Request
    edge_depletion: float
    warnings: list[str]

    @property
    def cells(self) -> xr.Dataset:
        """The cell dataset on the run's pressure dates."""
        return self.timeline.cells

    @property
    def wants_map(self) -> bool:
        """A scenario without points gets a map."""
        return self.scenario.map is not None or not self.points.x.size

    def expected_pixels(self) -> int:
        """Size of the map: exact where bounds are given, else from the usual reach of a bowl."""
        table = self.scenario.map
        low, high = np.full(3, np.inf), np.full(3, -np.inf)
        for start in range(0, self.bodies.count, 100_000):
            corners = self.bodies.corners(
                np.arange(start, min(start + 100_000, self.bodies.count)))
            low = np.minimum(low, corners.min(axis=(0, 1)))
            high = np.maximum(high, corners.max(axis=(0, 1)))
        unit = float(self.cells.attrs["xy_unit_in_m"])
        if table is None or table.bounds is None:
            # a point source falls to 1 % of its peak at 4.5 depths
            reach = 4.5 * float(self.depth.max())
            west, south, east, north = (low[0] - reach, low[1] - reach, high[0] + reach,
                                        high[1] + reach)
            step = table.spacing if table and table.spacing else round_spacing(
                float(self.depth.min()), max(east - west, north - south))
            columns, rows = int((east - west) / step), int((north - south) / step)
            refuse_size(columns, rows, step)
            return columns * rows
        grid = plan_map(table, low[:2], high[:2], float(self.depth.min()), unit,
                        lambda targets: np.zeros(targets.x.size))
        return grid.x.size * grid.y.size

    def plan(self, targets: int, sources: int = 1) -> Plan:
        """Method and expected work for a number of targets."""
        return make_plan(self.scenario.solver.method, self.bodies.count, targets,
                         self.timeline.dates.size, 8 if self.request.gradient else 3, sources)


def prepare(scenario: str | Path | Scenario, plugins: Sequence[str | Path] = (),
            progress: Progress | None = None) -> Job:
    """Read and check a scenario and all it names.

    Raises
    ------
    InputError
        For the first thing that is wrong.
    """
    progress = progress or Progress()
    if not isinstance(scenario, Scenario):
        scenario = load_scenario(scenario)
    for file in (*plugins, *(scenario.resolve(p) for p in scenario.plugins)):
        registry.load_file(Path(file))
    where = f"scenario '{scenario.path}'"
    with located(where):
        earth = make_earth(scenario.earth)
        laws = {table.law: registry.get("law", table.law, "[compaction] law")
                for table in scenario.compaction}
        request = read_request(scenario.output.quantities)
        make_plan(scenario.solver.method, 0, 0, 0, 3, 1)
    grid = scenario.grid[0]
    with progress.stage("reading", 1, "file") as advance:
        cells = open_grid(scenario.resolve(grid.file), crs=grid.crs, accept=grid.accept,
                          surface=scenario.earth.surface, initial_pressure=grid.initial_pressure)
        advance(1)
    depth = cells["centroid"].values[:, 2] - scenario.earth.surface
    points = read_points([scenario.resolve(p.file) for p in scenario.points],
                         scenario.earth.surface, cells.attrs["xy_unit_in_m"])
    if scenario.survey is not None:
        read_survey(scenario.resolve(scenario.survey.file))
    with located(where, partial(place, cells)):
        given = grid.initial_pressure is not None
        timeline = make_timeline(cells, scenario.time.start,
                                 cells["initial_pressure"].values if given else None,
                                 scenario.output.times)
        bodies = _bodies(timeline.cells, scenario.earth.surface)
        _inside_valid_depths(bodies, earth, timeline.cells)
        _can_be_observed(points, earth, float(depth.max()))
        blocks = assign_blocks(scenario.compaction, laws, timeline.cells)
        if any(table.horizontal_release == "own" for table in scenario.compaction):
            earth.modulus_at(depth[:1])
        edge = edge_depletion(timeline.cells, timeline.cells["pressure"].values[0])
        job = Job(
            scenario=scenario, timeline=timeline, blocks=blocks, earth=earth, bodies=bodies,
            depth=depth, points=points, request=request, edge_depletion=edge,
            warnings=[*cells.attrs["warnings"], *timeline.warnings,
                      *filter(None, [cut_off_text(edge)])],
        )
        _can_be_written(str(cells.attrs["crs_wkt"]), f"grid '{grid.file}'")
        if not job.wants_map and request.maps:
            raise InputError(f"[output] quantities: '{request.maps[0]}' is a map, and this "
                             "scenario makes none because it names points; add [map], or leave "
                             "it out.")
        if job.wants_map:
            job.expected_pixels()  # refuses bounds that make no map
    return job


def run(
    scenario: str | Path | Scenario,
    *,
    output: str | Path | None = None,
    overwrite: bool = False,
    plugins: Sequence[str | Path] = (),
    progress: Progress | None = None,
) -> xr.Dataset:
    """The main job: from a scenario to a result.

    Parameters
    ----------
    scenario : path or Scenario
    output : path, optional
        Result file (NetCDF) to write; without it nothing is written.
    overwrite : bool
        Replace an output that was not made from this scenario.
    plugins : sequence of path
        Plug-in files to load on purpose.
    progress : Progress, optional
        Told about the stages.

    Returns
    -------
    Dataset
        Variables of `subside.names.RESULT_VARIABLES`, SI.

    Raises
    ------
    InputError
        For the first thing wrong in the input.
    CannotDo
        Disk or memory.
    """
    progress = progress or Progress()
    if not isinstance(scenario, Scenario):
        scenario = load_scenario(scenario)
    target = ResultFile(Path(output), scenario) if output is not None else None
    if target is not None:
        target.refuse(overwrite)
    job = prepare(scenario, plugins, progress)
    with located(f"scenario '{scenario.path}'"):
        compaction = _compact(job, progress)
        grid = _map(job, compaction) if job.wants_map else None
        shallowest = float(job.depth.min())
        if grid is not None and grid.spacing > shallowest:
            job.warnings.append(
                f"the map's spacing of {grid.spacing:g} m is wider than the shallowest cell is "
                f"deep ({shallowest:.0f} m): the deepest place may lie between pixels; give a "
                "smaller [map] spacing.")
        fields, region_fields, record = _superpose(job, compaction, grid, progress)
    result = assemble(Parts(
        scenario=job.scenario, timeline=job.timeline, blocks=job.blocks, earth=job.earth,
        bodies=job.bodies, depth=job.depth, points=job.points, request=job.request, grid=grid,
        compaction=compaction, fields=fields, region_fields=region_fields,
        solver=record,
        edge_depletion=job.edge_depletion, warnings=[*job.warnings, *compaction.warnings],
    ))
    if target is not None:
        with progress.stage("writing", 1, "file") as advance:
            target.write(result)
            advance(1)
    return result


def _compact(job: Job, progress: Progress) -> Compaction:
    with progress.stage("compaction", job.bodies.count, "cells") as advance:
        return compact(job.cells, job.cells["pressure"].values, job.timeline.axis, job.blocks,
                       job.earth, job.depth, advance)


def _superpose(job: Job, compaction: Compaction, grid: MapGrid | None,
               progress: Progress) -> tuple[Fields, list[Fields], SolverRecord]:
    """The field at map and points together, and by region on the map where asked for."""
    moments = compaction.moments
    at_map = grid.targets if grid is not None else None
    at_points = job.points.targets
    regions = job.cells.sizes["region"] if job.request.by_region and grid is not None else 0
    size = at_map.x.size if at_map is not None else 0
    pairs = float(job.bodies.count) * len(moments) * (size + at_points.x.size + regions * size)
    record = SolverRecord()
    region_fields = []
    with progress.stage("superposition", job.bodies.count, "cells") as advance:

        def advance_pairs(done: float) -> None:
            advance(done / pairs * job.bodies.count)

        def solve(moments: Mapping[str, np.ndarray], targets: Targets, gradient: bool) -> Fields:
            solver = job.plan(targets.x.size, len(moments)).solver()
            field = solver.solve(job.bodies, moments, targets, job.earth, gradient=gradient,
                                 tolerance=job.scenario.solver.tolerance, progress=advance_pairs)
            record.note(solver)
            return field

        fields: Fields = {}
        if at_map is not None:
            fields |= {f"map_{name}": values for name, values in solve(
                moments, at_map, job.request.gradient).items()}
        if at_points.x.size:
            fields |= {f"point_{name}": values for name, values in solve(
                moments, at_points, False).items()}
        for region in range(regions):
            chosen = job.cells["region"].values == region
            part = {source: np.where(chosen, moment, 0.0) for source, moment in moments.items()}
            assert at_map is not None
            region_fields.append(solve(part, at_map, False))
    return fields, region_fields, record


def _map(job: Job, compaction: Compaction) -> MapGrid:
    """The map's pixels; an automatic extent asks for the field at a few places first."""
    lost = compaction.volume_lost
    live = np.nonzero(np.any(lost != 0.0, axis=0))[0]
    if not live.size:
        live = np.arange(job.bodies.count)
    corners = job.bodies.corners(live)
    # the date of the largest total and the last one: between them the bowl only grows or shrinks
    total = np.abs(lost.sum(axis=1))
    steps = np.unique([int(total.argmax()), lost.shape[0] - 1])
    moments = {source: moment[steps] for source, moment in compaction.moments.items()}

    def subsidence_at(targets: Targets) -> np.ndarray:
        solver = job.plan(targets.x.size, len(moments)).solver()
        field = solver.solve(job.bodies, moments, targets, job.earth, tolerance=1e-2)
        return np.asarray(np.abs(field["down"]).max(axis=0))

    return plan_map(job.scenario.map, corners[..., :2].min(axis=(0, 1)),
                    corners[..., :2].max(axis=(0, 1)), float(corners[..., 2].min()),
                    float(job.cells.attrs["xy_unit_in_m"]), subsidence_at)


def _bodies(cells: xr.Dataset, surface: float) -> Bodies:
    """The cells in space, depth below the ground or seabed."""
    if "corners" in cells:
        corners = cells["corners"].values
        shift = np.array([0.0, 0.0, surface])
        return Bodies(corners.shape[0], lambda index: corners[index] - shift)
    columns = [cells[n].values for n in ("x", "y", "top", "bottom", "dx", "dy", "azimuth")]
    boxes = np.column_stack(columns)
    boxes[:, 2:4] -= surface
    return Bodies(boxes.shape[0], lambda index: corners_of_boxes(*boxes[index].T), boxes)


def _can_be_written(wkt: str, where: str) -> None:
    """Not every coordinate system can be written so that a GIS reads it: before the long run."""
    if wkt:
        with located(where):
            crs = projected_crs(wkt)
            axis_unit(crs)
            grid_mapping(crs)


def _can_be_observed(points: Points, earth: EarthModel, source_depth: float) -> None:
    """Not every earth model answers below the surface: ask it before the long run."""
    if not points.x.size or not points.depth.any():
        return
    deepest = int(points.depth.argmax())
    with located(f"[points] '{points.name[deepest]}', {points.depth[deepest]:g} m below the ground "
                 "or seabed (leave its depth out to put it on the surface)"):
        earth.displacement("contraction", np.ones(1), points.depth[[deepest]],
                           np.full(1, source_depth))


def _inside_valid_depths(bodies: Bodies, earth: EarthModel, cells: xr.Dataset) -> None:
    shallowest, deepest = earth.valid_depths
    for start in range(0, bodies.count, 100_000):
        index = np.arange(start, min(start + 100_000, bodies.count))
        depth = bodies.corners(index)[..., 2]
        outside = (depth.max(axis=1) >= deepest) | (depth.min(axis=1) < shallowest)
        if outside.any():
            cell = int(np.argmax(outside))
            raise InputError(
                f"[earth] model = '{earth.name}' holds for sources between {shallowest:g} and "
                f"{deepest:g} m below the ground or seabed; {place(cells, int(index[cell]))} "
                f"reaches from {depth[cell].min():.6g} to {depth[cell].max():.6g} m. Put the "
                "basement below the cells, or use another model."
            )
