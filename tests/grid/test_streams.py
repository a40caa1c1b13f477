"""Streams: every storage gives the values that netCDF4 itself gives, in any blocks and dates."""

from __future__ import annotations

import importlib.util
import pickle
import sys
import zlib
from concurrent.futures import ThreadPoolExecutor

import netCDF4
import numpy as np
import pytest
from grid_drafts import CELLS, as_table, box_draft
from hypothesis import given, settings
from hypothesis import strategies as st

from subside.errors import InputError
from subside.grid import HeldStream, chunks, open_cells, open_grid, selection
from subside.grid.chunks import ChunkStore
from subside.grid.library import LibraryStore

SHAPE = (7, 5, 6, 9)  # dates, k, j, i: no chunk below divides them
FILTERS = {
    "plain": {}, "deflated": {"zlib": True, "complevel": 1, "shuffle": False},
    "shuffled": {"zlib": True, "complevel": 1, "shuffle": True},
    "checksum": {"zlib": True, "fletcher32": True}, "zstd": {"compression": "zstd"},
}
CHUNKS = [(1, 5, 6, 9), (3, 2, 4, 5), (7, 1, 1, 4), (2, 5, 6, 2), (4, 4, 6, 9), None]


def pressures(shape=SHAPE, seed=0):
    """Near hydrostatic for the boxes below; some cells have none on any date."""
    rng = np.random.default_rng(seed)
    values = 210.0 + rng.random(shape)
    values[:, rng.random(shape[1:]) < 0.3] = np.nan
    return values


def write(path, values, kind="f4", chunks=None, filters="plain", fill=None, attributes=None,
          unlimited=False, skip=(), form="NETCDF4", table=False):
    """A grid of boxes with this pressure; NaN is written as the fill value."""
    steps, nk, nj, ni = values.shape
    dims = ("time", "cell") if table else ("time", *CELLS)
    with netCDF4.Dataset(path, "w", format=form) as file:
        for name, size in zip(("time", *CELLS), values.shape, strict=True):
            file.createDimension(name, None if unlimited and name == "time" else size)
        file.createDimension("cell", nk * nj * ni)
        time = file.createVariable("time", "f8", ("time",))
        time.units = "days since 2000-01-01"
        time[:] = np.arange(steps) * 30.0
        k, j, i = np.indices((nk, nj, ni))
        box = {"x": 5e5 + 100.0 * i, "y": 5.8e6 + 100.0 * j, "top": 2000.0 + 20 * k,
               "bottom": 2020.0 + 20 * k, "dx": np.full(k.shape, 100.0),
               "dy": np.full(k.shape, 100.0)}
        for name, numbers in box.items():
            variable = file.createVariable(name, "f8", dims[1:])
            variable.setncatts({"units": "m", "positive": "down", "vertical_datum": "sea"})
            variable[...] = numbers.reshape(-1) if table else numbers
        options = {} if form != "NETCDF4" else {**FILTERS[filters], "chunksizes": chunks}
        pressure = file.createVariable("pressure", kind[-2:], dims, fill_value=fill,
                                       endian="big" if kind[0] == ">" else "native", **options)
        pressure.setncatts({"units": "bar", "long_name": "absolute pressure"})
        attributes = attributes or {}
        late = {n: v for n, v in attributes.items() if np.size(v) > 1}  # netCDF4 cannot write these
        pressure.setncatts({n: v for n, v in attributes.items() if n not in late})
        for n in range(steps):
            if n not in skip:
                step = values[n].reshape(-1) if table else values[n]
                pressure[n] = np.ma.masked_invalid(step)
        pressure.setncatts(late)
    return path


def truth(path):
    """(dates, cells that have a value at the first) as netCDF4 reads them."""
    with netCDF4.Dataset(path) as file:
        raw = np.ma.filled(np.ma.asarray(file["pressure"][...], dtype=float), np.nan)
    raw = raw.reshape(len(raw), -1)
    return raw[:, np.isfinite(raw[0])]


