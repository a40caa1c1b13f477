"""Checks of the pressure history made while it streams by, whatever its blocks and legs are."""

from __future__ import annotations

import threading
from collections.abc import Iterable
from typing import TYPE_CHECKING, Any

import numpy as np

from subside.grid.check_pressure import lithostatic_limit
from subside.grid.fields import require_field
from subside.grid.findings import Findings
from subside.grid.seen import Seen
from subside.grid.stream import Stream
from subside.grid.verdict import Verdict
from subside.grid.watch_pass import look

if TYPE_CHECKING:
    import xarray as xr

__all__ = ["PressureWatch"]


class PressureWatch:
    """Looks at every pressure once and remembers what is wrong on each date, and where first.

    Parameters
    ----------
    cells : Dataset
        Of `subside.grid.open_cells`.
    surface : float
        Depth of the ground or seabed in the grid's vertical datum, m.
    stream : Stream
        The pressure; its `strays` are looked at in the end.
    accept : iterable of str
        Checks whose errors become warnings.
    initial : array (cell,), optional
        Pressure before production, Pa, for `edge_depletion`; the dataset's own `initial_pressure`,
        or the first date, when left out.
    depletion_from : int
        First date of the file that counts for `edge_depletion`.

    Attributes
    ----------
    seen : Seen
        What was found so far: small, to be sent back by a worker.
    """

    def __init__(self, cells: xr.Dataset, surface: float, stream: Stream, *,
                 accept: Iterable[str] = (), initial: np.ndarray | None = None,
                 depletion_from: int = 0) -> None:
        if initial is None and "initial_pressure" in cells:
            initial = require_field(cells, "initial_pressure", "Pa", "the edge depletion").values
        # as stored, and seen in SI batch by batch: a copy of all cells may be a large thing
        self._to_si = (1.0, 0.0) if initial is not None else stream.to_si
        self._initial = stream.at_start if initial is None else initial
        self._depth = cells["centroid"].values[:, 2]
        self._edge = cells["edge"].values
        self._from = depletion_from
        self._cells: xr.Dataset | None = cells
        self._stream: Stream | None = stream
        self._surface, self._accept = surface, accept
        self.seen = Seen(stream.steps, stream.strays)
        self._lock = threading.Lock()

    def __getstate__(self) -> dict[str, Any]:
        # a copy elsewhere looks and sends back what it has seen; only the first speaks
        return {**self.__dict__, "_lock": None, "_cells": None, "_stream": None}

    def __setstate__(self, state: dict[str, Any]) -> None:
        self.__dict__.update(state)
        self._lock = threading.Lock()

    def fresh(self, stream: Stream) -> PressureWatch:
        """A watch of the same cells that has seen nothing, for a worker that reads `stream`."""
        other = object.__new__(PressureWatch)
        other.__setstate__(self.__dict__)
        other.seen = Seen(stream.steps, stream.strays)
        return other

    def see(self, block_cells: np.ndarray, first: int, pressure_pa: np.ndarray,
            before: np.ndarray | None = None) -> None:
        """Look at some dates of some cells; may be called by several threads.

        Parameters
        ----------
        block_cells : array (m,) of int
            Numbers of the cells in the dataset, ascending.
        first : int
            Number in the file of the first date.
        pressure_pa : array (n, m)
            Pa.
        before : array (m,), optional
            Of the date before; None at the first date of the file.
        """
        pressure = np.ascontiguousarray(pressure_pa, dtype=float)
        steps, m = pressure.shape
        if not m or not steps:
            return
        counts, where = np.zeros((steps, 3), np.int64), np.zeros((steps, 3), np.int64)
        jump, jump_at = np.zeros(steps), np.zeros(steps, np.int64)
        largest = np.zeros(2)
        previous = pressure[0] if before is None else np.ascontiguousarray(before, dtype=float)
        factor, offset = self._to_si
        initial = self._initial[block_cells].astype(float) * factor + offset
        look(pressure, previous, lithostatic_limit(self._depth[block_cells], self._surface),
             initial, self._edge[block_cells].astype(float),
             max(0, self._from - first), counts, where, jump, jump_at, largest)
        rows = slice(first, first + steps)
        with self._lock:
            self.seen.wrong(rows, counts, block_cells[where],
                            pressure[np.arange(steps)[:, None], where])
            self.seen.jumps(rows, jump, block_cells[jump_at])
            self.seen.compared[first + (before is None):first + steps] = True
            self.seen.changes(float(largest[0]), float(largest[1]))

    def merge(self, other: PressureWatch | Seen) -> None:
        """Add what another watch has seen of other cells or dates of the same grid."""
        with self._lock:
            self.seen.merge(other if isinstance(other, Seen) else other.seen)

    @property
    def edge_depletion(self) -> float:
        """Largest change of pressure on the outer edge over the largest anywhere, 0 to 1."""
        seen = self.seen
        return seen.on_edge / seen.anywhere if seen.anywhere > 0 else 0.0

    def finish(self) -> list[str]:
        """Warnings on what was seen.

        Raises
        ------
        InputError
            At the first error that is not accepted.
        """
        cells, stream = self._cells, self._stream
        if cells is None or stream is None:
            raise ValueError("only the watch that was made first can finish; merge this into it")
        findings = Findings(str(cells.attrs["source_file"]), self._accept)
        verdict = Verdict(self.seen, cells, stream, self._surface)
        for name, find in (
                ("pressure-gap", verdict.missing), ("pressure-gap", verdict.stray),
                ("pressure-not-positive", verdict.at_or_below_zero),
                ("lithostatic", verdict.too_high), ("pressure-jump", verdict.jump),
                ("identical-steps", verdict.identical)):
            found = find()
            if found:
                step, text = found
                findings.add(name, text, stream.origin(step).file)
        return findings.warnings
