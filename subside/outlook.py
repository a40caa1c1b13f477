"""What a run is about to do: its map, superpositions, legs and memory, known before it starts."""

from __future__ import annotations

import os
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field, replace

import numpy as np

from subside.batches import Batch, cut_batches
from subside.crew import BLOCKS_AHEAD, Crew, Team
from subside.grid.summary import cut_off_text
from subside.grid.watch import PressureWatch
from subside.job import Job
from subside.legs import Leg, Needs, plan_legs
from subside.maps import held_names, map_names
from subside.observe.footprint import Footprints
from subside.observe.map import MapGrid, plan_map, refuse_size, round_spacing
from subside.progress import Progress
from subside.superposition.interface import Targets
from subside.superposition.lattice import Lattice
from subside.superposition.summation import Summation
from subside.timeline import StartGap
from subside.work import Tally, Work

__all__ = ["Outlook", "expected_map", "look_ahead"]

_MAP_TOLERANCE = 1e-2
"""Of the field that only tells how far an automatic map reaches."""
_BATCH_BYTES = 8.0 * 30_000 * 6
"""Arrays of a batch that is worked on, for each date."""
_REMEMBERED = 28.0
"""Of a cell, from leg to leg: its first and latest pressure, the largest stress it felt."""
_WRITER_BYTES = 1.0e8
_OUTLINE_BYTES = 150.0
"""Of a pillar: its outline and its shares of pixels, for each term of these."""


@dataclass
class Outlook:
    """A run laid out.

    Attributes
    ----------
    job : Job
    grid : MapGrid or None
    footprints : Footprints
        Of the cells.
    work : Work
    legs : list of Leg
    batches : list of Batch
    needs : Needs
    threads : int
    warnings : list of str
    largest : float
        Volume lost by the batch that tells when the bowl is large, at its largest so far, m3.
    """

    job: Job
    grid: MapGrid | None
    footprints: Footprints
    work: Work
    legs: list[Leg]
    batches: list[Batch]
    needs: Needs
    threads: int
    warnings: list[str] = field(default_factory=list)
    largest: float = 0.0
    _gap: StartGap | None = None

    @classmethod
    def of(cls, job: Job, grid: MapGrid | None, attempt: int, memory: float | None,
           workers: int | None, in_memory: bool) -> Outlook:
        """Lay out a run.

        Parameters
        ----------
        grid : MapGrid or None
            The map, from `look_ahead`.
        attempt : int
            Which of `summation.ATTEMPTS`.
        memory, workers
            As `pipeline.run` takes them.
        in_memory : bool
            Whether the maps are kept in memory.

        Raises
        ------
        CannotDo
            If it does not fit into its memory.
        """
        threads = workers or os.cpu_count() or 1
        footprints = Footprints.of(job.bodies) if grid is not None else Footprints.none()
        work = replace(_work(job), summations=_summations(job, grid, attempt),
                       by_column=grid is not None, by_cell=job.request.by_cell,
                       shape=footprints.shape)
        needs = _needs(job, work, grid, footprints, threads, in_memory)
        outlook = cls(job, grid, footprints, work, _legs(job, needs, memory),
                      cut_batches(job.streams["pressure"].blocks, job.bodies.column), needs,
                      threads)
        shallowest = float(job.depth.min())
        if grid is not None and grid.spacing > shallowest:
            outlook.warnings.append(
                f"the map's spacing of {grid.spacing:g} m is wider than the shallowest cell is "
                f"deep ({shallowest:.0f} m): the deepest place may lie between pixels; give a "
                "smaller [map] spacing.")
        return outlook

    @property
    def memory_bytes(self) -> float:
        """Predicted use beyond what the program has before it starts."""
        longest = max((leg.rows for leg in self.legs), default=0)
        return self.needs.fixed + longest * self.needs.per_date

    @contextmanager
    def workers(self, cluster: str | None) -> Iterator[Team]:
        """Those who do the work on batches."""
        if cluster is None:
            with Crew(self.work, self.batches, self.legs, self.threads) as crew:
                yield crew
            return
        from subside.cluster import ClusterCrew

        with ClusterCrew(self.work, self.batches, self.legs, self.threads, cluster) as crew:
            yield crew

    def watched(self, tally: Tally) -> None:
        """Take over what was seen of the pressures in a leg."""
        self.work.watch.merge(tally.watch)
        if tally.gap is not None:
            self._gap = tally.gap if self._gap is None else self._gap.worse(tally.gap)

    def finish(self, of_laws: list[str]) -> None:
        """Say what the pressures and the laws were found to be like.

        Raises
        ------
        InputError
            For what is wrong with the pressures.
        """
        if self._gap is not None:
            self.job.timeline.refuse_gap(self._gap)
        self.warnings += self.work.watch.finish()
        self.warnings += filter(None, [cut_off_text(self.edge_depletion)])
        self.warnings += of_laws

    @property
    def edge_depletion(self) -> float:
        """Change of pressure on the grid's edge over the largest, 0 to 1."""
        return self.work.watch.edge_depletion


