"""From a file to a checked cell dataset, with its variables in time as streams or in memory."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from subside.errors import CannotDo, InputError, located
from subside.grid.cells import attributes
from subside.grid.checks import check_accept, refuse_incomplete, run_checks
from subside.grid.fields import require_field
from subside.grid.findings import Findings
from subside.grid.memory import refuse_giants
from subside.grid.stream import HeldStream, Stream
from subside.grid.threads import processors
from subside.grid.watch import PressureWatch
from subside.units import parse_quantity

if TYPE_CHECKING:
    import xarray as xr

__all__ = ["in_memory", "open_cells", "open_grid"]

_IN_TIME = ("time", "cell")


def open_cells(
    path: str | Path | Sequence[str | Path],
    *,
    crs: str | None = None,
    accept: Iterable[str] = (),
    surface: float = 0.0,
    initial_pressure: float | str | Mapping[str, str] | None = None,
    fields: Iterable[str] | None = None,
) -> tuple[xr.Dataset, dict[str, Stream]]:
    """See `subside.grid.open_cells`."""
    paths = [Path(path)] if isinstance(path, (str, Path)) else [Path(p) for p in path]
    if not paths:
        raise InputError("no pressure grid is named; give its file, or a list of files.")
    with located(str(paths[0])):
        words = check_accept(accept)
    reader = _reader_of(paths)()
    if fields is not None:
        extra = initial_pressure.values() if isinstance(initial_pressure, Mapping) else ()
        fields = [*fields, *extra]
    options = {"crs": crs, "accept": tuple(sorted(words)), "fields": fields}
    findings = Findings(paths[0], words)
    streams: dict[str, Stream]
    try:
        if len(paths) > 1:
            cells, streams = reader.open_several(paths, options)
            findings.path = str(cells.attrs["source_file"])  # the first by date
        elif hasattr(reader, "open"):
            cells, streams = reader.open(paths[0], options)
        else:
            cells, streams = _held(reader.read(paths[0], options), findings)
        if initial_pressure is not None:
            _set_initial(cells, streams, initial_pressure)
        run_checks(cells, surface, findings, streams["pressure"])
    except MemoryError:
        raise _too_large(paths[0]) from None
    return cells, streams


def open_grid(path: str | Path | Sequence[str | Path], *, accept: Iterable[str] = (),
              surface: float = 0.0, **options: Any) -> xr.Dataset:
    """See `subside.grid.open_grid`."""
    accept = (accept,) if isinstance(accept, str) else tuple(accept)
    cells, streams = open_cells(path, accept=accept, surface=surface, **options)
    try:
        pressure = streams["pressure"]
        watch = PressureWatch(cells, surface, pressure, accept=accept)
        whole = in_memory(cells, streams, watch)
        known = whole.attrs["warnings"]
        whole.attrs["warnings"] = known + [w for w in watch.finish() if w not in known]
    except MemoryError:
        raise _too_large(cells.attrs["source_file"]) from None
    return whole


def in_memory(cells: xr.Dataset, streams: Mapping[str, Stream], watch: PressureWatch | None = None
              ) -> xr.Dataset:
    """The cell dataset with its variables in time, read block by block and seen by `watch`.

    Raises
    ------
    CannotDo
        If they do not fit into the machine's memory.
    """
    import xarray as xr

    steps, count = cells.sizes["time"], cells.sizes["cell"]
    refuse_giants(Findings(str(cells.attrs["source_file"])), count,
                  8 * steps * len(streams) + cells.nbytes // max(count, 1), f" and {steps} steps")
    held = {n: (_IN_TIME, _filled(s, watch if n == "pressure" else None), s.attrs)
            for n, s in streams.items()}
    return xr.Dataset({**held, **cells.data_vars}, cells.coords, cells.attrs)


def _filled(stream: Stream, watch: PressureWatch | None) -> np.ndarray:
    """All of a stream (time, cell), SI."""
    whole = np.empty((stream.steps, stream.cells))

    def take(block: int) -> None:
        cells, before = stream.blocks[block], None
        for first in range(0, stream.steps, stream.time_chunk):
            last = min(first + stream.time_chunk, stream.steps)
            values = stream.read_si(block, first, last)
            if watch is not None:
                watch.see(cells, first, values, before)
            before = values[-1]
            whole[first:last, cells] = values

    with ThreadPoolExecutor(processors()) as pool:
        list(pool.map(take, range(len(stream.blocks))))
    return whole


def _held(whole: xr.Dataset, findings: Findings) -> tuple[xr.Dataset, dict[str, Stream]]:
    """What a reader gave in memory, taken apart: the pressure first."""
    refuse_incomplete(whole, findings, ("pressure",))
    names = ["pressure"] + [str(n) for n, v in whole.data_vars.items()
                            if v.dims == _IN_TIME and n != "pressure"]
    streams: dict[str, Stream] = {
        n: HeldStream(whole[n].values, n, {**attributes(n), **whole[n].attrs}) for n in names}
    return whole.drop_vars(names), streams


def _too_large(path: str | Path) -> CannotDo:
    return CannotDo(f"{path}: the grid does not fit into the memory that is free; close other "
                    "programs, or keep fewer steps or cells.")


def _reader_of(paths: Sequence[Path]) -> type[Any]:
    """The reader that takes them all."""
    first, *others = paths
    reader = _reader_of_one(first)
    if others and not hasattr(reader, "open_several"):
        raise InputError(f"{others[0]}: the reader of files ending in '{first.suffix}' takes one "
                         "file for each grid; join the files along time into one.")
    for path in others:
        if _reader_of_one(path) is not reader:
            raise InputError(f"{path}: it is of another kind than '{first}'; files that continue "
                             "each other must be of one kind.")
    return reader


def _reader_of_one(path: Path) -> type[Any]:
    from subside.hooks.registry import registry

    found = registry.all("reader").values()
    fitting = [r for r in found if path.suffix.lower() in r.cls.suffixes]
    if len(fitting) > 1:
        raise InputError(f"{path}: files ending in '{path.suffix}' are claimed by several readers, "
                         + ", ".join(f"{r.name} ({r.origin})" for r in fitting)
                         + "; uninstall one of them.")
    if not fitting:
        endings = sorted({s for r in found for s in r.cls.suffixes})
        raise InputError(f"{path}: no reader takes files ending in '{path.suffix}'; the installed "
                         f"ones take {', '.join(endings)}.")
    return fitting[0].cls


def _set_initial(cells: xr.Dataset, streams: Mapping[str, Stream],
                 wanted: float | str | Mapping[str, str]) -> None:
    if isinstance(wanted, Mapping):
        if set(wanted) != {"field"}:
            raise InputError(f"{cells.attrs['source_file']}: initial_pressure = {dict(wanted)!r}: "
                             "write \"first\", a quantity such as \"350 bar\", or "
                             "{ field = \"initial_pressure\" }.")
        name = wanted["field"]
        if name in streams:
            raise InputError(f"{cells.attrs['source_file']}: initial_pressure names the field "
                             f"'{name}', which changes in time; it must be static.")
        values = require_field(cells, name, "Pa", "initial_pressure").values
    elif wanted == "first":
        values = streams["pressure"].start_si()
    else:
        with located(str(cells.attrs["source_file"])):
            values = np.full(cells.sizes["cell"],
                             parse_quantity(wanted, "Pa", name="initial_pressure"))
    cells["initial_pressure"] = (("cell",), values, attributes("initial_pressure"))
