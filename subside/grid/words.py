"""How places, dates and values are written in messages."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

if TYPE_CHECKING:
    import xarray as xr

__all__ = ["counted", "place", "place_in_file", "pressure_text", "step_text"]


def counted(number: int, noun: str = "active cell") -> str:
    """``"1 active cell"``, ``"12 active cells"``."""
    return f"{number} {noun}" if number == 1 else f"{number} {noun}s"


def place_in_file(index: int, shape: tuple[int, ...]) -> str:
    """Where a cell lies by its flat number: ``"(k=1, j=2, i=3)"``, or its row in a cell table."""
    if len(shape) == 1:
        return f"(cell={index})"
    k, j, i = np.unravel_index(index, shape)
    return f"(k={k}, j={j}, i={i})"


def place(cells: xr.Dataset, cell: int) -> str:
    """Where a cell of a cell dataset lies in its file."""
    if all(n in cells for n in "kji"):
        k, j, i = (int(cells[n][cell]) for n in "kji")
        return f"(k={k}, j={j}, i={i})"
    if "cell_id" in cells:
        return f"(cell={cells['cell_id'].values[cell]})"
    return f"(cell={cell})"


def step_text(time: np.ndarray, step: int, in_file: int | None = None) -> str:
    """``"step 2 (2002-01-01)"``; `in_file` is its number in the file where there are several."""
    number = step if in_file is None else in_file
    return f"step {number} ({np.datetime_as_string(time[step], unit='D')})"


def pressure_text(pascal: float, attributes: Any) -> str:
    """A pressure in bar, and in the file's own unit where that is another."""
    text = f"{pascal / 1e5:.6g} bar"
    unit = attributes.get("file_units", "")
    if unit and unit not in {"bar", "bara", "barsa"}:
        text += f" ({pascal / attributes['file_unit_in_pa']:.6g} {unit} in the file)"
    return text
