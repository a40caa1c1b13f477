"""The whole job, `subside run`, beside a serial read and write of the same files by netCDF4."""

from __future__ import annotations

import json
import subprocess
import sys
import time
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import click
import netCDF4
import numpy as np

from bench.grid_writer import ZLIB, pieces
from bench.timing import in_turn, stopwatch

__all__ = ["has_option", "measure_job", "read_serially", "write_serially"]


def measure_job(scenario: Path, repeats: int, options: tuple[str, ...] = (),
                long: float = np.inf) -> dict[str, Any]:
    """Median seconds of the run and of reading and writing its files, and its peak memory.

    Parameters
    ----------
    options : tuple of str
        Further options of `subside run`.
    long : float
        Seconds of a run that is measured once only.
    """
    folder = scenario.parent
    grid, result, copy = (folder / n for n in ("pressure.nc", "result.nc", "copy.nc"))
    peaks = []

    def run() -> float:
        told = _launch(scenario, result, options)
        peaks.append(told["peak_bytes"])
        return float(told["seconds"])

    click.echo(f"{folder.name}: the whole job")
    if run() > long:  # compiles what is not compiled yet, and makes the result that is copied
        repeats = 1
    peaks.clear()
    seconds = in_turn({
        "read": lambda: stopwatch(lambda: read_serially(grid)),
        "write": lambda: write_serially(result, copy),
        "run": run,
    }, repeats)
    copy.unlink()
    files = seconds["read"].median + seconds["write"].median
    found = {
        "seconds": seconds["run"].record(), "read_s": seconds["read"].record(),
        "write_s": seconds["write"].record(), "ratio": seconds["run"].median / files,
        "peak_bytes": max(peaks), "options": list(options),
        "grid_bytes": grid.stat().st_size, "result_bytes": result.stat().st_size,
        "result_attributes": _attributes(result),
    }
    click.echo(f"  {folder.name}: {seconds['run'].median:.3g} s, files {files:.3g} s, ratio "
               f"{found['ratio']:.2f}, peak {max(peaks) / 1e9:.2f} GB")
    return found


def has_option(name: str) -> bool:
    """Whether `subside run` knows an option."""
    told = subprocess.run([*_COMMAND, "run", "--help"], capture_output=True, text=True,
                          check=True)
    return name in told.stdout


_COMMAND = (sys.executable, "-c", "from subside.cli.main import main; main()")


def _launch(scenario: Path, result: Path, options: tuple[str, ...]) -> dict[str, Any]:
    told = subprocess.run(
        [sys.executable, str(Path(__file__).with_name("launch.py")), *_COMMAND, "run",
         str(scenario), "-o", str(result), "--overwrite", "--no-figures", "--quiet", *options],
        capture_output=True, text=True, check=True)
    found: dict[str, Any] = json.loads(told.stdout)
    if found["code"]:
        raise click.ClickException(f"subside run {scenario} failed with {found['code']}: "
                                   f"{told.stderr.strip()[-2000:]}")
    return found


def _attributes(result: Path) -> dict[str, Any]:
    """What the run says of its own method, error and memory."""
    with netCDF4.Dataset(result) as file:
        return {name: str(file.getncattr(name)) for name in file.ncattrs()
                if name.startswith(("solver", "superposition", "memory", "achieved"))}


def _all_pieces(variable: netCDF4.Variable) -> Iterator[tuple[slice, ...]]:
    """The variable in pieces of bounded size that cut no chunk."""
    if variable.ndim == 0:
        yield ()
    else:
        yield from (piece for _, piece in pieces(variable, min(3, variable.ndim)))


def read_serially(path: Path) -> None:
    """Read every variable of a file once, each chunk once, without masking or conversion."""
    with netCDF4.Dataset(path) as file:
        file.set_auto_maskandscale(False)
        for variable in file.variables.values():
            for piece in _all_pieces(variable):
                variable[piece or ...]


def write_serially(result: Path, copy: Path) -> float:
    """Seconds to write the variables of a result anew: same types, chunks, zlib 1 + shuffle."""
    seconds = 0.0
    with netCDF4.Dataset(result) as source:
        source.set_auto_maskandscale(False)
        start = time.perf_counter()
        target = netCDF4.Dataset(copy, "w", format="NETCDF4")
        for dimension in source.dimensions.values():
            target.createDimension(dimension.name, None if dimension.isunlimited()
                                   else len(dimension))
        seconds += time.perf_counter() - start
        for name, variable in source.variables.items():
            chunks = variable.chunking()
            packed = variable.filters() is not None and chunks != "contiguous" and (
                variable.dtype is not str)
            options: dict[str, Any] = {} if chunks == "contiguous" else {"chunksizes": chunks}
            if packed and _is_packed(variable):
                options |= ZLIB
            start = time.perf_counter()
            new = target.createVariable(name, variable.dtype, variable.dimensions, **options)
            new.set_auto_maskandscale(False)
            seconds += time.perf_counter() - start
            for piece in _all_pieces(variable):
                values = variable[piece or ...]
                start = time.perf_counter()
                new[piece or ...] = np.asarray(values)
                seconds += time.perf_counter() - start
        start = time.perf_counter()
        target.close()
        seconds += time.perf_counter() - start
    return seconds


def _is_packed(variable: netCDF4.Variable) -> bool:
    return any(variable.filters().get(name) for name in ("zlib", "szip", "zstd", "bzip2", "blosc"))
