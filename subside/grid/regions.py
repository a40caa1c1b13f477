"""Region of each cell: an index, and the names."""

from __future__ import annotations

from typing import Any

import numpy as np

from subside.grid.layout import Layout
from subside.grid.source import Source
from subside.grid.words import counted, place_in_file

__all__ = ["read_regions"]


def read_regions(source: Source, layout: Layout, kept: np.ndarray) -> tuple[np.ndarray, list[str]]:
    """Index (cell,) into the names of regions that occur, in the order of the file's flags.

    Parameters
    ----------
    kept : array (cell,) of int
        Flat numbers of the cells that are kept.

    Raises
    ------
    InputError
        If a kept cell has no region, or one that `flag_values` does not list.
    """
    if "region" not in source.variables:
        return np.zeros(len(kept), dtype=np.int32), ["all"]
    kind = source.variables["region"].dtype
    if kind is str or (isinstance(kind, np.dtype) and kind.kind in "SU"):
        return _from_text(source, layout, kept)
    return _from_numbers(source, layout, kept)


def _from_text(source: Source, layout: Layout, kept: np.ndarray) -> tuple[np.ndarray, list[str]]:
    import netCDF4

    variable = source.variables["region"]
    variable.set_auto_chartostring(False)
    raw: Any = np.asarray(variable[...])
    dims = variable.dimensions
    if variable.dtype is not str:
        raw = netCDF4.chartostring(raw) if variable.dtype.itemsize == 1 else raw
        dims = dims[:-1]
    if dims != tuple(d for d in layout.dims if d in dims) or raw.ndim != len(dims):
        raise source.findings.error(f"variable 'region' has dimensions {variable.dimensions}; "
                                    f"expected ({', '.join(layout.dims)}) with text.")
    spread = tuple(slice(None) if d in dims else None for d in layout.dims)
    words = np.broadcast_to(raw[spread], layout.shape).reshape(-1)[kept].astype(str)
    words = np.char.strip(words, " \0")
    _refuse(source, layout, kept, words == "", "no region")
    names, index = np.unique(words, return_inverse=True)
    return index.astype(np.int32), [str(n) for n in names]


def _from_numbers(source: Source, layout: Layout, kept: np.ndarray
                  ) -> tuple[np.ndarray, list[str]]:
    values = layout.full(source, "region")[kept]
    _refuse(source, layout, kept, ~np.isfinite(values), "no region")
    _refuse(source, layout, kept, values != np.round(values), "a region that is no integer")
    numbers, index = np.unique(values.astype(np.int64), return_inverse=True)
    flags = _flags(source)
    if flags is None:
        return index.astype(np.int32), [f"region-{n}" for n in numbers]
    for number in numbers:
        if int(number) not in flags:
            known = ", ".join(f"{v} ({n})" for v, n in flags.items())
            _refuse(source, layout, kept, values == number,
                    f"region {number}, which flag_values does not list (it has {known}),")
    order = {value: n for n, value in enumerate(v for v in flags if v in set(numbers.tolist()))}
    new = np.array([order[int(n)] for n in numbers], dtype=np.int32)
    return new[index], [flags[v] for v in order]


def _flags(source: Source) -> dict[int, str] | None:
    variable = source.variables["region"]
    has = [a for a in ("flag_values", "flag_meanings") if a in variable.ncattrs()]
    if not has:
        return None
    if len(has) == 1:
        raise source.findings.error(f"variable 'region' has {has[0]} but not its partner; give "
                                    "both flag_values and flag_meanings, or neither.")
    values = [int(v) for v in np.atleast_1d(variable.getncattr("flag_values"))]
    names = str(variable.getncattr("flag_meanings")).split()
    if len(values) != len(names) or len(set(names)) != len(names) or len(set(values)) != len(names):
        raise source.findings.error(
            f"variable 'region' has {len(values)} flag_values and {len(names)} flag_meanings "
            f"('{' '.join(names)}'); each value needs one name of its own, separated by blanks "
            "(so a name holds no blank).")
    return dict(zip(values, names, strict=True))


def _refuse(source: Source, layout: Layout, kept: np.ndarray, wrong: np.ndarray, what: str) -> None:
    where = np.flatnonzero(wrong)
    if where.size:
        raise source.findings.error(
            f"variable 'region': {what} in {counted(where.size)}, first "
            f"{place_in_file(int(kept[where[0]]), layout.shape)}; give every active cell a region.")
