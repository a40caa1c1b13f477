"""Maps into the file chunk by chunk, compressed outside the library so that threads can share it.

The NetCDF library deflates under one lock. Here each chunk is shuffled and deflated by whichever
thread has it (both steps let go of the interpreter's lock), and stored as a finished chunk with
`h5py`, in the form the NetCDF library would have given it (HDF5 File Format Specification 3.0,
"Filter Pipeline": filter 2 shuffle, then filter 1 deflate). Without `h5py` the library does it all.
"""

from __future__ import annotations

import itertools
import sys
import zlib
from collections.abc import Mapping
from pathlib import Path
from typing import Any, Protocol

import netCDF4
import numpy as np
from numba import njit

from subside.export.layout import FILL
from subside.export.library import LIBRARY

try:
    import h5py
except ImportError:
    h5py = None
try:
    from isal.isal_zlib import compress as _deflate
except ImportError:
    _deflate = zlib.compress

__all__ = ["DirectChunks", "LibraryChunks", "MapFile", "open_maps"]

# Where the lowest byte of a number and the next lie in memory, among four.
_FIRST, _SECOND = (0, 1) if sys.byteorder == "little" else (3, 2)


class MapFile(Protocol):
    """A file whose map variables are there and await their values."""

    parallel: bool
    """Whether `write` gains from being called by several threads; it may be in any case."""

    def write(self, name: str, index: tuple[int, ...], values: np.ndarray) -> int:
        """Write one map (rows, columns); give the number of values that float32 cannot hold.

        Those are the infinite ones and the finite ones beyond 3.4e38.
        """

    def close(self) -> None:
        """Hand everything to the operating system."""


def open_maps(path: Path, maps: Mapping[str, int | None]) -> MapFile:
    """Open the file by the fastest way there is here.

    Parameters
    ----------
    path : Path
        A closed NetCDF-4 file.
    maps : mapping
        Each map variable and its number of dates (None: it has no dimension `time`).
    """
    return LibraryChunks(path) if h5py is None else DirectChunks(path, maps)


class DirectChunks:
    """Chunks compressed by the calling thread and stored as they are."""

    parallel = True

    def __init__(self, path: Path, maps: Mapping[str, int | None]) -> None:
        with LIBRARY:
            self._file = h5py.File(path, "r+")
            self._maps: dict[str, Any] = {}
            for name, steps in maps.items():
                self._maps[name] = self._file[name]
                if steps is not None:
                    self._file[name].resize(steps, axis=0)
            self._chunks = {name: data.chunks[-2:] for name, data in self._maps.items()}

    def write(self, name: str, index: tuple[int, ...], values: np.ndarray) -> int:
        high, wide = self._chunks[name]
        rows, columns = values.shape
        if values.dtype != np.float32:
            values = np.asarray(values, np.float64)
        values = np.ascontiguousarray(values)
        packed = np.empty(4 * high * wide, np.uint8)
        infinite = 0
        for row, column in itertools.product(range(0, rows, high), range(0, columns, wide)):
            infinite += int(_pack(values, row, column, high, wide, packed))
            data = _deflate(packed, 1)
            with LIBRARY:
                self._maps[name].id.write_direct_chunk((*index, row, column), data)
        return infinite

    def close(self) -> None:
        with LIBRARY:
            self._file.close()


class LibraryChunks:
    """Maps written through the NetCDF library."""

    parallel = False

    def __init__(self, path: Path) -> None:
        with LIBRARY:
            self._file = netCDF4.Dataset(str(path), "r+")
            self._file.set_auto_maskandscale(False)

    def write(self, name: str, index: tuple[int, ...], values: np.ndarray) -> int:
        with np.errstate(over="ignore"):
            values = np.asarray(values, np.float32)
        infinite = int(np.isinf(values).sum())
        with LIBRARY:
            self._file[name][index] = np.where(np.isnan(values), FILL, values)
        return infinite

    def close(self) -> None:
        with LIBRARY:
            if self._file.isopen():
                self._file.close()


@njit(cache=True, nogil=True)
def _pack(values, first_row, first_column, high, wide, packed):  # type: ignore[no-untyped-def]
    """Shuffle one chunk: float32, the fill value for NaN and beyond the map, bytes by place.

    Parameters
    ----------
    values : array (rows, columns), float32 or float64
        The whole map.
    first_row, first_column, high, wide : int
        The chunk, which may reach beyond the map.
    packed : array (4 high wide,) uint8
        Filled: the first bytes of all values, then all second bytes, ...

    Returns
    -------
    int
        How many values are infinite in float32.
    """
    rows = min(high, values.shape[0] - first_row)
    columns = min(wide, values.shape[1] - first_column)
    line = np.full(wide, FILL, np.float32)
    bits = line.view(np.uint32)
    planes = packed.reshape(4, high, wide)
    first, second = planes[_FIRST], planes[_SECOND]
    third, fourth = planes[3 - _SECOND], planes[3 - _FIRST]
    infinite = np.uint32(0)
    for row in range(high):
        if row < rows:
            for column in range(columns):
                line[column] = values[first_row + row, first_column + column]
            for column in range(columns):  # an exponent of ones: infinite, or NaN if more is set
                size = bits[column] & np.uint32(0x7FFFFFFF)
                infinite += np.uint32(size == np.uint32(0x7F800000))
                if size > np.uint32(0x7F800000):
                    line[column] = FILL
        elif row == rows:
            line[:] = FILL
        for column in range(wide):
            value = bits[column]
            first[row, column] = value & np.uint32(255)
            second[row, column] = (value >> np.uint32(8)) & np.uint32(255)
            third[row, column] = (value >> np.uint32(16)) & np.uint32(255)
            fourth[row, column] = value >> np.uint32(24)
    return infinite
