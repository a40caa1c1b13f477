"""Batches on a Dask cluster: the same work, on other processes or machines.

The cells of a run are sent to each worker once; pressures the workers read themselves where they
see the file, else they are sent block by block. Parts of the work map to workers, what they amount
to is added up in a tree, and only the sum comes back. What a part remembers from leg to leg stays
with the cluster, so that a worker that is lost costs its own parts only: they are done again
elsewhere.
"""

from __future__ import annotations

import copy
import platform
import sys
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from importlib import metadata
from itertools import pairwise
from pathlib import Path
from types import TracebackType
from typing import Any, Self

import numpy as np

from subside.batches import Batch
from subside.compaction.findings import Findings
from subside.errors import CannotDo, SubsideError
from subside.grid.watch import PressureWatch
from subside.hooks.registry import PLUGIN_MODULE
from subside.legs import Leg
from subside.superposition.summation import one_blas_thread
from subside.work import Memory, Tally, Work, file_dates

__all__ = ["ClusterCrew"]

_INSTALL = "pip install 'subside[cluster]'"
_PARTS_FOR_A_WORKER = 4
"""So many parts that a lost worker costs little, and few enough that sending costs little."""
_BRANCHES = 4
"""Tallies that are added up at one place of the tree."""
_TIMEOUT = "10s"
_COMPARED = ("subside", "numpy", "scipy", "numba", "xarray")


@dataclass
class _Part:
    """What a worker hands back: a tally, and what its batches remember."""

    tally: Tally
    memories: dict[int, Memory]


class ClusterCrew:
    """Workers of a Dask cluster that go through all batches, leg by leg.

    Parameters
    ----------
    work : Work
    batches : sequence of Batch
    legs : sequence of Leg
        Not needed here; a `Crew` takes them.
    workers : int
        Of a local cluster.
    address : str
        Of a scheduler, or ``"local"``.

    Raises
    ------
    CannotDo
        Dask is not installed, the scheduler does not answer, or its workers have other versions.
    """

    def __init__(self, work: Work, batches: Sequence[Batch], legs: Sequence[Leg], workers: int,
                 address: str) -> None:
        self._work, self._batches = work, batches
        self._probe: Memory | None = None
        self._client, self._cluster = _connect(address, workers)
        try:
            self._compare_versions()
            self._sends = not self._workers_see_files()
            _carry_plugins()
            count = max(len(self._client.scheduler_info(n_workers=-1)["workers"]), 1)
            self._groups = _groups(batches, _PARTS_FOR_A_WORKER * count, self._sends)
            self._work_there = self._client.scatter(work, broadcast=True, hash=False)
        except BaseException:
            self._close()
            raise
        self._parts: list[Any] = []

    def __enter__(self) -> Self:
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None,
                 trace: TracebackType | None) -> None:
        self._close()

    def _close(self) -> None:
        self._client.close()
        if self._cluster is not None:
            self._cluster.close()

    @property
    def findings(self) -> list[Findings]:
        """Of the laws, of all batches."""
        found = self._client.gather([self._client.submit(_findings, part) for part in self._parts])
        return [one for some in found for one in some]

    def leg(self, leg: Leg, ready: Callable[[np.ndarray], None],
            done: Callable[[int], None]) -> Tally:
        """All batches through a leg, in one tally; see `Crew.leg`."""
        from distributed import as_completed

        keep = self._dates_to_keep(leg, ready)
        before = self._parts or [None] * len(self._groups)
        first, last = file_dates(self._work.timeline, leg)
        parts = []
        for group, part in zip(self._groups, before, strict=True):
            raw = None
            if self._sends:
                raw = {block: _read(self._work, block, first, last)
                       for block in {batch.block for batch in group}}
            parts.append(self._client.submit(_treat, self._work_there, group, leg, keep, part, raw,
                                             pure=False))
        cells = {part.key: sum(batch.cells.size for batch in group)
                 for part, group in zip(parts, self._groups, strict=True)}
        tallies = [self._client.submit(_tally_of, part, pure=False) for part in parts]
        while len(tallies) > 1:
            tallies = [self._client.submit(_add_up, self._work_there, tallies[n:n + _BRANCHES],
                                           pure=False)
                       for n in range(0, len(tallies), _BRANCHES)]
        try:
            for part in as_completed(parts):
                if part.status == "error":
                    part.result()  # raises; of the others nothing is fetched but their sum
                done(cells[part.key])
            tally: Tally = tallies[0].result()
        except SubsideError:
            raise
        except Exception as error:
            raise CannotDo(f"the cluster could not do its work: {type(error).__name__}: {error}. "
                           "See the logs of its workers, or run without --cluster.") from error
        self._parts = parts
        return tally

    def _dates_to_keep(self, leg: Leg, ready: Callable[[np.ndarray], None]) -> tuple[int, ...]:
        """The first batch, done here, tells at which dates the bowl will be large."""
        batch = self._batches[0]
        first, last = file_dates(self._work.timeline, leg)
        self._probe = self._probe or self._work.begin(batch)
        scratch = Tally({}, np.zeros((0, 0)), np.zeros(0),
                        self._work.watch.fresh(self._work.streams["pressure"]))
        raw = _read(self._work, batch.block, first, last)
        strength = self._work.strength(scratch, batch, leg, raw, self._probe)
        ready(np.abs(strength.volume_lost).sum(axis=1))
        # those that are summed plainly keep none, whatever they are told
        return max((s.keep for s in self._work.summations.values()), key=len, default=())

    def _compare_versions(self) -> None:
        here = _versions()
        for worker, there in self._client.run(_versions).items():
            other = [f"{name} {there[name]} there and {version} here"
                     for name, version in here.items() if there[name] != version]
            if other:
                raise CannotDo(f"the cluster's worker {worker} has other versions: "
                               f"{', '.join(other)}. Install the same ones.")

    def _workers_see_files(self) -> bool:
        """Whether every worker sees the very files that were opened here."""
        # by the very names that workers will open
        streams = self._work.streams.values()
        files = {str(file) for stream in streams for file in stream.files}
        if not all(stream.files for stream in streams):
            return False
        here = {file: _mark(file) for file in files}
        seen = self._client.run(lambda names: {name: _mark(name) for name in names}, list(here))
        return all(there == here for there in seen.values())


