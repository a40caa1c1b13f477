"""A grid whose dates are spread over several files is the grid in one file."""

from __future__ import annotations

import gc
import os
import pickle
import random
from concurrent.futures import ThreadPoolExecutor
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest
from grid_drafts import (
    CELLS,
    NI,
    NJ,
    NK,
    Draft,
    as_table,
    box_draft,
    corner_draft,
    corner_values,
    with_crs,
)
from hypothesis import given, settings
from hypothesis import strategies as st

from subside.errors import InputError
from subside.grid import PressureWatch, chunks, disk, open_cells, open_grid, selection
from subside.grid.joined import JoinedStream

STEPS = 6
GEOMETRY = ("corners", "x", "y", "top", "bottom", "dx", "dy")


@pytest.fixture(autouse=True)
def small_blocks(monkeypatch):
    """Several blocks even in small grids."""
    real = selection.make_blocks
    monkeypatch.setattr("subside.grid.netcdf.make_blocks", lambda s, c: real(s, c, enough=20))


def history(steps=STEPS, seed=0):
    """A structured grid of boxes, each date 2 to 3 bar below the one before, some cells without."""
    rng = np.random.default_rng(seed)
    draft = box_draft()
    draft.add("time", ("time",), 365.0 * np.arange(steps), units="days since 2000-01-01")
    pressure = 210.0 - np.cumsum(2.0 + rng.random((steps, NK, NJ, NI)), axis=0)
    pressure[:, 0, 0, 1] = pressure[:, 2, 3, :2] = np.nan
    draft.add("pressure", ("time", *CELLS), pressure, units="bar", long_name="absolute")
    draft.add("temperature", ("time", *CELLS), 80.0 + rng.random((steps, NK, NJ, NI)),
              units="degC")
    draft.add("porosity", CELLS, rng.random((NK, NJ, NI)), units="1")
    return draft


def dates(draft, first, last, geometry=True):
    """The same grid with dates `first` to ``last - 1`` only."""
    part = Draft()
    for name, (dims, values, attributes) in draft.variables.items():
        own = values[first:last] if dims[:1] == ("time",) else values
        part.variables[name] = [dims, own.copy(), dict(attributes)]
    if not geometry:
        for name in (*GEOMETRY, "porosity"):
            part.variables.pop(name, None)
    return part


def pieces(draft, ranges, geometry=True):
    """Drafts of ranges of dates; the first has the geometry in any case."""
    return [dates(draft, a, b, geometry or n == 0) for n, (a, b) in enumerate(ranges)]


def write(drafts, folder, names="abcdefghi"):
    """A file of each."""
    return [d.write(folder / f"{n}.nc") for d, n in zip(drafts, names, strict=False)]


def same(found, wanted):
    """Equal in everything but the file they say they come from."""
    found, wanted = found.copy(), wanted.copy()
    for one in (found, wanted):
        del one.attrs["source_file"]
    assert found.identical(wanted)


ONE_EACH = [(n, n + 1) for n in range(STEPS)]
REPEATED = [(0, 3), (2, 5), (4, 6)]


@pytest.mark.parametrize("ranges", [ONE_EACH, REPEATED, [(0, 2), (2, 6)], [(0, 1), (0, 6)],
                                    [(0, 4), (3, 4), (4, 6)]])
@pytest.mark.parametrize("geometry", [False, True])
@pytest.mark.parametrize("table", [False, True])
def test_files_in_any_order_are_the_single_file(tmp_path, ranges, geometry, table):
    draft = as_table(history()) if table else history()
    paths = write(pieces(draft, ranges, geometry), tmp_path, "fbdace")
    whole = open_grid(draft.write(tmp_path / "whole.nc"))
    random.Random(1).shuffle(paths)
    same(open_grid(paths), whole)
    same(open_grid([str(p) for p in paths[::-1]]), whole)


def test_corners(tmp_path):
    draft = with_crs(corner_draft(), "EPSG:32631")
    whole = open_grid(draft.write(tmp_path / "whole.nc"))
    same(open_grid(write(pieces(draft, [(0, 1), (1, 3)]), tmp_path)), whole)