def check(path, stored=None):
    """Every block, in legs of several lengths, against netCDF4; returns the stream."""
    _, streams = open_cells(path)
    stream = streams["pressure"]
    if stored is not None:
        assert isinstance(stream.store, stored)
    wanted = truth(path)
    assert np.concatenate(stream.blocks).size == stream.cells == wanted.shape[1]
    for length in (1, 3, stream.steps):
        found = np.full(wanted.shape, -1.0)
        for n, cells in enumerate(stream.blocks):
            assert (np.diff(cells) > 0).all()
            for first in range(0, stream.steps, length):
                last = min(first + length, stream.steps)
                values = stream.read(n, first, last, threads=2)
                assert stream.bytes_per_date(n) == values[0].nbytes
                found[first:last, cells] = values
        assert np.array_equal(found, wanted, equal_nan=True)
    assert np.array_equal(stream.at_start, wanted[0])
    return stream


@pytest.fixture(autouse=True)
def small_blocks(monkeypatch):
    """Several blocks even in small grids."""
    real = selection.make_blocks
    monkeypatch.setattr("subside.grid.netcdf.make_blocks", lambda s, c: real(s, c, enough=20))


@pytest.mark.parametrize("kind", ["f4", "f8", ">f4", ">f8"])
@pytest.mark.parametrize("filters", ["plain", "deflated", "shuffled"])
@pytest.mark.parametrize("chunks", CHUNKS)
def test_storages_that_are_read_by_chunks(tmp_path, chunks, filters, kind):
    stream = check(write(tmp_path / "a.nc", pressures(), kind, chunks, filters), ChunkStore)
    assert stream.read(0, 0, 1).dtype == np.dtype(kind).newbyteorder("=")
    if chunks is not None or filters == "plain":
        assert stream.time_chunk == (1 if chunks is None else chunks[0])


@pytest.mark.parametrize("filters", ["checksum", "zstd"])
def test_storages_that_only_the_library_reads(tmp_path, filters):
    check(write(tmp_path / "a.nc", pressures(), "f4", (3, 2, 4, 5), filters), LibraryStore)


@pytest.mark.parametrize("form", ["NETCDF3_CLASSIC", "NETCDF3_64BIT_OFFSET"])
@pytest.mark.parametrize("unlimited", [False, True])
@pytest.mark.parametrize("table", [False, True])
def test_classic_files(tmp_path, form, unlimited, table):
    path = write(tmp_path / "a.nc", pressures(), form=form, unlimited=unlimited, table=table)
    check(path, LibraryStore)


@pytest.mark.parametrize("chunks", [(1, 270), (3, 50), (7, 32), None])
@pytest.mark.parametrize("filters", ["plain", "shuffled"])
def test_cell_tables(tmp_path, chunks, filters):
    check(write(tmp_path / "a.nc", pressures(), "f4", chunks, filters, table=True), ChunkStore)


def test_unlimited_time(tmp_path):
    check(write(tmp_path / "a.nc", pressures(), "f4", None, "shuffled", unlimited=True), ChunkStore)


@pytest.mark.parametrize(("kind", "fill", "attributes", "stored"), [
    ("f4", 1e20, {}, ChunkStore), ("f8", -999.0, {}, ChunkStore), ("f4", np.nan, {}, ChunkStore),
    ("f4", 0.0, {}, ChunkStore), ("f8", None, {}, ChunkStore),
    ("f4", None, {"missing_value": np.float32(-1.0)}, ChunkStore),
    ("f8", 1e30, {"missing_value": np.array([-1.0, 211.0])}, ChunkStore),
    ("f4", None, {"missing_value": np.float64(1e-3)}, LibraryStore),  # no float32
    ("f4", None, {"valid_range": np.array([0, 210.9], "f4")}, LibraryStore),
    ("f4", None, {"valid_max": np.float32(210.9)}, LibraryStore),
    ("i4", None, {}, LibraryStore),
    ("i2", -9, {"scale_factor": 0.01, "add_offset": 200.0}, LibraryStore),
])
@pytest.mark.parametrize("chunks", [(3, 2, 4, 5), None])
def test_missing_values(tmp_path, kind, fill, attributes, stored, chunks):
    values = pressures()
    values[3] = np.where(np.isfinite(values[0]), values[3], np.nan)
    values[4, 2, 3] = 211.0 if "missing_value" in attributes else values[4, 2, 3]
    filters = "plain" if chunks is None else "shuffled"
    path = write(tmp_path / "a.nc", values, kind, chunks, filters, fill, attributes)
    check(path, stored)


