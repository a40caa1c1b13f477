"""The regular north-up map: its pixels, and its extent where the scenario gives none."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from subside.api import InputError
from subside.scenario import MapTable
from subside.superposition.interface import Targets

__all__ = ["MapGrid", "plan_map", "refuse_size", "round_spacing"]

_REACH_SHARE = 0.01
"""An automatic map reaches to this share of the peak."""
_COARSE = 48
_WIDENINGS = 24
_LARGEST = 20_000


@dataclass(frozen=True)
class MapGrid:
    """Pixel centres in m; x ascending, y descending (north first)."""

    x: np.ndarray
    y: np.ndarray
    spacing: float

    @property
    def pixel_area(self) -> float:
        """m2."""
        return self.spacing**2

    @property
    def shape(self) -> tuple[int, int]:
        """(rows, columns)."""
        return self.y.size, self.x.size

    @property
    def targets(self) -> Targets:
        """The pixel centres as targets of a superposition, row by row."""
        x, y = np.meshgrid(self.x, self.y)
        return Targets(x.ravel(), y.ravel(), np.zeros(x.size))


def plan_map(
    table: MapTable | None,
    low: np.ndarray,
    high: np.ndarray,
    depth: float,
    unit_in_m: float,
    subsidence_at: Callable[[Targets], np.ndarray],
) -> MapGrid:
    """The map of a run.

    Parameters
    ----------
    table : MapTable or None
        The scenario's `[map]`.
    low, high : array (2,)
        Smallest and largest x, y of the cells that lose volume, m.
    depth : float
        Depth of the shallowest such cell below the surface, m.
    unit_in_m : float
        Length of the CRS's own unit, in which `bounds` are given.
    subsidence_at : callable
        Largest absolute subsidence over time at targets (n,), for the automatic extent.

    Raises
    ------
    InputError
        Bounds that are not whole multiples of the spacing apart, or a map of absurd size.
    """
    spacing = table.spacing if table else None
    bounds = table.bounds if table else None
    if bounds is not None:
        west, south, east, north = (b * unit_in_m for b in bounds)
        if not (east > west and north > south):
            raise InputError(f"[map] bounds = {list(bounds)}: they run [xmin, ymin, xmax, ymax], "
                             "each smaller one first.")
        step = spacing or round_spacing(depth, max(east - west, north - south))
        columns, rows = (east - west) / step, (north - south) / step
        for count, word in ((columns, "xmax - xmin"), (rows, "ymax - ymin")):
            if abs(count - round(count)) > 1e-6 * max(count, 1.0):
                raise InputError(f"[map] bounds: {word} is {count * step:g} m, which is not a "
                                 f"whole multiple of the spacing {step:g} m; make it "
                                 f"{math.ceil(count) * step:g} m, or change the spacing.")
        return _grid(west, north, step, round(columns), round(rows))
    west, south, east, north = _reach(low, high, depth, subsidence_at)
    step = spacing or round_spacing(depth, max(east - west, north - south))
    first_column, last_column = (math.floor(west / step), math.ceil(east / step))
    first_row, last_row = math.floor(south / step), math.ceil(north / step)
    columns = max(last_column - first_column, 2)
    rows = max(last_row - first_row, 2)
    return _grid(first_column * step, (first_row + rows) * step, step, columns, rows)


def _grid(west: float, north: float, step: float, columns: int, rows: int) -> MapGrid:
    if min(columns, rows) < 2:
        raise InputError(f"[map]: it has {rows} x {columns} pixels; at least 2 x 2 are needed for "
                         "a map that a GIS can place; give a smaller spacing or wider bounds.")
    refuse_size(columns, rows, step)
    return MapGrid(west + (np.arange(columns) + 0.5) * step,
                   north - (np.arange(rows) + 0.5) * step, step)


def refuse_size(columns: int, rows: int, step: float) -> None:
    """Raise `InputError` for a map no GIS would thank for."""
    if max(columns, rows) > _LARGEST:
        raise InputError(f"[map]: it has {rows} x {columns} pixels; more than {_LARGEST} on a side "
                         f"is refused; give a larger spacing than {step:g} m.")


def round_spacing(depth: float, extent: float) -> float:
    """A round spacing (1, 2, 2.5 or 5 times a power of ten) near a twelfth of the depth."""
    wish = max(depth / 12.0, extent / 400.0)
    power = 10.0 ** math.floor(math.log10(wish))
    return min((m * power for m in (1.0, 2.0, 2.5, 5.0, 10.0)), key=lambda s: abs(s - wish))


def _reach(low: np.ndarray, high: np.ndarray, depth: float,
           subsidence_at: Callable[[Targets], np.ndarray]) -> tuple[float, float, float, float]:
    """West, south, east, north of where the ground moves by more than 1 % of the peak."""
    # the reach follows from the deepest cells that matter, which may lie far below the shallowest
    margin = max(2.0 * depth, 0.05 * float((high - low).max()))
    for _ in range(_WIDENINGS):
        x = np.linspace(low[0] - margin, high[0] + margin, _COARSE)
        y = np.linspace(low[1] - margin, high[1] + margin, _COARSE)
        grid_x, grid_y = np.meshgrid(x, y)
        moved = np.abs(subsidence_at(
            Targets(grid_x.ravel(), grid_y.ravel(), np.zeros(grid_x.size))
        )).reshape(grid_x.shape)
        peak = moved.max()
        if peak == 0.0:
            return (low[0] - depth, low[1] - depth, high[0] + depth, high[1] + depth)
        inside = moved >= _REACH_SHARE * peak
        border = inside[0].any() or inside[-1].any() or inside[:, 0].any() or inside[:, -1].any()
        if not border:
            columns = np.nonzero(inside.any(axis=0))[0]
            rows = np.nonzero(inside.any(axis=1))[0]
            return (float(x[columns[0] - 1]), float(y[rows[0] - 1]),
                    float(x[columns[-1] + 1]), float(y[rows[-1] + 1]))
        margin *= 1.6
    return (low[0] - margin, low[1] - margin, high[0] + margin, high[1] + margin)
