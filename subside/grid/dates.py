"""The dates of pressure steps, from a CF time variable."""

from __future__ import annotations

import re
from typing import Any

import numpy as np

from subside.grid.findings import Findings

__all__ = ["decode_dates"]

_CALENDARS = ("standard", "gregorian", "proleptic_gregorian")
_EXAMPLE = "write units like 'days since 1990-01-01'"


def decode_dates(values: Any, units: str | None, calendar: str | None, findings: Findings
                 ) -> np.ndarray:
    """Dates as datetime64[ns], rounded to whole seconds.

    Parameters
    ----------
    values : array (nt,)
        Numbers of the time variable.
    units : str or None
        Such as ``"days since 1990-01-01"``.
    calendar : str or None
        CF calendar; None is ``"standard"``.

    Raises
    ------
    InputError
        Without a reference date, in months or years, under a calendar that is not of this world,
        or with a missing or impossible value.
    """
    import cftime

    if not units:
        raise findings.error(f"variable 'time' has no units; {_EXAMPLE}.")
    match = re.fullmatch(r"\s*(\w+)\s+since\s+(.+?)\s*", units)
    if not match:
        raise findings.error(f"variable 'time' has units '{units}', which name no reference date; "
                             f"{_EXAMPLE}.")
    if re.fullmatch(r"(common_)?(months?|mon|years?|yr|y|a)", match[1]):
        raise findings.error(f"variable 'time' has units '{units}'; months and years differ in "
                             f"length, so dates would be guessed; {_EXAMPLE}.")
    calendar = (calendar or "standard").lower()
    if calendar not in _CALENDARS:
        raise findings.error(f"variable 'time' has calendar '{calendar}'; pressure dates must be "
                             f"real dates, so one of {', '.join(_CALENDARS)}.")
    numbers: np.ndarray = np.ma.filled(np.ma.asarray(values, dtype=float), np.nan)
    if not np.isfinite(numbers).all():
        step = int(np.flatnonzero(~np.isfinite(numbers))[0])
        raise findings.error(f"variable 'time' has no value at step {step}; every pressure step "
                             "needs a date.")
    try:
        dates = cftime.num2pydate(numbers, units, calendar)
        plain = [d.replace(tzinfo=None) for d in np.atleast_1d(dates)]
    except (ValueError, OverflowError, TypeError) as error:
        raise findings.error(f"variable 'time' (units '{units}', first value {numbers[0]:g}) "
                             f"cannot be read as dates: {error}; {_EXAMPLE}.") from None
    if any(not 1700 <= d.year <= 2250 for d in plain):
        worst = next(d for d in plain if not 1700 <= d.year <= 2250)
        raise findings.error(f"variable 'time' reaches the year {worst.year} (units '{units}'); "
                             "dates from 1700 to 2250 are taken, check the unit and the reference "
                             "date.")
    exact = np.array(plain, dtype="datetime64[us]")
    half = np.timedelta64(500_000, "us")
    return (exact + half).astype("datetime64[s]").astype("datetime64[ns]")