@pytest.mark.parametrize("zero", [0.0, -0.0])
def test_either_zero_is_the_fill_value(tmp_path, zero):
    path = write(tmp_path / "a.nc", pressures(), "f8", (2, 5, 6, 9), "shuffled", 0.0)
    with netCDF4.Dataset(path, "a") as file:
        file["pressure"].set_auto_mask(False)
        file["pressure"][3, 1, 2, 3] = zero
    assert np.isnan(truth(path)).sum() <= 1
    check(path, ChunkStore)


@pytest.mark.parametrize("fill", [None, 5.0])
@pytest.mark.parametrize("filters", ["plain", "shuffled"])
def test_dates_that_were_never_written(tmp_path, filters, fill):
    path = write(tmp_path / "a.nc", pressures(), "f4", (2, 2, 4, 5), filters, fill, skip=(2, 3, 5))
    check(path, ChunkStore)


@pytest.mark.parametrize("filters", ["plain", "shuffled"])
def test_dates_never_written_where_nothing_fills_them_are_missing(tmp_path, filters):
    # netCDF4 gives what happens to stand in memory
    path = write(tmp_path / "a.nc", pressures(), "f4", (2, 5, 6, 9), filters, False, skip=(2, 3))
    stream = open_cells(path)[1]["pressure"]
    assert np.isnan(stream.read(0, 2, 4)).all()
    assert np.isfinite(stream.read(0, 4, 7)).all()


def test_a_fill_value_out_of_range_is_a_pressure_where_the_attribute_is_gone(tmp_path):
    # without _FillValue netCDF4 masks the default fill value only
    path = write(tmp_path / "a.nc", pressures(), "f4", (2, 2, 4, 5), "shuffled", 777.0, skip=(2, 3))
    with netCDF4.Dataset(path, "a") as file:
        file["pressure"].delncattr("_FillValue")
    check(path, ChunkStore)


@settings(max_examples=40, deadline=None)
@given(st.data())
def test_any_chunks_and_legs(tmp_path_factory, data):
    shape = data.draw(st.tuples(*(st.integers(1, n) for n in (6, 5, 7, 8))))
    chunks = data.draw(st.tuples(*(st.integers(1, n) for n in shape)))
    kind = data.draw(st.sampled_from(["f4", "f8", ">f4"]))
    filters = data.draw(st.sampled_from(["plain", "deflated", "shuffled"]))
    values = pressures(shape, data.draw(st.integers(0, 99)))
    values[:, 0, 0, 0] = 210.0  # at least one
    path = write(tmp_path_factory.mktemp("any") / "a.nc", values, kind, chunks, filters)
    stream = check(path, ChunkStore)
    first = data.draw(st.integers(0, shape[0] - 1))
    last = data.draw(st.integers(first + 1, shape[0]))
    found = np.concatenate([stream.read(n, first, last) for n in range(len(stream.blocks))], axis=1)
    wanted = truth(path)[first:last, np.concatenate(stream.blocks)]
    assert np.array_equal(found, wanted)


