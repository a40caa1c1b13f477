"""NetCDF files that continue each other in time, opened as one grid.

The first by date says what does not change in time. Of the others each is opened once, for its
dates and for the places of its storage chunks; where it says where the cells are, some of them are
compared with the first file's.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from subside.errors import InputError
from subside.grid.check_time import backwards, repeated
from subside.grid.disk import OpenFiles
from subside.grid.fields import field_names
from subside.grid.findings import Findings
from subside.grid.joined import JoinedStream, Part
from subside.grid.layout import Layout, find_layout, has_geometry
from subside.grid.netcdf import dates_of, scale_in_time, whole
from subside.grid.same_geometry import GeometrySample
from subside.grid.source import open_source
from subside.grid.storage import open_store
from subside.grid.stream import FileStream, Store, Stream
from subside.grid.threads import processors
from subside.grid.words import counted, place, pressure_text

if TYPE_CHECKING:
    import xarray as xr

__all__ = ["open_several"]

_SAME = 1e-6  # of two pressures on the same date, relative: single precision has 6e-8
Scale = tuple[tuple[float, float], dict[str, Any]]


@dataclass
class _File:
    """One of the files, as far as it is known without its cells."""

    path: Path
    findings: Findings
    layout: Layout
    located: bool
    time: np.ndarray
    in_time: dict[str, tuple[Store, Scale]]


def open_several(paths: Sequence[Path], options: Mapping[str, Any]
                 ) -> tuple[xr.Dataset, Mapping[str, Stream]]:
    """The cell dataset of files that continue each other, and its variables in time.

    Parameters
    ----------
    paths : sequence of Path
        In any order; that of their first dates counts.
    options : mapping
        Of `subside.grid.netcdf.NetcdfGrid.open`.

    Raises
    ------
    InputError
        If a file is wrong, is listed twice, holds another grid than the first, or dates that lie
        within those of another.
    CannotDo
        If the grid is larger than the machine's memory.
    """
    _refuse_twice(paths)
    among = OpenFiles()
    files = sorted((_look(path, options, among) for path in paths),
                   key=lambda file: (file.time[0], file.time[-1]))
    for before, after in pairwise(files):
        _refuse_overlap(before, after)
    first, *others = files
    first.findings = Findings(first.path, options.get("accept", ()))  # it is read once more
    for other in others:
        _refuse_other_shape(first, other)
    with open_source(first.path, first.findings, among) as source:
        cells, streams = whole(source, options, first.findings)
        sample = GeometrySample.of(source, cells, streams["pressure"],
                                   sum(other.located for other in others))
    number = 0
    for other in others:
        if other.located:
            with open_source(other.path, other.findings, among) as source:
                sample.compare(source, number)
            number += 1

    by_file = [streams, *(_streams_of(other, first, streams) for other in others)]
    skips = [0] + [int(after.time[0] == before.time[-1])
                   for before, after in pairwise(files)]
    for n in np.flatnonzero(skips):
        for name in streams:
            _refuse_other_values(cells, files[n - 1], files[n], by_file[n - 1][name],
                                 by_file[n][name])
    time = np.concatenate([file.time[skip:] for file, skip in zip(files, skips, strict=True)])
    cells = cells.drop_vars("time").assign_coords(time=time)
    cells.attrs["warnings"] = cells.attrs["warnings"] + _told_by(others, first)
    return cells, {name: JoinedStream([
        Part(own[name], skip) for own, skip in zip(by_file, skips, strict=True)
        if own[name].steps > skip]) for name in streams}


def _refuse_twice(paths: Sequence[Path]) -> None:
    known: set[Path] = set()
    for path in paths:
        if path.resolve() in known:
            raise InputError(f"{path}: the file is listed twice; each adds its own dates, so name "
                             "it once.")
        known.add(path.resolve())


def _look(path: Path, options: Mapping[str, Any], among: OpenFiles) -> _File:
    """Open a file for what it has in time."""
    findings = Findings(path, options.get("accept", ()))
    with open_source(path, findings, among) as source:
        layout = find_layout(source, geometry=False)
        time = dates_of(source)
        wrong = backwards(time) or repeated(time)
        if wrong:
            raise findings.error(wrong)
        names = ["pressure", *(n for n in field_names(source, layout, options.get("fields"))
                               if "time" in source.variables[n].dimensions)]
        return _File(path, findings, layout, has_geometry(source), time, {
            n: (open_store(source, n, layout), scale_in_time(source, n, layout)) for n in names})


def _refuse_overlap(before: _File, after: _File) -> None:
    last, first = before.time[-1], after.time[0]
    if first < last:
        raise after.findings.error(
            f"it begins on {_day(first)}, but '{before.path}' runs from {_day(before.time[0])} to "
            f"{_day(last)}; files that continue each other may share one date at most, the last "
            "of one and the first of the next. Remove the dates that come twice from one of them.")


def _refuse_other_shape(first: _File, other: _File) -> None:
    mine, theirs = other.layout, first.layout
    if (mine.dims, mine.shape) != (theirs.dims, theirs.shape):
        raise other.findings.error(
            f"variable 'pressure' has cells {_shape(mine)}, but in '{first.path}' {_shape(theirs)};"
            " files that continue each other hold the same grid.")


def _streams_of(file: _File, first: _File, known: Mapping[str, FileStream]
                ) -> dict[str, FileStream]:
    """What a file has of the variables in time of the first one."""
    found = {}
    for name, stream in known.items():
        if name not in file.in_time:
            raise file.findings.error(
                f"there is no variable '{name}' on (time, {', '.join(file.layout.dims)}), but "
                f"'{first.path}' has one; write it into all files that continue each other, or "
                "into none.")
        store, (to_si, attributes) = file.in_time[name]
        unit, wanted = attributes.get("units"), stream.attrs.get("units")
        if unit != wanted:
            raise file.findings.error(
                f"variable '{name}' is measured in {_unit(unit)}, but in '{first.path}' in "
                f"{_unit(wanted)}; give it units of the same kind in both.")
        found[name] = FileStream(store, stream.in_blocks, to_si, attributes)
    return found


def _refuse_other_values(cells: xr.Dataset, before: _File, after: _File, old: FileStream,
                         new: FileStream) -> None:
    """The first date of a file that is the last of the one before must have the same values."""

    def worst(block: int) -> tuple[float, int, float, float, int]:
        a = old.read_si(block, old.steps - 1, old.steps)[0]
        b = new.read_si(block, 0, 1)[0]
        apart = np.abs(a - b)
        differs = (~(apart <= _SAME * np.maximum(np.abs(a), np.abs(b)))
                   & ~(np.isnan(a) & np.isnan(b)))
        if not differs.any():
            return 0.0, 0, 0.0, 0.0, 0
        at = int(np.argmax(np.where(differs, np.nan_to_num(apart, nan=np.inf), -1.0)))
        return (float(np.nan_to_num(apart[at], nan=np.inf)), -int(old.blocks[block][at]),
                float(a[at]), float(b[at]), int(np.count_nonzero(differs)))

    with ThreadPoolExecutor(processors()) as pool:
        found = list(pool.map(worst, range(len(old.blocks))))
    count = sum(one[-1] for one in found)
    if count:
        apart, cell, a, b, _ = max(one for one in found if one[-1])
        size = f"by {_value(apart, new.name, {'units': new.attrs.get('units')})}" if np.isfinite(
            apart) else "where one of them has none"
        raise after.findings.error(
            f"its first date, {_day(after.time[0])}, is the last of '{before.path}', but "
            f"'{new.name}' differs between them in {counted(count)}, most in {place(cells, -cell)} "
            f"{size}: {_value(a, old.name, old.attrs)} there and {_value(b, new.name, new.attrs)} "
            "here. Remove the date from one of the files, or correct it.")


def _value(value: float, name: str, attributes: Mapping[str, Any]) -> str:
    if not np.isfinite(value):
        return "no value"
    if name == "pressure":
        return pressure_text(value, attributes)
    return f"{value:.8g} {attributes.get('units') or ''}".strip()


def _told_by(others: Iterable[_File], first: _File) -> list[str]:
    """Warnings that not the first file gave already, each once."""
    by_text: dict[str, list[str]] = {}
    for other in others:
        for text in other.findings.warnings:
            if text not in first.findings.warnings:
                by_text.setdefault(text, []).append(other.path.name)
    return [names[0] + (f" (and {counted(len(names) - 1, 'more file')})" if names[1:] else "")
            + f": {text}" for text, names in by_text.items()]


def _day(date: np.datetime64) -> str:
    whole = date == date.astype("datetime64[D]")
    return str(np.datetime_as_string(date, unit="D" if whole else "s"))


def _shape(layout: Layout) -> str:
    return "(" + ", ".join(f"{d}={n}" for d, n in zip(layout.dims, layout.shape, strict=True)) + ")"


def _unit(unit: str | None) -> str:
    return "no known unit" if unit is None else f"'{unit}'"
