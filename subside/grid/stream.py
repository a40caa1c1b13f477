"""A variable in time, read block by block: never all dates of all cells at once."""

from __future__ import annotations

import threading
from abc import ABC, abstractmethod
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path
from typing import Any, NamedTuple

import numpy as np

from subside.grid.chunks import ChunkStore
from subside.grid.library import LibraryStore
from subside.grid.selection import Blocks, Selection
from subside.grid.unpack import ABSENT, KEPT, exponent_bits, gather, nan_bits, strays

__all__ = ["FileStream", "HeldStream", "Origin", "Store", "Strays", "Stream"]

Store = ChunkStore | LibraryStore
_HELD = 50_000  # cells in a block of an array in memory


class Strays:
    """Values found in cells that have none at the first date: their numbers by block and date.

    Noted by block and date, so that reading a thing twice counts it once.
    """

    def __init__(self) -> None:
        self.found: dict[tuple[int, int], tuple[int, int]] = {}

    def note(self, block: int, step: int, count: int, lowest: int) -> None:
        """`count` cells at a date, the lowest by its flat number in the file."""
        self.found[block, step] = (count, lowest)

    def merge(self, other: Strays) -> None:
        """Take over what another has found, in a worker's copy of the stream."""
        self.found.update(other.found)

    def first(self) -> tuple[int, int, int] | None:
        """`(step, count, lowest)` of the first date that has any."""
        if not self.found:
            return None
        step = min(s for _, s in self.found)
        here = [v for (_, s), v in list(self.found.items()) if s == step]
        return step, sum(c for c, _ in here), min(n for _, n in here)


class Origin(NamedTuple):
    """Where a date of a stream comes from.

    Attributes
    ----------
    file : Path or None
        One of several files; None where there is but one.
    step : int
        Its number in the file.
    attrs : dict
        Attributes of the variable there.
    """

    file: Path | None
    step: int
    attrs: dict[str, Any]


class Stream(ABC):
    """One variable in time.

    Attributes
    ----------
    name : str
    steps, cells : int
        Dates of the file; cells of the dataset.
    time_chunk : int
        Dates that are unpacked together.
    blocks : list of array of int32
        Numbers of the dataset's cells in each block, ascending; together each cell once. All
        streams of a grid have the same blocks.
    to_si : (factor, offset)
        ``si = value * factor + offset``.
    attrs : dict
        Attributes of the variable in SI, as it would have in the dataset.
    strays : Strays
    """

    name: str
    steps: int
    cells: int
    time_chunk: int
    blocks: list[np.ndarray]
    to_si: tuple[float, float]
    attrs: dict[str, Any]
    strays: Strays

    @abstractmethod
    def read(self, block: int, first: int, last: int, threads: int = 1) -> np.ndarray:
        """Dates `first` to ``last - 1`` of the file for the cells of a block.

        Parameters
        ----------
        threads : int
            That may work on this block.

        Returns
        -------
        array (last - first, cells of the block)
            float32 or float64 as stored, in the file's unit, NaN where missing. May be called by
            several threads.

        Raises
        ------
        InputError
            If the file is damaged, or no longer the one that was opened.
        """

    @abstractmethod
    def bytes_per_date(self, block: int) -> int:
        """Bytes of a date of the block as `read` gives it."""

    @property
    @abstractmethod
    def at_start(self) -> np.ndarray:
        """The first date (cells,), in the file's unit."""

    @property
    def files(self) -> tuple[Path, ...]:
        """The files it is read from; none of one that is in memory."""
        return ()

    def origin(self, step: int) -> Origin:
        """Where a date comes from."""
        return Origin(None, step, self.attrs)

    def start_si(self) -> np.ndarray:
        """The first date (cells,) as float64 in SI."""
        return self._si(self.at_start)

    def read_si(self, block: int, first: int, last: int, threads: int = 1) -> np.ndarray:
        """The same as float64 in SI."""
        return self._si(self.read(block, first, last, threads))

    def _si(self, stored: np.ndarray) -> np.ndarray:
        factor, offset = self.to_si
        values = np.multiply(stored, factor, dtype=float)
        if offset:
            values += offset
        return values


class HeldStream(Stream):
    """A variable that is in memory already, in SI.

    Parameters
    ----------
    values : array (nt, cell)
    """

    def __init__(self, values: np.ndarray, name: str = "pressure",
                 attrs: dict[str, Any] | None = None) -> None:
        self.values = np.asarray(values)
        self.name, self.attrs = name, attrs or {}
        self.steps, self.cells = self.values.shape
        self.time_chunk, self.to_si = 1, (1.0, 0.0)
        self.blocks = [np.arange(a, min(a + _HELD, self.cells), dtype=np.int32)
                       for a in range(0, self.cells, _HELD)]
        self.strays = Strays()

    def read(self, block: int, first: int, last: int, threads: int = 1) -> np.ndarray:
        """See `Stream.read`."""
        cells = self.blocks[block]
        return self.values[first:last, cells[0]:cells[-1] + 1]

    def bytes_per_date(self, block: int) -> int:
        """See `Stream.bytes_per_date`."""
        return len(self.blocks[block]) * self.values.dtype.itemsize

    @property
    def at_start(self) -> np.ndarray:
        """See `Stream.at_start`."""
        return self.values[0]


