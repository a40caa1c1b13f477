"""A few thousand cells that are stored together and follow one law: their way through a leg."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import xarray as xr

from subside.api import EarthModel, History, InputError
from subside.compaction.fields import Streams, field_in_time, field_of_cells, place
from subside.compaction.findings import Findings
from subside.compaction.march import march
from subside.compaction.rock import Block, Part
from subside.compaction.span import Span
from subside.compaction.strength import Strength, released

__all__ = ["Field", "Piece", "Work"]

_ENOUGH_CELLS = 200_000
"""Of a law's block, for the median of their stiffness."""


@dataclass
class Piece:
    """What is remembered of these cells from leg to leg.

    Attributes
    ----------
    block : int
        Number of the law's block.
    columns : slice or array of int (c,)
        Which of the storage block's cells.
    part : slice or array of int (c,)
        Which of the law's block's cells.
    memory
        The law's own.
    initial, last : array (c,)
        The first and the latest pressure, Pa.
    fields : dict
        The latest row (c,) of the fields in time that the law needs.
    """

    block: int
    columns: Part
    part: Part
    memory: Any = None
    initial: np.ndarray = field(default_factory=lambda: np.empty(0))
    last: np.ndarray = field(default_factory=lambda: np.empty(0))
    fields: dict[str, np.ndarray] = field(default_factory=dict)


@dataclass(frozen=True)
class Field:
    """What is the same for all cells of a run.

    Attributes
    ----------
    net : array (cell,)
        Net bulk volume, m3.
    depth : array (cell,)
        Of the cell centres, m below the ground or seabed.
    dates : int
        Output dates of the run.
    """

    dataset: xr.Dataset
    streams: Streams
    earth: EarthModel
    net: np.ndarray
    depth: np.ndarray
    dates: int


class Work:
    """One piece, its law and its rock, for the time of a leg.

    `at_once` says that the leg is the whole history and the law is asked for all of it.
    """

    def __init__(self, piece: Piece, block: Block, common: Field, cells: np.ndarray,
                 findings: Findings, at_once: bool) -> None:
        self._piece, self._block, self._common, self._findings = piece, block, common, findings
        self._cells = cells[piece.columns]
        self._rock = block.rock(piece.part)
        self._net = common.net[self._cells]
        self._at_once = at_once
        self._static = {
            name: field_of_cells(common.dataset, name, None, block.by_law, self._cells)
            for name in block.law.needs if name not in common.streams}
        self.in_time = tuple(name for name in block.law.needs if name in common.streams)

    def begin(self, pressure: np.ndarray) -> None:
        """Take the initial pressure (m,) of the storage block, Pa."""
        self._piece.initial = np.array(pressure[self._piece.columns], dtype=float)
        self._piece.last = self._piece.initial
        if not self._at_once:
            with self._block.speaking(self._piece.part):
                self._piece.memory = self._block.law.start(self._rock)

    def advance(self, span: Span, pressure: np.ndarray, fields: Mapping[str, np.ndarray],
                strength: Strength, start: int) -> None:
        """Go over some dates.

        Parameters
        ----------
        span : Span
            The dates.
        pressure : array (rows, m)
            Of the storage block, Pa.
        fields : mapping of str to array (rows, m)
            The fields in time named by `in_time`.
        strength : Strength
            Where the output dates go, from row `start` on.
        """
        drop = self._drop(span, pressure)
        biot = self._rock.biot
        rise = drop if isinstance(biot, float) and biot == 1.0 else biot * drop
        strain = self._strain(span, drop, rise, self._fields(span, fields))
        if not span.keep.size:
            return
        rise = span.kept(rise)
        common, piece, block = self._common, self._piece, self._block
        if not self._findings.see_strain(strain, span.dates[0], self._cells):
            first = int(self._cells[np.nonzero(~np.isfinite(strain).all(axis=0))[0][0]])
            raise InputError(f"{block.by_law} gives no finite strain in "
                             f"{place(common.dataset, first)}; check its parameters there.")
        if (span.dates[1] == common.dates and block.table.horizontal_release == "matched"
                and common.earth.has_modulus):
            # a median: of many cells some are enough, the same ones however they come
            some = self._cells % max(1, block.cells.size // _ENOUGH_CELLS) == 0
            modulus = common.earth.modulus_at(common.depth[self._cells[some]])
            self._findings.see_stiffness(piece.block, strain[-1, some], rise[-1, some], modulus)
        part = None
        if strength.closure is not None:
            part = released(block, piece.part, strain, rise, common.earth,
                            common.depth[self._cells])
        strength.put(start, piece.columns, strain, self._net, part)

    def _drop(self, span: Span, pressure: np.ndarray) -> np.ndarray:
        """Depletion (dates, c) at the span's dates, Pa."""
        piece = self._piece
        pressure = pressure[:, piece.columns]
        later = pressure[1:] if span.from_start else pressure
        drop = np.empty((later.shape[0] + 1, pressure.shape[1]))
        np.subtract(piece.initial, piece.last, out=drop[0])
        np.subtract(piece.initial, later, out=drop[1:])
        if later.shape[0]:
            piece.last = np.array(later[-1], dtype=float)
        return span.on_time(drop)

    def _fields(self, span: Span, values: Mapping[str, np.ndarray]) -> dict[str, np.ndarray]:
        """Fields the law needs: (c,), or (dates, c) at the span's dates."""
        found = dict(self._static)
        for name in self.in_time:
            rows = field_in_time(values[name][:, self._piece.columns], self._common.dataset,
                                 self._common.streams, name, self._block.by_law, self._cells)
            if not span.from_start:
                rows = np.concatenate([self._piece.fields[name][None], rows])
            self._piece.fields[name] = rows[-1].copy()
            found[name] = span.on_time(rows)
        return found

    def _strain(self, span: Span, drop: np.ndarray, rise: np.ndarray,
                fields: dict[str, np.ndarray]) -> np.ndarray:
        """Strain (n, c) at the span's output dates."""
        piece, block, law, rock = self._piece, self._block, self._block.law, self._rock
        for array in (drop, rise, *fields.values()):
            array.flags.writeable = False
        with block.speaking(piece.part):
            if self._at_once:
                strain = np.asarray(law.strain(History(span.time, drop, rise, fields), rock))
                shape = rise.shape
            else:
                piece.memory, strain = march(law, piece.memory, span.time, rise, fields, rock)
                shape = (rise.shape[0] - 1, rise.shape[1])
        if strain.shape != shape:
            raise InputError(f"{block.by_law} returned strain of shape {strain.shape}; "
                             f"(time, cell) = {shape} is expected.")
        return span.kept(strain) if self._at_once else span.kept_of_later(strain)
