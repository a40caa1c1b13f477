"""The dates of one leg of a run: what of the pressure comes in, what the laws get, what is kept."""

from __future__ import annotations

import numpy as np

from subside.timeline import TimeAxis

__all__ = ["Span"]


class Span:
    """Pressure rows `first` to `last` - 1, and the date before them.

    Attributes
    ----------
    time : array (n + 1,)
        Seconds since the start: the date before (in the first leg the start) and every pressure or
        output date after it, to the last pressure date of the leg.
    keep : array of int
        Which of `time` are output dates of this leg; of two legs that meet, the earlier has the
        date at which they do.
    dates : tuple of int
        The output dates of the leg, ``(from, to)``.
    from_start : bool
        Whether the leg holds the start itself.
    """

    def __init__(self, axis: TimeAxis, first: int, last: int) -> None:
        self.from_start = first == 0
        before = max(first - 1, 0)
        self._known = axis.pressure[before:last]
        start, end = self._known[0], self._known[-1]
        union = axis.union
        self.time = union[(union >= start) & (union <= end)]
        a = int(np.searchsorted(axis.output, start, side="left" if first == 0 else "right"))
        b = int(np.searchsorted(axis.output, end, side="right"))
        self.dates = (a, b)
        self.keep = np.searchsorted(self.time, axis.output[a:b])
        self._between = self.time.size != self._known.size
        if self._between:
            known = self._known
            self._left = np.clip(np.searchsorted(known, self.time, side="right") - 1, 0,
                                 known.size - 2)
            self._share = ((self.time - known[self._left])
                           / (known[self._left + 1] - known[self._left]))[:, None]

    def on_time(self, values: np.ndarray) -> np.ndarray:
        """Values (rows, cell) at the pressure dates and the one before, on `time`: linear."""
        if not self._between:
            return values
        share = self._share
        return np.asarray(values[self._left] * (1 - share) + values[self._left + 1] * share)

    def kept(self, values: np.ndarray) -> np.ndarray:
        """The output dates (n, cell) of values on `time`."""
        return _rows(values, self.keep)

    def kept_of_later(self, strain: np.ndarray) -> np.ndarray:
        """The output dates of strain at ``time[1:]``; at the start it is zero."""
        if self.keep.size and self.keep[0] == 0:
            later = _rows(strain, self.keep[1:] - 1)
            return np.concatenate([np.zeros((1, strain.shape[1])), later])
        return _rows(strain, self.keep - 1)


def _rows(values: np.ndarray, rows: np.ndarray) -> np.ndarray:
    """Ascending rows; without a copy where they follow each other."""
    if rows.size and rows[-1] - rows[0] == rows.size - 1:
        return values[rows[0]:rows[-1] + 1]
    return np.asarray(values[rows])
