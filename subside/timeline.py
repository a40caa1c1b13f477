"""Start, pressure dates and output dates of a run, and where in the file its pressure comes from.

Laws run from the start, where the pressure is the initial one and every result is zero. Pressure is
linear between its dates, so that output dates may lie anywhere among them. No pressure is needed to
lay out the dates: `Rows` says how to get the run's rows from those of the file, as they are read.
"""

from __future__ import annotations

import datetime as dt
from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

import numpy as np
import xarray as xr

from subside.errors import InputError

__all__ = ["Read", "Rows", "StartGap", "TimeAxis", "Timeline", "make_timeline"]

Read = Callable[[int, int], np.ndarray]
"""Gives the dates first to last - 1 of the file: (last - first, n)."""


@dataclass(frozen=True)
class TimeAxis:
    """The dates a run works on, as seconds since its start.

    Attributes
    ----------
    pressure : array (np,)
        When pressure is known; the first entry is the start, 0.
    output : array (nt,)
        When results are wanted.
    """

    pressure: np.ndarray
    output: np.ndarray

    @property
    def union(self) -> np.ndarray:
        """Both, sorted, each once: what the laws are given."""
        return np.union1d(self.pressure, self.output)


@dataclass(frozen=True)
class Rows:
    """How the rows of the run's pressure axis come from the dates of the file.

    Row r is date ``at + r`` of the file, but for row 0 where it is `given` or lies between dates.

    Attributes
    ----------
    count : int
        Rows of the run, one for each entry of `TimeAxis.pressure`.
    at : int
        The file's date at the start or the last one before it; -1 where the start is before all.
    share : float
        Of the file's date ``at + 1`` in row 0, the rest is from date `at`; 0 on a date of the file.
    """

    count: int
    at: int
    share: float = 0.0

    @property
    def given(self) -> bool:
        """Whether the start lies before the file: the initial pressure is then row 0."""
        return self.at < 0

    def pressure(self, read: Read, first: int, last: int,
                 initial: np.ndarray | None = None) -> np.ndarray:
        """Rows first to last - 1 of the run's pressure: (last - first, n), as `read` gives it.

        Parameters
        ----------
        read : callable
            ``read(a, b)``: the file's dates a to b - 1 of some cells, (b - a, n).
        first, last : int
        initial : array (n,), optional
            Pressure of those cells at the start; used for row 0 if it is `given`.
        """
        if first > 0 or not self.given:
            return self._read(read, first, last)
        if initial is None:
            raise ValueError("the start lies before the file: an initial pressure is needed")
        start = np.asarray(initial, dtype=float)[None]
        return np.concatenate([start, read(0, last - 1)]) if last > 1 else start

    def field(self, read: Read, first: int, last: int) -> np.ndarray:
        """The same for another variable in time: before its first date it is as on it."""
        if first > 0 or not self.given:
            return self._read(read, first, last)
        values = read(0, max(last - 1, 1))
        return np.concatenate([values[:1], values]) if last > 1 else values

    def _read(self, read: Read, first: int, last: int) -> np.ndarray:
        if first > 0 or self.share == 0.0:
            return read(self.at + first, self.at + last)
        values = read(self.at, self.at + max(last, 2))
        between = (1 - self.share) * values[0] + self.share * values[1]
        return np.concatenate([between[None], values[1:last]])


@dataclass(frozen=True)
class StartGap:
    """The largest difference between the initial pressure and the file's on the start date.

    Attributes
    ----------
    cell : int
    initial, first : float
        Pressure of that cell, Pa: the one given and the one of the file.
    """

    cell: int
    initial: float
    first: float

    @classmethod
    def of(cls, initial: np.ndarray, first: np.ndarray, cells: np.ndarray) -> StartGap:
        """The worst of some cells: pressures (n,) in Pa, n > 0, and the cells' numbers (n,)."""
        worst = int(np.abs(initial - first).argmax())
        return cls(int(cells[worst]), float(initial[worst]), float(first[worst]))

    def worse(self, other: StartGap) -> StartGap:
        """The worse of two, whichever is asked; of equal ones that of the lower cell."""
        return max(self, other, key=lambda gap: (abs(gap.initial - gap.first), -gap.cell))