def test_one_file_in_a_list(tmp_path):
    path = history().write(tmp_path / "a.nc")
    assert open_grid([path]).identical(open_grid(path))


@settings(max_examples=25, deadline=None)
@given(data=st.data())
def test_any_cuts(tmp_path_factory, data):
    folder = tmp_path_factory.mktemp("cuts")
    draft = history(8, data.draw(st.integers(0, 9)))
    cuts = [0, *sorted(data.draw(st.sets(st.integers(1, 7)))), 8]
    repeats = [data.draw(st.booleans()) for _ in cuts[1:-1]]
    ranges = [(a - (n > 0 and repeats[n - 1]), b)
              for n, (a, b) in enumerate(pairwise(cuts))]
    names = data.draw(st.permutations("abcdefgh"))
    paths = write(pieces(draft, ranges, data.draw(st.booleans())), folder, names)
    cells, streams = open_cells(paths)
    wanted, single = open_cells(draft.write(folder / "whole.nc"))
    assert (cells["time"].values == wanted["time"].values).all()
    first = data.draw(st.integers(0, 7))
    last = data.draw(st.integers(first + 1, 8))
    for name, stream in streams.items():
        assert stream.steps == 8
        for n, numbers in enumerate(stream.blocks):
            assert np.array_equal(numbers, single[name].blocks[n])
            values = stream.read(n, first, last, data.draw(st.integers(1, 3)))
            assert values.nbytes == (last - first) * stream.bytes_per_date(n)
            assert np.array_equal(values, single[name].read(n, first, last), equal_nan=True)
        assert np.array_equal(stream.at_start, single[name].at_start)


@pytest.mark.parametrize(("ranges", "chunk"), [
    (ONE_EACH, 1), ([(0, 3), (3, 6)], 3), ([(0, 2), (1, 4), (3, 6)], 2), (REPEATED, 3),
    ([(0, 1), (1, 2), (2, 6)], 1)])
def test_dates_unpacked_together(tmp_path, ranges, chunk):
    """A chunk of all dates of a file, those left out not counted; the most frequent number, of
    equally frequent ones the largest."""
    import netCDF4

    paths = write(pieces(history(), ranges), tmp_path)
    for path in paths:
        with netCDF4.Dataset(path) as old, netCDF4.Dataset(f"{path}.new", "w") as new:
            for name, dim in old.dimensions.items():
                new.createDimension(name, len(dim))
            for name, variable in old.variables.items():
                options = {"chunksizes": variable.shape, "zlib": True} if variable.ndim == 4 else {}
                copy = new.createVariable(name, variable.dtype, variable.dimensions, **options)
                copy.setncatts(variable.__dict__)
                copy[...] = variable[...]
        os.replace(f"{path}.new", path)
    assert open_cells(paths)[1]["pressure"].time_chunk == chunk


def test_units_may_differ(tmp_path):
    """1 MPa = 10 bar; K = degC + 273.15."""
    draft = history()
    whole = open_grid(draft.write(tmp_path / "whole.nc"))
    parts = pieces(draft, REPEATED)
    parts[1].values("pressure")[...] /= 10.0
    parts[1].attrs("pressure")["units"] = "MPa"
    parts[2].values("temperature")[...] += 273.15
    parts[2].attrs("temperature")["units"] = "K"
    paths = write(parts, tmp_path)
    found = open_grid(paths)
    for name in ("pressure", "temperature"):
        np.testing.assert_allclose(found[name], whole[name], rtol=1e-14)
    stream = open_cells(paths)[1]["pressure"]
    assert stream.to_si == (1.0, 0.0)
    assert stream.bytes_per_date(0) == stream.read(0, 0, 1).nbytes
    np.testing.assert_allclose(stream.start_si()[stream.blocks[0]], stream.read(0, 0, 1)[0])


def test_single_and_double_precision(tmp_path):
    parts = pieces(history(), [(0, 2), (2, 6)])
    parts[0].variables["pressure"][1] = parts[0].values("pressure").astype("f4")
    stream = open_cells(write(parts, tmp_path))[1]["pressure"]
    for first, last in ((0, 1), (1, 3), (3, 4)):
        assert stream.read(0, first, last).dtype == np.float64
    assert stream.at_start.dtype == np.float64


