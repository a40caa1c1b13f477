"""Benchmarks and other places named by the user."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from subside.api import InputError
from subside.superposition.interface import Targets
from subside.tables import Column, read_table

__all__ = ["Points", "read_points"]

_FOREIGN_FEET = {0.3048: ("US_survey_foot", "usft", "ftUS"), 0.304800610: ("ft", "foot", "feet")}
"""Feet that are not those of a CRS, by the length of its own unit in m."""


@dataclass(frozen=True)
class Points:
    """Named points: x, y in m, depth in m below the ground or seabed, each (n,)."""

    name: np.ndarray
    x: np.ndarray
    y: np.ndarray
    depth: np.ndarray

    @property
    def targets(self) -> Targets:
        """The points as targets of a superposition."""
        return Targets(self.x, self.y, self.depth)


def read_points(paths: Sequence[Path], surface: float, crs_unit_in_m: float) -> Points:
    """Read points from CSV files: name, x, y, and depth where they lie below the surface.

    Parameters
    ----------
    paths : sequence of Path
    surface : float
        Depth of the ground or seabed in the grid's vertical datum, m; the column `depth` is in
        that datum. Points without a depth lie on the surface.
    crs_unit_in_m : float
        Length of the CRS's own unit. Where it is not the metre, headings must say their unit.

    Raises
    ------
    InputError
        From the table, or for a point above the surface or a name used twice.
    """
    plain = "m" if crs_unit_in_m == 1.0 else None
    foreign = _FOREIGN_FEET.get(round(crs_unit_in_m, 9), ())
    columns = [Column("name", None), Column("x", "m", plain_unit=plain, refused=foreign),
               Column("y", "m", plain_unit=plain, refused=foreign),
               Column("depth", "m", required=False, plain_unit="m")]
    parts = []
    for path in paths:
        table = read_table(path, columns, "points")
        depth = table.get("depth", np.full(table["x"].size, np.nan))
        depth = np.where(np.isnan(depth), surface, depth) - surface
        if (depth < 0).any():
            first = int(np.argmax(depth < 0))
            raise InputError(f"points file '{path}': point '{table['name'][first]}' at depth "
                             f"{depth[first] + surface:g} m lies above the ground or seabed "
                             f"([earth] surface = {surface:g} m); leave its depth out to put it on "
                             "the surface.")
        parts.append((table["name"], table["x"], table["y"], depth))
    name, x, y, depth = (np.concatenate(p) if parts else np.zeros(0)
                         for p in zip(*parts, strict=True)) if parts else (np.zeros(0),) * 4
    names, counts = np.unique(name, return_counts=True)
    if (counts > 1).any():
        files = ", ".join(f"'{path}'" for path in paths)
        raise InputError(f"points file {files}: the name '{names[counts > 1][0]}' is used "
                         f"{counts[counts > 1][0]} times; names must differ.")
    return Points(np.asarray(name, dtype=str), x, y, depth)
