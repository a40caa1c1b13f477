"""Land subsidence from the pressure grid of a flow simulation.

>>> import subside as sd
>>> result = sd.run("scenario.toml")  # doctest: +SKIP
"""

from __future__ import annotations

import os
import sys
from pathlib import Path
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from subside.export.netcdf import read_result
    from subside.grid import open_grid
    from subside.pipeline import run
    from subside.scenario import load_scenario

__all__ = ["load_scenario", "open_grid", "read_result", "run"]

_HOME = {
    "load_scenario": "subside.scenario",
    "open_grid": "subside.grid",
    "read_result": "subside.export.netcdf",
    "run": "subside.pipeline",
}


# numpy asks for huge pages, which the system clears two megabytes at a time: measured on a run of
# two million cells this cost 3 of 14 seconds of processor time and gained nothing.
os.environ.setdefault("NUMPY_MADVISE_HUGEPAGE", "0")


def _cache_folder() -> str:
    """Where compiled code is kept: not inside the installed package, whence pip cannot take it."""
    word = "LOCALAPPDATA" if sys.platform == "win32" else "XDG_CACHE_HOME"
    base = Path(os.environ.get(word) or os.path.expanduser("~/.cache"))
    return str(base / "subside" / "compiled")


os.environ.setdefault("NUMBA_CACHE_DIR", _cache_folder())


def __getattr__(name: str) -> Any:
    # public names load their module when first used, so that `--help` needs no numpy
    if name in _HOME:
        from importlib import import_module

        return getattr(import_module(_HOME[name]), name)
    raise AttributeError(f"module 'subside' has no attribute '{name}'")


def __dir__() -> list[str]:
    return sorted({*globals(), *__all__})