def test_pickled_streams_and_watches_read_the_same_and_find_the_same(tmp_path):
    draft = history()
    draft.values("pressure")[4, 0, 0, 1] = 190.0  # a cell that has no pressure at first
    paths = write(pieces(draft, REPEATED), tmp_path)
    cells, streams = open_cells(paths)
    stream = streams["pressure"]
    watch = PressureWatch(cells, 0.0, stream)
    copy, other = pickle.loads(pickle.dumps((stream, watch)))
    assert isinstance(copy, JoinedStream)
    assert copy.files == stream.files == tuple(paths)
    for n, numbers in enumerate(copy.blocks):
        values = copy.read_si(n, 0, STEPS)
        assert np.array_equal(values, stream.read_si(n, 0, STEPS))
        other.see(numbers, 0, values)
    stream.strays.found.clear()
    watch.merge(other)
    # date 4 is the last of the second file, its third
    with pytest.raises(InputError, match=r"b\.nc: step 0 of a\.nc \(2000-01-01\): 1 active cell "
                                         r"has no pressure, first \(k=0, j=0, i=1\), though there "
                                         r"is one at step 2 \(2003-12-31\)"):
        watch.finish()


@pytest.mark.parametrize(("change", "text"), [
    (lambda p: p.__setitem__((3, 1, 2, 3), np.nan),
     r"b\.nc: step 1 \(2002-12-31\): 1 active cell has no pressure, first \(k=1, j=2, i=3\), "
     r"though there is one at step 0 of a\.nc; mark"),
    (lambda p: p.__setitem__((5, 1, 2, 3), -1.0),
     r"c\.nc: step 1 \(2004-12-30\): 1 active cell has a pressure <= 0, .* -1 bar"),
    (lambda p: p.__setitem__((1, 1, 2, 3), 900.0),
     r"a\.nc: step 1 \(2000-12-31\): 1 active cell has a pressure above lithostatic"),
])
def test_what_is_wrong_names_the_file_it_is_in(tmp_path, change, text):
    draft = history()
    change(draft.values("pressure"))
    with pytest.raises(InputError, match=text):
        open_grid(write(pieces(draft, REPEATED), tmp_path))


def test_a_wrong_value_is_told_in_the_unit_of_its_own_file(tmp_path):
    parts = pieces(history(), [(0, 3), (3, 6)])
    parts[1].values("pressure")[...] /= 10.0
    parts[1].values("pressure")[0, 1, 2, 3] = -2.5
    parts[1].attrs("pressure")["units"] = "MPa"
    with pytest.raises(InputError, match=r"b\.nc: .*-25 bar \(-2.5 MPa in the file\)"):
        open_grid(write(parts, tmp_path))


def test_warnings_name_the_file(tmp_path):
    draft = history()
    draft.values("pressure")[3] = draft.values("pressure")[2]
    draft.values("pressure")[5, 0, 0, 0] -= 120.0
    parts = pieces(draft, [(0, 3), (3, 4), (4, 6)])
    for part in parts[1:]:
        part.attrs("pressure").pop("long_name")
    told = open_grid(write(parts, tmp_path)).attrs["warnings"]
    assert any(t.startswith("b.nc (and 1 more file): variable 'pressure' does not say gauge")
               for t in told)
    assert any(t.startswith("c.nc: step 1 (2004-12-30): pressure changes by ") for t in told)
    assert "b.nc: step 0 (2002-12-31) is identical to step 2 of a.nc." in told
    assert len([t for t in told if "gauge" in t]) == 1


# -- files that do not continue each other ---------------------------------------------------------


def refused(paths, *parts, **options):
    """Opening them is refused with all of these words."""
    with pytest.raises(InputError) as error:
        open_cells(paths, **options)
    for part in parts:
        assert part in str(error.value), error.value