def test_blocks_hold_whole_pillars_and_follow_the_chunks(tmp_path):
    path = write(tmp_path / "a.nc", pressures(), "f4", (3, 2, 3, 3), "shuffled")
    cells, streams = open_cells(path)
    of = np.empty(cells.sizes["cell"], int)
    for n, numbers in enumerate(streams["pressure"].blocks):
        assert len(numbers) >= 20
        of[numbers] = n
    assert len(streams["pressure"].blocks) > 2
    j, i = cells["j"].values, cells["i"].values
    for chunk in set(zip(j // 3, i // 3, strict=True)):
        assert len(set(of[(j // 3 == chunk[0]) & (i // 3 == chunk[1])])) == 1


@pytest.fixture
def inflated(monkeypatch):
    """Byte places of the chunks that were inflated, in their order."""
    places = []
    real = ChunkStore._inflated
    monkeypatch.setattr(ChunkStore, "_inflated",
                        lambda self, p, n: places.append(p) or real(self, p, n))
    return places


def read_all(stream, step):
    """All of a stream, block by block, some dates at a time."""
    for n in range(len(stream.blocks)):
        for first in range(0, stream.steps, step):
            stream.read(n, first, min(first + step, stream.steps))


def test_each_chunk_is_inflated_once_however_many_dates_it_holds(tmp_path, inflated):
    """The first dates too, though they are read to find the active cells."""
    path = write(tmp_path / "a.nc", pressures(), "f4", (3, 2, 3, 3), "shuffled")
    stream = open_cells(path)[1]["pressure"]
    read_all(stream, stream.time_chunk)
    of_pressure = [p for p in inflated if p in stream.store.place]
    assert len(of_pressure) == len(set(of_pressure)) == 3 * 3 * 2 * 3
    assert not stream.store._held  # what was kept is used up
    read_all(stream, stream.time_chunk)
    assert len(of_pressure) * 2 == len([p for p in inflated if p in stream.store.place])


@pytest.mark.parametrize(("chunks", "filters", "most"), [
    ((1, 2, 3, 3), "shuffled", 1e9), ((3, 2, 3, 3), "plain", 1e9),
    # whole chunks: 3 dates x 6 x 6 x 9 cells of 4 bytes
    ((3, 2, 3, 3), "shuffled", 3 * 6 * 6 * 9 * 4 - 1)])
def test_nothing_is_kept_where_it_gains_nothing_or_is_too_large(tmp_path, monkeypatch, chunks,
                                                                filters, most):
    monkeypatch.setattr("subside.grid.storage._HELD", most)
    path = write(tmp_path / "a.nc", pressures(), "f4", chunks, filters)
    assert not open_cells(path)[1]["pressure"].store._held


def test_nothing_is_kept_of_cells_that_are_not_active_nor_in_a_copy(tmp_path):
    values = pressures()
    path = write(tmp_path / "a.nc", values, "f4", (3, 2, 3, 3), "shuffled")
    with netCDF4.Dataset(path, "a") as file:
        active = file.createVariable("active", "i1", CELLS)
        active[...] = 0
        active[:, :3, 3:] = 1
    store = open_cells(path)[1]["pressure"].store
    # three chunks along k, one of two along j, two of three along i
    assert len(store._held) == 3 * 1 * 2
    assert not pickle.loads(pickle.dumps(store))._held


@pytest.mark.parametrize("filters", ["shuffled", "zstd"])
def test_threads_and_pickles_read_the_same(tmp_path, filters):
    path = write(tmp_path / "a.nc", pressures(), "f4", (2, 2, 3, 4), filters)
    stream = open_cells(path)[1]["pressure"]
    copy = pickle.loads(pickle.dumps(stream))
    tasks = [(n, a) for n in range(len(stream.blocks)) for a in range(stream.steps)] * 5
    with ThreadPoolExecutor(4) as pool:
        found = list(pool.map(lambda t: copy.read(t[0], t[1], t[1] + 1, 2), tasks))
    for (n, a), values in zip(tasks, found, strict=True):
        assert np.array_equal(values, stream.read(n, a, a + 1))
    assert stream.to_si == copy.to_si == (1e5, 0.0)


@pytest.mark.parametrize("filters", ["shuffled", "zstd"])
def test_a_file_that_changed_is_refused(tmp_path, filters):
    path = write(tmp_path / "a.nc", pressures(), "f4", (2, 2, 3, 4), filters)
    copy = pickle.loads(pickle.dumps(open_cells(path)[1]["pressure"]))
    path.unlink()
    write(path, pressures(seed=1), "f8", (2, 2, 3, 4), filters)
    with pytest.raises(InputError, match=r"a\.nc: the file has changed since it was opened"):
        copy.read(0, 0, 1)
    path.unlink()
    with pytest.raises(InputError, match="cannot be opened"):
        copy.read(0, 0, 1)


@pytest.mark.parametrize("at", [0.3, 0.6, 0.9])
def test_a_damaged_chunk_is_an_error_that_names_the_file(tmp_path, at):
    path = write(tmp_path / "a.nc", pressures(), "f4", (2, 5, 6, 9), "shuffled")
    store = open_cells(path)[1]["pressure"].store
    place, size = int(store.place[1, 0, 0, 0, 0]), int(store.size[1, 0, 0, 0, 0])
    content = bytearray(path.read_bytes())
    content[place + int(size * at):place + int(size * at) + 8] = b"\xff" * 8
    path.write_bytes(content)
    with pytest.raises(InputError, match=r"a\.nc: .*truncated or damaged"):
        open_grid(path)


def test_without_h5py(tmp_path, monkeypatch):
    path = write(tmp_path / "a.nc", pressures(), "f4", (2, 2, 3, 4), "shuffled")
    monkeypatch.setitem(sys.modules, "h5py", None)
    check(path, LibraryStore)


def test_without_isal(tmp_path, monkeypatch):
    path = write(tmp_path / "a.nc", pressures(), "f4", (2, 2, 3, 4), "shuffled")
    monkeypatch.setitem(sys.modules, "isal", None)
    spec = importlib.util.spec_from_file_location("chunks_again", chunks.__file__)
    again = importlib.util.module_from_spec(spec)
    monkeypatch.setitem(sys.modules, "chunks_again", again)
    spec.loader.exec_module(again)
    assert again._zlib is zlib
    monkeypatch.setattr(chunks, "_zlib", again._zlib)
    check(path, ChunkStore)


def test_other_variables_in_time_come_in_the_same_blocks(tmp_path):
    path = write(tmp_path / "a.nc", pressures(), "f4", (2, 2, 3, 4), "shuffled")
    warm = 80.0 + np.arange(np.prod(SHAPE)).reshape(SHAPE) / 1e4
    with netCDF4.Dataset(path, "a") as file:
        variable = file.createVariable("temperature", "f8", ("time", *CELLS), zlib=True,
                                       chunksizes=(7, 5, 2, 2))
        variable.units = "degC"
        variable[...] = warm
    cells, streams = open_cells(path)
    assert set(streams) == {"pressure", "temperature"}
    assert not {"pressure", "temperature"} & set(cells.data_vars)
    flat = np.ravel_multi_index([cells[n].values for n in "kji"], SHAPE[1:])
    for n, numbers in enumerate(streams["temperature"].blocks):
        assert np.array_equal(numbers, streams["pressure"].blocks[n])
        # 0 degC = 273.15 K
        assert streams["temperature"].read_si(n, 2, 5) == pytest.approx(
            warm.reshape(7, -1)[2:5, flat[numbers]] + 273.15)
    whole = open_grid(path)
    assert whole["temperature"].dims == ("time", "cell")
    assert whole["temperature"].attrs["units"] == "K"
    assert "temperature" not in open_cells(path, fields=[])[1]


def test_a_variable_in_memory():
    values = np.arange(3 * 120_000.0).reshape(3, -1)
    stream = HeldStream(values)
    assert (stream.steps, stream.cells, len(stream.blocks)) == (3, 120_000, 3)
    for n, cells in enumerate(stream.blocks):
        assert np.array_equal(stream.read(n, 1, 3), values[1:3, cells])
    assert np.array_equal(stream.at_start, values[0])


def test_readers_of_other_kinds_give_streams_in_memory(tmp_path, monkeypatch):
    from subside.grid.netcdf import NetcdfGrid

    path = as_table(box_draft()).write(tmp_path / "a.nc")
    wanted = open_grid(path)
    monkeypatch.delattr(NetcdfGrid, "open")
    monkeypatch.setattr(NetcdfGrid, "read", lambda self, p, o: wanted.copy())
    cells, streams = open_cells(path)
    assert isinstance(streams["pressure"], HeldStream)
    assert "pressure" not in cells
    assert open_grid(path).identical(wanted)


def test_dates_out_of_range(tmp_path):
    stream = open_cells(write(tmp_path / "a.nc", pressures()))[1]["pressure"]
    for first, last in ((-1, 2), (3, 3), (0, 8)):
        with pytest.raises(ValueError, match="dates"):
            stream.read(0, first, last)
