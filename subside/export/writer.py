"""A result written while it is still being computed: maps date by date, the rest at the end."""

from __future__ import annotations

import datetime
from collections.abc import Iterable, Iterator
from contextlib import contextmanager, suppress
from functools import partial
from pathlib import Path
from types import TracebackType
from typing import TYPE_CHECKING, Self

import netCDF4
import numpy as np
import xarray as xr

from subside.errors import InputError
from subside.export.atomic import whole
from subside.export.axes import check_map, check_times, is_map, ordered
from subside.export.background import Background
from subside.export.layout import (
    create_map,
    placing_of,
    put_attributes,
    write_dimensions,
    write_globals,
    write_variable,
)
from subside.export.library import LIBRARY, library_errors
from subside.names import RESULT_VARIABLES

if TYPE_CHECKING:
    from subside.export.chunks import MapFile

__all__ = ["ResultWriter"]

class ResultWriter:
    """Write a result whose maps arrive date by date, whole or not at all.

    ::

        with ResultWriter(path, frame, ["subsidence", "tilt"]) as writer:
            for first, maps in ...:
                writer.put("subsidence", first, maps)
            writer.finish(result)

    Threads compress what was put while the next maps are computed. The file appears under its name
    when the block ends after `finish`; if it ends in any other way, by an error or an interrupt
    from the keyboard, nothing is left behind, and a file that was there before stays.

    Parameters
    ----------
    path : path
        The file; a missing folder is made.
    frame : xarray.Dataset
        What is known at the start: all coordinates of the maps (`x`, `y`: pixel centres in the
        CRS's own unit; `time`: datetime64; `region_name` where maps have regions) and the
        attributes `crs_wkt` (empty: no CRS) and `xy_unit`. A map that is a variable of `frame`
        takes its dimensions and attributes from there, its values do not count.
    maps : iterable of str
        The variables that `put` will bring. One that is not in `frame` has the dimensions that
        `subside.names.RESULT_VARIABLES` gives it; (time, y, x) if it is not there either.
    threads : int
        How many threads compress.
    created : datetime, optional
        Goes into `history`; now, unless given.
    held : int [bytes]
        How much `put` may leave waiting before it waits itself, at least a map for each thread.

    Raises
    ------
    InputError
        On entering the block: the map is uneven or smaller than 2 x 2 pixels, times do not
        increase, or the CRS cannot be written so that a GIS would read it.
    CannotDo
        On entering or leaving it, in `put`, `flush` and `finish`: the disk is full, the folder
        not writable, ...
    """

    def __init__(
        self, path: str | Path, frame: xr.Dataset, maps: Iterable[str], *, threads: int = 2,
        created: datetime.datetime | None = None, held: int = 64 << 20,
    ) -> None:
        self._path = Path(path)
        self._threads, self._held, self._created = threads, held, created
        self._frame = given = ordered(frame)
        self._turn = tuple(
            slice(None, None, 1 if frame[name].variable.equals(given[name].variable) else -1)
            for name in ("y", "x") if name in frame.coords)
        self._maps = {name: _like(given, name) for name in maps}
        self._coords = given.coords.to_dataset().drop_vars(list(self._maps), errors="ignore").load()
        self._missing = {name: set(range(data.sizes.get("time", 1)))
                         for name, data in self._maps.items()}
        self._file: MapFile | None = None
        self._finished = self._ended = False

    def __enter__(self) -> Self:
        check_map(self._frame, f"'{self._path}'")
        check_times(self._coords, f"'{self._path}'")
        self._placing = placing_of(self._frame.attrs)
        self._whole = whole(self._path)
        self._part = self._whole.__enter__()
        self._work = Background(self._threads, self._held)
        with self._own(), library_errors():
            self._begin()
        return self

    def _begin(self) -> None:
        """Everything that is known; the maps get their place but no values."""
        # Late: the compiler takes its time, and who only reads results does not need it.
        from subside.export.chunks import open_maps

        with LIBRARY, netCDF4.Dataset(str(self._part), "w", format="NETCDF4") as file:
            write_dimensions(file, self._frame.sizes)
            if self._placing.mapping is not None:
                put_attributes(file.createVariable("crs", "i4"), self._placing.mapping)
            for name in self._coords.variables:
                write_variable(file, str(name), self._coords[name], self._placing)
            for name, data in self._maps.items():
                create_map(file, name, data, self._placing)
        if self._maps:
            self._file = open_maps(self._part, {name: data.sizes.get("time")
                                                for name, data in self._maps.items()})
            if not self._file.parallel:
                self._work.stop()
                self._work = Background(1, self._held)

    def put(self, name: str, first_step: int, values: np.ndarray) -> None:
        """Hand over maps of dates that follow each other; each date once, in any order.

        Parameters
        ----------
        name : str
            One of `maps`.
        first_step : int
            The place in `time` of the first of them; 0 if the map has no time.
        values : array (dates, rows, columns) or (dates, regions, rows, columns)
            In the map's unit; NaN where nothing is known. Rows and columns run as `y` and `x` of
            `frame` do. Threads read the array afterwards: do not change it before `flush`.

        Raises
        ------
        InputError
            If a value handed over so far is infinite, or beyond what float32 holds.
        """
        with self._own():
            data = self._maps[name]
            values = np.asarray(values)
            inner = data.shape["time" in data.dims:]
            steps = range(first_step, first_step + len(values))
            if values.shape[1:] != inner or not self._missing[name].issuperset(steps):
                raise ValueError(f"{name}: maps {values.shape} do not fit from date {first_step} "
                                 f"into {data.shape}, or a date comes twice")
            self._missing[name].difference_update(steps)
            for number, step in enumerate(steps):
                for stack in np.ndindex(inner[:-2]):
                    plane = values[(number, *stack)][self._turn]
                    index = (step, *stack) if "time" in data.dims else stack
                    self._work.submit(partial(self._write, name, step, index, plane), plane.nbytes)

    def _write(self, name: str, step: int, index: tuple[int, ...], values: np.ndarray) -> None:
        """One map, in a thread."""
        assert self._file is not None
        with library_errors():
            infinite = self._file.write(name, index, values)
        if infinite:
            when = ""
            if "time" in self._maps[name].dims and "time" in self._coords:
                when = f" on {np.datetime_as_string(self._coords['time'].values[step], 'D')}"
            raise InputError(f"'{self._path}': {name} is infinite in {infinite} places{when}; this "
                             "is not a result.")

    def flush(self) -> None:
        """Wait until all that was put is in the file. Raises as `put`."""
        with self._own():
            self._work.flush()

    def finish(self, result: xr.Dataset) -> None:
        """Write all that is not a map, and the attributes of the file.

        Parameters
        ----------
        result : xarray.Dataset
            Variables as in `subside.names.RESULT_VARIABLES` and attributes `title`, ... Maps that
            were put are passed over.

        Raises
        ------
        InputError
            If a value is infinite.
        ValueError
            If a date of a map was never put, or `result` has another map or other coordinates than
            `frame`.
        """
        with self._own(), library_errors():
            self._work.flush()
            self._work.stop()
            self._end(ordered(result.drop_vars(list(self._maps), errors="ignore")).compute())
            self._finished = True

    def _end(self, result: xr.Dataset) -> None:
        lacking = [f"{name} (date {min(steps)})" for name, steps in self._missing.items() if steps]
        strange = [str(name) for name, data in result.variables.items() if is_map(data.dims)]
        strange += [str(name) for name, data in self._coords.variables.items()
                    if name in result.variables and not data.equals(result[name].variable)]
        if lacking or strange:
            raise ValueError(f"maps never put: {lacking}; not as in the frame: {strange}")
        for name, data in result.variables.items():
            if data.dtype.kind == "f" and np.isinf(data.values).any():
                raise InputError(f"'{self._path}': {name} is infinite in "
                                 f"{int(np.isinf(data.values).sum())} places; this is not a "
                                 "result.")
        if self._file is not None:
            self._file.close()
        with LIBRARY, netCDF4.Dataset(str(self._part), "r+") as file:
            write_globals(file, result.attrs, self._placing.mapping is not None, self._created)
            write_dimensions(file, result.sizes)
            for name in result.variables:
                if name not in file.variables:
                    write_variable(file, str(name), result[name], self._placing)

    @contextmanager
    def _own(self) -> Iterator[None]:
        """An error in here ends the writer: the file is removed, an `OSError` is `CannotDo`."""
        if self._ended or self._finished:
            raise ValueError(f"'{self._path}' is finished or given up; nothing more can be put")
        try:
            yield
        except BaseException as error:
            self._give_up(error)
            raise

    def _give_up(self, error: BaseException) -> None:
        self._ended = True
        self._work.stop()
        if self._file is not None:
            with suppress(OSError, RuntimeError):  # what stopped it stops its closing as well
                self._file.close()
        self._whole.__exit__(type(error), error, error.__traceback__)

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None,
                 trace: TracebackType | None) -> None:
        if self._ended:
            return
        if self._finished and error is None:
            self._ended = True
            self._whole.__exit__(None, None, None)
            return
        # The error of the block is not one of writing, even if it is an OSError: it goes through.
        self._give_up(Exception("the block ended before the result was finished"))
        if error is None:
            raise ValueError(f"'{self._path}': the block ended without `finish`; nothing written")


def _like(frame: xr.Dataset, name: str) -> xr.DataArray:
    """An array with the dimensions, sizes, labels and attributes of a map; its values are none."""
    if name in frame.variables:
        like, attributes = frame[name], frame[name].attrs
        dims = tuple(str(dim) for dim in like.dims)
    else:
        known = RESULT_VARIABLES.get(name)
        dims, attributes = known.dims if known else ("time", "y", "x"), {}
    if not is_map(dims) or not frame.sizes.keys() >= set(dims):
        raise ValueError(f"{name} {dims} is no map of a frame with {tuple(frame.sizes)}")
    empty = np.broadcast_to(np.float32(np.nan), tuple(frame.sizes[dim] for dim in dims))
    labels = {key: value for key, value in frame.coords.items() if set(value.dims) <= set(dims)}
    return xr.DataArray(empty, dims=dims, coords=labels, attrs=attributes)
