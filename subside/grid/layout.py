"""Which of the layouts a NetCDF grid has, and how its variables unfold over the file's cells."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any, NoReturn

import numpy as np

from subside.grid.source import Source

__all__ = ["BOX_VARIABLES", "GEOMETRY", "Layout", "chunk_along", "find_layout", "has_geometry"]

BOX_VARIABLES = ("x", "y", "top", "bottom")
GEOMETRY = frozenset({"corners", *BOX_VARIABLES, "dx", "dy", "azimuth", "area"})
_CELLS_PER_BLOCK = 250_000


@dataclass(frozen=True)
class Layout:
    """The shape of a grid.

    Attributes
    ----------
    dims : tuple of str
        ``("k", "j", "i")`` or ``("cell",)``.
    shape : tuple of int
        Of those dimensions.
    steps : int
        Pressure steps.
    has_corners : bool
        Corners, or else boxes.
    """

    dims: tuple[str, ...]
    shape: tuple[int, ...]
    steps: int
    has_corners: bool

    @property
    def structured(self) -> bool:
        """Whether cells have k, j, i."""
        return len(self.dims) == 3

    @property
    def size(self) -> int:
        """Cells in the file, active or not."""
        return int(np.prod(self.shape, dtype=object))

    @property
    def label(self) -> str:
        """For people: ``"structured corners"``."""
        return (("structured " if self.structured else "cell table ")
                + ("corners" if self.has_corners else "boxes"))

    def slabs(self, variable: Any, steps: int = 1) -> Iterator[tuple[int, int]]:
        """Ranges of the first cell dimension that cut no storage chunk, of bounded size."""
        row = max(1, int(np.prod(self.shape[1:], dtype=object)) * steps)
        chunk = chunk_along(variable, self.dims[0])
        rows = max(1, _CELLS_PER_BLOCK // row)
        rows = max(chunk, rows // chunk * chunk)
        for start in range(0, self.shape[0], rows):
            yield start, min(start + rows, self.shape[0])

    def cells_of(self, start: int, stop: int) -> slice:
        """Flat numbers of the cells in a slab."""
        row = self.size // self.shape[0]
        return slice(start * row, stop * row)

    def dims_of(self, source: Source, name: str) -> tuple[str, ...]:
        """Dimensions of a variable on the cells, or on some of their dimensions."""
        dims: tuple[str, ...] = source.variables[name].dimensions
        if tuple(d for d in self.dims if d in dims) != dims:
            raise source.findings.error(
                f"variable '{name}' has dimensions {_shown(source, name)}; expected "
                f"({', '.join(self.dims)})"
                + (", or (j, i) for what is the same in every layer." if self.structured else "."))
        return dims

    @property
    def box(self) -> tuple[int, int, int]:
        """The shape as (k, j, i); a cell table is one row."""
        return self.shape if len(self.shape) == 3 else (1, 1, self.shape[0])


def chunk_along(variable: Any, dimension: str) -> int:
    """Length of a storage chunk along a dimension; 1 where the file is not chunked."""
    chunks = variable.chunking()
    if not isinstance(chunks, (list, tuple)) or dimension not in variable.dimensions:
        return 1
    return int(chunks[variable.dimensions.index(dimension)])


def _shown(source: Source, name: str) -> str:
    variable = source.variables[name]
    return "(" + ", ".join(f"{d}={n}" for d, n in
                           zip(variable.dimensions, variable.shape, strict=True)) + ")"


def find_layout(source: Source, geometry: bool = True) -> Layout:
    """The layout of the file, from the dimensions of `pressure` and what geometry there is.

    Without `geometry` there need be none.
    """
    error = source.findings.error
    pressure = source.need("pressure", "pore pressure of every cell at every date; dimensions "
                           "(time, k, j, i) or (time, cell)")
    dims = pressure.dimensions
    if dims not in {("time", "k", "j", "i"), ("time", "cell")}:
        raise error(f"variable 'pressure' has dimensions {_shown(source, 'pressure')}; expected "
                    "(time, k, j, i), or (time, cell) for a cell table, in that order.")
    if 0 in pressure.shape:
        raise error(f"variable 'pressure' is empty, {_shown(source, 'pressure')}; it needs at "
                    "least one step and one cell.")
    cell_dims, shape = dims[1:], tuple(int(n) for n in pressure.shape[1:])
    has_corners = "corners" in source.variables
    if not geometry:
        return Layout(cell_dims, shape, int(pressure.shape[0]), has_corners)
    if has_corners:
        wanted, expected = (*cell_dims, "corner", "xyz"), (*shape, 8, 3)
        corners = source.variables["corners"]
        if corners.dimensions != wanted or corners.shape != expected:
            raise error(f"variable 'corners' has dimensions {_shown(source, 'corners')} but "
                        f"pressure has {_shown(source, 'pressure')}; expected corners of "
                        f"({', '.join(f'{d}={n}' for d, n in zip(wanted, expected, strict=True))})"
                        ".")
    elif _missing(source):
        _refuse_missing(source)
    return Layout(cell_dims, shape, int(pressure.shape[0]), has_corners)


def has_geometry(source: Source) -> bool:
    """Whether the file says where its cells are."""
    return "corners" in source.variables or not _missing(source)


def _missing(source: Source) -> list[str]:
    """Variables that boxes would need and the file does not have."""
    missing = [n for n in BOX_VARIABLES if n not in source.variables]
    if "area" not in source.variables:
        missing += [n for n in ("dx", "dy") if n not in source.variables]
    return missing


def _refuse_missing(source: Source) -> NoReturn:
    raise source.findings.error(
        f"the file has no geometry: neither 'corners' nor the box variable(s) "
        f"{', '.join(repr(n) for n in _missing(source))}; write corners(k, j, i, corner, xyz), or "
        "x, y, top, bottom with dx, dy (or area). " + source.contents("corners"))
