"""Where a run may write: it replaces its own earlier result, and nothing else without asking."""

from __future__ import annotations

import os
from collections.abc import Iterable
from contextlib import suppress
from pathlib import Path
from types import TracebackType
from typing import Self

import numpy as np
import xarray as xr

from subside.errors import CannotDo, InputError
from subside.export.reader import open_result, scenario_file_of
from subside.export.writer import ResultWriter
from subside.maps import HeldMaps
from subside.scenario import Scenario

__all__ = ["ResultFile", "Sink"]


class ResultFile:
    """The result file of a run and its relation to the scenario."""

    def __init__(self, path: Path, scenario: Scenario) -> None:
        try:
            self.path = path.resolve()
            self.path.exists()
        except (OSError, RuntimeError, ValueError) as error:
            raise InputError(f"output '{str(path)[:200]}' cannot be a file: {error}. Name another "
                             "one with -o.") from None
        self._scenario = scenario

    @property
    def source(self) -> str:
        """The scenario's path as seen from the result's folder, kept in the result."""
        return Path(os.path.relpath(self._scenario.path.resolve(), self.path.parent)).as_posix()

    def refuse(self, overwrite: bool) -> None:
        """Raise before a long run what would stop it at the end, or lose something of the user's.

        Raises
        ------
        InputError
            The file is there and was not made from this scenario, or it is an input of the run.
        CannotDo
            It lies below something that is no folder, or a folder that may not be written.
        """
        for file in self._inputs():
            if file == self.path:
                raise InputError(f"output '{self.path}' is an input of this run; nothing was "
                                 "written. Name another file with -o.")
        if self.path.is_dir():
            raise InputError(f"output '{self.path}' is a folder; name a file, for example "
                             f"'{self.path / 'result.nc'}'.")
        if self.path.exists() and not self.path.is_file():
            raise InputError(f"output '{self.path}' is a device or the like, not a file; nothing "
                             "was written. Name a file with -o.")
        folder = next(p for p in self.path.parents if p.exists())
        if not folder.is_dir() or not os.access(folder, os.W_OK | os.X_OK):
            reason = "may not be written" if folder.is_dir() else "is a file, not a folder"
            raise CannotDo(f"output '{self.path}' cannot be written: '{folder}' {reason}. Name "
                           "another place with -o.")
        if not self.path.exists() or overwrite:
            return
        try:
            made_from = scenario_file_of(self.path)
        except InputError:
            made_from = ""
        if made_from == self.source:
            return
        origin = f"made from '{made_from}'" if made_from else "not a result of subside"
        raise InputError(f"output '{self.path}' exists and is {origin}; nothing was written. Name "
                         "another file with -o, or allow it with --overwrite.")

    def _inputs(self) -> Iterable[Path]:
        scenario = self._scenario
        files = [t.file for t in scenario.points]
        if scenario.survey is not None:
            files.append(scenario.survey.file)
        return (scenario.path.resolve(), *scenario.grid_files().values(),
                *map(scenario.resolve, files))


class Sink:
    """Where a run's result goes: into its file map by map, or into memory.

    Parameters
    ----------
    target : ResultFile or None
        None: the result stays in memory.
    frame : Dataset
        Coordinates, and the maps to come as variables without values.
    maps : list of str
    """

    def __init__(self, target: ResultFile | None, frame: xr.Dataset, maps: list[str]) -> None:
        self._target, self._frame, self._names = target, frame, maps
        self._held = HeldMaps()
        self._writer: ResultWriter | None = None

    def __enter__(self) -> Self:
        if self._target is not None:
            self._writer = ResultWriter(self._target.path, self._frame, self._names)
            self._writer.__enter__()
        return self

    def put(self, name: str, first_step: int, values: np.ndarray) -> None:
        """See `subside.maps.MapSink`."""
        (self._writer or self._held).put(name, first_step, values)

    def written(self) -> bool:
        """Wait until all maps are in the file; whether their arrays may then be used again."""
        if self._writer is None:
            return False
        self._writer.flush()
        return True

    def finish(self, numbers: xr.Dataset) -> xr.Dataset:
        """Write the rest and give the result."""
        if self._writer is None or self._target is None:
            for name in self._names:
                attributes = self._frame[name].attrs
                numbers[name] = (self._frame[name].dims, self._held.whole(name), attributes)
            return numbers
        numbers.attrs["scenario_file"] = self._target.source
        self._writer.finish(numbers)
        self._writer.__exit__(None, None, None)
        self._writer = None
        return open_result(self._target.path)

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None,
                 trace: TracebackType | None) -> None:
        if self._writer is not None:  # not finished: nothing is left behind
            error = error or _GivenUp("the run was given up")
            with suppress(_GivenUp):
                self._writer.__exit__(type(error), error, trace)


class _GivenUp(Exception):
    """A result that was not good enough is being made anew."""

