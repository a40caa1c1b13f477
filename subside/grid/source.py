"""An open NetCDF file whose variables come as float64 in the unit asked for, or as clear errors."""

from __future__ import annotations

import difflib
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import numpy as np

from subside.errors import InputError
from subside.grid.disk import FileOnDisk, OpenFiles
from subside.grid.findings import Findings
from subside.units import scale_to_si

__all__ = ["Source", "open_source"]

_LENGTH_OK = 0.01  # coordinates must tell 1 cm apart, m


@contextmanager
def open_source(path: Path, findings: Findings, among: OpenFiles | None = None
                ) -> Iterator[Source]:
    """Open a NetCDF file; whatever the library raises becomes an `InputError`.

    `among` is for files that are read together later on, see `subside.grid.disk`.
    """
    import netCDF4

    if path.is_dir() or not path.exists():
        raise findings.error("this is a folder, not a pressure grid." if path.is_dir() else
                             "there is no such file; check the path (in a scenario it is relative "
                             "to the scenario file).")
    try:
        with open(path, "rb") as stream:
            magic = stream.read(8)
    except OSError as error:
        raise findings.error(f"the file cannot be opened: {error.strerror}.") from None
    if not (magic[:3] == b"CDF" or magic == b"\x89HDF\r\n\x1a\n"):
        size = path.stat().st_size
        raise findings.error(f"this is not a NetCDF file ({size} bytes, "
                             + (f"it starts with {magic[:4]!r}" if size else "it is empty")
                             + "); write the pressure grid as NetCDF.")
    try:
        if magic[:3] == b"CDF":
            _refuse_cut_classic(path, magic, findings)
        dataset = netCDF4.Dataset(path, "r")
        try:
            yield Source(dataset, findings, FileOnDisk(path, among))
        finally:
            dataset.close()
    except (OSError, RuntimeError, UnicodeError) as error:
        raise findings.error(f"the NetCDF file cannot be read ({error}); it is probably truncated "
                             "or damaged: copy or write it again.") from None


def _refuse_cut_classic(path: Path, magic: bytes, findings: Findings) -> None:
    """NetCDF-3 has no checksums: its C library reads on beyond the end of a cut file in silence.

    scipy maps every variable onto the file, which fails when one does not fit.
    """
    from scipy.io import netcdf_file

    if magic[3] not in (1, 2):
        raise findings.error("this is a NetCDF file of the 64-bit data format (CDF-5), which "
                             "cannot be checked for completeness; write it as NetCDF-4.")
    try:
        # what scipy has mapped it may keep: the views are dropped before it closes
        with netcdf_file(path, "r", mmap=True) as file:
            file.variables.clear()
    except (TypeError, ValueError, IndexError, KeyError, AttributeError, OverflowError):
        raise findings.error(f"the NetCDF-3 file cannot be read ({path.stat().st_size} bytes do "
                             "not hold what its header promises); it is truncated or damaged: copy "
                             "or write it again.") from None


