"""What a measurement was made on: processor, memory, versions, date."""

from __future__ import annotations

import datetime
import importlib.metadata
import os
import platform
import subprocess
from pathlib import Path

import netCDF4
import numba

__all__ = ["about"]

_PACKAGES = ("subside", "numpy", "scipy", "numba", "netCDF4", "h5py", "isal")


def about() -> dict[str, str]:
    """Facts for the results file; a package that is not installed is left out."""
    facts = {
        "date": datetime.datetime.now(datetime.UTC).strftime("%Y-%m-%d %H:%M UTC"),
        "processor": _processor(),
        "cores": str(len(os.sched_getaffinity(0))),
        "numba threads": str(numba.get_num_threads()),
        "memory": f"{os.sysconf('SC_PAGE_SIZE') * os.sysconf('SC_PHYS_PAGES') / 1e9:.0f} GB",
        "load before": f"{os.getloadavg()[0]:.1f}",
        "system": f"{platform.system()} {platform.release()}",
        "python": platform.python_version(),
        "HDF5": netCDF4.__hdf5libversion__,
        "commit": _commit(),
    }
    for name in _PACKAGES:
        try:
            facts[name] = importlib.metadata.version(name)
        except importlib.metadata.PackageNotFoundError:
            continue
    return facts


def _processor() -> str:
    info = Path("/proc/cpuinfo").read_text()
    lines = dict(line.split(":", 1) for line in info.splitlines() if ":" in line)
    found = {key.strip(): value.strip() for key, value in lines.items()}
    flags = found.get("flags", "").split()
    vectors = next((v for v in ("avx512f", "avx2", "avx") if v in flags), "no AVX")
    return f"{found.get('model name', platform.processor())}, {vectors}"


def _commit() -> str:
    here = Path(__file__).parent
    told = subprocess.run(["git", "-C", str(here), "describe", "--always", "--dirty"],
                          capture_output=True, text=True)
    return told.stdout.strip() or "not known"
