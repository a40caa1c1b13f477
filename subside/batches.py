"""Cells in batches: what one thread works on at a time, whole pillars together."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

__all__ = ["Batch", "cut_batches"]

_CELLS = 30_000
"""Cells of a batch: with some dozen dates its arrays are a few MB."""


@dataclass(frozen=True)
class Batch:
    """Some cells of a storage block.

    Attributes
    ----------
    number : int
        Of the batch.
    block : int
        Of the storage block.
    cells : array of int32 (m,)
        Numbers of the cells in the dataset, ascending.
    places : array of int32 (m,) or None
        Where among the block's cells they are; None: they are all of them.
    """

    number: int
    block: int
    cells: np.ndarray
    places: np.ndarray | None


def cut_batches(blocks: Sequence[np.ndarray], column: np.ndarray | None) -> list[Batch]:
    """Batches of all blocks; `column (cell,)` is the pillar a cell stands in, as in `Bodies`.

    The first one lies amid the others: it is asked when the bowl will be large.
    """
    batches: list[Batch] = []
    for block, cells in enumerate(blocks):
        if cells.size <= 1.5 * _CELLS:
            batches.append(Batch(len(batches), block, cells, None))
            continue
        if column is None:
            order = np.arange(cells.size)
            cuts = np.arange(0, cells.size, _CELLS)
        else:
            stands = column[cells]
            order = np.argsort(stands, kind="stable")
            stands = stands[order]
            # the first cell of the pillar at which each batch is cut
            cuts = np.unique(np.searchsorted(stands, stands[::_CELLS]))
        for first, last in zip(cuts, [*cuts[1:], cells.size], strict=True):
            places = np.sort(order[first:last]).astype(np.int32)
            batches.append(Batch(len(batches), block, cells[places], places))
    middle = batches[len(batches) // 2]
    return sorted(batches, key=lambda batch: (batch.block != middle.block, batch is not middle))
