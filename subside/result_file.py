"""Where a run may write: it replaces its own earlier result, and nothing else without asking."""

from __future__ import annotations

import os
from collections.abc import Iterable
from pathlib import Path

import xarray as xr

from subside.errors import CannotDo, InputError
from subside.export.netcdf import scenario_file_of, write_result
from subside.scenario import Scenario

__all__ = ["ResultFile"]


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
        files = [t.file for t in scenario.grid] + [t.file for t in scenario.points]
        if scenario.survey is not None:
            files.append(scenario.survey.file)
        return (scenario.path.resolve(), *map(scenario.resolve, files))

    def write(self, result: xr.Dataset) -> None:
        """Write the result whole or not at all."""
        result.attrs["scenario_file"] = self.source
        write_result(result, self.path)
