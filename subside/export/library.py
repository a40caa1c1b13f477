"""The NetCDF and HDF5 libraries: one thread at a time, and their errors as Python names them."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager

from xarray.backends.netCDF4_ import NETCDF4_PYTHON_LOCK

__all__ = ["LIBRARY", "library_errors"]

LIBRARY = NETCDF4_PYTHON_LOCK
"""Held while a library works; the lock that xarray takes to read a file that it has open."""


@contextmanager
def library_errors() -> Iterator[None]:
    """Turn the `RuntimeError` that stands for a full disk, among others, into an `OSError`."""
    try:
        yield
    except RuntimeError as error:
        raise OSError(f"{error} (is the disk full?)") from error
