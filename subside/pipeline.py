"""The main job: read, compact, superpose, observe, write. Reading the code starts here.

`prepare` checks everything without computing; `run` does the job, some dates (a leg) and some cells
(a batch) at a time: see `work` for what happens to a batch.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from functools import partial
from pathlib import Path

import numpy as np
import xarray as xr

from subside.assemble import Gathered, add_numbers, describe, frame_of, record_of
from subside.bodies import bodies_of, inside_valid_depths
from subside.checksums import Checksums
from subside.compaction.apply import Compactor
from subside.compaction.fields import place
from subside.compaction.rock import assign_blocks
from subside.earth_setup import make_earth
from subside.errors import InputError, located
from subside.export.grid_mapping import axis_unit, grid_mapping, projected_crs
from subside.grid import open_cells
from subside.heap import give_back_freed_memory, keep_freed_memory
from subside.hooks.contracts import EarthModel
from subside.hooks.registry import registry
from subside.job import Job
from subside.maps import HeldMaps, MapMaker, computed, held_names, is_local, map_names
from subside.observe.points import Points, read_points
from subside.observe.request import read_request
from subside.outlook import Outlook, expected_map, look_ahead
from subside.progress import Progress
from subside.result_file import ResultFile, Sink
from subside.scenario import Scenario, load_scenario
from subside.superposition.plan import refuse_method
from subside.superposition.summation import ATTEMPTS, one_blas_thread
from subside.survey.overlay import read_survey
from subside.timeline import make_timeline

__all__ = ["Job", "prepare", "run"]


def prepare(scenario: str | Path | Scenario, plugins: Sequence[str | Path] = (),
            progress: Progress | None = None) -> Job:
    """Read and check a scenario and all it names, but for the pressures after the first date.

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
        refuse_method(scenario.solver.method)
    grid, files = scenario.grid[0], scenario.grid_files()
    with progress.stage("reading", len(files), "file") as advance:
        cells, streams = open_cells(
            list(files.values()), crs=grid.crs, accept=grid.accept,
            surface=scenario.earth.surface, initial_pressure=grid.initial_pressure)
        advance(len(files))
    depth = cells["centroid"].values[:, 2]
    if scenario.earth.surface != 0.0:  # else the same numbers, which need not be kept twice
        depth = depth - scenario.earth.surface
    points = read_points([scenario.resolve(p.file) for p in scenario.points],
                         scenario.earth.surface, cells.attrs["xy_unit_in_m"])
    if scenario.survey is not None:
        read_survey(scenario.resolve(scenario.survey.file))
    with located(where, partial(place, cells)):
        given = grid.initial_pressure is not None
        timeline = make_timeline(cells, scenario.time.start,
                                 cells["initial_pressure"].values if given else None,
                                 scenario.output.times)
        bodies = bodies_of(cells, scenario.earth.surface)
        inside_valid_depths(bodies, earth, cells)
        _can_be_observed(points, earth, float(depth.max()))
        attributes = {name: stream.attrs for name, stream in streams.items() if name != "pressure"}
        blocks = assign_blocks(scenario.compaction, laws, cells, attributes)
        if any(table.horizontal_release == "own" for table in scenario.compaction):
            earth.modulus_at(depth[:1])
        job = Job(
            scenario=scenario, timeline=timeline, cells=cells, streams=streams, blocks=blocks,
            compactor=Compactor(cells, timeline.axis, blocks, earth, depth, attributes),
            earth=earth, bodies=bodies, depth=depth, points=points, request=request,
            warnings=[*cells.attrs["warnings"], *timeline.warnings])
        _can_be_written(str(cells.attrs["crs_wkt"]), f"grid '{next(iter(files))}'")
        if not job.wants_map and request.maps:
            raise InputError(f"[output] quantities: '{request.maps[0]}' is a map, and this "
                             "scenario makes none because it names points; add [map], or leave "
                             "it out.")
        if job.wants_map:
            expected_map(job)  # refuses bounds that make no map
    return job


