"""Whether two files hold the same geometry byte by byte, told without inflating it."""

from __future__ import annotations

from typing import Any

from subside.grid.chunks import ChunkStore, find_chunks
from subside.grid.layout import GEOMETRY
from subside.grid.source import Source

__all__ = ["StoredGeometry"]

_STRIDE = 7919  # a prime: files that follow each other are compared at chunks far apart


class StoredGeometry:
    """How the variables that say where cells are lie in a file.

    A program that writes the same geometry into each of its files compresses it to the same bytes.
    The sizes of all compressed chunks are a fingerprint that costs no reading.
    """

    def __init__(self, source: Source) -> None:
        self._stores = {name: _store(source, name) for name in source.variables if name in GEOMETRY}
        self._marks = {name: _mark(source.variables[name], store)
                       for name, store in self._stores.items()}

    def equals(self, other: StoredGeometry, number: int) -> bool:
        """Whether variables, attributes and sizes are the same, and the bytes of one chunk of each.

        False where it cannot be told. `number`, of the file, says which chunks are compared.
        """
        return (self._marks == other._marks
                and all(_same_bytes(store, other._stores[name], number * _STRIDE)
                        for name, store in self._stores.items()))


def _store(source: Source, name: str) -> ChunkStore | None:
    variable = source.variables[name]
    dims = variable.dimensions
    k, j = (int(d in dims) for d in "kj")
    axes = (0, k, j, int("i" in dims or "cell" in dims), 2 * int("corner" in dims))
    return find_chunks(source.file, name, variable, axes) if sum(axes) == len(dims) else None


def _mark(variable: Any, store: ChunkStore | None) -> Any:
    """All that must be equal."""
    said = {a: str(variable.getncattr(a)) for a in variable.ncattrs()}
    stored = None if store is None else (
        store.shape, store.chunk, str(store.dtype), store.shuffled, store.swapped, store.deflated,
        store.whole, str(store.blank), (store.place < 0).tobytes(), store.size.tobytes())
    return variable.dimensions, said, stored


def _same_bytes(mine: ChunkStore | None, theirs: ChunkStore | None, number: int) -> bool:
    if mine is None or theirs is None:
        return False
    at = number % mine.place.size
    place, other, size = (int(a.reshape(-1)[at]) for a in (mine.place, theirs.place, mine.size))
    return place < 0 or mine.file.read(place, size) == theirs.file.read(other, size)
