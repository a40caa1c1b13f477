"""Start, pressure dates and output dates of a run.

Laws run from the start, where the pressure is the initial one and every result is zero. Pressure is
linear between its dates, so that output dates may lie anywhere among them.
"""

from __future__ import annotations

import datetime as dt
from dataclasses import dataclass
from typing import Literal

import numpy as np
import xarray as xr

from subside.errors import InputError

__all__ = ["TimeAxis", "Timeline", "make_timeline"]


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
class Timeline:
    """A time axis with its dates and the cell dataset brought onto it.

    Attributes
    ----------
    start : datetime64
    dates : array of datetime64 (nt,)
        Output dates.
    axis : TimeAxis
    cells : Dataset
        `pressure` and every field in time at `axis.pressure`; the first row of `pressure` is the
        initial pressure.
    """

    start: np.datetime64
    dates: np.ndarray
    axis: TimeAxis
    cells: xr.Dataset
    warnings: tuple[str, ...] = ()


def make_timeline(cells: xr.Dataset, start: dt.datetime | None, initial: np.ndarray | None,
                  times: Literal["all"] | list[dt.datetime]) -> Timeline:
    """Bring start, initial pressure and output dates together.

    Parameters
    ----------
    cells : Dataset
        Cell dataset with `pressure(time, cell)` in Pa.
    start : datetime or None
        `[time] start`; None: the first pressure step.
    initial : array (cell,) or None
        Absolute pressure at the start, Pa, where the scenario gives one.
    times : "all" or list of datetime
        Output dates; "all": the start and every pressure date after it.

    Raises
    ------
    InputError
        A start before the first step without an initial pressure, an initial pressure that
        differs from a first step on the same date, a start after the last step, output dates
        outside the pressure dates.
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
        cells = xr.concat([cells.isel(time=[0]).assign_coords(time=[begin]), cells], dim="time",
                          data_vars="minimal", coords="minimal", compat="override")
        cells["pressure"].values[0] = initial
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
        cells, known = _from_start(cells, steps, begin)
        if initial is not None:
            _same(initial, cells["pressure"].values[0], begin)
    dates = known if times == "all" else _dates(times, begin, known[-1])
    origin = known[0]
    axis = TimeAxis(pressure=(known - origin) / np.timedelta64(1, "s"),
                    output=(dates - origin) / np.timedelta64(1, "s"))
    return Timeline(origin, dates, axis, cells, tuple(warnings))


def _from_start(cells: xr.Dataset, steps: np.ndarray, begin: np.datetime64) -> tuple[
        xr.Dataset, np.ndarray]:
    """Drop what lies before the start; pressure and fields at the start are interpolated."""
    at = int(np.searchsorted(steps, begin, side="right")) - 1
    if steps[at] == begin:
        return cells.isel(time=slice(at, None)), steps[at:]
    share = float((begin - steps[at]) / (steps[at + 1] - steps[at]))
    kept = cells.isel(time=slice(at, None)).copy()
    kept = kept.assign_coords(time=np.concatenate([[begin], steps[at + 1:]]))
    for name, variable in cells.data_vars.items():
        if "time" in variable.dims:
            before = variable.isel(time=at).values
            after = variable.isel(time=at + 1).values
            row = variable.isel(time=slice(at, None)).values.copy()
            row[0] = (1 - share) * before + share * after
            kept[name] = (variable.dims, row, variable.attrs)
    return kept, np.concatenate([[begin], steps[at + 1:]])


def _same(initial: np.ndarray, first: np.ndarray, begin: np.datetime64) -> None:
    gap = np.abs(initial - first)
    worst = int(gap.argmax())
    if gap[worst] > 1e-5 * first[worst]:
        raise InputError(
            f"[grid] initial_pressure differs from the pressure on the start date {_day(begin)} by "
            f"up to {gap[worst] / 1e5:.4g} bar ({initial[worst] / 1e5:.6g} against "
            f"{first[worst] / 1e5:.6g} bar), a jump in no time; set [time] start before the first "
            "step, or leave initial_pressure out.", cell=worst)


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
