"""The NetCDF reader: a pressure grid, structured or a cell table, to the cell dataset."""

from __future__ import annotations

import os
from collections.abc import Mapping
from pathlib import Path
from typing import TYPE_CHECKING, Any, ClassVar

import numpy as np

from subside.errors import CannotDo
from subside.grid.bodies import read_boxes, read_corners
from subside.grid.cells import CellParts, assemble
from subside.grid.crs import MapSystem, map_system
from subside.grid.dates import decode_dates
from subside.grid.fields import field_names, read_field
from subside.grid.findings import Findings, declare
from subside.grid.history import Gaps, read_history
from subside.grid.layout import Layout, find_layout
from subside.grid.regions import read_regions
from subside.grid.source import Source, open_source
from subside.grid.words import counted, place_in_file, step_text
from subside.hooks.contracts import Reader

if TYPE_CHECKING:
    import xarray as xr

__all__ = ["NetcdfGrid"]

GAUGE = declare("gauge", "warning")
DATUM = declare("vertical-datum", "warning")
IDLE_PRESSURE = declare("inactive-pressure", "warning")
GAP = declare("pressure-gap", "error")
NOTHING = declare("no-active-cell", "error")


class NetcdfGrid(Reader):
    """Pressure grids in NetCDF: structured (k, j, i) or a cell table, corners or boxes."""

    name = "netcdf-grid"
    summary = "NetCDF pressure grid: structured (k, j, i) or a cell table, corners or boxes"
    source = "NetCDF (Unidata); attributes by the CF conventions 1.11"
    suffixes: ClassVar[tuple[str, ...]] = (".nc", ".nc4", ".cdf", ".netcdf")

    def read(self, path: Path, options: Mapping[str, Any]) -> xr.Dataset:
        """The cell dataset of a file.

        Parameters
        ----------
        path : Path
            The file.
        options : mapping
            `crs`, `accept`, and `fields` (names of further fields to read; all when absent).

        Raises
        ------
        InputError
            If the file is not what it should be; nothing is guessed.
        CannotDo
            If it is larger than the machine's memory.
        """
        findings = Findings(path, options.get("accept", ()))
        with open_source(path, findings) as source:
            return _read(source, options, findings)


def _read(source: Source, options: Mapping[str, Any], findings: Findings) -> xr.Dataset:
    layout = find_layout(source)
    names = field_names(source, layout, options.get("fields"))
    _refuse_giants(source, layout, names)
    pressure_scale = _pressure_scale(source)
    time = _dates(source, layout)
    system = _map_system(source, options.get("crs"))

    # 1. which cells count
    enabled = _enabled(source, layout)
    has_pressure = np.isfinite(source.values("pressure", 0)).reshape(-1)
    idle = int(np.count_nonzero(has_pressure & ~enabled))
    if idle:
        findings.add(IDLE_PRESSURE, f"{counted(idle, 'inactive cell')} "
                     f"{'carries' if idle == 1 else 'carry'} a pressure; it is ignored.")
    keep = enabled & has_pressure
    _refuse_empty(keep, enabled, layout, findings)

    # 2. their bodies; what has no volume drops out
    judged = np.flatnonzero(keep)
    solids = (read_corners if layout.has_corners else read_boxes)(source, layout, keep, system)
    kept = judged[solids.solid]
    keep[judged[~solids.solid]] = False
    _refuse_empty(keep, enabled, layout, findings)

    # 3. their pressure, region and fields
    gaps = Gaps()
    pressure = read_history(source, "pressure", layout, keep, pressure_scale, gaps,
                            enabled & ~has_pressure)
    _refuse_gaps(gaps, time, layout, findings)
    region, region_names = read_regions(source, layout, kept)
    parts = CellParts(
        time=time, pressure=pressure, solids=solids, region=region, region_names=region_names,
        layout=layout.label, shape=layout.shape, kept=kept,
        fields={n: read_field(source, n, layout, keep) for n in names},
        ids=_ids(source, layout, kept),
        pressure_attrs={"file_units": source.text("pressure", "units") or "",
                        "file_unit_in_pa": pressure_scale[0]},
        attrs={
            "crs_wkt": system.wkt, "crs_name": system.name, "xy_unit_in_m": system.unit_in_m,
            "vertical_datum": _vertical_datum(source, layout, system),
            "source_file": str(findings.path), "cells_in_file": layout.size,
            "inactive": layout.size - len(kept),
            "dropped_marked_inactive": int(np.count_nonzero(~enabled)),
            "dropped_without_pressure": int(np.count_nonzero(enabled & ~has_pressure)),
            "dropped_without_volume": int(np.count_nonzero(~solids.solid)),
        },
    )
    return assemble(parts, findings)


def _refuse_giants(source: Source, layout: Layout, names: list[str]) -> None:
    per_cell = 8 * layout.steps + 8 * (24 if layout.has_corners else 7) + 60
    per_cell += sum(8 * (layout.steps if "time" in source.variables[n].dimensions else 1)
                    for n in names)
    needed = per_cell * layout.size
    memory = os.sysconf("SC_PAGE_SIZE") * os.sysconf("SC_PHYS_PAGES")
    if needed > memory:
        raise CannotDo(
            f"{source.findings.path}: the file claims {layout.size:.4g} cells and {layout.steps} "
            f"steps, {needed / 2**30:.3g} GiB in memory, and this machine has "
            f"{memory / 2**30:.3g} GiB; check its dimensions, or keep fewer steps or cells.")


