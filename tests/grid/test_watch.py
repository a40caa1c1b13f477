"""The watch says what a look at the whole history at once says, however the history is cut."""

from __future__ import annotations

import pickle
from concurrent.futures import ThreadPoolExecutor
from itertools import pairwise

import numpy as np
import pytest
from grid_drafts import CELLS, box_draft, corner_draft, pressure_values
from hypothesis import given, settings
from hypothesis import strategies as st

from subside.errors import InputError
from subside.grid import HeldStream, PressureWatch, edge_depletion, open_cells, open_grid

DEEP = 2010.0  # m, centre of the upper layer of the drafts
LIMIT = 22.7e3 * DEEP  # Pa, the lowest lithostatic limit there


@pytest.fixture(scope="module")
def grid(tmp_path_factory):
    """Cells and pressure (3, 60) in Pa of a sound grid."""
    cells, streams = open_cells(box_draft().write(tmp_path_factory.mktemp("watch") / "a.nc"))
    return cells, streams["pressure"].read_si(0, 0, 3)


def whole(cells, pressure):
    """The first error's start, or the warnings, by plain numpy on everything at once."""
    k, j, i = (cells[n].values for n in "kji")
    days = [str(d)[:10] for d in cells["time"].values]
    limit = 22.7e3 * cells["centroid"].values[:, 2]
    for wrong, words in ((~np.isfinite(pressure), "no pressure"), (pressure <= 0, "<= 0"),
                         (pressure > limit, "above lithostatic")):
        for n in np.flatnonzero(wrong.any(axis=1)):
            c = np.flatnonzero(wrong[n])[0]
            count = int(wrong[n].sum())
            return [f"step {n} ({days[n]})", f"{count} active cell{'s' * (count > 1)} ha",
                    words, f"(k={k[c]}, j={j[c]}, i={i[c]})"], None
    change = np.abs(np.diff(pressure, axis=0))
    warnings = []
    if change.max() > 100e5:
        n, c = np.unravel_index(np.argmax(change), change.shape)
        warnings.append([f"step {n + 1} ({days[n + 1]})", f"by {change.max() / 1e5:.4g} bar",
                         f"(k={k[c]}, j={j[c]}, i={i[c]})"])
    same = np.flatnonzero((change == 0).all(axis=1)) + 1
    if same.size:
        warnings.append([f"step {same[0]} ({days[same[0]]}) is identical to step {same[0] - 1}"]
                        + [f"and {same.size - 1} more"] * (same.size > 1))
    return None, warnings


def watched(cells, pressure, parts, legs, threads=1, copies=False):
    """A watch that has seen the history in these parts of cells and legs of dates."""
    stream = HeldStream(pressure)
    watch = PressureWatch(cells, 0.0, stream)

    def one(own):
        mine = pickle.loads(pickle.dumps(watch)).fresh(stream) if copies else watch
        before = None
        for first, last in pairwise(legs):
            mine.see(own, first, pressure[first:last][:, own], before)
            before = pressure[last - 1, own]
        return mine

    with ThreadPoolExecutor(threads) as pool:
        for mine in pool.map(one, parts):
            if copies:
                watch.merge(pickle.loads(pickle.dumps(mine.seen)))
    return watch


spoilt = st.lists(st.tuples(
    st.integers(0, 2), st.integers(0, 59),
    st.sampled_from([np.nan, np.inf, 0.0, -1e5, 700e5, 460e5, 340e5, 85e5, 210e5])), max_size=6)


@settings(max_examples=150, deadline=None)
@given(changes=spoilt, cut=st.integers(1, 59), odd=st.booleans(), copies=st.booleans(),
       legs=st.sampled_from([(0, 3), (0, 1, 3), (0, 1, 2, 3), (0, 2, 3)]),
       copied=st.sampled_from([None, 1, 2]))
def test_any_cut_gives_the_same_words(grid, changes, cut, odd, copies, legs, copied):
    cells, sound = grid
    pressure = sound.copy()
    for step, cell, value in changes:
        pressure[step, cell] = value
    if copied is not None:
        pressure[copied] = pressure[copied - 1]
    numbers = np.arange(60, dtype=np.int32)
    parts = [numbers[1::2], numbers[::2]] if odd else [numbers[cut:], numbers[:cut]]
    watch = watched(cells, pressure, parts, legs, copies=copies)
    error, warnings = whole(cells, pressure)
    if error is None:
        found = watch.finish()
        assert len(found) == len(warnings)
    else:
        with pytest.raises(InputError) as caught:
            watch.finish()
        found, warnings = [str(caught.value)], [error]
    for text, words in zip(found, warnings, strict=True):
        for word in words:
            assert word in text