def test_dates_that_overlap(tmp_path):
    a, b = write(pieces(history(), [(0, 4), (2, 6)]), tmp_path)
    refused([b, a], f"{b}: it begins on 2001-12-31, but '{a}' runs from 2000-01-01 to 2002-12-31")


def test_a_file_within_another(tmp_path):
    a, b = write(pieces(history(), [(0, 6), (2, 3)]), tmp_path)
    refused([a, b], f"{b}: it begins on 2001-12-31, but '{a}' runs")


@pytest.mark.parametrize(("times", "text"), [
    ([0, 730, 365], "goes backwards at step 2 (2000-12-31"),
    ([0, 365, 365], "step 2 (2000-12-31) repeats step 1")])
def test_dates_within_a_file(tmp_path, times, text):
    parts = pieces(history(), [(0, 3), (3, 6)])
    parts[0].values("time")[:] = times
    paths = write(parts, tmp_path)
    refused(paths[::-1], f"{paths[0]}: ", text)


def test_a_repeated_date_with_other_pressures(tmp_path):
    parts = pieces(history(), REPEATED)
    parts[1].values("pressure")[0, 1, 2, 3] += 3.2
    parts[1].values("pressure")[0, 1, 2, 2] -= 1.0
    before = parts[0].values("pressure")[2, 1, 2, 3]
    a, b, _ = paths = write(parts, tmp_path)
    refused(paths, f"{b}: its first date, 2001-12-31, is the last of '{a}', but 'pressure' differs",
            "in 2 active cells, most in (k=1, j=2, i=3) by 3.2 bar", f"{before:.6g} bar there and "
            f"{before + 3.2:.6g} bar here")


def test_a_repeated_date_with_a_gap(tmp_path):
    parts = pieces(history(), REPEATED)
    parts[2].values("pressure")[0, 1, 2, 3] = np.nan
    _, b, c = paths = write(parts, tmp_path)
    refused(paths, f"{c}: its first date", f"'{b}'", "(k=1, j=2, i=3) where one of them has none",
            "no value here")


def test_a_repeated_date_with_another_temperature(tmp_path):
    parts = pieces(history(), REPEATED)
    parts[1].values("temperature")[0, 1, 2, 3] += 2.0
    refused(write(parts, tmp_path), "b.nc: its first date", "'temperature' differs", "by 2 K")


@pytest.mark.parametrize(("size", "good"), [(0.9e-6, True), (1.1e-6, False)])
def test_a_repeated_date_may_differ_by_one_in_a_million(tmp_path, size, good):
    parts = pieces(history(), REPEATED)
    parts[1].values("pressure")[0] *= 1 + size
    paths = write(parts, tmp_path)
    if good:
        # the earlier file's is kept
        wanted = parts[0].values("pressure")[2]
        found = open_grid(paths)["pressure"][2].values
        assert np.array_equal(found, 1e5 * wanted[np.isfinite(wanted)])
    else:
        refused(paths, "its first date")


def test_another_number_of_cells(tmp_path):
    parts = pieces(history(), [(0, 3), (3, 6)], geometry=False)
    for name in ("pressure", "temperature"):
        parts[1].variables[name][1] = parts[1].values(name)[..., :-1]
    a, b = paths = write(parts, tmp_path)
    refused(paths, f"{b}: variable 'pressure' has cells (k=3, j=4, i=4), but in '{a}' "
                   "(k=3, j=4, i=5)")


def test_a_cell_table_does_not_continue_a_structured_grid(tmp_path):
    one, other = pieces(history(), [(0, 3), (3, 6)])
    refused(write([one, as_table(other)], tmp_path),
            "b.nc: variable 'pressure' has cells (cell=60)")


@pytest.mark.parametrize(("name", "text"), [
    ("x", "x of the cell"), ("top", "top of the cell"), ("dx", "dx of the cell")])
def test_another_geometry(tmp_path, name, text):
    parts = pieces(history(), [(0, 3), (3, 6)])
    parts[1].values(name)[...] += 0.02
    a, b = paths = write(parts, tmp_path)
    refused(paths, f"{b}: {text} (k=", f" m in '{a}'")
    parts[1].values(name)[...] -= 0.015  # half a centimetre is no other place
    open_cells(write(parts, tmp_path))


