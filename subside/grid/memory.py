"""Refusing what this machine cannot hold, before it is read."""

from __future__ import annotations

import os

from subside.errors import CannotDo
from subside.grid.findings import Findings

__all__ = ["refuse_giants"]


def refuse_giants(findings: Findings, cells: int, bytes_per_cell: int, what: str = "") -> None:
    """Raise `CannotDo` where `cells` do not fit into the machine's memory.

    Parameters
    ----------
    what : str
        What there is of each cell, for the message: ``" and 60 steps"``.
    """
    needed = bytes_per_cell * cells
    memory = os.sysconf("SC_PAGE_SIZE") * os.sysconf("SC_PHYS_PAGES")
    if needed > memory or cells >= 2**31:
        raise CannotDo(
            f"{findings.path}: the file claims {cells:.4g} cells{what}, {needed / 2**30:.3g} GiB "
            f"in memory, and this machine has {memory / 2**30:.3g} GiB; check its dimensions, or "
            "keep fewer steps or cells.")
