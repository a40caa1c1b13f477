"""The NetCDF reader: a pressure grid, structured or a cell table, to the cell dataset."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any, ClassVar

import numpy as np

from subside.grid.bodies import read_boxes, read_corners
from subside.grid.cell_pass import places
from subside.grid.cells import CellParts, assemble, attributes
from subside.grid.crs import MapSystem, map_system
from subside.grid.dates import decode_dates
from subside.grid.fields import DECLARED, field_names, field_scale, read_field
from subside.grid.findings import Findings, declare
from subside.grid.layout import Layout, find_layout
from subside.grid.memory import refuse_giants
from subside.grid.regions import read_regions
from subside.grid.selection import make_blocks
from subside.grid.source import Source, open_source
from subside.grid.static import Kept
from subside.grid.storage import first_date, open_store
from subside.grid.stream import FileStream, Stream
from subside.grid.unpack import ABSENT
from subside.grid.words import counted
from subside.hooks.contracts import Reader

if TYPE_CHECKING:
    import xarray as xr

__all__ = ["NetcdfGrid", "dates_of", "map_system_of", "scale_in_time", "whole"]

GAUGE = declare("gauge", "warning")
DATUM = declare("vertical-datum", "warning")
IDLE_PRESSURE = declare("inactive-pressure", "warning")
NOTHING = declare("no-active-cell", "error")


class NetcdfGrid(Reader):
    """Pressure grids in NetCDF: structured (k, j, i) or a cell table, corners or boxes."""

    name = "netcdf-grid"
    summary = "NetCDF pressure grid: structured (k, j, i) or a cell table, corners or boxes"
    source = "NetCDF (Unidata); attributes by the CF conventions 1.11"
    suffixes: ClassVar[tuple[str, ...]] = (".nc", ".nc4", ".cdf", ".netcdf")

    def open(self, path: Path, options: Mapping[str, Any]
             ) -> tuple[xr.Dataset, dict[str, FileStream]]:
        """The cell dataset of a file without its variables in time, and these to be read.

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
            return whole(source, options, findings)

    def open_several(self, paths: Sequence[Path], options: Mapping[str, Any]
                     ) -> tuple[xr.Dataset, Mapping[str, Stream]]:
        """As `open`, of files that continue each other in time; see `subside.grid.continuation`."""
        from subside.grid.continuation import open_several

        return open_several(paths, options)

    def read(self, path: Path, options: Mapping[str, Any]) -> xr.Dataset:
        """The whole cell dataset, as `open` but with everything in memory."""
        from subside.grid.opening import in_memory

        return in_memory(*self.open(path, options))


def whole(source: Source, options: Mapping[str, Any], findings: Findings
          ) -> tuple[xr.Dataset, dict[str, FileStream]]:
    """See `NetcdfGrid.open`."""
    layout = find_layout(source)
    names = field_names(source, layout, options.get("fields"))
    in_time = [n for n in names if "time" in source.variables[n].dimensions]
    refuse_giants(findings, layout.size, 8 * (24 if layout.has_corners else 7) + 60
                  + 8 * (len(names) - len(in_time)), f" and {layout.steps} steps")
    scales = {n: scale_in_time(source, n, layout) for n in ("pressure", *in_time)}
    time = dates_of(source)
    system = map_system_of(source, options.get("crs"))

    # 1. which cells count
    enabled = _enabled(source, layout)
    store = open_store(source, "pressure", layout)
    start = first_date(store, layout)
    state = np.isfinite(start).view(np.uint8)
    idle = int(np.count_nonzero(state[~enabled]))
    if idle:
        findings.add(IDLE_PRESSURE, f"{counted(idle, 'inactive cell')} "
                     f"{'carries' if idle == 1 else 'carry'} a pressure; it is ignored.")
    without = enabled & (state == 0)
    state[~enabled] = 0  # neither KEPT nor ABSENT
    state[without] = ABSENT
    state = state.reshape(layout.box)
    kept = Kept.of(source, layout, state)
    _refuse_empty(kept, enabled, findings)

    # 2. their bodies; what has no volume drops out
    solids = (read_corners if layout.has_corners else read_boxes)(kept, system)
    flat = int(np.count_nonzero(~solids.solid))
    if flat:
        state.reshape(-1)[kept.number[~solids.solid]] = 0
        kept = Kept.of(source, layout, state)
        _refuse_empty(kept, enabled, findings)

    # 3. their pressure, region and fields
    blocks = make_blocks(state, store.chunk[1:4])
    streams = {n: FileStream(store if n == "pressure" else open_store(source, n, layout), blocks,
                             *scale) for n, scale in scales.items()}
    streams["pressure"].keep_start(start[kept.number])
    region, region_names = read_regions(kept)
    parts = CellParts(
        time=time, solids=solids, region=region, region_names=region_names,
        layout=layout.label, shape=layout.shape, kept=kept.number,
        fields={n: read_field(kept, n) for n in names if n not in in_time},
        ids=_ids(kept), attrs={
            "crs_wkt": system.wkt, "crs_name": system.name, "xy_unit_in_m": system.unit_in_m,
            "vertical_datum": _vertical_datum(source, layout, system),
            "source_file": str(findings.path), "cells_in_file": layout.size,
            "inactive": layout.size - len(kept.number),
            "dropped_marked_inactive": int(np.count_nonzero(~enabled)),
            "dropped_without_pressure": int(np.count_nonzero(without)),
            "dropped_without_volume": flat,
        },
    )
    return assemble(parts, findings), streams


