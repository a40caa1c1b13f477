"""Batches: every cell once, pillars whole."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from subside import batches
from subside.batches import cut_batches


@settings(max_examples=150)
@given(sizes=st.lists(st.integers(1, 200), min_size=1, max_size=5), pillars=st.integers(1, 60),
       has_columns=st.booleans(), most=st.integers(1, 60), seed=st.integers(0, 999))
def test_every_cell_once_and_pillars_whole(sizes: list[int], pillars: int, has_columns: bool,
                                           most: int, seed: int) -> None:
    rng = np.random.default_rng(seed)
    count = sum(sizes)
    owner = rng.permutation(np.repeat(np.arange(len(sizes)), sizes))
    blocks = [np.flatnonzero(owner == n).astype(np.int32) for n in range(len(sizes))]
    column = rng.integers(0, pillars, count) if has_columns else None
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(batches, "_CELLS", most)
        found = cut_batches(blocks, column)
    cells = np.concatenate([batch.cells for batch in found])
    assert np.array_equal(np.sort(cells), np.arange(count))
    assert sorted(batch.number for batch in found) == list(range(len(found)))
    seen: set[tuple[int, int]] = set()
    for batch in found:
        assert batch.cells.size and (np.diff(batch.cells) > 0).all()
        block = blocks[batch.block]
        assert np.array_equal(block if batch.places is None else block[batch.places], batch.cells)
        if column is None:
            assert batch.cells.size <= 1.5 * most
            continue
        mine = {(batch.block, int(c)) for c in np.unique(column[batch.cells])}
        assert not mine & seen, "a pillar in two batches of a block"
        seen |= mine
        largest = np.unique(column[block], return_counts=True)[1].max()
        assert batch.cells.size <= 1.5 * most + largest


def test_batches_of_a_block_come_together() -> None:
    """A storage block is unpacked once: its batches follow each other."""
    blocks = [np.arange(a, a + 100_000, dtype=np.int32) for a in range(0, 400_000, 100_000)]
    found = cut_batches(blocks, np.arange(400_000) // 7)
    of_block = [batch.block for batch in found]
    changes = sum(a != b for a, b in pairwise(of_block))
    assert changes == 3 and len(found) == 16
