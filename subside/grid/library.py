"""A variable in time read through netCDF4, one thread at a time: any storage the library knows."""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from subside.grid.disk import FileOnDisk
from subside.grid.unpack import byte_places, nan_bits

__all__ = ["LibraryStore", "filled"]

_STRIP = 100_000  # cells read together where the file has no chunks
_DATES = 16


def filled(raw: Any) -> np.ndarray:
    """Values as floats, float32 where they are so, NaN where missing."""
    kind = np.asarray(raw).dtype.newbyteorder("=")
    kind = kind if kind in (np.float32, np.float64) else np.dtype(float)
    if isinstance(raw, np.ma.MaskedArray):
        return np.ma.filled(np.ma.asarray(raw, dtype=kind), kind.type(np.nan))
    return np.asarray(raw, dtype=kind)


class LibraryStore:
    """The same as `chunks.ChunkStore`, through netCDF4 and under a lock.

    A "chunk" here holds all k of its j and i.
    """

    def __init__(self, file: FileOnDisk, name: str, variable: Any,
                 axes: tuple[int, int, int, int, int]) -> None:
        shape = variable.shape
        stored = variable.chunking()
        chunked = isinstance(stored, (list, tuple))
        self.file, self.name, self.axes = file, name, axes
        self.shape = (shape[0], *(1,) * (4 - len(shape)), *shape[1:], 1)
        _, nk, nj, ni, _ = self.shape
        if chunked:
            time = int(stored[0])
            cj, ci = (int(c) for c in ((1, *stored)[-2:] if axes[1] else (1, stored[-1])))
        else:
            time = min(shape[0], _DATES)
            ci = min(ni, max(1, _STRIP // nk))
            cj = min(nj, max(1, _STRIP // (nk * ni)))
        self.chunk = (time, nk, cj, ci, 1)
        kind = variable.dtype.newbyteorder("=")
        plain = kind in (np.float32, np.float64) and not (
            {"scale_factor", "add_offset"} & set(variable.ncattrs()))
        self.dtype = kind if plain else np.dtype(float)
        nan = nan_bits(self.dtype.itemsize)
        self.missing = np.full(4, nan)
        self.blank = nan

    def bytes_of(self, at: tuple[int, ...], first: int, last: int
                 ) -> tuple[np.ndarray, np.ndarray, int, int]:
        """A chunk's dates first to last - 1 as bytes, see `ChunkStore.bytes_of`."""
        import netCDF4
        from xarray.backends.locks import HDF5_LOCK

        _, nk, nj, ni, _ = self.shape
        _, _, cj, ci, _ = self.chunk
        j, i = at[2] * cj, at[3] * ci
        place = (slice(None), slice(j, j + cj), slice(i, i + ci))
        index = (slice(first, last), *(place if self.axes[1] else place[-1:]))
        self.file.check()
        try:
            # closed at once: left to the garbage collector, it would be closed without the lock
            with HDF5_LOCK, netCDF4.Dataset(self.file.path, "r") as dataset:
                values = filled(dataset.variables[self.name][index])
        except (OSError, RuntimeError) as error:
            raise self.file.damaged(str(error)) from None
        values = values.astype(self.dtype, copy=False).reshape(
            last - first, nk, min(cj, nj - j), min(ci, ni - i))
        whole = np.empty((last - first, nk, cj, ci), self.dtype)
        whole[:, :, :values.shape[2], :values.shape[3]] = values
        places, step = byte_places(math.prod(whole.shape), self.dtype.itemsize, False, False)
        raw = whole.reshape(-1).view(np.uint8)
        raw.flags.writeable = False  # the same kind of array as the bytes of a file: compiled once
        return raw, places, step, first