def _connect(address: str, workers: int) -> tuple[Any, Any]:
    """A client, and the cluster that was started for it."""
    try:
        from distributed import Client, LocalCluster
    except ImportError:
        raise CannotDo(f"--cluster needs Dask distributed: {_INSTALL}") from None
    if address == "local":
        cluster = LocalCluster(n_workers=workers, threads_per_worker=1, processes=True,
                               dashboard_address="127.0.0.1:0", silence_logs=50)
        return Client(cluster), cluster
    try:
        return Client(address, timeout=_TIMEOUT), None
    except (OSError, ValueError, TimeoutError) as error:
        raise CannotDo(f"--cluster {address}: the scheduler does not answer ({error}); check the "
                       "address, such as tcp://host:8786.") from None


def _carry_plugins() -> None:
    """Plug-in files that the user named are sent along, for workers need not have them."""
    import cloudpickle

    for name, module in list(sys.modules.items()):
        if name.startswith(PLUGIN_MODULE):
            cloudpickle.register_pickle_by_value(module)


def _groups(batches: Sequence[Batch], count: int, by_block: bool) -> list[list[Batch]]:
    """Batches in about `count` groups; those of a block together where blocks are sent."""
    if by_block:
        blocks: dict[int, list[Batch]] = {}
        for batch in batches:
            blocks.setdefault(batch.block, []).append(batch)
        return list(blocks.values())
    edges = np.linspace(0, len(batches), min(count, len(batches)) + 1).astype(int)
    return [list(batches[a:b]) for a, b in pairwise(edges)]


def _mark(name: str) -> tuple[int, int] | None:
    """Size and time of a file, to tell whether it is the same."""
    file = Path(name)
    return (file.stat().st_size, file.stat().st_mtime_ns) if file.is_file() else None


def _versions() -> dict[str, str]:
    return {"python": platform.python_version()} | {n: metadata.version(n) for n in _COMPARED}


# -- what workers do -------------------------------------------------------------------------------


def _read(work: Work, block: int, first: int, last: int) -> dict[str, np.ndarray]:
    return {name: work.streams[name].read(block, first, last)
            for name in ("pressure", *work.compactor.fields)}


def _treat(work: Work, group: Sequence[Batch], leg: Leg, keep: tuple[int, ...],
           before: _Part | None, raw: dict[int, dict[str, np.ndarray]] | None) -> _Part:
    """Some batches through a leg. Nothing that came in is changed: it may be needed again."""
    mine = replace(work, summations={name: copy.copy(s) for name, s in work.summations.items()})
    for summation in mine.summations.values():
        summation.begin(leg.steps, keep)
    memories = copy.deepcopy(before.memories) if before is not None else {}
    tally = mine.tally(leg)
    first, last = file_dates(work.timeline, leg)
    held: dict[int, dict[str, np.ndarray]] = raw or {}
    with one_blas_thread():
        for batch in group:
            if batch.block not in held:
                held = {batch.block: _read(work, batch.block, first, last)}
            memory = memories.get(batch.number) or mine.begin(batch)
            memories[batch.number] = memory
            strength = mine.strength(tally, batch, leg, held[batch.block], memory)
            mine.take(tally, batch, leg, strength)
    watch = tally.watch  # its arrays over all cells stay here
    seen = watch.seen if isinstance(watch, PressureWatch) else watch
    return _Part(replace(tally, watch=seen), memories)


def _tally_of(part: _Part) -> Tally:
    return part.tally


def _add_up(work: Work, tallies: list[Tally]) -> Tally:
    return work.merge([copy.deepcopy(tally) for tally in tallies])


def _findings(part: _Part) -> list[Findings]:
    return [memory.state.findings for memory in part.memories.values()]