def _pressure_scale(source: Source) -> tuple[float, float]:
    scale = source.unit("pressure", "Pa")
    said = " ".join(source.text("pressure", a) or "" for a in
                    ("long_name", "standard_name", "comment", "description", "reference")).lower()
    if "gauge" in said and "absolute" not in said:
        raise source.findings.error("variable 'pressure' is described as gauge pressure; add the "
                                    "atmosphere (about 1.013 bar) and write absolute pressure.")
    absolute = source.text("pressure", "units") in {"bara", "barsa", "psia", "PSIA"}
    if not absolute and "absolute" not in said:
        source.findings.add(GAUGE, "variable 'pressure' does not say gauge or absolute; absolute "
                            "is assumed (say so in its long_name, such as 'absolute pore "
                            "pressure').")
    return scale


def _dates(source: Source, layout: Layout) -> np.ndarray:
    variable = source.need("time", "the date of each pressure step")
    if variable.dimensions != ("time",):
        raise source.findings.error(f"variable 'time' has dimensions {variable.dimensions}; "
                                    "expected (time,).")
    return decode_dates(source.values("time"), source.text("time", "units"),
                        source.text("time", "calendar"), source.findings)


def _map_system(source: Source, wanted: str | None) -> MapSystem:
    named = [t for n in ("pressure", *source.variables)
             if n in source.variables and (t := source.text(n, "grid_mapping"))]
    name = named[0].split(":")[0].split()[0] if named else "crs"
    if named and name not in source.variables:
        raise source.findings.error(f"grid_mapping names the variable '{name}', which the file "
                                    "does not have; add it or remove the attribute.")
    variable = source.variables.get(name)
    attributes = None if variable is None else {a: variable.getncattr(a)
                                                for a in variable.ncattrs()}
    return map_system(attributes, name, wanted, source.findings)


def _enabled(source: Source, layout: Layout) -> np.ndarray:
    if "active" not in source.variables:
        return np.ones(layout.size, dtype=bool)
    values = layout.full(source, "active")
    return np.isfinite(values) & (values != 0)


def _refuse_empty(keep: np.ndarray, enabled: np.ndarray, layout: Layout, findings: Findings
                  ) -> None:
    if not keep.any():
        findings.add(NOTHING, f"no cell is active: of {layout.size} cells in the file "
                     f"{np.count_nonzero(~enabled)} are marked inactive and the others have no "
                     "pressure at the first step or no volume; check 'active', the missing value "
                     "of 'pressure', and the geometry.")


def _refuse_gaps(gaps: Gaps, time: np.ndarray, layout: Layout, findings: Findings) -> None:
    if gaps.missing:
        step = min(gaps.missing)
        count, first = gaps.missing[step]
        findings.add(GAP, f"{step_text(time, step)}: {counted(count)} "
                     f"{'has' if count == 1 else 'have'} no pressure, first "
                     f"{place_in_file(first, layout.shape)}, though there is one at step 0; mark "
                     "them inactive or fill the gap.")
    if gaps.stray:
        step = min(gaps.stray)
        count, first = gaps.stray[step]
        findings.add(GAP, f"step 0 ({np.datetime_as_string(time[0], unit='D')}): "
                     f"{counted(count)} {'has' if count == 1 else 'have'} no pressure, first "
                     f"{place_in_file(first, layout.shape)}, though there is one at "
                     f"{step_text(time, step)}; mark them inactive or fill the gap.")


def _ids(source: Source, layout: Layout, kept: np.ndarray) -> dict[str, np.ndarray]:
    """How a cell is named: k, j, i from 0, or the cell table's own columns."""
    if layout.structured:
        return dict(zip("kji", np.unravel_index(kept, layout.shape), strict=True))
    found = {}
    if all(n in source.variables and source.variables[n].dimensions == ("cell",) for n in "kji"):
        for name in "kji":
            found[name] = layout.full(source, name)[kept].astype(np.int64)
    column = next((n for n in ("cell_id", "cell") if n in source.variables
                   and source.variables[n].dimensions == ("cell",)), None)
    numbers = kept if column is None else _identifiers(source, column, kept)
    return found | {"cell_id": numbers}


def _identifiers(source: Source, column: str, kept: np.ndarray) -> np.ndarray:
    values = np.ma.filled(np.ma.asarray(source.variables[column][...]))[kept]
    return values.astype(str) if values.dtype.kind not in "iu" else values


def _vertical_datum(source: Source, layout: Layout, system: MapSystem) -> str:
    names = ["corners"] if layout.has_corners else ["top", "bottom"]
    said = {t for n in names if (t := source.text(n, "vertical_datum"))}
    if len(said) > 1:
        raise source.findings.error(f"variables 'top' and 'bottom' name different vertical_datum: "
                                    f"{', '.join(sorted(said))}; bring both to one.")
    whole = getattr(source.dataset, "vertical_datum", "")
    datum = said.pop() if said else (str(whole).strip() or system.vertical_datum)
    if not datum:
        source.findings.add(DATUM, "depth has no vertical_datum; mean sea level is assumed (give "
                            f"'{names[0]}' an attribute vertical_datum).")
    return datum
