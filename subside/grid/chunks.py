"""Where a variable lies in its file: storage chunks read and inflated without the file's library.

HDF5 is asked once for the byte places of all chunks; then threads read and inflate them side by
side. What is stored in a way that is not known here goes through netCDF4, see `library`.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from subside.grid.disk import FileOnDisk
from subside.grid.unpack import byte_places

_zlib: Any
try:
    from isal import isal_zlib as _zlib
except ImportError:  # the same format, more slowly
    import zlib as _zlib

__all__ = ["ChunkStore", "find_chunks"]

_SHUFFLE, _DEFLATE = 2, 1  # HDF5's numbers of the filters
_STRIP = 100_000  # values read together where a variable is stored in one piece


@dataclass
class ChunkStore:
    """A variable in storage chunks: (time, k, j, i, numbers of a cell), ones where it has less.

    Attributes
    ----------
    file : FileOnDisk
    name : str
    shape, chunk : tuple of int (5,)
        Of the variable and of a chunk. The last is not cut along: see `inner`.
    inner : list of array
        Columns of a cell's numbers held by each chunk along the last axis, -1 beyond the end.
    dtype : dtype
        Native float32 or float64.
    place, size : array (chunks of time, k, j, i, inner)
        Byte place (-1 where never written) and bytes stored.
    whole : bool
        Not stored in chunks: the last piece along an axis is shorter.
    missing : array (4,)
        Patterns that mean no value.
    blank : unsigned
        The pattern of what was never written.
    """

    file: FileOnDisk
    name: str
    shape: tuple[int, int, int, int, int]
    chunk: tuple[int, int, int, int, int]
    inner: list[np.ndarray]
    dtype: np.dtype[Any]
    shuffled: bool
    swapped: bool
    deflated: bool
    whole: bool
    place: np.ndarray
    size: np.ndarray
    missing: np.ndarray
    blank: Any
    layout: tuple[np.ndarray, int] = field(init=False)
    _holds: bool = field(init=False, default=False)
    _held: dict[tuple[int, ...], bytes] = field(init=False, default_factory=dict, repr=False)

    def __post_init__(self) -> None:
        self.layout = byte_places(math.prod(self.chunk), self.dtype.itemsize, self.shuffled,
                                  self.swapped)

    def hold(self, most: int) -> None:
        """Keep chunks of several dates as they are inflated, until they are asked for once more.

        Nothing is kept if the first dates of all cells have more than `most` bytes, or if it would
        save no inflating.
        """
        size = math.prod(self.chunk) * math.prod(self.place.shape[1:4]) * self.dtype.itemsize
        self._holds = self.deflated and min(self.chunk[0], self.shape[0]) > 1 and size <= most

    def hold_only(self, state: np.ndarray) -> None:
        """Keep no more; of what is kept, drop chunks whose cells (k, j, i) are all of state 0."""
        self._holds = False
        for at in list(self._held):
            cells = tuple(slice(n * c, (n + 1) * c)
                          for n, c in zip(at[1:4], self.chunk[1:4], strict=True))
            if not state[cells].any():
                del self._held[at]

    def __getstate__(self) -> dict[str, Any]:
        return {**self.__dict__, "_held": {}}

    def bytes_of(self, at: tuple[int, ...], first: int, last: int
                 ) -> tuple[np.ndarray, np.ndarray, int, int] | None:
        """A chunk ready for `unpack.gather`: bytes, places, step, its first date; None if never
        written."""
        place = int(self.place[at])
        if place < 0:
            return None
        content = self._held.pop(at, None)
        if content is None:
            content = self._inflated(place, int(self.size[at]))
            if self._holds:
                self._held[at] = content
        places, step = self.layout
        return np.frombuffer(content, np.uint8), places, step, at[0] * self.chunk[0]

    def _inflated(self, place: int, stored: int) -> bytes:
        content = self.file.read(place, stored)
        # in one piece with the rest of the file, the last stretch of a row is shorter
        wanted = stored if self.whole else math.prod(self.chunk) * self.dtype.itemsize
        if self.deflated:
            try:
                content = _zlib.decompress(content, 15, wanted)
            except _zlib.error as error:
                raise self.file.damaged(f"variable '{self.name}': {error}") from None
        if len(content) != wanted:
            raise self.file.damaged(f"variable '{self.name}': a chunk has {len(content)} bytes in "
                                    f"place of {wanted}")
        return content


def find_chunks(file: FileOnDisk, name: str, variable: Any, axes: tuple[int, int, int, int, int]
                ) -> ChunkStore | None:
    """How a variable is stored, if it is so in a way that is known here.

    Parameters
    ----------
    variable : netCDF4.Variable
    axes : tuple of int
        How many of the variable's axes, in their order, are time, k, j, i, and numbers of a cell.
    """
    missing = missing_patterns(variable)
    if missing is None:
        return None
    try:
        import h5py

        with h5py.File(file.path, "r") as opened:
            return _find(file, name, opened[name], variable, axes, missing)
    except (ImportError, OSError, KeyError, RuntimeError, ValueError):
        return None  # whatever is wrong with the file, netCDF4 says it


def missing_patterns(variable: Any) -> np.ndarray | None:
    """Bit patterns (4,) that netCDF4 takes for missing; None where the rule is less simple."""
    import netCDF4

    attributes = set(variable.ncattrs())
    if attributes & {"valid_min", "valid_max", "valid_range", "scale_factor", "add_offset",
                     "_Unsigned"} or not isinstance(variable.dtype, np.dtype):
        return None
    kind = variable.dtype
    if kind.kind != "f" or kind.itemsize not in (4, 8):
        return None
    kind = kind.newbyteorder("=")
    values: list[np.ndarray] = []
    for name in ("missing_value", "_FillValue"):
        if name in attributes:
            given = np.asarray(variable.getncattr(name))
            if given.dtype.kind not in "fiu" or given.size > 3:
                return None
            cast = given.astype(kind)
            if not ((cast == given) | (cast != cast)).all():  # netCDF4 would not use it
                return None
            values.append(cast.reshape(-1))
    if "_FillValue" not in attributes:
        values.append(np.array([netCDF4.default_fillvals[kind.str[1:]]], kind))
    found = np.unique(np.concatenate(values))
    if (found == 0).any():
        found = np.append(found, -np.zeros(1, kind))  # equal to 0, but another pattern
    if len(found) > 4:
        return None
    found = np.append(found, np.repeat(found[:1], 4 - len(found))).astype(kind)
    return found.view(np.uint32 if kind.itemsize == 4 else np.uint64)


def _find(file: FileOnDisk, name: str, data: Any, variable: Any, axes: tuple[int, ...],
          missing: np.ndarray) -> ChunkStore | None:
    from h5py import h5d

    plan = data.id.get_create_plist()
    if data.shape != variable.shape or data.is_virtual or data.external:
        return None
    filters = [plan.get_filter(n)[0] for n in range(plan.get_nfilters())]
    if filters not in ([], [_SHUFFLE], [_DEFLATE], [_SHUFFLE, _DEFLATE]):
        return None
    dtype = data.dtype.newbyteorder("=")
    bits = missing.dtype
    blank = np.asarray(data.fillvalue, dtype).reshape(1).view(bits)[0]
    if plan.fill_value_defined() != h5d.FILL_VALUE_USER_DEFINED:
        blank = missing[0]  # nothing was ever there
    shape, chunk = data.shape, data.chunks
    if chunk is None:
        along, length = _strip(shape, axes)
        chunk = (*(1,) * along, length, *shape[along + 1:])
    grid = tuple(-(-n // c) for n, c in zip(shape, chunk, strict=True))
    place, size = np.full(grid, -1, np.int64), np.zeros(grid, np.int64)
    if data.chunks is None:
        start = data.id.get_offset()
        if start is not None:
            row = math.prod(shape[along + 1:]) * dtype.itemsize
            first = np.arange(grid[along]) * length
            whole = np.arange(math.prod(shape[:along]))[:, None] * shape[along]
            place[...] = start + (whole + first).reshape(grid) * row
            size[...] = (np.minimum(length, shape[along] - first) * row).reshape(
                grid[along:])
    else:
        masks = set()

        def note(one: Any) -> None:
            at = tuple(o // c for o, c in zip(one.chunk_offset, chunk, strict=True))
            place[at], size[at] = one.byte_offset, one.size
            masks.add(one.filter_mask)

        data.id.chunk_iter(note)
        if masks - {0}:  # a filter was left out of some chunks
            return None
    full, part, inner = _canonical(shape, axes), _canonical(chunk, axes), [np.zeros(1, np.int64)]
    if axes[4]:
        inner = _inner(shape[-axes[4]:], chunk[-axes[4]:])
    grid5 = (*_canonical(grid, axes)[:4], len(inner))
    return ChunkStore(
        file, name, full, part, inner, dtype, shuffled=_SHUFFLE in filters,
        swapped=data.dtype.byteorder == ">", deflated=_DEFLATE in filters,
        whole=data.chunks is None,
        place=place.reshape(grid5), size=size.reshape(grid5), missing=missing, blank=blank)


def _canonical(numbers: tuple[int, ...], axes: tuple[int, ...]
               ) -> tuple[int, int, int, int, int]:
    """Five numbers from as many as the variable has axes."""
    left = iter(numbers)
    a, b, c, d, e = (math.prod(next(left) for _ in range(n)) for n in axes)
    return a, b, c, d, e


def _inner(shape: tuple[int, ...], chunk: tuple[int, ...]) -> list[np.ndarray]:
    """Columns of each chunk along the axes that count the numbers of a cell."""
    number = np.arange(math.prod(shape)).reshape(shape)
    grid = [-(-n // c) for n, c in zip(shape, chunk, strict=True)]
    padded = np.pad(number, [(0, g * c - n) for g, c, n in zip(grid, chunk, shape, strict=True)],
                    constant_values=-1)
    return [
        np.ascontiguousarray(padded[tuple(slice(a * c, (a + 1) * c)
                                          for a, c in zip(at, chunk, strict=True))]).reshape(-1)
        for at in np.ndindex(*grid)]


def _strip(shape: tuple[int, ...], axes: tuple[int, ...]) -> tuple[int, int]:
    """Pieces of a variable stored in one: `(axis, length)` of the axis that is cut.

    The axes before it have pieces of one, those after it are whole, so a piece lies in one stretch.
    """
    cells = axes[0] + axes[1] + axes[2] + axes[3]
    along = cells - 1  # i, unless several whole rows of i fit
    if axes[2] and math.prod(shape[along:]) < _STRIP:
        along -= 1
    return along, min(shape[along], max(1, _STRIP // math.prod(shape[along + 1:])))