@dataclass(frozen=True)
class Timeline:
    """Dates of a run.

    Attributes
    ----------
    start : datetime64
    dates : array of datetime64 (nt,)
        Output dates.
    axis : TimeAxis
    rows : Rows
        Where in the file the rows of `axis.pressure` are.
    compares : bool
        Whether the scenario gives an initial pressure although the file has one for the start date:
        they must be the same, see `refuse_gap`.
    """

    start: np.datetime64
    dates: np.ndarray
    axis: TimeAxis
    rows: Rows
    compares: bool = False
    warnings: tuple[str, ...] = ()

    def refuse_gap(self, gap: StartGap) -> None:
        """Raise `InputError` where the initial pressure is not that of the file on the start date.

        Parameters
        ----------
        gap : StartGap
            The worst of all cells, row 0 against the initial pressure.
        """
        size = abs(gap.initial - gap.first)
        if size > 1e-5 * gap.first:
            raise InputError(
                "[grid] initial_pressure differs from the pressure on the start date "
                f"{_day(self.start)} by up to {size / 1e5:.4g} bar ({gap.initial / 1e5:.6g} "
                f"against {gap.first / 1e5:.6g} bar), a jump in no time; set [time] start before "
                "the first step, or leave initial_pressure out.", cell=gap.cell)


def make_timeline(cells: xr.Dataset, start: dt.datetime | None, initial: np.ndarray | None,
                  times: Literal["all"] | list[dt.datetime]) -> Timeline:
    """Bring start, initial pressure and output dates together.

    Parameters
    ----------
    cells : Dataset
        Cell dataset with the file's dates in its coordinate `time`.
    start : datetime or None
        `[time] start`; None: the first pressure step.
    initial : array (cell,) or None
        Absolute pressure at the start, Pa, where the scenario gives one.
    times : "all" or list of datetime
        Output dates; "all": the start and every pressure date after it.

    Raises
    ------
    InputError
        A start before the first step without an initial pressure, a start after the last step,
        output dates outside the pressure dates.
    """
    steps = cells["time"].values.astype("datetime64[s]")
    begin = np.datetime64(start, "s") if start is not None else steps[0]
    warnings: list[str] = []
    if begin < steps[0]:
        if initial is None:
            raise InputError(
                f"[time] start = {_day(begin)} lies before the first pressure step "
                f"({_day(steps[0])}), so the initial pressure is not known; give [grid] "
                "initial_pressure as \"first\" (as at the first step), a quantity such as "
                "\"350 bar\" or { field = \"initial_pressure\" }, or leave start out."
            )
        rows = Rows(steps.size + 1, -1)
        known = np.concatenate([[begin], steps])
    elif steps.size == 1 and start is None:
        raise InputError(f"the grid has one pressure step ({_day(steps[0])}), and compaction is "
                         "the answer to a change; give more steps, or a [time] start before it and "
                         "[grid] initial_pressure.")
    elif begin >= steps[-1]:
        raise InputError(f"[time] start = {_day(begin)} is not before the last pressure step "
                         f"({_day(steps[-1])}); nothing would happen. Give an earlier start.")
    else:
        if begin > steps[0]:
            warnings.append(f"the start ({_day(begin)}) is after the first pressure step "
                            f"({_day(steps[0])}); compaction before it is not counted.")
        at = int(np.searchsorted(steps, begin, side="right")) - 1
        share = 0.0
        if steps[at] != begin:
            share = float((begin - steps[at]) / (steps[at + 1] - steps[at]))
        rows = Rows(steps.size - at, at, share)
        known = np.concatenate([[begin], steps[at + 1:]])
    dates = known if times == "all" else _dates(times, begin, known[-1])
    origin = known[0]
    axis = TimeAxis(pressure=(known - origin) / np.timedelta64(1, "s"),
                    output=(dates - origin) / np.timedelta64(1, "s"))
    return Timeline(origin, dates, axis, rows, initial is not None and not rows.given,
                    tuple(warnings))


def _dates(times: list[dt.datetime], begin: np.datetime64, last: np.datetime64) -> np.ndarray:
    if not times:
        raise InputError("[output] times is an empty list; write \"all\" or at least one date.")
    dates = np.array(times, dtype="datetime64[s]")
    for date in dates:
        if date < begin or date > last:
            raise InputError(f"[output] times: {_day(date)} lies outside the pressure history, "
                             f"{_day(begin)} to {_day(last)}; pressure is not extrapolated.")
    if (np.diff(dates) <= np.timedelta64(0, "s")).any():
        raise InputError("[output] times: the dates must increase and differ.")
    return dates


def _day(date: np.datetime64) -> str:
    return str(date.astype("datetime64[D]"))
