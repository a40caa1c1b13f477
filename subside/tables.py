"""CSV tables of the user's with units in the headings: ``x [km]``."""

from __future__ import annotations

import csv
import re
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from subside.errors import InputError, nearest
from subside.units import scale_to_si

__all__ = ["Column", "read_table"]

_HEADING = re.compile(r"\s*([^\[\]]+?)\s*(?:\[\s*([^\[\]]*?)\s*\])?\s*")
_MAX_ROWS = 5_000_000


@dataclass(frozen=True)
class Column:
    """A column a table may have.

    Attributes
    ----------
    name : str
    unit : str or None
        SI unit of a column of numbers; None for text.
    required : bool
    refused : tuple of str
        Units that are mixed up with another one in this place.
    plain_unit : str or None
        Unit of a heading without brackets; None: such a heading is an error.
    """

    name: str
    unit: str | None
    required: bool = True
    plain_unit: str | None = None
    refused: tuple[str, ...] = ()


def read_table(path: Path, columns: Sequence[Column], what: str) -> dict[str, np.ndarray]:
    """Read a CSV file with known columns; numbers come back in SI.

    Parameters
    ----------
    path : Path
    columns : sequence of Column
        What the table may hold; other columns are refused by name.
    what : str
        What the file is, for messages ("points").

    Returns
    -------
    dict of str to array
        One entry for each column of the file, and `line`, the line of the file each row ends on.

    Raises
    ------
    InputError
        Naming the file, the line, the column, the value and the way out.
    """
    known = {c.name: c for c in columns}
    try:
        with path.open(encoding="utf-8-sig", newline="") as file:
            reader = csv.reader(_bounded(file, path))
            lines = [(reader.line_num, row) for row in reader if any(map(str.strip, row))]
    except FileNotFoundError:
        raise InputError(f"{what} file '{path}' does not exist.") from None
    except UnicodeDecodeError:
        raise InputError(f"{what} file '{path}' is not text in UTF-8; save it as CSV (UTF-8)."
                         ) from None
    except csv.Error as error:
        raise InputError(f"{what} file '{path}' is not CSV: {error}.") from None
    except OSError as error:
        raise InputError(f"{what} file '{path}' cannot be read: {error.strerror}.") from None
    if not lines:
        raise InputError(f"{what} file '{path}' is empty; its first line names the columns: "
                         f"{', '.join(known)}.")
    headings = [_heading(cell, known, path, what) for cell in lines[0][1]]
    names = [name for name, _ in headings]
    for column in columns:
        if column.required and column.name not in names:
            raise InputError(f"{what} file '{path}' has no column '{column.name}'; it has "
                             f"{', '.join(names)}.")
    if len(set(names)) < len(names):
        raise InputError(f"{what} file '{path}' has two columns of one name; its columns are "
                         f"{', '.join(names)}.")
    if len(lines) == 1:
        raise InputError(f"{what} file '{path}' has headings and no rows below them; add rows, or "
                         "leave the file out.")
    table: dict[str, list] = {name: [] for name in names}
    for number, row in lines[1:]:
        if len(row) != len(names):
            raise InputError(f"{what} file '{path}', line {number}: it has {len(row)} values for "
                             f"{len(names)} columns ({', '.join(names)}).")
        for (name, factor), cell in zip(headings, row, strict=True):
            table[name].append(_value(cell, known[name], factor, f"{what} file '{path}', line "
                                      f"{number}, column '{name}'"))
    return {n: np.array(v, dtype=str if known[n].unit is None else float)
            for n, v in table.items()} | {"line": np.array([number for number, _ in lines[1:]])}


def _bounded(file, path):  # type: ignore[no-untyped-def]
    for number, line in enumerate(file):
        if number > _MAX_ROWS or len(line) > 1_000_000:
            raise InputError(f"file '{path}' has more than {_MAX_ROWS} rows or a line of more than "
                             "a million characters; is it the right file?")
        yield line


def _heading(cell: str, known: dict[str, Column], path: Path, what: str) -> tuple[
        str, tuple[float, float]]:
    match = _HEADING.fullmatch(cell)
    name = match[1] if match else cell.strip()
    if name not in known:
        separator = " Separate columns with commas." if ";" in name or "\t" in name else ""
        raise InputError(f"{what} file '{path}' has an unknown column '{name}'."
                         + separator + nearest(name, known))
    column = known[name]
    unit = match[2] if match else None
    if column.unit is None:
        return name, (1.0, 0.0)
    unit = unit or column.plain_unit
    if unit is None:
        raise InputError(f"{what} file '{path}': column '{name}' has no unit; write it in "
                         f"brackets, for example '{name} [{column.unit}]'.")
    if unit in column.refused:
        raise InputError(f"{what} file '{path}', column '{name}': '{unit}' is not the foot of the "
                         "grid's CRS, which would shift the points by metres; write the CRS's own "
                         "unit, 'ft' or 'US_survey_foot', or 'm'.")
    try:
        return name, scale_to_si(unit, column.unit)
    except InputError as error:
        raise InputError(f"{what} file '{path}', column '{name}': {error}") from None


def _value(cell: str, column: Column, scale: tuple[float, float], where: str) -> str | float:
    text = cell.strip()
    if column.unit is None:
        if not text and column.required:
            raise InputError(f"{where}: it is empty; every row needs one.")
        return text
    if not text and not column.required:
        return float("nan")
    try:
        number = float(text)
    except ValueError:
        number = float("nan")
    if not abs(number) < float("inf"):
        raise InputError(f"{where}: {text!r} is not a finite number; the decimal sign is a point.")
    return number * scale[0] + scale[1]
