"""A variable in time whose dates are spread over several files, as one stream."""

from __future__ import annotations

from collections.abc import Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from subside.grid.stream import FileStream, Origin, Strays, Stream

__all__ = ["JoinedStream", "Part"]


@dataclass(frozen=True)
class Part:
    """What a file adds to a joined stream: dates `skip` to the last of `stream`."""

    stream: FileStream
    skip: int = 0

    @property
    def steps(self) -> int:
        """Dates it adds."""
        return self.stream.steps - self.skip


class JoinedStream(Stream):
    """Streams of the same cells in the same blocks, one after another in time.

    Values come as they are stored where all files have one unit, else as float64 in SI.

    Parameters
    ----------
    parts : sequence of Part
        At least one, each of at least one date. Strays that they find from now on are noted here.
    """

    def __init__(self, parts: Sequence[Part]) -> None:
        first = parts[0].stream
        self._parts = list(parts)
        self._ends = np.cumsum([part.steps for part in parts])
        self._one_unit = len({part.stream.to_si for part in parts}) == 1
        self._dtype = (np.result_type(*{part.stream.store.dtype for part in parts})
                       if self._one_unit else np.dtype(float))
        self.name, self.attrs = first.name, first.attrs
        self.to_si = first.to_si if self._one_unit else (1.0, 0.0)
        self.blocks, self.cells, self.steps = first.blocks, first.cells, int(self._ends[-1])
        self.time_chunk = _usual_length(parts)
        self.strays = Strays()
        for part, end in zip(parts, self._ends, strict=True):
            part.stream.strays = _ShiftedStrays(self.strays, int(end) - part.stream.steps)

    def read(self, block: int, first: int, last: int, threads: int = 1) -> np.ndarray:
        """See `Stream.read`."""
        if not 0 <= first < last <= self.steps:
            raise ValueError(f"dates {first} to {last} of a stream of {self.steps}")
        numbers = range(self._part_of(first), self._part_of(last - 1) + 1)
        if len(numbers) == 1:
            return self._read_part(numbers[0], block, first, last, threads)
        out = np.empty((last - first, len(self.blocks[block])), self._dtype)

        def take(number: int) -> None:
            a = max(first, int(self._ends[number]) - self._parts[number].steps)
            b = min(last, int(self._ends[number]))
            out[a - first:b - first] = self._read_part(number, block, a, b,
                                                       max(1, threads // len(numbers)))

        if threads > 1:
            with ThreadPoolExecutor(min(threads, len(numbers))) as pool:
                list(pool.map(take, numbers))
        else:
            for number in numbers:
                take(number)
        return out

    def _read_part(self, number: int, block: int, first: int, last: int, threads: int
                   ) -> np.ndarray:
        """Dates of the joined stream that all lie in one part."""
        stream = self._parts[number].stream
        shift = stream.steps - int(self._ends[number])
        read = stream.read if self._one_unit else stream.read_si
        return read(block, first + shift, last + shift, threads).astype(self._dtype, copy=False)

    def _part_of(self, step: int) -> int:
        return int(np.searchsorted(self._ends, step, side="right"))

    def bytes_per_date(self, block: int) -> int:
        """See `Stream.bytes_per_date`."""
        return len(self.blocks[block]) * self._dtype.itemsize

    @property
    def files(self) -> tuple[Path, ...]:
        """See `Stream.files`."""
        return tuple(file for part in self._parts for file in part.stream.files)

    def origin(self, step: int) -> Origin:
        """See `Stream.origin`."""
        number = self._part_of(step)
        stream = self._parts[number].stream
        return Origin(stream.store.file.path, step + stream.steps - int(self._ends[number]),
                      stream.attrs)

    @property
    def at_start(self) -> np.ndarray:
        """See `Stream.at_start`."""
        first = self._parts[0].stream
        start = first.at_start if self._one_unit else first.start_si()
        return start.astype(self._dtype, copy=False)


class _ShiftedStrays(Strays):
    """Notes what a file finds under the dates of the joined stream."""

    def __init__(self, into: Strays, by: int) -> None:
        super().__init__()
        self._into, self._by = into, by

    def note(self, block: int, step: int, count: int, lowest: int) -> None:
        """See `Strays.note`."""
        self._into.note(block, step + self._by, count, lowest)


def _usual_length(parts: Sequence[Part]) -> int:
    """The number of dates most often unpacked together: legs of so many cut few chunks."""
    lengths: list[int] = []
    for part in parts:
        chunk = part.stream.time_chunk
        edges = [part.skip, *range((part.skip // chunk + 1) * chunk, part.stream.steps, chunk),
                 part.stream.steps]
        lengths += np.diff(edges).tolist()
    found, counts = np.unique(lengths, return_counts=True)
    return int(found[counts == counts.max()][-1])