def _work(job: Job) -> Work:
    cells, grid = job.cells, job.scenario.grid[0]
    rows = job.timeline.rows
    column = cells["column"].values if "column" in cells else np.arange(job.bodies.count)
    watch = PressureWatch(cells, job.scenario.earth.surface, job.streams["pressure"],
                          accept=grid.accept, initial=job.initial,
                          depletion_from=max(rows.at, 0))
    return Work(job.timeline, job.compactor, job.streams, job.initial, watch, job.earth, job.depth,
                cells["region"].values, cells.sizes["region"], column)


def _summations(job: Job, grid: MapGrid | None, attempt: int) -> dict[str, Summation]:
    solver, request = job.scenario.solver, job.request

    def summation(targets: Targets, gradient: bool) -> Summation:
        return Summation(job.bodies, job.compactor.sources, targets, job.earth,
                         tolerance=solver.tolerance, gradient=gradient,
                         steps=job.timeline.dates.size, method=solver.method, attempt=attempt)

    found = {}
    if grid is not None:
        found["map"] = summation(grid.targets, request.gradient)
    if job.points.x.size:
        found["points"] = summation(job.points.targets, False)
    if grid is not None and request.by_region:
        for region in range(job.cells.sizes["region"]):
            found[f"region {region}"] = summation(grid.targets, False)
    return found


def _needs(job: Job, work: Work, grid: MapGrid | None, footprints: Footprints, threads: int,
           in_memory: bool) -> Needs:
    """Memory of a run, counted generously."""
    sums = footprints.terms * footprints.outlines.shape[0]
    fixed = _WRITER_BYTES + _OUTLINE_BYTES * sums + _REMEMBERED * job.bodies.count
    fixed += 0 if footprints.shape is None else footprints.shape.nbytes
    fixed += max((s.fixed_bytes for s in work.summations.values()), default=0.0)
    stream = job.streams["pressure"]
    block = max(stream.bytes_per_date(n) for n in range(len(stream.blocks)))
    per_date = (BLOCKS_AHEAD + 2) * block * (1.0 + len(job.compactor.fields))
    per_date += threads * _BATCH_BYTES
    for summation in work.summations.values():
        share, result = summation.bytes_per_date
        per_date += threads * share + 1.5 * result
    dates = job.timeline.dates.size
    if grid is not None:
        pixels = 8.0 * grid.x.size * grid.y.size
        names = map_names(job.request)
        per_date += 16.0 * sums + pixels * len(names)
        kept = len(held_names(job.request)) + (len(names) if in_memory else 0)
        fixed += 2.0 * kept * pixels * dates
    if work.by_cell:
        fixed += 2 * 8.0 * dates * job.bodies.count
    return Needs(fixed, per_date)


def _legs(job: Job, needs: Needs, memory: float | None) -> list[Leg]:
    rows = job.timeline.axis.pressure.size
    ranges = plan_legs(needs, rows, job.streams["pressure"].time_chunk,
                       job.compactor.whole_history, memory, job.timeline.rows.at)
    return [Leg(first, last, job.compactor.output_range(first, last)) for first, last in ranges]


# -- the map ---------------------------------------------------------------------------------------


