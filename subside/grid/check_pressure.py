"""Checks of pressures at the start and of fractions; those in time are made by `watch`."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from subside.grid.findings import Findings, check, declare
from subside.grid.words import counted, place, pressure_text

if TYPE_CHECKING:
    import xarray as xr

LITHOSTATIC = 22.7e3  # Pa/m, weight of a heavy overburden; common practice, no source
SEA_WATER = 1025.0 * 9.81  # Pa/m; common practice, no source
HYDROSTATIC = 9.81e3  # Pa/m, fresh water
ATMOSPHERE = 1.013e5  # Pa
JUMP = 100e5  # Pa
_PART = 1 << 20  # cells at a time: no temporaries of the size of a grid

GAP = declare("pressure-gap", "error")
NOT_POSITIVE = declare("pressure-not-positive", "error", acceptable=True)
TOO_HIGH = declare("lithostatic", "error", acceptable=True)
ODD = declare("hydrostatic", "warning")
JUMPS = declare("pressure-jump", "warning")
IDENTICAL = declare("identical-steps", "warning")


def lithostatic_limit(depth: np.ndarray, surface: float) -> np.ndarray:
    """Weight of the rock above cells, 22.7 kPa/m, and of the sea above that: (cell,), Pa.

    `depth` is of their centres in the grid's vertical datum, m.
    """
    # The water above a seabed weighs too. Under 2000 m of it the rock alone would allow 22.7 kPa/m
    # x 1000 m = 22.7 MPa at a depth of 3000 m, where plain hydrostatic is 9.81 kPa/m x 3000 m =
    # 29.4 MPa already.
    return LITHOSTATIC * (depth - surface) + SEA_WATER * max(surface, 0.0)


def check_start(cells: xr.Dataset, surface: float, first: np.ndarray, attributes: Any,
                findings: Findings) -> None:
    """Check the initial pressure, where there is one, and the pressure (cell,) of the first date.

    Parameters
    ----------
    first : array (cell,)
        Pa; overwritten.
    attributes : mapping
        Of the variable `pressure`.
    """
    if "initial_pressure" in cells:
        initial = cells["initial_pressure"].values
        step = "initial_pressure"
        wrong = np.flatnonzero(initial <= 0)
        if wrong.size:
            findings.add(NOT_POSITIVE, not_positive_text(
                cells, step, wrong.size, int(wrong[0]), initial[wrong[0]], attributes))
        wrong = np.flatnonzero(initial > lithostatic_limit(cells["centroid"].values[:, 2], surface))
        if wrong.size:
            findings.add(TOO_HIGH, lithostatic_text(
                cells, surface, step, wrong.size, int(wrong[0]), initial[wrong[0]], attributes))
    depth = cells["centroid"].values[:, 2]
    for start in range(0, len(first), _PART):
        part = slice(start, start + _PART)
        first[part] /= ATMOSPHERE + HYDROSTATIC * np.maximum(depth[part] - surface, 0.0)
    ratio = float(np.median(first, overwrite_input=True))
    if not 0.3 <= ratio <= 3.0:  # in most fields
        findings.add(ODD, f"the first step's pressure is {ratio:.3g} times hydrostatic (median "
                     "over cells); check the units of pressure (psi?) and depth (m?).")


def not_positive_text(cells: xr.Dataset, step: str, count: int, cell: int, value: float,
                      attributes: Any) -> str:
    """What to say of `count` pressures that are not above zero, the first in `cell`."""
    return (f"{step}: {counted(count)} {_has(count)} a pressure <= 0, first {place(cells, cell)}, "
            f"{pressure_text(float(value), attributes)}; zero often marks inactive cells: mark "
            "them in 'active' or as missing values.")


def lithostatic_text(cells: xr.Dataset, surface: float, step: str, count: int, cell: int,
                     value: float, attributes: Any) -> str:
    """What to say of `count` pressures above the weight of the rock, the first in `cell`."""
    limit = lithostatic_limit(cells["centroid"].values[:, 2], surface)[cell]
    water = SEA_WATER * max(surface, 0.0)
    sea = f" plus {water / 1e5:.6g} bar of sea water above it" if surface > 0 else ""
    return (f"{step}: {counted(count)} {_has(count)} a pressure above lithostatic, first "
            f"{place(cells, cell)}: {pressure_text(float(value), attributes)} at a depth of "
            f"{cells['centroid'].values[cell, 2]:.6g} m (limit {limit / 1e5:.6g} bar, 22.7 kPa/m "
            f"below the surface{sea}); check the units of pressure and depth.")


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


def _has(count: int) -> str:
    return "has" if count == 1 else "have"
