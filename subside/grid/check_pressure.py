"""Checks of the pressure history and the fractions, step by step: no large temporaries."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

import numpy as np

from subside.grid.findings import check
from subside.grid.words import counted, place, pressure_text, step_text

if TYPE_CHECKING:
    import xarray as xr

LITHOSTATIC = 22.7e3  # Pa/m, weight of a heavy overburden; common practice, no source
SEA_WATER = 1025.0 * 9.81  # Pa/m; common practice, no source
HYDROSTATIC = 9.81e3  # Pa/m, fresh water
ATMOSPHERE = 1.013e5  # Pa
_JUMP = 100e5  # Pa


def _histories(cells: xr.Dataset) -> Iterator[tuple[str, np.ndarray]]:
    """Each pressure (cell,) with the words for it: every step, and the initial one if given."""
    time, pressure = cells["time"].values, cells["pressure"].values
    if "initial_pressure" in cells:
        yield "initial_pressure", cells["initial_pressure"].values
    for n in range(len(time)):
        yield step_text(time, n), pressure[n]


@check("pressure-not-positive", "error", acceptable=True)
def pressure_not_positive(cells: xr.Dataset, surface: float) -> str | None:
    """Absolute pressure is above zero."""
    for step, pressure in _histories(cells):
        wrong = np.flatnonzero(pressure <= 0)
        if wrong.size:
            first = int(wrong[0])
            return (f"{step}: {counted(wrong.size)} {_has(wrong)} a pressure <= 0, first "
                    f"{place(cells, first)}, {_pressure(cells, pressure[first])}; zero often "
                    "marks inactive cells: mark them in 'active' or as missing values.")
    return None


@check("lithostatic", "error", acceptable=True)
def lithostatic(cells: xr.Dataset, surface: float) -> str | None:
    """Pore pressure stays below the weight of the rock, 22.7 kPa/m, and of the sea above it."""
    depth = cells["centroid"].values[:, 2]
    # The water above a seabed weighs too. Under 2000 m of it the rock alone would allow 22.7 kPa/m
    # x 1000 m = 22.7 MPa at a depth of 3000 m, where plain hydrostatic is 9.81 kPa/m x 3000 m =
    # 29.4 MPa already.
    water = SEA_WATER * max(surface, 0.0)
    limit = LITHOSTATIC * (depth - surface) + water
    for step, pressure in _histories(cells):
        wrong = np.flatnonzero(pressure > limit)
        if wrong.size:
            first = int(wrong[0])
            sea = f" plus {water / 1e5:.6g} bar of sea water above it" if surface > 0 else ""
            return (f"{step}: {counted(wrong.size)} {_has(wrong)} a pressure above lithostatic, "
                    f"first {place(cells, first)}: {_pressure(cells, pressure[first])} at "
                    f"a depth of {depth[first]:.6g} m (limit {limit[first] / 1e5:.6g} bar, 22.7 "
                    f"kPa/m below the surface{sea}); check the units of pressure and depth.")
    return None


@check("hydrostatic", "warning")
def hydrostatic(cells: xr.Dataset, surface: float) -> str | None:
    """The first step is between 0.3 and 3 times hydrostatic in most fields."""
    depth = cells["centroid"].values[:, 2] - surface
    water = ATMOSPHERE + HYDROSTATIC * np.maximum(depth, 0.0)
    ratio = float(np.median(cells["pressure"].values[0] / water))
    if 0.3 <= ratio <= 3.0:
        return None
    return (f"the first step's pressure is {ratio:.3g} times hydrostatic (median over cells); "
            "check the units of pressure (psi?) and depth (m?).")


@check("pressure-jump", "warning")
def pressure_jump(cells: xr.Dataset, surface: float) -> str | None:
    """More than 100 bar in one step is rare."""
    time, pressure = cells["time"].values, cells["pressure"].values
    largest, text = _JUMP, None
    for n in range(1, len(time)):
        change = np.abs(pressure[n] - pressure[n - 1])
        cell = int(np.argmax(change))
        if change[cell] > largest:
            largest = float(change[cell])
            text = (f"{step_text(time, n)}: pressure changes by {largest / 1e5:.4g} bar in one "
                    f"step in {place(cells, cell)}, the largest of all steps; is a step missing?")
    return text


@check("identical-steps", "warning")
def identical_steps(cells: xr.Dataset, surface: float) -> str | None:
    """Two equal steps in a row are often a copy by mistake."""
    time, pressure = cells["time"].values, cells["pressure"].values
    same = [n for n in range(1, len(time)) if np.array_equal(pressure[n], pressure[n - 1])]
    if not same:
        return None
    more = f" (and {len(same) - 1} more such steps)" if len(same) > 1 else ""
    return f"{step_text(time, same[0])} is identical to step {same[0] - 1}{more}."


@check("porosity", "error", acceptable=True)
def porosity(cells: xr.Dataset, surface: float) -> str | None:
    """A fraction from 0 to 1."""
    return _fraction(cells, "porosity")


@check("net-to-gross", "error", acceptable=True)
def net_to_gross(cells: xr.Dataset, surface: float) -> str | None:
    """A fraction from 0 to 1."""
    return _fraction(cells, "net_to_gross")


def _fraction(cells: xr.Dataset, name: str) -> str | None:
    if name not in cells:
        return None
    values = cells[name].values
    wrong = np.flatnonzero((values > 1 + 1e-6) | (values < 0))  # 1e-6: single precision
    if not wrong.size:
        return None
    worst = int(wrong[np.argmax(np.abs(values[wrong] - 0.5))])
    percent = "; in percent? Then write units = \"%\"" if values[worst] > 1 else ""
    return (f"variable '{name}' is {values[worst]:.6g} in {place(cells, worst)}, outside 0 to 1 in "
            f"{counted(wrong.size)}; it is a fraction{percent}.")


def _has(wrong: np.ndarray) -> str:
    return "has" if wrong.size == 1 else "have"


def _pressure(cells: xr.Dataset, value: float) -> str:
    return pressure_text(float(value), cells["pressure"].attrs)
