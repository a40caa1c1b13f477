"""Region of each cell: an index, and the names."""

from __future__ import annotations

from typing import Any

import numpy as np

from subside.grid.source import Source
from subside.grid.static import Kept
from subside.grid.words import counted, place_in_file

__all__ = ["read_regions"]


def read_regions(kept: Kept) -> tuple[np.ndarray, list[str]]:
    """Index (cell,) into the names of regions that occur, in the order of the file's flags.

    Raises
    ------
    InputError
        If a kept cell has no region, or one that `flag_values` does not list.
    """
    source = kept.source
    if "region" not in source.variables:
        return np.zeros(len(kept.number), dtype=np.int32), ["all"]
    kind = source.variables["region"].dtype
    if kind is str or (isinstance(kind, np.dtype) and kind.kind in "SU"):
        return _from_text(kept)
    return _from_numbers(kept)


def _from_text(kept: Kept) -> tuple[np.ndarray, list[str]]:
    import netCDF4

    source, layout = kept.source, kept.layout
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
    words = kept.unfold(raw, dims).astype(str)
    words = np.char.strip(words, " \0")
    _refuse(kept, words == "", "no region")
    names, index = np.unique(words, return_inverse=True)
    return index.astype(np.int32), [str(n) for n in names]


def _from_numbers(kept: Kept) -> tuple[np.ndarray, list[str]]:
    values = kept.values("region")
    _refuse(kept, ~np.isfinite(values), "no region")
    _refuse(kept, values != np.round(values), "a region that is no integer")
    numbers, index = _distinct(values)
    flags = _flags(kept.source)
    if flags is None:
        return index.astype(np.int32), [f"region-{n}" for n in numbers]
    for number in numbers:
        if int(number) not in flags:
            known = ", ".join(f"{v} ({n})" for v, n in flags.items())
            _refuse(kept, values == number,
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


def _distinct(values: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """The integers that occur, ascending, and where each value stands among them."""
    low, high = (int(values.min()), int(values.max())) if values.size else (0, 0)
    if high - low >= 1 << 20:
        return np.unique(values.astype(np.int64), return_inverse=True)
    shifted = (values - low).astype(np.int32)  # few numbers: no sorting
    occurs = np.bincount(shifted, minlength=1) > 0
    index = (np.cumsum(occurs, dtype=np.int32) - 1)[shifted]
    return np.flatnonzero(occurs) + low, index


def _refuse(kept: Kept, wrong: np.ndarray, what: str) -> None:
    where = np.flatnonzero(wrong)
    if where.size:
        first = place_in_file(int(kept.number[where[0]]), kept.layout.shape)
        raise kept.source.findings.error(
            f"variable 'region': {what} in {counted(where.size)}, first {first}; give every active "
            "cell a region.")
