"""Variables that do not change in time, on the kept cells only, in storage order."""

from __future__ import annotations

from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass

import numpy as np

from subside.grid.cell_pass import in_layers, kept_numbers
from subside.grid.chunks import ChunkStore, find_chunks
from subside.grid.layout import Layout
from subside.grid.selection import Selection
from subside.grid.source import Source
from subside.grid.threads import processors, spread
from subside.grid.unpack import KEPT, columns, nan_bits

__all__ = ["Kept"]


@dataclass
class Kept:
    """The kept cells of a file, and what its static variables are there.

    Attributes
    ----------
    source : Source
    layout : Layout
    state : array (k, j, i) of uint8
        Of every cell of the file, see `subside.grid.unpack`.
    number : array (cell,) of int32
        Flat numbers in the file of the kept cells.
    """

    source: Source
    layout: Layout
    state: np.ndarray
    number: np.ndarray

    @classmethod
    def of(cls, source: Source, layout: Layout, state: np.ndarray) -> Kept:
        """The cells whose state is `KEPT`."""
        number = np.empty(np.count_nonzero(state == KEPT), np.int32)
        kept_numbers(state.reshape(-1), KEPT, number)
        return cls(source, layout, state, number)

    def values(self, name: str) -> np.ndarray:
        """A variable on the cells, or on some of their dimensions: float64 (cell,), as stored."""
        variable = self.source.variables[name]
        dims = self.layout.dims_of(self.source, name)
        if dims != self.layout.dims:
            return self.unfold(self.source.values(name), dims)
        axes = (0, 1, 1, 1, 0) if self.layout.structured else (0, 0, 0, 1, 0)
        store = find_chunks(self.source.file, name, variable, axes)
        if store is not None:
            return self._unpack(store)[:, 0].astype(float, copy=False)
        out = np.empty(len(self.number))
        for start, stop in self.layout.slabs(variable):
            cells = self.layout.cells_of(start, stop)
            own = slice(*np.searchsorted(self.number, (cells.start, cells.stop)))
            values = self.source.values(name, slice(start, stop)).reshape(-1)
            out[own] = values[self.number[own] - cells.start]
        return out

    def unfold(self, values: np.ndarray, dims: tuple[str, ...]) -> np.ndarray:
        """Values on some of the cells' dimensions to the kept cells."""
        if dims == self.layout.dims[1:] and values.dtype == float:  # the same in every layer
            layer, out = values.reshape(-1), np.empty(len(self.number))
            spread(lambda a, b: in_layers(layer, self.number, a, b, out), len(out))
            return out
        places = tuple(slice(None) if d in dims else None for d in self.layout.dims)
        whole = np.broadcast_to(values[places], self.layout.shape)
        return np.asarray(whole[np.unravel_index(self.number, self.layout.shape)])

    def corners(self) -> np.ndarray:
        """`corners` as stored, (cell, 24), float32 or float64."""
        variable = self.source.variables["corners"]
        axes = (0, 1, 1, 1, 2) if self.layout.structured else (0, 0, 0, 1, 2)
        store = find_chunks(self.source.file, "corners", variable, axes)
        if store is not None:
            return self._unpack(store)
        out = np.empty((len(self.number), 24))
        for start, stop in self.layout.slabs(variable):
            cells = self.layout.cells_of(start, stop)
            own = slice(*np.searchsorted(self.number, (cells.start, cells.stop)))
            values = self.source.values("corners", slice(start, stop)).reshape(-1, 24)
            out[own] = values[self.number[own] - cells.start]
        return out

    def _unpack(self, store: ChunkStore) -> np.ndarray:
        """All numbers of the kept cells (cell, numbers), NaN where missing."""
        bits = np.uint32 if store.dtype.itemsize == 4 else np.uint64
        out = np.empty((len(self.number), store.shape[4]), bits)
        nan = bits(nan_bits(store.dtype.itemsize))
        _, nj, ni = self.state.shape
        own = Selection(self.state, (0, nj, 0, ni), store.chunk[1:4], KEPT)

        def take(at: tuple[int, int]) -> None:
            n, e = at
            found = store.bytes_of((0, *own.chunks[n], e), 0, 1)
            if found is None:
                blank = nan if store.blank in store.missing else store.blank
                inner = store.inner[e][store.inner[e] >= 0]
                for _, number, length, _ in own.runs(n):
                    out[number:number + length, inner] = blank
                return
            raw, places, step, _ = found
            columns(raw, places, step, own.runs(n), store.inner[e], store.missing, nan, out)

        work = [(n, e) for n in range(len(own.chunks)) if own.touches(n)
                for e in range(len(store.inner))]
        with ThreadPoolExecutor(processors()) as pool:
            list(pool.map(take, work))
        return out.view(store.dtype)
