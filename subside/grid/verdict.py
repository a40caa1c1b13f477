"""What was seen of the pressures, in words: which date of which file, which cell, how much."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from subside.grid.check_pressure import JUMP, lithostatic_text, not_positive_text
from subside.grid.seen import MISSING, NOT_POSITIVE, TOO_HIGH, Seen
from subside.grid.stream import Stream
from subside.grid.words import counted, place, place_in_file, step_text

if TYPE_CHECKING:
    import xarray as xr

__all__ = ["Verdict"]

Finding = tuple[int, str] | None
"""The step that is concerned, and what to say; None where nothing is wrong."""


@dataclass
class Verdict:
    """The findings that `seen` amounts to.

    Parameters
    ----------
    seen : Seen
    cells : Dataset
    stream : Stream
        The pressure.
    surface : float
        Depth of the ground or seabed in the grid's vertical datum, m.
    """

    seen: Seen
    cells: xr.Dataset
    stream: Stream
    surface: float

    def missing(self) -> Finding:
        """Cells that lose their pressure."""
        found = self._earliest(MISSING)
        if found is None:
            return None
        step, count, cell, _ = found
        though = f", though there is one at {self._number(0, step)}" if step else ""
        return step, (f"{self._step(step)}: {counted(count)} "
                      f"{'has' if count == 1 else 'have'} no pressure, first "
                      f"{place(self.cells, cell)}{though}; mark them inactive or fill the gap.")

    def stray(self) -> Finding:
        """Cells that have a pressure later, but none at first."""
        found = self.seen.strays.first()
        if found is None:
            return None
        step, count, flat = found
        cells = self.cells
        shape = tuple(cells.attrs["shape"])
        where = place_in_file(flat, shape if "k" in cells else (cells.attrs["cells_in_file"],))
        day = np.datetime_as_string(cells["time"].values[0], unit="D")
        return step, (f"{self._number(0, step)} ({day}): {counted(count)} "
                      f"{'has' if count == 1 else 'have'} no pressure, first {where}, though there "
                      f"is one at {self._step(step)}; mark them inactive or fill the gap.")

    def at_or_below_zero(self) -> Finding:
        """Pressures that are not above zero."""
        found = self._earliest(NOT_POSITIVE)
        if found is None:
            return None
        step, count, cell, value = found
        return step, not_positive_text(self.cells, self._step(step), count, cell, value,
                                       self.stream.origin(step).attrs)

    def too_high(self) -> Finding:
        """Pressures above the weight of the rock."""
        found = self._earliest(TOO_HIGH)
        if found is None:
            return None
        step, count, cell, value = found
        return step, lithostatic_text(self.cells, self.surface, self._step(step), count, cell,
                                      value, self.stream.origin(step).attrs)

    def jump(self) -> Finding:
        """The largest change from one date to the next."""
        step = int(np.argmax(self.seen.jump))
        largest = float(self.seen.jump[step])
        if not largest > JUMP:
            return None
        return step, (f"{self._step(step)}: pressure changes by {largest / 1e5:.4g} bar in one "
                      f"step in {place(self.cells, int(self.seen.jump_cell[step]))}, the largest "
                      "of all steps; is a step missing?")

    def identical(self) -> Finding:
        """Dates on which nothing changes."""
        same = np.flatnonzero(self.seen.compared & (self.seen.jump == 0.0))
        if not same.size:
            return None
        step = int(same[0])
        more = f" (and {len(same) - 1} more such steps)" if len(same) > 1 else ""
        return step, (f"{self._step(step)} is identical to {self._number(step - 1, step)}{more}.")

    def _earliest(self, kind: int) -> tuple[int, int, int, float] | None:
        """Step, count, lowest cell and its pressure of the first date with something wrong."""
        steps = np.flatnonzero(self.seen.counts[:, kind])
        if not steps.size:
            return None
        step, seen = int(steps[0]), self.seen
        return (step, int(seen.counts[step, kind]), int(seen.first[step, kind]),
                float(seen.values[step, kind]))

    def _step(self, step: int) -> str:
        return step_text(self.cells["time"].values, step, self.stream.origin(step).step)

    def _number(self, step: int, told: int) -> str:
        """A step beside the one that the message is about, which may be of another file."""
        origin = self.stream.origin(step)
        other = origin.file is not None and origin.file != self.stream.origin(told).file
        return f"step {origin.step}" + (f" of {origin.file.name}" if other and origin.file else "")