class Source:
    """Variables of an open NetCDF file."""

    def __init__(self, dataset: Any, findings: Findings, file: FileOnDisk) -> None:
        self.variables: dict[str, Any] = dict(dataset.variables)
        self.dataset = dataset
        self.findings = findings
        self.file = file

    def need(self, name: str, purpose: str) -> Any:
        """The variable, or an error saying what the file has instead."""
        if name not in self.variables:
            raise self.findings.error(f"there is no variable '{name}' ({purpose}). "
                                      + self.contents(name))
        return self.variables[name]

    def contents(self, wanted: str) -> str:
        """What the file has, and what `wanted` may have been meant to be."""
        if not self.variables:
            return "The file has no variables at its top level."
        close = difflib.get_close_matches(wanted, self.variables, n=1, cutoff=0.5)
        return (f"Did you mean '{close[0]}'? " if close else "") + (
            f"The file has {', '.join(sorted(self.variables))}.")

    def text(self, name: str, attribute: str) -> str | None:
        """An attribute as text; None when absent or blank."""
        variable = self.variables[name]
        if attribute not in variable.ncattrs():
            return None
        return str(variable.getncattr(attribute)).strip() or None

    def unit(self, name: str, si_unit: str) -> tuple[float, float]:
        """`(factor, offset)` to SI of a variable's `units`, which it must have."""
        unit = self.text(name, "units")
        if unit is None:
            raise self.findings.error(f"variable '{name}' has no units attribute; give it one, "
                                      f"such as units = \"{si_unit}\".")
        try:
            return scale_to_si(unit, si_unit)
        except InputError as error:
            raise self.findings.error(f"variable '{name}' has units '{unit}': {error}") from None

    def refuse_text(self, name: str) -> None:
        """Refuse a variable that does not hold plain numbers."""
        variable = self.variables[name]
        if not (isinstance(variable.dtype, np.dtype) and variable.dtype.kind in "fiu"):
            kind = variable.dtype if isinstance(variable.dtype, np.dtype) else "text"
            raise self.findings.error(f"variable '{name}' holds {kind}, not numbers; write it as "
                                      "float64 or float32.")
        if not isinstance(variable.datatype, np.dtype):
            raise self.findings.error(f"variable '{name}' holds a list in each cell, not a number; "
                                      "write it as plain numbers.")

    def values(self, name: str, index: Any = ...) -> np.ndarray:
        """float64 values in the file's unit, NaN where missing."""
        self.refuse_text(name)
        raw = self.variables[name][index]
        if isinstance(raw, np.ma.MaskedArray):
            return np.ma.filled(np.ma.asarray(raw, dtype=float), np.nan)
        return np.asarray(raw, dtype=float)

    def flags(self, name: str, index: Any = ...) -> np.ndarray:
        """Where a variable has a value that is not zero."""
        self.refuse_text(name)
        raw = self.variables[name][index]
        if np.asarray(raw).dtype.kind in "iu":  # the usual flags: no floats of a whole grid
            return np.asarray(np.ma.filled(raw, 0) != 0)
        values: np.ndarray = np.ma.filled(np.ma.asarray(raw, dtype=float), np.nan)
        return np.isfinite(values) & (values != 0)

    def sense(self, name: str) -> float:
        """+1 where the variable's `positive` is "down", -1 for "up"."""
        positive = self.text(name, "positive")
        if positive is None or positive.lower() not in {"down", "up"}:
            what = "no 'positive' attribute" if positive is None else f"positive = '{positive}'"
            raise self.findings.error(
                f"variable '{name}' has {what}; write positive = \"down\" if it holds depth, or "
                "positive = \"up\" if it holds elevation.")
        return 1.0 if positive.lower() == "down" else -1.0

    def origin(self, name: str, numbers: tuple[int, ...]) -> np.ndarray:
        """The `origin` attribute, which is added to the values; zeros when absent."""
        variable = self.variables[name]
        if "origin" not in variable.ncattrs():
            return np.zeros(max(numbers))
        try:
            origin = np.atleast_1d(np.asarray(variable.getncattr("origin"), dtype=float))
        except ValueError:
            origin = np.empty(0)
        if origin.ndim != 1 or origin.size not in numbers or not np.isfinite(origin).all():
            wanted = " or ".join(str(n) for n in numbers)
            raise self.findings.error(f"variable '{name}' has origin = "
                                      f"{variable.getncattr('origin')!r}; it takes {wanted} "
                                      "number(s), x0, y0[, z0], in the variable's own unit.")
        return np.concatenate([origin, np.zeros(max(numbers) - origin.size)])

    def check_precision(self, name: str, values: np.ndarray, factor: float) -> None:
        """Refuse single precision where it cannot tell 1 cm apart.

        `values` are as stored, `factor` is their unit in m.
        """
        if self.variables[name].dtype.newbyteorder("=") != np.float32 or not values.size:
            return
        largest = float(np.nanmax(np.abs(values), initial=0))
        if not np.isfinite(largest):
            return
        step = float(np.spacing(np.float32(largest))) * factor
        if step > _LENGTH_OK:
            raise self.findings.error(
                f"variable '{name}' is float32 and reaches {largest:.10g} "
                f"{self.text(name, 'units')}, where its precision is only {step:.2g} m; store it "
                "as float64, or as float32 relative to a point given in an 'origin' attribute.")
