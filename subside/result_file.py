"""Where a run may write: it replaces its own earlier result, and nothing else without asking."""

from __future__ import annotations

import os
from pathlib import Path

import xarray as xr

from subside.errors import InputError
from subside.export.netcdf import read_result, write_result
from subside.scenario import Scenario

__all__ = ["ResultFile"]


class ResultFile:
    """The result file of a run and its relation to the scenario."""

    def __init__(self, path: Path, scenario: Scenario) -> None:
        self.path = path.resolve()
        self._scenario = scenario.path.resolve()

    @property
    def source(self) -> str:
        """The scenario's path as seen from the result's folder, kept in the result."""
        return Path(os.path.relpath(self._scenario, self.path.parent)).as_posix()

    def refuse(self, overwrite: bool) -> None:
        """Raise `InputError` if writing would lose something of the user's."""
        if self.path.is_dir():
            raise InputError(f"output '{self.path}' is a folder; name a file, for example "
                             f"'{self.path / 'result.nc'}'.")
        if not self.path.exists() or overwrite:
            return
        try:
            made_from = str(read_result(self.path).attrs.get("scenario_file", ""))
        except InputError:
            made_from = ""
        if made_from == self.source:
            return
        origin = f"made from '{made_from}'" if made_from else "not a result of subside"
        raise InputError(f"output '{self.path}' exists and is {origin}; nothing was written. Name "
                         "another file with -o, or allow it with --overwrite.")

    def write(self, result: xr.Dataset) -> None:
        """Write the result whole or not at all."""
        result.attrs["scenario_file"] = self.source
        write_result(result, self.path)
