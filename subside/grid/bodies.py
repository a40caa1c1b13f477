"""The geometry of a NetCDF grid: `corners`, or boxes, to metres with depth positive down."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from subside.grid.crs import MapSystem
from subside.grid.layout import BOX_VARIABLES, Layout
from subside.grid.solids import BOX, Solids, judge_boxes, judge_corners
from subside.grid.source import Source
from subside.grid.words import place_in_file

__all__ = ["read_boxes", "read_corners"]


def _horizontal_scale(source: Source, name: str, system: MapSystem) -> float:
    """Metres per unit of x and y; a foot that is nearly the map's own foot is refused."""
    factor = source.unit(name, "m")[0]
    ratio = factor / system.unit_in_m
    if system.wkt and 1e-9 < abs(ratio - 1.0) < 1e-4:
        raise source.findings.error(
            f"variable '{name}' has units '{source.text(name, 'units')}' ({factor:.10g} m) but "
            f"{system.name} counts in units of {system.unit_in_m:.10g} m; the two feet shift a map "
            "by metres: write the map's own (US_survey_foot or ft).")
    return factor


def read_corners(source: Source, layout: Layout, keep: np.ndarray, system: MapSystem
                 ) -> Solids:
    """Hexahedra of the kept cells, read slab by slab; see `subside.grid.solids.judge_corners`."""
    variable = source.variables["corners"]
    factor, sense = _horizontal_scale(source, "corners", system), source.sense("corners")
    origin = source.origin("corners", (2, 3))
    corners = np.empty((int(np.count_nonzero(keep)), 8, 3))
    done = 0
    for start, stop in layout.slabs(variable):
        part = keep[layout.cells_of(start, stop)]
        values = source.values("corners", slice(start, stop)).reshape(-1, 8, 3)[part]
        if values.size:
            source.check_precision("corners", float(np.nanmax(np.abs(values), initial=0)), factor)
        values += origin
        values *= (factor, factor, factor * sense)
        corners[done:done + len(values)] = values
        done += len(values)
    ignored = [n for n in (*BOX_VARIABLES, "dx", "dy", "azimuth", "area") if n in source.variables]
    if ignored:
        source.findings.warnings.append("the geometry is taken from 'corners'; the file's "
                                        f"{', '.join(ignored)} are not used.")
    return judge_corners(corners, _place(layout, keep), source.findings)


def read_boxes(source: Source, layout: Layout, keep: np.ndarray, system: MapSystem) -> Solids:
    """Boxes of the kept cells; see `subside.grid.solids.judge_boxes`."""
    box = {}
    for name in ("x", "y"):
        factor = _horizontal_scale(source, name, system)
        values = layout.full(source, name)[keep]
        source.check_precision(name, float(np.nanmax(np.abs(values), initial=0)), factor)
        box[name] = (values + source.origin(name, (1,))[0]) * factor
    for name in ("top", "bottom"):
        values = layout.full(source, name)[keep]
        factor = source.unit(name, "m")[0]
        source.check_precision(name, float(np.nanmax(np.abs(values), initial=0)), factor)
        box[name] = (values + source.origin(name, (1,))[0]) * (factor * source.sense(name))
    if "dx" in source.variables and "dy" in source.variables:
        for name in ("dx", "dy"):
            box[name] = layout.full(source, name)[keep] * source.unit(name, "m")[0]
    else:
        area = layout.full(source, "area")[keep] * source.unit("area", "m2")[0]
        negative = area <= 0
        if negative.any():
            first = int(np.flatnonzero(negative)[0])
            raise source.findings.error(
                f"variable 'area' is {area[first]:g} m2 in {_place(layout, keep)(first)}; an area "
                "is positive: correct it or mark the cell inactive.")
        box["dx"] = box["dy"] = np.sqrt(area)
        source.findings.warnings.append("cells have an area but no dx and dy; each is taken as a "
                                        "square.")
    if "azimuth" in source.variables:
        box["azimuth"] = layout.full(source, "azimuth")[keep] * source.unit("azimuth", "degree")[0]
    else:
        box["azimuth"] = np.zeros(len(box["x"]))
    return judge_boxes({n: box[n] for n in BOX}, _place(layout, keep), source.findings)


def _place(layout: Layout, keep: np.ndarray) -> Callable[[int], str]:
    """Number of a judged cell to its place in the file."""
    return lambda n: place_in_file(int(np.flatnonzero(keep)[n]), layout.shape)