def test_other_corners(tmp_path):
    parts = pieces(corner_draft(), [(0, 1), (1, 3)])
    parts[1].values("corners")[..., 5, 2] += 1.0
    refused(write(parts, tmp_path),
            "b.nc: depth of corner 5 of the cell (k=0, j=0, i=0) is 2021 m, but 2020 m in")


def test_corners_do_not_continue_boxes(tmp_path):
    parts = [dates(box_draft(), 0, 2), dates(corner_draft(), 2, 3)]
    refused(write(parts, tmp_path), "b.nc: it describes cells by corners, but", "by boxes")


def test_the_same_geometry_in_other_units_and_upside_down(tmp_path):
    parts = pieces(history(), [(0, 3), (3, 6)])
    for name in ("top", "bottom"):
        parts[1].values(name)[...] *= -100.0
        parts[1].attrs(name).update(units="cm", positive="up")
    open_cells(write(parts, tmp_path))


def test_another_coordinate_system(tmp_path):
    parts = pieces(history(), [(0, 3), (3, 6)])
    paths = write([with_crs(parts[0], "EPSG:32631"), with_crs(parts[1], "EPSG:32632")], tmp_path)
    refused(paths, "b.nc: its coordinate system is", "32632", "32631")


def test_cells_of_no_account_may_lie_anywhere(tmp_path):
    parts = pieces(history(), [(0, 3), (3, 6)])
    parts[1].values("top")[0, 0, 1] = parts[1].values("top")[2, 3, 0] = np.nan
    open_cells(write(parts, tmp_path))


def test_a_variable_in_time_that_is_missing(tmp_path):
    parts = pieces(history(), [(0, 3), (3, 6)])
    parts[1].drop("temperature")
    a, b = paths = write(parts, tmp_path)
    refused(paths, f"{b}: there is no variable 'temperature' on (time, k, j, i), but '{a}' has one")
    assert set(open_cells(paths, fields=[])[1]) == {"pressure"}


def test_a_variable_in_time_of_another_kind(tmp_path):
    parts = pieces(history(), [(0, 3), (3, 6)])
    parts[1].attrs("temperature")["units"] = "bar"
    refused(write(parts, tmp_path), "b.nc: variable 'temperature' is measured in 'Pa', but", "'K'")


def test_a_pressure_without_units(tmp_path):
    parts = pieces(history(), [(0, 3), (3, 6)])
    parts[1].drop("pressure", "units")
    refused(write(parts, tmp_path), "b.nc: variable 'pressure' has no units attribute")


def test_the_first_by_date_has_no_geometry(tmp_path):
    paths = write([dates(history(), 0, 3, False), dates(history(), 3, 6)], tmp_path)
    refused(paths[::-1], f"{paths[0]}: the file has no geometry")


def test_files_that_are_not_there_or_listed_twice(tmp_path):
    a, b = write(pieces(history(), [(0, 3), (3, 6)]), tmp_path)
    refused([a, tmp_path / "no.nc"], f"{tmp_path / 'no.nc'}: there is no such file")
    refused([a, b, tmp_path / "." / "a.nc"], "a.nc: the file is listed twice")
    (tmp_path / "link.nc").symlink_to(a)
    refused([a, tmp_path / "link.nc"], "link.nc: the file is listed twice")
    refused([], "no pressure grid is named")
    refused([a, tmp_path / "b.txt"], "no reader takes files ending in '.txt'")


def test_readers_that_take_one_file(tmp_path, monkeypatch):
    from subside.grid.netcdf import NetcdfGrid

    paths = write(pieces(history(), [(0, 3), (3, 6)]), tmp_path)
    monkeypatch.delattr(NetcdfGrid, "open_several")
    refused(paths, "b.nc: the reader of files ending in '.nc' takes one file for each grid")


def test_a_file_that_changed_is_refused(tmp_path):
    a, b = write(pieces(history(), [(0, 3), (3, 6)]), tmp_path)
    stream = open_cells([a, b])[1]["pressure"]
    dates(history(6, 1), 3, 5).write(b)
    stream.read(0, 0, 3)
    with pytest.raises(InputError, match=r"b\.nc: the file has changed"):
        stream.read(0, 2, 4)