class FileStream(Stream):
    """A variable read from its file.

    Parameters
    ----------
    store : Store
        How it lies in the file.
    blocks : Blocks
        Which cells are kept, and in which blocks.
    """

    def __init__(self, store: Store, blocks: Blocks, to_si: tuple[float, float] = (1.0, 0.0),
                 attrs: dict[str, Any] | None = None) -> None:
        self.store, self.in_blocks = store, blocks
        self.name, self.to_si, self.attrs = store.name, to_si, attrs or {}
        self.steps, self.time_chunk = store.shape[0], min(store.chunk[0], store.shape[0])
        self.blocks, self.cells = blocks.cells, blocks.count
        self.strays = Strays()
        self._at_start: np.ndarray | None = None
        self._lock = threading.Lock()

    def __getstate__(self) -> dict[str, Any]:
        return {**self.__dict__, "_lock": None}

    def __setstate__(self, state: dict[str, Any]) -> None:
        self.__dict__.update(state)
        self._lock = threading.Lock()

    def bytes_per_date(self, block: int) -> int:
        """See `Stream.bytes_per_date`."""
        return len(self.blocks[block]) * self.store.dtype.itemsize

    @property
    def files(self) -> tuple[Path, ...]:
        """See `Stream.files`."""
        return (self.store.file.path,)

    @property
    def at_start(self) -> np.ndarray:
        """See `Stream.at_start`."""
        if self._at_start is None:
            values = np.empty(self.cells, self.store.dtype)
            for n, cells in enumerate(self.blocks):
                values[cells] = self.read(n, 0, 1)[0]
            self._at_start = values
        return self._at_start

    def keep_start(self, values: np.ndarray) -> None:
        """Note the first date (cells,), which has been read already."""
        self._at_start = values
        if isinstance(self.store, ChunkStore):
            self.store.hold_only(self.in_blocks.state)

    def read(self, block: int, first: int, last: int, threads: int = 1) -> np.ndarray:
        """See `Stream.read`."""
        if not 0 <= first < last <= self.steps:
            raise ValueError(f"dates {first} to {last} of a stream of {self.steps}")
        store = self.store
        out = np.empty((last - first, len(self.blocks[block])),
                       np.uint32 if store.dtype.itemsize == 4 else np.uint64)
        kept, absent = (self.in_blocks.select(block, store.chunk[1:4], s) for s in (KEPT, ABSENT))
        counts = np.zeros(last - first, np.int64)
        lowest = np.full(last - first, np.iinfo(np.int64).max)
        together = store.chunk[0]

        def take(at: tuple[int, int]) -> None:
            time, n = at
            self._take(kept, absent, n, max(first, time * together),
                       min(last, (time + 1) * together), first, out, counts, lowest)

        work = [(time, n) for time in range(first // together, -(-last // together))
                for n in range(len(kept.chunks)) if kept.touches(n) or absent.touches(n)]
        if threads > 1 and len(work) > 1:
            with ThreadPoolExecutor(min(threads, len(work))) as pool:
                list(pool.map(take, work))
        else:
            for at in work:
                take(at)
        for n in np.flatnonzero(counts):
            self.strays.note(block, first + int(n), int(counts[n]), int(lowest[n]))
        return out.view(store.dtype)

    def _take(self, kept: Selection, absent: Selection, n: int, first: int, last: int, start: int,
              out: np.ndarray, counts: np.ndarray, lowest: np.ndarray) -> None:
        """Dates first to last - 1 of chunk n of a block."""
        store = self.store
        at = (first // store.chunk[0], *kept.chunks[n], 0)
        found = store.bytes_of(at, first, last)
        nan = out.dtype.type(nan_bits(store.dtype.itemsize))
        row = first - start
        layer = store.chunk[1] * store.chunk[2] * store.chunk[3]
        if found is None:
            blank = nan if store.blank in store.missing else store.blank
            for _, number, length, _ in kept.runs(n):
                out[row:row + last - first, number:number + length] = blank
            return
        raw, places, step, base = found
        dates = (first - base, last - base)
        gather(raw, places, step, kept.runs(n), layer, *dates, store.missing, nan, out, row)
        if absent.touches(n):
            runs = absent.runs(n).copy()
            runs[:, 1] = np.cumsum(runs[:, 2]) - runs[:, 2]
            values = np.empty((last - first, runs[:, 2].sum()), out.dtype)
            gather(raw, places, step, runs, layer, *dates, store.missing, nan, values, 0)
            found_here, lowest_here = np.zeros(len(values), np.int64), np.zeros(len(values),
                                                                                np.int64)
            strays(values, exponent_bits(store.dtype.itemsize), runs, found_here, lowest_here)
            if found_here.any():
                with self._lock:
                    rows = row + np.flatnonzero(found_here)
                    counts[rows] += found_here[rows - row]
                    lowest[rows] = np.minimum(lowest[rows], lowest_here[rows - row])

