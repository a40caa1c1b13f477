"""How many dates a run takes on at a time, so that it stays inside its memory."""

from __future__ import annotations

import os
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path

from subside.errors import CannotDo

__all__ = ["Leg", "Needs", "default_memory", "memory_in_use", "plan_legs"]

_COMFORT = 3.0e8
"""Bytes beyond which a leg gains nothing from being longer."""
_SHARE_OF_MACHINE = 0.6
_WORTH_A_LEG = 8
"""Dates below which a leg is not made shorter for comfort alone."""


@dataclass(frozen=True)
class Leg:
    """Rows `first` to `last` - 1 of the run's pressure axis, worked on together.

    `dates` are the output dates (a, b), a to b - 1, that they give.
    """

    first: int
    last: int
    dates: tuple[int, int]

    @property
    def rows(self) -> int:
        """Pressure rows."""
        return self.last - self.first

    @property
    def steps(self) -> int:
        """Output dates."""
        return self.dates[1] - self.dates[0]


@dataclass(frozen=True)
class Needs:
    """Memory of a run beyond what it has already, bytes.

    Attributes
    ----------
    fixed : float
        Whatever the number of dates.
    per_date : float
        For each date of a leg.
    """

    fixed: float
    per_date: float


def plan_legs(needs: Needs, rows: int, chunk: int, whole: bool, memory: float | None,
              at: int = 0) -> list[tuple[int, int]]:
    """Ranges of pressure rows.

    Parameters
    ----------
    needs : Needs
    rows : int
        Pressure rows of the run.
    chunk : int
        Dates that are unpacked together; legs hold whole ones where memory allows.
    whole : bool
        Whether a law needs its whole history at once.
    memory : float or None
        Bytes the program may use in all; None: a share of the machine's.
    at : int
        Date of the file at row 0; -1 where the start lies before the file.

    Raises
    ------
    CannotDo
        If not even one date fits.
    """
    budget = memory if memory is not None else default_memory()
    room = budget - memory_in_use() - needs.fixed
    most = int(room // max(needs.per_date, 1.0))
    # of a start between two dates of the file the first row needs both
    least = rows if whole else min(2, rows)
    if most < least:
        missing = memory_in_use() + needs.fixed + least * needs.per_date
        reason = ", because a law needs all dates at once," if whole else ""
        raise CannotDo(f"the run needs about {missing / 1e9:.3g} GB of memory{reason} and may use "
                       f"{budget / 1e9:.3g} GB; allow more with --memory, or take a coarser map, "
                       "fewer cells or a larger tolerance.")
    if whole:
        return [(0, rows)]
    comfortable = max(int(_COMFORT // max(needs.per_date, 1.0)), _WORTH_A_LEG, chunk)
    count = min(most, max(comfortable, least), rows)
    if count > chunk:
        count -= count % chunk
    # legs end where chunks of the file do
    edges = [row for row in range(1, rows) if (at + row) % count == 0]
    edges = [0, *(row for row in edges if row >= least), rows]
    if max(b - a for a, b in pairwise(edges)) > most:
        edges = [*range(0, rows, count), rows]
    return list(pairwise(edges))


def default_memory() -> float:
    """What a run may use where nothing is said: a share of what is free, bytes."""
    return memory_in_use() + _SHARE_OF_MACHINE * _free_memory()


def _free_memory() -> float:
    free = float(os.sysconf("SC_PAGE_SIZE")) * os.sysconf("SC_PHYS_PAGES")
    info = Path("/proc/meminfo")
    if info.is_file():
        for line in info.read_text().splitlines():
            if line.startswith("MemAvailable:"):
                free = 1024.0 * int(line.split()[1])
    group = Path("/sys/fs/cgroup")
    limit, used = group / "memory.max", group / "memory.current"
    if limit.is_file() and used.is_file() and limit.read_text().strip() != "max":
        free = min(free, float(limit.read_text()) - float(used.read_text()))
    return max(free, 0.0)


def memory_in_use() -> float:
    """Resident memory of this process, bytes; a guess where the system does not tell."""
    status = Path("/proc/self/statm")
    if status.is_file():
        return float(status.read_text().split()[1]) * os.sysconf("SC_PAGE_SIZE")
    return 4.0e8
