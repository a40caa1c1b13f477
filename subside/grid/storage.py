"""How a variable in time is read: by chunks where its storage is known here, else by netCDF4."""

from __future__ import annotations

from concurrent.futures import ThreadPoolExecutor

import numpy as np

from subside.grid.chunks import ChunkStore, find_chunks
from subside.grid.layout import Layout
from subside.grid.library import LibraryStore
from subside.grid.selection import make_blocks
from subside.grid.source import Source
from subside.grid.stream import FileStream, Store
from subside.grid.threads import processors

__all__ = ["first_date", "open_store"]

_HELD = 200_000_000  # bytes


def open_store(source: Source, name: str, layout: Layout) -> Store:
    """The storage of a variable (time, k, j, i) or (time, cell)."""
    source.refuse_text(name)
    axes = (1, 1, 1, 1, 0) if layout.structured else (1, 0, 0, 1, 0)
    variable = source.variables[name]
    return (find_chunks(source.file, name, variable, axes)
            or LibraryStore(source.file, name, variable, axes))


def first_date(store: Store, layout: Layout) -> np.ndarray:
    """The first date of every cell of the file, flat, NaN where missing.

    Chunks that hold further dates stay inflated for the next to read them, where they are no more
    than 200 MB.
    """
    if isinstance(store, ChunkStore):
        store.hold(_HELD)
    everything = FileStream(store, make_blocks(np.ones(layout.box, np.uint8), store.chunk[1:4]))
    values = np.empty(layout.size, store.dtype)

    def take(block: int) -> None:
        values[everything.blocks[block]] = everything.read(block, 0, 1)[0]

    with ThreadPoolExecutor(processors()) as pool:
        list(pool.map(take, range(len(everything.blocks))))
    return values