def expected_map(job: Job) -> MapGrid:
    """The map where its bounds are given, else one of the usual reach of a bowl."""
    table = job.scenario.map
    if table is None or table.bounds is None:
        low, high = _box(job, None)
        # a point source falls to 1 % of its peak at 4.5 depths
        reach = 4.5 * float(job.depth.max())
        west, south, east, north = (low[0] - reach, low[1] - reach, high[0] + reach,
                                    high[1] + reach)
        step = table.spacing if table and table.spacing else round_spacing(
            float(job.depth.min()), max(east - west, north - south))
        columns, rows = max(int((east - west) / step), 2), max(int((north - south) / step), 2)
        refuse_size(columns, rows, step)
        return MapGrid(west + (np.arange(columns) + 0.5) * step,
                       north - (np.arange(rows) + 0.5) * step, step)
    nowhere = np.zeros(2)
    return plan_map(table, nowhere, nowhere, float(job.depth.min()), job.unit,
                    lambda targets: np.zeros(targets.x.size))


def _box(job: Job, live: np.ndarray | None) -> tuple[np.ndarray, np.ndarray]:
    """Smallest and largest x, y, depth of cells, m."""
    low, high = np.full(3, np.inf), np.full(3, -np.inf)
    cells = np.arange(job.bodies.count) if live is None else live
    for start in range(0, cells.size, 100_000):
        corners = job.bodies.corners(cells[start:start + 100_000])
        low = np.minimum(low, corners.min(axis=(0, 1)))
        high = np.maximum(high, corners.max(axis=(0, 1)))
    return low, high


def look_ahead(job: Job, memory: float | None, workers: int | None,
               progress: Progress) -> MapGrid | None:
    """The map of a run; where its extent is left to us, the cells are gone through once for it."""
    if not job.wants_map:
        return None
    table = job.scenario.map
    if table is not None and table.bounds is not None:
        return expected_map(job)
    last = job.timeline.dates.size - 1
    total, moments = _moments_at(job, last, memory, workers, progress)
    # between the date of the largest total and the last one the bowl only grows or shrinks
    largest = int(np.abs(total).argmax())
    if largest != last:
        _, more = _moments_at(job, largest, memory, workers, progress)
        moments = {source: np.stack([more[source], moments[source]]) for source in moments}
    else:
        moments = {source: moment[None] for source, moment in moments.items()}
    live = np.nonzero(np.any([m.any(axis=0) for m in moments.values()], axis=0))[0]
    low, high = _box(job, live if live.size else None)

    def subsidence_at(targets: Targets) -> np.ndarray:
        field = Lattice().solve(job.bodies, moments, targets, job.earth, tolerance=_MAP_TOLERANCE)
        return np.asarray(np.abs(field["down"]).max(axis=0))

    return plan_map(table, low[:2], high[:2], float(low[2]), job.unit, subsidence_at)


def _moments_at(job: Job, date: int, memory: float | None, workers: int | None,
                progress: Progress) -> tuple[np.ndarray, dict[str, np.ndarray]]:
    """Volume lost at each date (date,), and the moments (cell,) at one of them."""
    threads = workers or os.cpu_count() or 1
    work = replace(_work(job), keep=date)
    legs = _legs(job, _needs(job, work, None, Footprints.none(), threads, False), memory)
    batches = cut_batches(job.streams["pressure"].blocks, job.bodies.column)
    moments = {source: np.zeros(job.bodies.count) for source in job.compactor.sources}
    total = []
    watch, gap = work.watch, None
    with progress.stage("extent", float(job.bodies.count) * len(legs), "cells") as advance, \
            Crew(work, batches, legs, threads) as crew:
        for leg in legs:
            tally = crew.leg(leg, lambda size: None, advance)
            watch.merge(tally.watch)
            gap = tally.gap if tally.gap is not None else gap
            total.append(tally.lost_by_region.sum(axis=1))
            for cells, some in tally.kept:
                for source, moment in some.items():
                    moments[source][cells] = moment
    if gap is not None:
        job.timeline.refuse_gap(gap)
    watch.finish()
    return np.concatenate(total), moments
