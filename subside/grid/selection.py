"""Which cells of a file a dataset has, cut into blocks that follow the storage chunks."""

from __future__ import annotations

from itertools import pairwise
from typing import Any

import numpy as np

from subside.grid.unpack import KEPT, number_cells, runs_of

__all__ = ["Blocks", "Box", "Selection", "make_blocks"]

Box = tuple[int, int, int, int]
"""j from, j to, i from, i to (beyond the last): the pillars of a block."""

_ENOUGH = 32_768  # kept cells: blocks of fewer are joined to the next


class Selection:
    """The cells of a state in a box, as stretches of cells that follow each other in a chunk.

    Parameters
    ----------
    state : array (k, j, i) of uint8
        Of every cell of the file, see `subside.grid.unpack`.
    box : Box
    chunk : tuple of int
        Extent of a storage chunk along k, j, i.
    wanted : int

    Attributes
    ----------
    chunks : list of (kc, jc, ic)
        Numbers of the chunks that the box touches.
    """

    def __init__(self, state: np.ndarray, box: Box, chunk: tuple[int, int, int], wanted: int
                 ) -> None:
        j0, j1, i0, i1 = box
        ck, cj, ci = chunk
        self.chunks = [(k, j, i) for k in range(-(-state.shape[0] // ck))
                       for j in range(j0 // cj, -(-j1 // cj))
                       for i in range(i0 // ci, -(-i1 // ci))]
        ends = np.zeros(len(self.chunks), np.int64)
        runs_of(state, box, chunk, wanted, ends, np.empty((0, 4), np.int32), False)
        self._bounds = np.concatenate([[0], np.cumsum(ends)])
        self._runs = np.empty((self._bounds[-1], 4), np.int32)
        runs_of(state, box, chunk, wanted, self._bounds[:-1].copy(), self._runs, True)

    def touches(self, chunk: int) -> bool:
        """Whether there are any cells in a chunk of `chunks`."""
        return bool(self._bounds[chunk + 1] > self._bounds[chunk])

    def runs(self, chunk: int) -> np.ndarray:
        """Stretches (r, 4): number in the chunk, number in the block, length, flat number."""
        return self._runs[self._bounds[chunk]:self._bounds[chunk + 1]]


class Blocks:
    """Boxes of whole pillars that together hold every cell of the file.

    Parameters
    ----------
    state : array (k, j, i) of uint8
    boxes : list of Box

    Attributes
    ----------
    cells : list of array of int32
        Numbers in the dataset of each box's kept cells, ascending.
    count : int
        Cells of the dataset.
    """

    def __init__(self, state: np.ndarray, boxes: list[Box]) -> None:
        self.state, self.boxes = state, boxes
        kept = state == KEPT
        row = kept.sum(axis=2)
        self.count = int(row.sum())
        first = np.cumsum(row.reshape(-1)).reshape(row.shape) - row
        self.cells = []
        for box in boxes:  # ascending in i within the same j: number_cells counts on
            j0, j1, i0, i1 = box
            numbers = np.empty(np.count_nonzero(kept[:, j0:j1, i0:i1]), np.int32)
            number_cells(state, box, first, numbers)
            self.cells.append(numbers)
        self._found: dict[tuple[int, tuple[int, int, int], int], Selection] = {}

    def select(self, block: int, chunk: tuple[int, int, int], wanted: int) -> Selection:
        """The cells of a state in a block; found once for all variables stored alike."""
        key = (block, chunk, wanted)
        if key not in self._found:
            self._found[key] = Selection(self.state, self.boxes[block], chunk, wanted)
        return self._found[key]

    def __getstate__(self) -> dict[str, Any]:
        return {**self.__dict__, "_found": {}}


def make_blocks(state: np.ndarray, chunk: tuple[int, int, int], enough: int = _ENOUGH) -> Blocks:
    """Blocks that cut no storage chunk across j and i, none of them of few cells.

    Parameters
    ----------
    state : array (k, j, i) of uint8
    chunk : tuple of int
        Extent of a storage chunk along k, j, i.
    """
    _, cj, ci = chunk
    nj, ni = state.shape[1:]
    pillars = np.count_nonzero(state == KEPT, axis=0)
    boxes: list[Box] = []
    for a, b in _joined(np.add.reduceat(pillars.sum(axis=1), np.arange(0, nj, cj)), enough):
        j0, j1 = a * cj, min(b * cj, nj)
        strip = np.add.reduceat(pillars[j0:j1].sum(axis=0), np.arange(0, ni, ci))
        boxes += [(j0, j1, c * ci, min(d * ci, ni)) for c, d in _joined(strip, enough)]
    return Blocks(state, boxes)


def _joined(counts: np.ndarray, enough: int) -> list[tuple[int, int]]:
    """Ranges of neighbours that have enough together; a poor rest goes to the range before it."""
    ends, held = [0], 0
    for n, count in enumerate(counts):
        held += int(count)
        if held >= enough:
            ends.append(n + 1)
            held = 0
    if ends[-1] < len(counts):
        if len(ends) > 1:
            ends[-1] = len(counts)
        else:
            ends.append(len(counts))
    return list(pairwise(ends))
