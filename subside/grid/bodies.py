"""The geometry of a NetCDF grid: `corners`, or boxes, to metres with depth positive down."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from subside.grid.crs import MapSystem
from subside.grid.layout import BOX_VARIABLES
from subside.grid.solids import BOX, Solids, judge_boxes, judge_corners
from subside.grid.source import Source
from subside.grid.static import Kept
from subside.grid.threads import spread
from subside.grid.words import place_in_file

__all__ = ["box_values", "corner_values", "read_boxes", "read_corners"]

_SIDES = {"dx", "dy"}


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


def read_corners(kept: Kept, system: MapSystem) -> Solids:
    """Hexahedra of the kept cells; see `subside.grid.solids.judge_corners`."""
    source = kept.source
    corners = corner_values(kept, system)
    ignored = [n for n in (*BOX_VARIABLES, "dx", "dy", "azimuth", "area") if n in source.variables]
    if ignored:
        source.findings.warnings.append("the geometry is taken from 'corners'; the file's "
                                        f"{', '.join(ignored)} are not used.")
    return judge_corners(corners, _place(kept), source.findings)


def corner_values(kept: Kept, system: MapSystem) -> np.ndarray:
    """Corners (cell, 8, 3) of the kept cells, m, depth positive down, as they are."""
    source = kept.source
    factor, sense = _horizontal_scale(source, "corners", system), source.sense("corners")
    origin = source.origin("corners", (2, 3))
    values = kept.corners()
    source.check_precision("corners", values, factor)
    corners = values.astype(float, copy=False).reshape(-1, 8, 3)
    scale = np.array([factor, factor, factor * sense])

    def to_metres(start: int, stop: int) -> None:
        part = corners[start:stop]
        part += origin
        part *= scale

    if origin.any() or (scale != 1.0).any():
        spread(to_metres, len(corners))
    return corners


def read_boxes(kept: Kept, system: MapSystem) -> Solids:
    """Boxes of the kept cells; see `subside.grid.solids.judge_boxes`."""
    source = kept.source
    box = box_values(kept, system)
    if not source.variables.keys() >= _SIDES:
        source.findings.warnings.append("cells have an area but no dx and dy; each is taken as a "
                                        "square.")
    return judge_boxes(box, _place(kept), source.findings)


def box_values(kept: Kept, system: MapSystem) -> dict[str, np.ndarray]:
    """`solids.BOX` of the kept cells, (cell,) each, m and degrees, depth positive down, as is."""
    source = kept.source
    box = {}
    for name in ("x", "y", "top", "bottom"):
        upright = name in ("top", "bottom")
        factor = source.unit(name, "m")[0] if upright else _horizontal_scale(source, name, system)
        values = kept.values(name)
        source.check_precision(name, values, factor)
        box[name] = _scaled(values, factor * (source.sense(name) if upright else 1.0),
                            float(source.origin(name, (1,))[0]))
    if source.variables.keys() >= _SIDES:
        for name in sorted(_SIDES):
            box[name] = _scaled(kept.values(name), source.unit(name, "m")[0])
    else:
        area = _scaled(kept.values("area"), source.unit("area", "m2")[0])
        negative = area <= 0
        if negative.any():
            first = int(np.flatnonzero(negative)[0])
            raise source.findings.error(
                f"variable 'area' is {area[first]:g} m2 in {_place(kept)(first)}; an area "
                "is positive: correct it or mark the cell inactive.")
        box["dx"] = np.sqrt(area)
        box["dy"] = box["dx"].copy()
    if "azimuth" in source.variables:
        box["azimuth"] = _scaled(kept.values("azimuth"), source.unit("azimuth", "degree")[0])
    else:
        box["azimuth"] = np.zeros(len(box["x"]))
    return {n: box[n] for n in BOX}


def _scaled(values: np.ndarray, factor: float, origin: float = 0.0) -> np.ndarray:
    """``(values + origin) * factor``, in place."""
    if origin:
        values += origin
    if factor != 1.0:
        values *= factor
    return values


def _place(kept: Kept) -> Callable[[int], str]:
    """Number of a judged cell to its place in the file."""
    return lambda n: place_in_file(int(kept.number[n]), kept.layout.shape)
