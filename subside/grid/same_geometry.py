"""Whether files that continue each other have their cells in the same places."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from subside.grid.bodies import box_values, corner_values
from subside.grid.crs import MapSystem, same_system
from subside.grid.layout import find_layout
from subside.grid.netcdf import map_system_of
from subside.grid.source import Source
from subside.grid.static import Kept
from subside.grid.stored_alike import StoredGeometry
from subside.grid.stream import FileStream
from subside.grid.unpack import KEPT
from subside.grid.words import place_in_file

if TYPE_CHECKING:
    import xarray as xr

__all__ = ["GeometrySample"]

_CELLS = 32  # compared in all, where there are few files
_LEAST = 2  # in each file
_SAME = 0.01  # m; degrees of azimuth


@dataclass
class GeometrySample:
    """Some cells of the first file, against which the others are held.

    To compare all cells of hundreds of files would cost more than their pressures. A file that was
    written like the first (see `subside.grid.stored_alike`) is known to be the same; any other is
    compared at cells of its own, evenly spread, so that together they cover the grid.

    Attributes
    ----------
    kept : Kept
        The sample, in the first file.
    values : dict of str to array
        As `_values` gives them there.
    files : int
        That will be compared.
    """

    kept: Kept
    stored: StoredGeometry
    system: MapSystem
    values: dict[str, np.ndarray]
    files: int

    @classmethod
    def of(cls, source: Source, cells: xr.Dataset, pressure: FileStream, files: int
           ) -> GeometrySample:
        """Choose the sample and read it from the first file.

        Parameters
        ----------
        cells, pressure
            Of `subside.grid.netcdf.whole`.
        files : int
            That will be compared.
        """
        state = pressure.in_blocks.state
        numbers = np.flatnonzero(state.reshape(-1) == KEPT)
        wanted = files * max(_LEAST, _CELLS // max(files, 1))
        chosen = numbers[np.linspace(0, len(numbers) - 1, min(wanted, len(numbers))).astype(int)]
        system = MapSystem(cells.attrs["crs_wkt"], cells.attrs["crs_name"],
                           cells.attrs["xy_unit_in_m"])
        kept = _only(chosen, state.shape, source)
        values = _values(kept, system) if files else {}
        return cls(kept, StoredGeometry(source), system, values, files)

    def compare(self, source: Source, number: int) -> None:
        """Refuse another file whose cells lie elsewhere.

        Parameters
        ----------
        number : int
            Of the file, 0 to `files` - 1: its cells are every `files`-th from there on.
        """
        error, first = source.findings.error, self.kept.source.findings.path
        layout = find_layout(source)
        if layout.has_corners != self.kept.layout.has_corners:
            raise error(f"it describes cells by {_kind(layout.has_corners)}, but '{first}' by "
                        f"{_kind(not layout.has_corners)}; files that continue each other hold the "
                        "same grid: leave the geometry out of this one, or write the same.")
        system = map_system_of(source, None)
        if system.wkt and self.system.wkt and not same_system(system, self.system):
            raise error(f"its coordinate system is {system.name}, but that of '{first}' is "
                        f"{self.system.name}; files that continue each other hold the same grid.")
        if self.stored.equals(StoredGeometry(source), number):
            return
        own = np.arange(number % max(1, len(self.kept.number)), len(self.kept.number), self.files)
        kept = _only(self.kept.number[own], self.kept.state.shape, source)
        for name, values in _values(kept, self.system).items():
            wanted = self.values[name][own]
            apart = np.abs(values - wanted).reshape(len(own), -1)
            wrong = ~(apart <= _SAME)
            if wrong.any():
                cell = int(np.flatnonzero(wrong.any(axis=1))[0])
                at = int(np.flatnonzero(wrong[cell])[0])
                what = name if name != "corners" else (
                    f"{('x', 'y', 'depth')[at % 3]} of corner {at // 3}")
                unit = "degrees" if name == "azimuth" else "m"
                here, there = (v.reshape(len(own), -1)[cell, at] for v in (values, wanted))
                raise error(
                    f"{what} of the cell {place_in_file(int(kept.number[cell]), layout.shape)} is "
                    f"{here:.10g} {unit}, but {there:.10g} {unit} in '{first}'; files that "
                    "continue each other hold the same grid: leave the geometry out of this one, "
                    "or correct it.")


def _only(numbers: np.ndarray, shape: tuple[int, ...], source: Source) -> Kept:
    """Those cells of a file, by their flat numbers."""
    state = np.zeros(shape, np.uint8)
    state.reshape(-1)[numbers] = KEPT
    return Kept.of(source, find_layout(source), state)


def _values(kept: Kept, system: MapSystem) -> dict[str, np.ndarray]:
    """Corners, or the numbers of boxes, m and degrees."""
    if kept.layout.has_corners:
        return {"corners": corner_values(kept, system)}
    return box_values(kept, system)


def _kind(corners: bool) -> str:
    return "corners" if corners else "boxes"
