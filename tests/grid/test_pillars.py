"""Which cells stand in one pillar."""

from __future__ import annotations

import numpy as np
import pytest
from grid_drafts import CELLS, NI, NJ, NK, as_table, box_draft, corner_draft

from subside.grid import open_cells
from subside.grid.pillars import pillars

FULL = (NK, NJ, NI)
PLACE = np.arange(NK * NJ * NI) % (NJ * NI)


def columns(draft, path):
    cells, _ = open_cells(draft.write(path))
    assert cells["column"].dtype == np.int32
    return cells["column"].values


@pytest.mark.parametrize("table", [False, True])
@pytest.mark.parametrize("make", [box_draft, corner_draft])
def test_cells_above_each_other_share_a_pillar(tmp_path, make, table):
    draft = as_table(make()) if table else make()
    found = columns(draft, tmp_path / "a.nc")
    assert found.tolist() == PLACE.tolist()  # numbered as they first come


@pytest.mark.parametrize("table", [False, True])
def test_numbers_have_no_gaps_where_cells_are_inactive(tmp_path, table):
    draft = box_draft()
    active = np.ones(FULL, "i1")
    active[:, 1, 2] = active[0, 0, 0] = 0
    draft.add("active", CELLS, active)
    found = columns(as_table(draft) if table else draft, tmp_path / "a.nc")
    place = PLACE[active.reshape(-1) == 1]
    assert sorted(set(found.tolist())) == list(range(NJ * NI - 1))
    # the same pillar exactly where the same j, i
    pairs = set(zip(found.tolist(), place.tolist(), strict=True))
    assert len(pairs) == NJ * NI - 1


@pytest.mark.parametrize("table", [False, True])
def test_a_cell_whose_edges_lean_stands_alone(tmp_path, table):
    draft = corner_draft()
    draft.values("corners")[1, 2, 3, 4:, 0] += 0.01
    found = columns(as_table(draft) if table else draft, tmp_path / "a.nc").reshape(FULL)
    assert np.count_nonzero(found == found[1, 2, 3]) == 1
    assert found[0, 2, 3] == found[2, 2, 3]
    assert len(np.unique(found)) == found.max() + 1 == NJ * NI + 1


@pytest.mark.parametrize(("name", "shift", "parts"), [
    ("x", 2e-6, 2), ("x", 0.5e-6, 1), ("y", 2e-6, 2), ("dx", 2e-6, 2), ("dy", -2e-6, 2),
    # a turn of 2e-6 rad moves the ends of a box of 100 m x 150 m by more than 1 um
    ("azimuth", np.degrees(2e-6), 2), ("azimuth", 1e-10, 1),
])
def test_outlines_are_the_same_to_a_micrometre(tmp_path, name, shift, parts):
    draft = box_draft()
    draft.add("azimuth", ("j", "i"), np.zeros((NJ, NI)), units="degree")
    values = np.broadcast_to(draft.values(name), FULL).copy()
    values[1, 2, 3] += shift
    draft.add(name, CELLS, values, units="degree" if name == "azimuth" else "m")
    found = columns(draft, tmp_path / "a.nc").reshape(FULL)
    assert len(set(found[:, 2, 3].tolist())) == parts
    assert found[0, 2, 3] == found[2, 2, 3]
    assert found.max() + 1 == NJ * NI + parts - 1


def test_several_pillars_at_one_place():
    # boxes of two widths, one in the other, in turn
    n = 40
    width = np.where(np.arange(n) % 2, 50.0, 100.0)
    box = {"x": np.full(n, 5e5), "y": np.full(n, 5.8e6), "dx": width, "dy": width,
           "azimuth": np.zeros(n)}
    assert pillars(box).tolist() == (np.arange(n) % 2).tolist()