@pytest.mark.parametrize("storage", [{"zlib": True}, {}])
def test_geometry_written_alike_is_not_unpacked_again(tmp_path, monkeypatch, storage):
    """Where it was, one byte of it that differs is found by the cells."""
    import netCDF4

    from subside.grid import same_geometry

    seen = []
    real = same_geometry.corner_values
    monkeypatch.setattr(same_geometry, "corner_values", lambda *a: seen.append(1) or real(*a))
    paths = [tmp_path / f"{n}.nc" for n in "abc"]
    for path, part in zip(paths, pieces(corner_draft(), [(0, 1), (1, 2), (2, 3)]), strict=True):
        part.drop("corners")
        part.write(path)
        with netCDF4.Dataset(path, "a") as file:
            file.createDimension("corner", 8)
            file.createDimension("xyz", 3)
            corners = file.createVariable("corners", "f8", (*CELLS, "corner", "xyz"), **storage)
            corners.setncatts({"units": "m", "positive": "down"})
            corners[...] = corner_values()
    open_cells(paths)
    assert len(seen) == 1  # of the first file
    with netCDF4.Dataset(paths[2], "a") as file:
        file["corners"][..., 7, 1] += 5.0
    refused(paths, "c.nc: y of corner 7 of the cell")


def test_a_unit_that_differs_is_not_the_same_geometry(tmp_path):
    parts = pieces(history(), [(0, 3), (3, 6)])
    for name in ("top", "bottom"):
        parts[1].attrs(name)["units"] = "ft"
    refused(write(parts, tmp_path), "b.nc: top of the cell (k=0, j=0, i=0) is 609.6 m, but 2000 m")


# -- resources -------------------------------------------------------------------------------------


def descriptors(folder):
    """How many files of the folder this process has open."""
    links = [Path("/proc/self/fd") / n for n in os.listdir("/proc/self/fd")]
    return sum(str(p.resolve()).startswith(str(folder)) for p in links)


@pytest.mark.skipif(not Path("/proc/self/fd").is_dir(), reason="no list of open files here")
def test_few_files_are_open_at_a_time(tmp_path, monkeypatch):
    monkeypatch.setattr(disk.OpenFiles.__init__, "__defaults__", (5,))
    draft = history(40)
    paths = write(pieces(draft, [(n, n + 1) for n in range(40)], False), tmp_path,
                  [f"p{n}" for n in range(40)])
    stream = open_cells(paths)[1]["pressure"]
    wanted = stream.read(0, 0, 40)
    assert 0 < descriptors(tmp_path) <= 5
    with ThreadPoolExecutor(4) as pool:
        for found in pool.map(lambda _: stream.read(0, 0, 40, 4), range(30)):
            assert np.array_equal(found, wanted)
    assert descriptors(tmp_path) <= 5
    copy = pickle.loads(pickle.dumps(stream))
    assert np.array_equal(copy.read(0, 0, 40), wanted)
    assert descriptors(tmp_path) <= 10


@pytest.mark.skipif(not Path("/proc/self/fd").is_dir(), reason="no list of open files here")
def test_files_are_closed_with_the_last_stream(tmp_path):
    streams = open_cells(write(pieces(history(), ONE_EACH), tmp_path))[1]
    streams["pressure"].read(0, 0, STEPS)
    assert descriptors(tmp_path) == STEPS
    del streams
    gc.collect()
    assert descriptors(tmp_path) == 0


def test_each_file_is_asked_for_its_chunks_once(tmp_path, monkeypatch):
    asked = []
    real = chunks._find
    monkeypatch.setattr(chunks, "_find", lambda f, n, *a: asked.append((f.path, n)) or real(
        f, n, *a))
    paths = write(pieces(history(), ONE_EACH, False), tmp_path)
    open_cells(paths)
    for path in paths[1:]:
        assert asked.count((path, "pressure")) == asked.count((path, "temperature")) == 1
