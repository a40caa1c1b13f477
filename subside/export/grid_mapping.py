"""A coordinate reference system as CF attributes that every GIS reads the same way."""

from __future__ import annotations

import math
import warnings
from typing import Any

from pyproj import CRS
from pyproj.exceptions import CRSError

from subside.errors import InputError

__all__ = ["axis_unit", "grid_mapping", "metres_per_unit", "projected_crs"]

_REMEDY = "give the grid in a projected CRS with axes east and north, such as a UTM zone"


def projected_crs(wkt: str) -> CRS:
    """The projected CRS of a result, with axes east and north.

    The horizontal part of a compound CRS and the source of a bound one are taken.

    Parameters
    ----------
    wkt : str
        WKT, or any text pyproj understands.

    Raises
    ------
    InputError
        If the text is no CRS, or the CRS is not projected or not east and north.
    """
    try:
        crs = CRS.from_user_input(wkt)
    except CRSError as error:
        raise InputError(f"crs_wkt '{wkt[:60]}...' is not a coordinate reference system "
                         f"({str(error)[:120]}); {_REMEDY}.") from error
    if crs.is_bound and crs.source_crs is not None:
        crs = crs.source_crs
    if crs.is_compound:
        crs = crs.sub_crs_list[0]
        if crs.is_bound and crs.source_crs is not None:
            crs = crs.source_crs
    if not crs.is_projected:
        raise InputError(f"the CRS '{crs.name}' is {crs.type_name}, not projected; {_REMEDY}.")
    directions = [axis.direction for axis in crs.axis_info[:2]]
    if sorted(directions) != ["east", "north"]:
        raise InputError(f"the axes of the CRS '{crs.name}' run {' and '.join(directions)}; "
                         f"{_REMEDY}.")
    return crs


def axis_unit(crs: CRS) -> str:
    """The unit of x and y as CF (UDUNITS) spells it: ``"m"``, ``"US_survey_foot"``, ...

    Raises
    ------
    InputError
        If UDUNITS has no name for the unit.
    """
    name = crs.axis_info[0].unit_name
    known = {"metre": "m", "US survey foot": "US_survey_foot", "foot": "foot", "kilometre": "km"}
    if name not in known:
        raise InputError(f"x and y of the CRS '{crs.name}' are in '{name}', which CF has no name "
                         f"for; {_REMEDY}.")
    return known[name]


def metres_per_unit(unit: str) -> float:
    """Metres in one of the units `axis_unit` returns.

    The US survey foot is 1200/3937 m by definition.
    """
    return {"m": 1.0, "km": 1000.0, "foot": 0.3048, "US_survey_foot": 1200.0 / 3937.0}[unit]


def grid_mapping(crs: CRS) -> dict[str, Any]:
    """CF attributes of the grid mapping variable, `crs_wkt` (WKT2:2019) among them.

    Raises
    ------
    InputError
        If CF has no name for the method of the projection.
    """
    with warnings.catch_warnings():
        # pyproj warns of parameters CF cannot hold; crs_wkt holds them.
        warnings.simplefilter("ignore", UserWarning)
        attributes = {key: value for key, value in crs.to_cf().items()
                      if value not in ("unknown", "undefined", "")}
    if "grid_mapping_name" not in attributes:
        attributes |= _parameters_by_hand(crs)
    attributes["crs_wkt"] = _plain_wkt(crs)
    return attributes


def _plain_wkt(crs: CRS) -> str:
    """WKT2:2019 without area of use and scope: equal to the full one, and plain ASCII."""
    tree = crs.to_json_dict()
    for key in ("area", "scope", "bbox", "usages", "remarks"):
        tree.pop(key, None)
    return CRS.from_json_dict(tree).to_wkt("WKT2_2019")


# Methods CF has a near or loose description of: EPSG method -> (CF name, EPSG to CF parameters).
# CF's `stereographic` goes from the ellipsoid in one step, the national grids of the oblique method
# through a sphere; CF leaves open which origin the false coordinates of `oblique_mercator` count
# from. `crs_wkt` is exact, so the attribute `comment` points there.
_BY_HAND: dict[str, tuple[str, dict[str, str]]] = {
    "Oblique Stereographic": ("stereographic", {
        "Latitude of natural origin": "latitude_of_projection_origin",
        "Longitude of natural origin": "longitude_of_projection_origin",
        "Scale factor at natural origin": "scale_factor_at_projection_origin",
        "False easting": "false_easting",
        "False northing": "false_northing",
    }),
    "Hotine Oblique Mercator (variant A)": ("oblique_mercator", {
        "Latitude of projection centre": "latitude_of_projection_origin",
        "Longitude of projection centre": "longitude_of_projection_origin",
        "Azimuth at projection centre": "azimuth_of_central_line",
        "Scale factor at projection centre": "scale_factor_at_projection_origin",
        "False easting": "false_easting",
        "False northing": "false_northing",
    }),
}


def _parameters_by_hand(crs: CRS) -> dict[str, Any]:
    """What pyproj leaves out, from the parameters of the conversion; angles in degrees."""
    operation = crs.coordinate_operation
    method = operation.method_name if operation is not None else "none"
    if operation is None or method not in _BY_HAND:
        raise InputError(f"CF has no grid mapping for '{crs.name}' (method '{method}'); a GIS "
                         f"would see a map without a CRS. Remedy: {_REMEDY}.")
    name, translation = _BY_HAND[method]
    attributes: dict[str, Any] = {"grid_mapping_name": name}
    for parameter in operation.params:
        if parameter.name in translation:
            angle = parameter.unit_name not in ("unity", crs.axis_info[0].unit_name)
            value = float(parameter.value)
            if angle:
                value = math.degrees(value * parameter.unit_conversion_factor)
            attributes[translation[parameter.name]] = value
    attributes["comment"] = ("crs_wkt is exact; the parameters alone describe a projection that "
                             "differs by metres")
    return attributes
