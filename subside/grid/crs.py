"""The map coordinate system of a grid: from the file, from the scenario, never two of them."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from subside.grid.findings import Findings

__all__ = ["MapSystem", "map_system", "same_system"]


@dataclass(frozen=True)
class MapSystem:
    """A coordinate system.

    Attributes
    ----------
    wkt : str
        WKT2:2019, ``""`` when there is none.
    name : str
        For messages.
    unit_in_m : float
        Length of its own unit, m.
    vertical_datum : str
        Name of the vertical part of a compound system, ``""`` when there is none.
    """

    wkt: str = ""
    name: str = ""
    unit_in_m: float = 1.0
    vertical_datum: str = ""


def map_system(in_file: Mapping[str, Any] | None, variable: str, wanted: str | None,
               findings: Findings) -> MapSystem:
    """The coordinate system of a grid.

    Parameters
    ----------
    in_file : mapping or None
        Attributes of the file's grid mapping variable.
    variable : str
        Name of that variable, for messages.
    wanted : str or None
        What the scenario says, such as ``"EPSG:32631"``.

    Raises
    ------
    InputError
        If either does not parse, is not a map projection, or the two differ.
    """
    file_crs = None if in_file is None else _from_file(dict(in_file), variable, findings)
    own_crs = _from_user(wanted, findings) if wanted else None
    if file_crs is None and own_crs is None:
        return MapSystem()
    if file_crs is not None and own_crs is not None:
        first, second = _horizontal(file_crs), _horizontal(own_crs)
        if not _same(first, second):
            raise findings.error(
                f"the file's '{variable}' is {_label(first)} but crs = \"{wanted}\" in the "
                f"scenario is {_label(second)}; remove the wrong one (the file's is used when the "
                "scenario has no crs key).")
    crs = file_crs if file_crs is not None else own_crs
    where = f"variable '{variable}'" if file_crs is not None else f"crs = \"{wanted}\""
    return _accepted(crs, where, findings)


def _from_file(attributes: dict[str, Any], variable: str, findings: Findings) -> Any:
    from pyproj import CRS
    from pyproj.exceptions import CRSError

    wkt = attributes.get("crs_wkt", attributes.get("spatial_ref"))
    if wkt is None and "grid_mapping_name" not in attributes:
        raise findings.error(f"variable '{variable}' has neither crs_wkt nor CF grid-mapping "
                             "attributes; give it crs_wkt, or remove it and write crs = "
                             "\"EPSG:...\" under [[grid]].")
    try:
        return CRS.from_cf(attributes) if wkt is None else CRS.from_wkt(str(wkt))
    except (CRSError, KeyError, ValueError, TypeError) as error:
        shown = str(wkt)[:60] if wkt is not None else str(attributes["grid_mapping_name"])
        reason = str(error).splitlines()[0][:120] if str(error) else type(error).__name__
        raise findings.error(f"the coordinate system of variable '{variable}' ('{shown}') does not "
                             f"parse: {reason}; write crs_wkt anew from an EPSG code, or remove "
                             "the variable and write crs = \"EPSG:...\" under [[grid]]."
                             ) from None


def _from_user(text: str, findings: Findings) -> Any:
    from pyproj import CRS
    from pyproj.exceptions import CRSError

    try:
        return CRS.from_user_input(text)
    except CRSError as error:
        reason = str(error).splitlines()[0][:120]
        raise findings.error(f"crs = \"{text}\" is no coordinate system ({reason}); write an EPSG "
                             "code such as \"EPSG:32631\", or WKT.") from None


def _horizontal(crs: Any) -> Any:
    """Without a vertical part and without a transformation bound to it."""
    if crs.is_bound:
        crs = crs.source_crs
    return crs.sub_crs_list[0] if crs.is_compound else crs


def _same(first: Any, second: Any) -> bool:
    """Equal, or both marked with the same code: dialects of WKT differ in names and axes."""
    code = first.to_json_dict().get("id")
    return bool(first.equals(second, ignore_axis_order=True)
                or (code is not None and code == second.to_json_dict().get("id")))


def same_system(first: MapSystem, second: MapSystem) -> bool:
    """Whether two files have one coordinate system, though they may write it differently."""
    from pyproj import CRS

    return first.wkt == second.wkt or _same(CRS.from_wkt(first.wkt), CRS.from_wkt(second.wkt))


def _label(crs: Any) -> str:
    code = crs.to_authority()
    return f"{crs.name} ({code[0]}:{code[1]})" if code else str(crs.name)


def _accepted(crs: Any, where: str, findings: Findings) -> MapSystem:
    flat = _horizontal(crs)
    if flat.is_geographic or flat.is_geocentric:
        raise findings.error(
            f"{where} is {_label(flat)}, whose coordinates are "
            f"{'degrees' if flat.is_geographic else 'geocentric'}; distances are needed: project "
            "the grid to a map projection in metres or feet (the UTM zone of the field, or the "
            "national grid) and name that.")
    axes = [a for a in flat.axis_info[:2] if a.unit_conversion_factor > 0]
    if len(axes) < 2 or axes[0].unit_conversion_factor != axes[1].unit_conversion_factor:
        raise findings.error(f"{where} ({_label(flat)}) does not have two axes of one length unit; "
                             "name a projected coordinate system.")
    if any(a.direction.lower() == "west" for a in axes):
        raise findings.error(f"{where} ({_label(flat)}) counts to the west; x must grow to the "
                             "east and y to the north: project the grid to such a system.")
    vertical = ""
    if crs.is_compound and len(crs.sub_crs_list) > 1:
        part = crs.sub_crs_list[1]
        vertical = part.datum.name if part.datum is not None else part.name
    return MapSystem(flat.to_wkt("WKT2_2019"), _label(flat), axes[0].unit_conversion_factor,
                     vertical)