def run(
    scenario: str | Path | Scenario,
    *,
    output: str | Path | None = None,
    overwrite: bool = False,
    plugins: Sequence[str | Path] = (),
    progress: Progress | None = None,
    memory: float | None = None,
    workers: int | None = None,
    cluster: str | None = None,
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
    memory : float, optional
        Bytes the program may use in all; a share of what the machine has free when left out.
    workers : int, optional
        Threads, or workers of a ``"local"`` cluster; one for each core when left out.
    cluster : str, optional
        Address of a Dask scheduler, or ``"local"`` for one on this machine; threads of this process
        when left out.

    Returns
    -------
    Dataset
        Variables of `subside.names.RESULT_VARIABLES`, SI. Of a result that was written, maps are
        read from the file when they are asked for.

    Raises
    ------
    InputError
        For the first thing wrong in the input.
    CannotDo
        Disk, memory, or workers.
    """
    keep_freed_memory()
    progress = progress or Progress()
    if not isinstance(scenario, Scenario):
        scenario = load_scenario(scenario)
    target = ResultFile(Path(output), scenario) if output is not None else None
    if target is not None:
        target.refuse(overwrite)
    job = prepare(scenario, plugins, progress)
    files = scenario.grid_files() | {p.file: scenario.resolve(p.file) for p in scenario.points}
    with (Checksums(files.values()) as checksums, one_blas_thread(),
          located(job.where, partial(place, job.cells))):
        return _Run(job, target, memory, workers, cluster, progress,
                    lambda: {name: checksums.of(file) for name, file in files.items()}).result()


class _Run:
    """One run from a job made ready to its result."""

    def __init__(self, job: Job, target: ResultFile | None, memory: float | None,
                 workers: int | None, cluster: str | None, progress: Progress,
                 checksums: Callable[[], dict[str, str]]) -> None:
        self._job, self._target, self._memory = job, target, memory
        self._workers, self._cluster, self._progress = workers, cluster, progress
        self._checksums = checksums
        self._notes: list[str] = []

    def result(self) -> xr.Dataset:
        """Try the designs, each finer than the one before, until the check is content."""
        job = self._job
        if self._memory is not None:
            give_back_freed_memory()
        scouted = look_ahead(job, self._memory, self._workers, self._progress)
        for attempt in range(len(ATTEMPTS)):
            outlook = Outlook.of(job, scouted, attempt, self._memory, self._workers,
                                 in_memory=self._target is None)
            result = self._attempt(outlook)
            if result is not None:
                return result
        raise AssertionError("the plain sum is always accepted")

    def _attempt(self, outlook: Outlook) -> xr.Dataset | None:
        """The result, or None if its error was too large."""
        job, grid = self._job, outlook.grid
        frame = frame_of(job, grid)
        gathered, held = Gathered(), HeldMaps()
        names = map_names(job.request) if grid is not None else []
        with Sink(self._target, frame, names) as sink:
            maker = None
            if grid is not None:
                maker = MapMaker(frame, job.request, grid, outlook.footprints, job.unit, sink, held)
            self._legs(outlook, gathered, maker, sink)
            summations = outlook.work.summations.values()
            errors = [summation.error() for summation in summations]
            self._notes += [note for summation in summations for note in summation.notes
                            if note not in self._notes]
            for summation, error in zip(summations, errors, strict=True):
                if not summation.accepts(error):
                    self._notes.append(
                        f"the check found an error of {error:.2g}, more than half the tolerance "
                        f"of {job.scenario.solver.tolerance:g}: refined")
                    return None
            methods = sorted({summation.method for summation in summations})
            warnings = [*job.warnings, *outlook.warnings]
            frame.attrs |= record_of(job, self._checksums(), list(dict.fromkeys(warnings))) | {
                "solver_method": ", ".join(methods),
                "solver_tolerance": job.scenario.solver.tolerance,
                "solver_error": max(errors, default=0.0),
                "solver_notes": "; ".join(self._notes),
                "edge_depletion": outlook.edge_depletion,
            }
            numbers = frame.drop_vars(names)
            add_numbers(numbers, job, gathered, maker.numbers if maker else None)
            self._whole_quantities(numbers, held, sink)
            with self._progress.stage("writing", 1, "file") as advance:
                result = sink.finish(numbers)
                advance(1)
            return result

    def _legs(self, outlook: Outlook, gathered: Gathered, maker: MapMaker | None,
              sink: Sink) -> None:
        """All legs; what they give goes into `gathered` and to the maker of maps."""
        job, work = self._job, outlook.work
        total = float(job.bodies.count) * len(job.timeline.axis.pressure)
        with self._progress.stage("superposition", total, "cell dates") as advance, \
                outlook.workers(self._cluster) as crew:
            for leg in outlook.legs:

                def ready(size: np.ndarray, steps: int = leg.steps) -> None:
                    # the check wants a date at which the bowl is large
                    keep = []
                    if steps and size.max() >= outlook.largest:
                        outlook.largest = float(size.max())
                        keep = [int(size.argmax()) if size.any() else steps - 1]
                    for summation in work.summations.values():
                        summation.begin(steps, keep)

                def done(cells: int, rows: int = leg.rows) -> None:
                    advance(float(cells * rows))

                tally = crew.leg(leg, ready, done)
                outlook.watched(tally)
                if not leg.steps:
                    continue
                gathered.lost_by_region.append(tally.lost_by_region)
                gathered.bowl.append(tally.bowl)
                if work.by_cell:
                    gathered.cells.append(tally.cells)
                again = sink.written()
                fields = {name: summation.fields(tally.shares[name], again and name != "points")
                          for name, summation in work.summations.items()}
                if "points" in fields:
                    gathered.points.append(fields["points"])
                if maker is not None:
                    by_region = [values["down"] for name, values in fields.items()
                                 if name.startswith("region ")]
                    maker.leg(leg.dates[0], fields["map"], by_region, tally.columns)
            outlook.finish(job.compactor.warnings(crew.findings))

    def _whole_quantities(self, numbers: xr.Dataset, held: HeldMaps, sink: Sink) -> None:
        """Quantities that want all dates at once."""
        request = self._job.request
        wanted = [quantity for quantity in request.quantities if not is_local(quantity)]
        if not wanted:
            return
        everything = numbers.copy()
        for name in held_names(request):
            if "x" in numbers.coords:
                everything[name] = (("time", "y", "x"), held.whole(name))
                describe(everything, name)
        for quantity in wanted:
            values = computed(quantity, everything)
            if quantity.name in map_names(request):
                sink.put(quantity.name, 0, values.transpose("time", "y", "x").values)
            else:
                numbers[quantity.name] = values
                describe(numbers, quantity.name, quantity.unit, quantity.long_name)


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