@settings(max_examples=30, deadline=None)
@given(seed=st.integers(0, 1000), cut=st.integers(1, 59))
def test_edge_depletion_of_parts(grid, seed, cut):
    cells, sound = grid
    pressure = sound + np.random.default_rng(seed).normal(0, 5e5, sound.shape)
    numbers = np.arange(60, dtype=np.int32)
    watch = watched(cells, pressure, [numbers[:cut], numbers[cut:]], (0, 2, 3), copies=True)
    change = np.abs(pressure - pressure[0])
    edge = cells["edge"].values
    assert watch.edge_depletion == change[:, edge].max() / change.max()
    held = cells.assign(pressure=(("time", "cell"), pressure))
    assert edge_depletion(held) == watch.edge_depletion
    late = PressureWatch(cells, 0.0, HeldStream(pressure), initial=pressure[1], depletion_from=2)
    late.see(numbers, 0, pressure)
    change = np.abs(pressure[2] - pressure[1])
    assert late.edge_depletion == change[edge].max() / change.max()


def test_many_cells_and_threads(grid):
    # more cells than a tile of the compiled pass, in parts that threads see at once
    cells, _ = grid
    many = cells.isel(cell=np.arange(30_000) % 60)
    rng = np.random.default_rng(5)
    pressure = 210e5 + rng.normal(0, 2e5, (3, 30_000))
    pressure[2, 23_456] = 85e5
    numbers = np.arange(30_000, dtype=np.int32)
    watch = watched(many, pressure, np.array_split(numbers, 9), (0, 1, 3), threads=4)
    change = np.abs(np.diff(pressure, axis=0))
    assert watch.seen.jump[1:] == pytest.approx(change.max(axis=1), rel=0)
    assert watch.seen.jump_cell[1:].tolist() == change.argmax(axis=1).tolist()
    assert watch.seen.counts.sum() == 0
    assert f"by {change[1, 23_456] / 1e5:.4g} bar in one step" in watch.finish()[0]


def test_strays_of_a_worker_count_once(tmp_path):
    draft = box_draft()
    draft.values("pressure")[0, 1, 2, 2:4] = np.nan
    draft.values("pressure")[1, 1, 2, 2] = np.nan
    path = draft.write(tmp_path / "a.nc")
    cells, streams = open_cells(path)
    assert cells.sizes["cell"] == 58
    stream = streams["pressure"]
    watch = PressureWatch(cells, 0.0, stream)
    for _ in range(2):  # a block that is done again after a worker was lost
        copy = pickle.loads(pickle.dumps(stream))
        part = watch.fresh(copy)
        for n, own in enumerate(copy.blocks):
            part.see(own, 0, copy.read_si(n, 0, 3))
        watch.merge(pickle.loads(pickle.dumps(part.seen)))
    with pytest.raises(InputError, match=r"step 0 \(2000-01-01\): 1 active cell has no pressure, "
                       r"first \(k=1, j=2, i=3\), though there is one at step 1 \(2000-12-31\)"):
        watch.finish()


def test_strays_in_chunks_without_a_kept_cell(tmp_path):
    import netCDF4

    draft = box_draft()
    draft.drop("pressure")
    path = draft.write(tmp_path / "a.nc")
    pressure = pressure_values()
    pressure[:, :, 2:, 3:] = np.nan
    pressure[2, 1, 3, 4] = 210.0
    with netCDF4.Dataset(path, "a") as file:
        variable = file.createVariable("pressure", "f4", ("time", *CELLS), zlib=True,
                                       chunksizes=(1, 3, 2, 3))
        variable.setncatts({"units": "bar", "long_name": "absolute pressure"})
        variable[...] = np.ma.masked_invalid(pressure)
    with pytest.raises(InputError, match=r"\(k=1, j=3, i=4\), though there is one at step 2"):
        open_grid(path)


def test_errors_that_are_accepted_are_told(tmp_path):
    draft = corner_draft()
    draft.values("pressure")[1, 1, 2, 3] = 900.0
    draft.values("pressure")[2, 0, 0, 0] = -1.0
    path = draft.write(tmp_path / "a.nc")
    cells, streams = open_cells(path)
    watch = PressureWatch(cells, 0.0, streams["pressure"],
                          accept=["lithostatic", "pressure-not-positive"])
    watch.see(streams["pressure"].blocks[0], 0, streams["pressure"].read_si(0, 0, 3))
    found = watch.finish()
    assert found[0].startswith("accepted (pressure-not-positive): step 2 (2001-12-31): 1 active")
    assert found[1].startswith("accepted (lithostatic): step 1 (2000-12-31)")
    # back from 900 to 209.8 bar: more than up from 210, or down to -1 in the other cell
    assert found[2].startswith("step 2 (2001-12-31): pressure changes by 690.2 bar in one step in "
                               "(k=1, j=2, i=3)")


def test_a_copy_does_not_speak(grid):
    cells, pressure = grid
    watch = pickle.loads(pickle.dumps(PressureWatch(cells, 0.0, HeldStream(pressure))))
    with pytest.raises(ValueError, match="only the watch that was made first"):
        watch.finish()
