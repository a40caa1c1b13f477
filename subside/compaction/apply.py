"""Which law on which cell: from the pressure history to the strength of every source.

The history comes in legs of some dates and the cells in blocks that are stored together. What a
block remembers from leg to leg is its `State`; how dates are cut into legs and cells into blocks
changes nothing.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
import xarray as xr

from subside.api import EarthModel
from subside.compaction.fields import Streams, field_of_cells
from subside.compaction.findings import Findings
from subside.compaction.march import Marching
from subside.compaction.piece import Field, Piece, Work
from subside.compaction.rock import Block, Part
from subside.compaction.span import Span
from subside.compaction.strength import Strength, releases_all
from subside.timeline import TimeAxis

__all__ = ["Compactor", "State", "Strength"]

_CELLS = 16_384
"""Cells of a piece: enough to make the cost of a call small."""
_VALUES = 131_072
"""Dates times cells worked on together: arrays of 1 MB, which stay in a processor's own cache."""


@dataclass
class State:
    """What is remembered of a storage block from leg to leg.

    Attributes
    ----------
    cells : array of int (m,)
        Its cells in the dataset.
    pieces : list of Piece
    rows : int
        Pressure rows it has been given.
    findings : Findings
    """

    cells: np.ndarray
    pieces: list[Piece]
    rows: int = 0
    findings: Findings = field(default_factory=Findings)


class Compactor:
    """Applies every block's law to its cells, leg by leg. Its methods may run in several threads.

    Parameters
    ----------
    dataset : Dataset
        The cell dataset: `volume`, static fields, and where the cells are in their file.
    axis : TimeAxis
    blocks : sequence of Block
        From `assign_blocks`.
    earth : EarthModel
        Its modulus is the host's, for ``horizontal_release = "own"`` and for the warning.
    depth : array (cell,)
        Depth of the cell centres below the ground or seabed, m.
    streams : mapping of str to mapping, optional
        Attributes of the fields in time, as for `assign_blocks`.
    """

    def __init__(self, dataset: xr.Dataset, axis: TimeAxis, blocks: Sequence[Block],
                 earth: EarthModel, depth: np.ndarray, streams: Streams | None = None) -> None:
        self._axis = axis
        self._blocks = list(blocks)
        self._owner = np.zeros(dataset.sizes["cell"], dtype=np.int16)
        bulk = dataset["volume"].values
        net = bulk
        for number, block in enumerate(self._blocks):
            self._owner[block.cells] = number
            if block.table.apply_net_to_gross and "net_to_gross" in dataset:
                if net is bulk:  # a copy of all cells may be a large thing
                    net = np.array(bulk, dtype=float)
                net[block.cells] *= field_of_cells(
                    dataset, "net_to_gross", "1", f"{block.where} apply_net_to_gross", block.cells)
        self._field = Field(dataset, streams or {}, earth, net, depth, axis.output.size)
        used = [block for block in self._blocks if block.cells.size]
        self._alike = [releases_all(block) for block in self._blocks]
        self.sources: tuple[str, ...] = ("contraction",)
        """Kinds of source that some cell uses."""
        if not all(releases_all(block) for block in used):
            self.sources = ("contraction", "closure")
        self._portions = [_takes_portions(block) for block in self._blocks]
        self.whole_history = not all(self._portions)
        """Whether all rows must come in one leg: some law offers `strain` alone."""
        self.fields: tuple[str, ...] = tuple(sorted(
            {name for block in used for name in block.law.needs if name in self._field.streams}))
        """Fields in time that `advance` wants."""

    def output_range(self, first: int, last: int) -> tuple[int, int]:
        """Output dates ``(a, b)``, a to b - 1, that pressure rows first to last - 1 give."""
        return Span(self._axis, first, last).dates

    def begin(self, cells: np.ndarray) -> State:
        """The state of a storage block at the start; its cells in the dataset, ascending."""
        cells = np.asarray(cells)
        owner = self._owner[cells]
        pieces = []
        for number, block in enumerate(self._blocks):
            columns = np.flatnonzero(owner == number)
            for start in range(0, columns.size, _CELLS):
                some = columns[start:start + _CELLS]
                part = cells[some]
                if block.cells.size != self._owner.size:
                    part = np.searchsorted(block.cells, part)
                pieces.append(Piece(number, _plain(some), _plain(part)))
        return State(cells, pieces)

    def advance(self, state: State, first: int, last: int, pressure: np.ndarray,
                fields: Mapping[str, np.ndarray] | None = None, *,
                keep_strain: bool = False) -> Strength:
        """Take a block's pressure rows first to last - 1 and give the output dates among them.

        Parameters
        ----------
        state : State
            Of the block; changed.
        first, last : int
            Rows of `axis.pressure`, in order without a gap; the first call starts at row 0, the
            initial pressure.
        pressure : array (last - first, m)
            Absolute pressure, Pa.
        fields : mapping of str to array (last - first, m), optional
            The fields in time named by `self.fields`, in the unit `streams` says.
        keep_strain : bool
            Whether the strain itself is wanted.

        Raises
        ------
        InputError
            From a law, when a law returns numbers that are not finite, or where a field in time
            has no value.
        """
        if first != state.rows or pressure.shape != (last - first, state.cells.size):
            raise ValueError(f"rows {first} to {last - 1} as {pressure.shape}: expected from row "
                             f"{state.rows} on, {state.cells.size} cells")
        start, stop = self.output_range(first, last)
        closure = not all(self._alike[piece.block] for piece in state.pieces)
        strength = Strength.empty(stop - start, state.cells.size, closure, keep_strain)
        whole = first == 0 and last == self._axis.pressure.size
        spans: dict[tuple[int, int], Span] = {}
        if self.whole_history and not whole:
            raise ValueError("a law needs the whole history in one leg")
        for piece in state.pieces:
            block = self._blocks[piece.block]
            at_once = whole and not isinstance(block.law, Marching)
            work = Work(piece, block, self._field, state.cells, state.findings, at_once)
            if first == 0:
                work.begin(pressure[0])
            step = last - first if at_once else max(1, _VALUES // piece.initial.size)
            for row in range(first, last, step):
                end = min(row + step, last)
                if (row, end) not in spans:
                    spans[row, end] = Span(self._axis, row, end)
                span, rows = spans[row, end], slice(row - first, end - first)
                given = {name: (fields or {})[name][rows] for name in work.in_time}
                work.advance(span, pressure[rows], given, strength, span.dates[0] - start)
        state.rows = last
        return strength

    def warnings(self, findings: Iterable[Findings]) -> list[str]:
        """What there is to say in the end, from the findings of all states."""
        return Findings.together(findings).warnings(self._blocks, self._field.dataset)


def _takes_portions(block: Block) -> bool:
    """Whether a block's law can be taken up where it was left; of no cells, any can."""
    some = slice(0, 1)
    if not block.cells.size or isinstance(block.law, Marching):
        return True
    with block.speaking(some):
        return block.law.start(block.rock(some)) is not None


def _plain(places: np.ndarray) -> Part:
    """Ascending places as a slice where they follow each other, else as small numbers."""
    if places.size and places[-1] - places[0] == places.size - 1:
        return slice(int(places[0]), int(places[-1]) + 1)
    return places.astype(np.int32)
