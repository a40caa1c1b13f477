"""One batch of cells through one leg: pressure, law, moments, and what they add up to.

This is all that a thread, a process or another machine does; the rest of a run happens once per leg
(`pipeline`). What batches amount to is kept in tallies, which add up.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from functools import partial

import numpy as np

from subside.batches import Batch
from subside.compaction.apply import Compactor, State, Strength
from subside.grid.seen import Seen
from subside.grid.stream import Stream
from subside.grid.watch import PressureWatch
from subside.hooks.contracts import EarthModel
from subside.legs import Leg
from subside.observe.footprint import column_sums
from subside.superposition.summation import Share, Summation
from subside.timeline import StartGap, Timeline

__all__ = ["Memory", "Tally", "Work", "file_dates"]


@dataclass
class Memory:
    """What is remembered of a batch from leg to leg.

    Attributes
    ----------
    state : State
        Of its laws.
    last : array (m,) or None
        The pressure seen last, as it is stored.
    """

    state: State
    last: np.ndarray | None = None


@dataclass
class Tally:
    """What some batches amount to over a leg.

    Attributes
    ----------
    shares : dict of str to Share
        Of each superposition.
    lost_by_region : array (date, region)
        Volume lost, m3.
    bowl : array (date,)
        Volume of the whole bowl, m3.
    columns : list of (columns, sums (date, term, n))
        Volume lost by pillars, from `observe.footprint.column_sums`.
    cells : list of (cells, volume lost (date, m))
        Where it is wanted cell by cell.
    watch : PressureWatch or Seen
        What was seen of the pressures.
    kept : list of (cells, moments)
        Moments by source (m,) at one date, where they are wanted.
    gap : StartGap or None
    """

    shares: dict[str, Share]
    lost_by_region: np.ndarray
    bowl: np.ndarray
    watch: PressureWatch | Seen
    columns: list[tuple[np.ndarray, np.ndarray]] = field(default_factory=list)
    cells: list[tuple[np.ndarray, np.ndarray]] = field(default_factory=list)
    kept: list[tuple[np.ndarray, dict[str, np.ndarray]]] = field(default_factory=list)
    gap: StartGap | None = None


@dataclass
class Work:
    """What a worker needs to know; it changes nothing in here.

    Attributes
    ----------
    timeline : Timeline
    compactor : Compactor
    streams : dict of str to Stream
        ``"pressure"`` and the fields in time.
    initial : array (cell,) or None
        Pressure at the start where the scenario gives it, Pa.
    watch : PressureWatch
        An empty one, of which tallies get copies.
    earth : EarthModel
    depth : array (cell,)
        Of the cells' centres below the ground or seabed, m.
    region : array of int (cell,)
    regions : int
    column : array of int (cell,)
    summations : dict of str to Summation
        ``"map"``, ``"points"``, and one for each region that is wanted: ``"region 0"``, ...
    by_column, by_cell : bool
        Whether volume lost is wanted by pillar, by cell.
    shape : array (cell, 3) or None
        Of the cells' thickness, of `observe.footprint.Footprints`.
    keep : int or None
        Output date whose moments are wanted cell by cell.
    """

    timeline: Timeline
    compactor: Compactor
    streams: dict[str, Stream]
    initial: np.ndarray | None
    watch: PressureWatch
    earth: EarthModel
    depth: np.ndarray
    region: np.ndarray
    regions: int
    column: np.ndarray
    summations: dict[str, Summation] = field(default_factory=dict)
    by_column: bool = False
    by_cell: bool = False
    shape: np.ndarray | None = None
    keep: int | None = None

    def begin(self, batch: Batch) -> Memory:
        """The memory of a batch before the first leg."""
        return Memory(self.compactor.begin(batch.cells))

    def tally(self, leg: Leg) -> Tally:
        """An empty one."""
        return Tally({name: job.share() for name, job in self.summations.items()},
                     np.zeros((leg.steps, self.regions)), np.zeros(leg.steps),
                     self.watch.fresh(self.streams["pressure"]))

    def strength(self, tally: Tally, batch: Batch, leg: Leg, raw: Mapping[str, np.ndarray],
                 memory: Memory) -> Strength:
        """What a batch does at the leg's dates, from the `raw` values of its storage block.

        Raises
        ------
        InputError
            From a law, or for what the pressures are.
        """
        rows, watch, pressure = self.timeline.rows, tally.watch, self.streams["pressure"]
        begin, _ = file_dates(self.timeline, leg)
        assert isinstance(watch, PressureWatch)

        def read(name: str, first: int, last: int) -> np.ndarray:
            return _in_si(_stored(raw[name], first - begin, last - begin, batch),
                          self.streams[name].to_si)

        def read_pressure(first: int, last: int) -> np.ndarray:
            stored = _stored(raw["pressure"], first - begin, last - begin, batch)
            values = _in_si(stored, pressure.to_si)
            before = None if memory.last is None else _in_si(memory.last, pressure.to_si)
            watch.see(batch.cells, first, values, before)
            memory.last = stored[-1].copy()
            return values

        initial = None if self.initial is None else self.initial[batch.cells]
        values = rows.pressure(read_pressure, leg.first, leg.last, initial)
        if leg.first == 0 and self.timeline.compares and initial is not None:
            gap = StartGap.of(initial, values[0], batch.cells)
            tally.gap = gap if tally.gap is None else tally.gap.worse(gap)
        fields = {name: rows.field(partial(read, name), leg.first, leg.last)
                  for name in self.compactor.fields}
        return self.compactor.advance(memory.state, leg.first, leg.last, values, fields)

    def take(self, tally: Tally, batch: Batch, leg: Leg, strength: Strength) -> None:
        """Add what a batch does to a tally."""
        lost, moments = strength.volume_lost, strength.moments
        if not lost.shape[0]:
            return
        region = self.region[batch.cells]
        for number in np.unique(region):
            mine = region == number
            tally.lost_by_region[:, number] += (lost if mine.all() else lost[:, mine]).sum(axis=1)
        for source, moment in moments.items():
            tally.bowl += moment @ self.earth.volume_ratio(source, self.depth[batch.cells])
        for name, job in self.summations.items():
            mine = region == _region_of(name)
            if _region_of(name) < 0 or mine.all():
                job.add(tally.shares[name], batch.cells, moments)
            elif mine.any():
                job.add(tally.shares[name], batch.cells[mine],
                        {source: moment[:, mine] for source, moment in moments.items()})
        if self.by_column:
            shape = None if self.shape is None else self.shape[batch.cells]
            tally.columns.append(column_sums(self.column[batch.cells], lost, shape))
        if self.by_cell:
            tally.cells.append((batch.cells, lost))
        if self.keep is not None and leg.dates[0] <= self.keep < leg.dates[1]:
            tally.kept.append((batch.cells, {source: moment[self.keep - leg.dates[0]].copy()
                                             for source, moment in moments.items()}))

    def merge(self, tallies: Iterable[Tally]) -> Tally:
        """All of them as one; they are used up."""
        first, *others = tallies
        for other in others:
            for name, job in self.summations.items():
                job.merge(first.shares[name], other.shares[name])
            first.lost_by_region += other.lost_by_region
            first.bowl += other.bowl
            first.columns += other.columns
            first.cells += other.cells
            first.kept += other.kept
            seen = other.watch
            first.watch.merge(seen.seen if isinstance(seen, PressureWatch) else seen)
            if other.gap is not None:
                first.gap = other.gap if first.gap is None else first.gap.worse(other.gap)
        return first


def file_dates(timeline: Timeline, leg: Leg) -> tuple[int, int]:
    """Which dates of the file a leg reads: first, and one past the last."""
    asked = []

    def read(first: int, last: int) -> np.ndarray:
        asked.append((first, last))
        return np.zeros((last - first, 0))

    timeline.rows.pressure(read, leg.first, leg.last, np.zeros(0))
    timeline.rows.field(read, leg.first, leg.last)
    return min(first for first, _ in asked), max(last for _, last in asked)


def _stored(raw: np.ndarray, first: int, last: int, batch: Batch) -> np.ndarray:
    """Rows of a block's values for a batch, as they are stored."""
    values = raw[first:last]
    return values if batch.places is None else values[:, batch.places]


def _in_si(stored: np.ndarray, to_si: tuple[float, float]) -> np.ndarray:
    factor, offset = to_si
    values = np.multiply(stored, factor, dtype=float)
    if offset:
        values += offset
    return values


def _region_of(name: str) -> int:
    """Number of the region a superposition is for, -1 for all."""
    return int(name.removeprefix("region ")) if name.startswith("region ") else -1
