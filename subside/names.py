"""The vocabulary: each variable's dimensions, unit, sign and meaning.

Results and cell datasets take their attributes from here, and the help prints from here.
"""

from __future__ import annotations

from dataclasses import dataclass

__all__ = ["CAUTIONS", "CELL_VARIABLES", "RESULT_VARIABLES", "Variable"]


@dataclass(frozen=True)
class Variable:
    """One variable: where it lives, its SI unit, and what it means (sign included)."""

    dims: tuple[str, ...]
    unit: str
    long_name: str
    comment: str = ""


_MAP = ("time", "y", "x")
_POINT = ("time", "point")

RESULT_VARIABLES: dict[str, Variable] = {
    # long names of the pair east/north are worded so that GIS meshes join them to a vector
    "subsidence": Variable(_MAP, "m", "subsidence", "positive down, since the start date"),
    "displacement_east": Variable(_MAP, "m", "x-component of horizontal displacement",
                                  "positive to the grid east of the CRS, since the start date"),
    "displacement_north": Variable(_MAP, "m", "y-component of horizontal displacement",
                                   "positive to the grid north of the CRS, since the start date"),
    "compaction": Variable(_MAP, "m", "reservoir compaction",
                           "volume lost by the parts of cells below a pixel over the pixel's "
                           "area; positive when the reservoir shortens"),
    "tilt": Variable(_MAP, "1", "tilt", "magnitude of the slope that subsidence adds to the "
                     "ground, m per m, from derivatives of the kernels"),
    "horizontal_strain_major": Variable(
        _MAP, "1", "major principal horizontal strain",
        "the larger one; positive = extension; from derivatives of the kernels"),
    "horizontal_strain_minor": Variable(
        _MAP, "1", "minor principal horizontal strain",
        "the smaller one; negative = compression; from derivatives of the kernels"),
    "subsidence_rate": Variable(
        _MAP, "m s-1", "rate of subsidence",
        "positive while sinking; mean over the interval before each date; zero at the start"),
    "slope_east": Variable(_MAP, "1", "slope of subsidence to the east",
                           "change of subsidence per m to the east; positive where it deepens"),
    "slope_north": Variable(_MAP, "1", "slope of subsidence to the north",
                            "change of subsidence per m to the north; positive where it deepens"),
    "horizontal_strain_east": Variable(_MAP, "1", "horizontal strain along east",
                                       "positive = extension"),
    "horizontal_strain_north": Variable(_MAP, "1", "horizontal strain along north",
                                        "positive = extension"),
    "horizontal_strain_shear": Variable(_MAP, "1", "horizontal shear strain, east against north",
                                        "tensor component, half the engineering shear strain"),
    "region_subsidence": Variable(("time", "region", "y", "x"), "m",
                                  "subsidence caused by one region", "positive down"),
    "cell_compaction": Variable(("time", "cell"), "m", "compaction of a cell",
                                "strain times thickness times net to gross; positive = shortening"),
    "point_subsidence": Variable(_POINT, "m", "subsidence at points",
                                 "positive down, since the start date"),
    "point_displacement_east": Variable(_POINT, "m", "displacement to the east at points",
                                        "positive to the grid east of the CRS"),
    "point_displacement_north": Variable(_POINT, "m", "displacement to the north at points",
                                         "positive to the grid north of the CRS"),
    "point_x": Variable(("point",), "m", "x of points"),
    "point_y": Variable(("point",), "m", "y of points"),
    "point_depth": Variable(("point",), "m", "depth of points below the ground or seabed",
                            "positive down"),
    "max_subsidence": Variable(("time",), "m", "largest subsidence on the map and at points",
                               "of the ground or seabed: points below it do not count"),
    "max_subsidence_x": Variable(("time",), "m", "x of the largest subsidence"),
    "max_subsidence_y": Variable(("time",), "m", "y of the largest subsidence"),
    "max_uplift": Variable(("time",), "m", "largest uplift on the map and at points",
                           "positive up; zero where the ground rises nowhere; points below it do "
                           "not count"),
    "max_uplift_x": Variable(("time",), "m", "x of the largest uplift"),
    "max_uplift_y": Variable(("time",), "m", "y of the largest uplift"),
    "bowl_volume": Variable(("time",), "m3", "volume of the whole bowl, tail included",
                            "out to infinity: the sum over cells of volume lost times the volume "
                            "ratio of the earth model, which is exact; the part beyond the map is "
                            "this minus bowl_volume_map"),
    "bowl_volume_map": Variable(("time",), "m3", "volume of the bowl on the map",
                                "sum of subsidence times pixel area"),
    "bowl_volume_1cm": Variable(("time",), "m3", "volume of the bowl inside the 1 cm contour",
                                "sum over the pixels that sink 1 cm or more"),
    "region_compaction_volume": Variable(("time", "region"), "m3",
                                         "volume lost by the cells of a region",
                                         "positive when the region shortens"),
}

CELL_VARIABLES: dict[str, Variable] = {
    "pressure": Variable(("time", "cell"), "Pa", "absolute pore pressure"),
    "corners": Variable(("cell", "corner", "xyz"), "m", "corners: x, y, depth positive down",
                        "4 corners of the top face going round, then the 4 below them"),
    "x": Variable(("cell",), "m", "x of the centre of a box"),
    "y": Variable(("cell",), "m", "y of the centre of a box"),
    "top": Variable(("cell",), "m", "depth of the top of a box, positive down"),
    "bottom": Variable(("cell",), "m", "depth of the bottom of a box, positive down"),
    "dx": Variable(("cell",), "m", "length of a box along its own x"),
    "dy": Variable(("cell",), "m", "length of a box along its own y"),
    "azimuth": Variable(("cell",), "degree", "clockwise from grid north to the box's own y"),
    "volume": Variable(("cell",), "m3", "bulk volume"),
    "centroid": Variable(("cell", "xyz"), "m", "centre of volume: x, y, depth positive down"),
    "region": Variable(("cell",), "1", "index into the coordinate region_name"),
    "k": Variable(("cell",), "1", "layer of the cell in its file, from 0"),
    "j": Variable(("cell",), "1", "row of the cell in its file, from 0"),
    "i": Variable(("cell",), "1", "column of the cell in its file, from 0"),
    "edge": Variable(("cell",), "1", "true for cells on the grid's outer edge"),
    "column": Variable(("cell",), "1", "number of the upright pillar a cell stands in",
                       "cells of one pillar have the same outline to 1e-6 m; from 0 without gaps; "
                       "a cell whose own edges lean has a pillar of its own"),
    "porosity": Variable(("cell",), "1", "porosity, fraction"),
    "net_to_gross": Variable(("cell",), "1", "net to gross, fraction"),
    "initial_pressure": Variable(("cell",), "Pa", "absolute pore pressure before production"),
}

CAUTIONS = (
    "This is a model result, not a measurement.",
    "It rests on the compressibility, on the stiffness and depth of what lies below the reservoir, "
    "and on pressure in water legs that nobody gauges.",
    "A half-space overstates the width of bowls over a stiff basement; a linear law misses delay "
    "and the late tail, and subsidence goes on after shut-in.",
    "Tilt, strain and damage classes serve for screening only.",
    "Subsidence of neighbouring fields and of shallow causes must be added.",
    "Do not extrapolate beyond the pressure range the laws were calibrated on.",
    "Judgement rests with licensed practitioners under the local code and regulator.",
)
"""What every forecast prints."""
