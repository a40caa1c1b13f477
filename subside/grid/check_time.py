"""Checks of the pressure dates."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from subside.grid.findings import check
from subside.grid.words import step_text

if TYPE_CHECKING:
    import xarray as xr


@check("time-order", "error")
def time_order(cells: xr.Dataset, surface: float) -> str | None:
    """Dates must not run backwards."""
    return backwards(cells["time"].values)


def backwards(time: np.ndarray) -> str | None:
    """What to say of dates (nt,) that run backwards."""
    back = np.flatnonzero(np.diff(time) < np.timedelta64(0))
    if not back.size:
        return None
    n = int(back[0]) + 1
    return (f"variable 'time' goes backwards at {step_text(time, n)}, after "
            f"{step_text(time, n - 1)}; sort the steps by date.")


@check("duplicate-times", "error")
def duplicate_times(cells: xr.Dataset, surface: float) -> str | None:
    """A date must not come twice."""
    return repeated(cells["time"].values)


def repeated(time: np.ndarray) -> str | None:
    """What to say of dates (nt,) that come twice."""
    same = np.flatnonzero(np.diff(time) == np.timedelta64(0))
    if not same.size:
        return None
    n = int(same[0]) + 1
    return f"variable 'time': {step_text(time, n)} repeats step {n - 1}; remove one of them."
