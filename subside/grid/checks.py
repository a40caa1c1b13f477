"""All checks of a pressure grid, in the order they run.

Those made while a file is read (units, `positive`, missing corners, volumes, pressure gaps) are
declared in `solids` and `netcdf`; those that look at the cell dataset, whatever reader made it,
live in `check_time`, `check_geometry` and `check_pressure`; those of the pressure history are made
in `watch` while it is read.
"""

from __future__ import annotations

from collections.abc import Iterable
from typing import TYPE_CHECKING

from subside.errors import InputError, nearest

# Importing a module registers its checks.
from subside.grid import check_geometry, check_pressure, check_time, netcdf  # noqa: F401
from subside.grid.findings import CHECKS, Check, Findings
from subside.names import CELL_VARIABLES

if TYPE_CHECKING:
    import xarray as xr

    from subside.grid.stream import Stream

__all__ = ["CHECKS", "Check", "Findings", "acceptable_checks", "check_accept", "run_checks"]

_NEEDED = ("volume", "centroid", "region", "edge")


def acceptable_checks() -> list[str]:
    """Names of the checks that `accept` turns into warnings."""
    return sorted(c.name for c in CHECKS.values() if c.acceptable)


def check_accept(accept: Iterable[str]) -> frozenset[str]:
    """The words of `accept` as a set.

    Raises
    ------
    InputError
        If one is no check, or a check that cannot be accepted.
    """
    words = frozenset([accept] if isinstance(accept, str) else accept)
    allowed = acceptable_checks()
    for word in sorted(words - set(allowed), key=str):
        if word not in CHECKS:
            raise InputError(f"accept = [\"{word}\"]: no check has that name."
                             + nearest(str(word), allowed))
        reason = ("it is a warning already" if CHECKS[word].severity == "warning"
                  else "nothing sensible can be computed from such a grid")
        raise InputError(f"accept = [\"{word}\"]: the check '{word}' cannot be accepted, {reason}. "
                         f"It can be: {', '.join(allowed)}.")
    return words


def run_checks(cells: xr.Dataset, surface: float, findings: Findings, pressure: Stream) -> None:
    """Run the checks on a cell dataset; warnings are added to ``cells.attrs["warnings"]``.

    Parameters
    ----------
    surface : float
        Depth of the ground or seabed in the grid's vertical datum, m.
    pressure : Stream
        Looked at on its first date only; `subside.grid.watch` sees the rest.

    Raises
    ------
    InputError
        At the first error that is not accepted.
    """
    refuse_incomplete(cells, findings)
    findings.run(cells, surface)
    check_pressure.check_start(cells, surface, pressure.start_si(), pressure.attrs, findings)
    known = list(cells.attrs.get("warnings", []))
    cells.attrs["warnings"] = known + [w for w in findings.warnings if w not in known]


def refuse_incomplete(cells: xr.Dataset, findings: Findings,
                      needed: tuple[str, ...] = _NEEDED) -> None:
    """A reader that came as a plug-in may have forgotten something."""
    shape = ("corners",) if "corners" in cells else ("x", "y", "top", "bottom", "dx", "dy",
                                                     "azimuth")
    for name in (*needed, *shape):
        wanted = CELL_VARIABLES[name].dims
        if name not in cells or cells[name].dims != wanted:
            found = f"dimensions {cells[name].dims}" if name in cells else "nothing"
            raise findings.error(f"the reader of this file returned {found} for '{name}', expected "
                                 f"({', '.join(wanted)}); this is a fault of the reader, tell its "
                                 "author.")