def scale_in_time(source: Source, name: str, layout: Layout
                  ) -> tuple[tuple[float, float], dict[str, Any]]:
    """`(factor, offset)` to SI of a variable in time, and its attributes."""
    if name in DECLARED:
        raise source.findings.error(f"variable '{name}' changes in time; it must be static, "
                                    f"({', '.join(layout.dims)}).")
    if name != "pressure":
        return field_scale(source, name)
    scale = _pressure_scale(source)
    return scale, {**attributes(name), "file_units": source.text(name, "units") or "",
                   "file_unit_in_pa": scale[0]}


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


def dates_of(source: Source) -> np.ndarray:
    """Dates of the pressure steps."""
    variable = source.need("time", "the date of each pressure step")
    if variable.dimensions != ("time",):
        raise source.findings.error(f"variable 'time' has dimensions {variable.dimensions}; "
                                    "expected (time,).")
    return decode_dates(source.values("time"), source.text("time", "units"),
                        source.text("time", "calendar"), source.findings)


def map_system_of(source: Source, wanted: str | None) -> MapSystem:
    """The coordinate system; see `subside.grid.crs.map_system`."""
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
    dims = layout.dims_of(source, "active")
    if dims == layout.dims:
        enabled = np.empty(layout.size, dtype=bool)
        for start, stop in layout.slabs(source.variables["active"]):
            enabled[layout.cells_of(start, stop)] = source.flags(
                "active", slice(start, stop)).reshape(-1)
        return enabled
    where = tuple(slice(None) if d in dims else None for d in layout.dims)
    return np.broadcast_to(source.flags("active")[where], layout.shape).reshape(-1)


def _refuse_empty(kept: Kept, enabled: np.ndarray, findings: Findings) -> None:
    if not len(kept.number):
        findings.add(NOTHING, f"no cell is active: of {kept.layout.size} cells in the file "
                     f"{np.count_nonzero(~enabled)} are marked inactive and the others have no "
                     "pressure at the first step or no volume; check 'active', the missing value "
                     "of 'pressure', and the geometry.")


def _ids(kept: Kept) -> dict[str, np.ndarray]:
    """How a cell is named: k, j, i from 0, or the cell table's own columns."""
    source, layout, number = kept.source, kept.layout, kept.number
    if layout.structured:
        found = {n: np.empty(len(number), np.int32) for n in "kji"}
        places(number, *layout.shape[1:], *found.values())
        return found
    found = {}
    if all(n in source.variables and source.variables[n].dimensions == ("cell",) for n in "kji"):
        for name in "kji":
            found[name] = kept.values(name).astype(np.int64)
    column = next((n for n in ("cell_id", "cell") if n in source.variables
                   and source.variables[n].dimensions == ("cell",)), None)
    numbers = number if column is None else _identifiers(source, column, number)
    return found | {"cell_id": numbers}


def _identifiers(source: Source, column: str, number: np.ndarray) -> np.ndarray:
    values = np.ma.filled(np.ma.asarray(source.variables[column][...]))[number]
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
