"""Batches on the threads of this machine: reading ahead, working, adding up."""

from __future__ import annotations

import queue
from collections import deque
from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import Future, ThreadPoolExecutor
from contextlib import contextmanager
from types import TracebackType
from typing import Protocol, Self

import numpy as np

from subside.batches import Batch
from subside.compaction.findings import Findings
from subside.errors import InputError
from subside.legs import Leg
from subside.work import Memory, Tally, Work, file_dates

__all__ = ["BLOCKS_AHEAD", "Crew", "Team"]

BLOCKS_AHEAD = 2
"""Storage blocks that are read or wait while others are worked on."""


class Team(Protocol):
    """Whoever takes all batches through a leg."""

    @property
    def findings(self) -> list[Findings]:
        """Of the laws, of all batches."""

    def leg(self, leg: Leg, ready: Callable[[np.ndarray], None],
            done: Callable[[int], None]) -> Tally:
        """See `Crew.leg`."""


class Crew:
    """Threads that go through all batches, leg by leg.

    Parameters
    ----------
    work : Work
    batches : sequence of Batch
    legs : sequence of Leg
        In the order in which they will be asked for.
    threads : int
    """

    def __init__(self, work: Work, batches: Sequence[Batch], legs: Sequence[Leg],
                 threads: int) -> None:
        self._work, self._threads = work, threads
        self._memory: dict[int, Memory] = {}
        self._of_block: dict[int, list[Batch]] = {}
        for batch in batches:
            self._of_block.setdefault(batch.block, []).append(batch)
        few = len(self._of_block) < 2 * threads
        self._readers = ThreadPoolExecutor(1 if few else min(threads, BLOCKS_AHEAD))
        self._threads_of_block = threads if few else 1
        self._pool = ThreadPoolExecutor(threads)
        self._wanted = deque((leg, block) for leg in legs for block in self._of_block)
        self._coming: deque[Future[dict[str, np.ndarray]]] = deque()

    def __enter__(self) -> Self:
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None,
                 trace: TracebackType | None) -> None:
        self._readers.shutdown(wait=True, cancel_futures=True)
        self._pool.shutdown(wait=True, cancel_futures=True)
        self._memory.clear()

    @property
    def findings(self) -> list[Findings]:
        """Of the laws, of all batches."""
        return [memory.state.findings for memory in self._memory.values()]

    def leg(self, leg: Leg, ready: Callable[[np.ndarray], None],
            done: Callable[[int], None]) -> Tally:
        """All batches through a leg, in one tally.

        Parameters
        ----------
        leg : Leg
        ready : callable
            Told the size of the first batch's moments by date, (date,), before any is added up.
        done : callable
            Told the number of cells finished since the last call.
        """
        free: queue.SimpleQueue[Tally] = queue.SimpleQueue()
        tallies: list[Tally] = []
        started = False
        waiting: deque[list[Future[int]]] = deque()
        with self._cancelling(waiting, tallies):
            for block, batches in self._of_block.items():
                raw = self._next()
                if not started:
                    first, *batches = batches
                    tally = self._begin(first, leg, raw, ready)
                    tallies += [tally, *(self._work.tally(leg) for _ in range(self._threads - 1))]
                    for one in tallies:
                        free.put(one)
                    done(first.cells.size)
                    started = True
                waiting.append([self._pool.submit(self._one, free, batch, leg, raw)
                                for batch in batches])
                del raw, block
                while len(waiting) >= BLOCKS_AHEAD:
                    self._finish(waiting.popleft(), done)
            while waiting:
                self._finish(waiting.popleft(), done)
        return self._work.merge(tallies)

    def _begin(self, batch: Batch, leg: Leg, raw: dict[str, np.ndarray],
               ready: Callable[[np.ndarray], None]) -> Tally:
        """The first batch tells at which dates the bowl will be large."""
        memory = self._memory.get(batch.number) or self._work.begin(batch)
        self._memory[batch.number] = memory
        watch = self._work.watch.fresh(self._work.streams["pressure"])
        scratch = Tally({}, np.zeros((0, 0)), np.zeros(0), watch)
        try:
            strength = self._work.strength(scratch, batch, leg, raw, memory)
        except InputError:
            self._work.watch.merge(watch)
            raise
        ready(np.abs(strength.volume_lost).sum(axis=1))
        tally = self._work.tally(leg)
        tally.watch, tally.gap = watch, scratch.gap
        self._work.take(tally, batch, leg, strength)
        return tally

    def _one(self, free: queue.SimpleQueue[Tally], batch: Batch, leg: Leg,
             raw: dict[str, np.ndarray]) -> int:
        tally = free.get()
        try:
            memory = self._memory.get(batch.number) or self._work.begin(batch)
            self._memory[batch.number] = memory
            strength = self._work.strength(tally, batch, leg, raw, memory)
            self._work.take(tally, batch, leg, strength)
        finally:
            free.put(tally)
        return int(batch.cells.size)

    @staticmethod
    def _finish(futures: list[Future[int]], done: Callable[[int], None]) -> None:
        for future in futures:
            done(future.result())

    @contextmanager
    def _cancelling(self, waiting: deque[list[Future[int]]],
                    tallies: list[Tally]) -> Iterator[None]:
        """Whatever goes wrong, no batch begins after it.

        If a law found its cells impossible, what is wrong with their pressures is said first.
        """
        try:
            yield
        except BaseException as error:
            for future in (future for futures in waiting for future in futures):
                future.cancel()
            if isinstance(error, InputError):
                self._pool.shutdown(wait=True)
                for tally in tallies:
                    self._work.watch.merge(tally.watch)
                self._work.watch.finish()
            raise

    def _next(self) -> dict[str, np.ndarray]:
        """The raw values of the next block that is wanted; others are read meanwhile."""
        while self._wanted and len(self._coming) < BLOCKS_AHEAD:
            leg, block = self._wanted.popleft()
            self._coming.append(self._readers.submit(self._read, leg, block))
        return self._coming.popleft().result()

    def _read(self, leg: Leg, block: int) -> dict[str, np.ndarray]:
        first, last = file_dates(self._work.timeline, leg)
        streams = self._work.streams
        return {name: streams[name].read(block, first, last, threads=self._threads_of_block)
                for name in ("pressure", *self._work.compactor.fields)}
