"""`ResultWriter`: the file a result would have been written to, made piece by piece."""

from __future__ import annotations

import os
import threading
import zlib
from pathlib import Path
from typing import Any

import h5py
import netCDF4
import numpy as np
import pytest
import rasterio
import xarray as xr
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from made_up_results import control_result

from subside.errors import CannotDo, InputError
from subside.export import chunks, writer
from subside.export.axes import is_map
from subside.export.netcdf import ResultWriter, read_result, write_result

WAYS = ["isal", "zlib", "without h5py"]


@pytest.fixture(params=WAYS)
def way(request: pytest.FixtureRequest, monkeypatch: pytest.MonkeyPatch) -> str:
    """Each way there is to write chunks: the faster libraries are extras."""
    if request.param == "zlib":
        monkeypatch.setattr(chunks, "_deflate", zlib.compress)
    elif request.param == "without h5py":
        monkeypatch.setattr(chunks, "h5py", None)
    else:
        assert chunks._deflate is not zlib.compress
    return request.param


def large_result() -> xr.Dataset:
    """More than one chunk each way, the last ones cut by the edge; places without value."""
    result = control_result(32631, ny=300, nx=280)
    for name in maps_of(result):
        result[name] = result[name] + 1e-3 * np.sin(result["x"] / 777.0)
        result[name].values[..., 250:270, 17] = np.nan
    return result


def maps_of(result: xr.Dataset) -> list[str]:
    return [str(name) for name, data in result.data_vars.items() if is_map(data.dims)]


def frame_of(result: xr.Dataset) -> xr.Dataset:
    """What a run knows at its start: no variable at all."""
    bare = xr.Dataset(coords={name: result[name] for name in ("time", "y", "x", "region_name")})
    return bare.assign_attrs({key: result.attrs[key] for key in ("crs_wkt", "xy_unit")})


def write_in_pieces(result: xr.Dataset, path: Path, leg: int = 2, dtype: Any = float) -> None:
    names = maps_of(result)
    with ResultWriter(path, frame_of(result), names) as file:
        for first in range(0, result.sizes["time"], leg):
            for name in names:
                file.put(name, first, result[name].values[first:first + leg].astype(dtype))
        file.finish(result.drop_vars(names))


def header(path: Path) -> dict[str, Any]:
    """Everything a reader sees of a file but values and order."""
    with netCDF4.Dataset(path) as file:
        found: dict[str, Any] = {"dims": {name: (d.size, d.isunlimited())
                                          for name, d in file.dimensions.items()}}
        found["attributes"] = {key: str(file.getncattr(key)) for key in file.ncattrs()
                               if key != "history"}
        for name, variable in file.variables.items():
            found[name] = (variable.dimensions, str(variable.dtype), variable.chunking(),
                           {key: str(variable.getncattr(key)) for key in variable.ncattrs()},
                           None if variable.dtype is str else variable.filters())
        return found


def no_threads_left() -> bool:
    return not any(thread.name.startswith("subside-write") for thread in threading.enumerate())


# -- the file ----------------------------------------------------------------------------------


@pytest.mark.parametrize("leg", [1, 2, 3])
def test_in_pieces_it_is_the_file_that_is_written_at_once(tmp_path: Path, way: str,
                                                          leg: int) -> None:
    result = large_result()
    write_result(result, tmp_path / "once.nc")
    write_in_pieces(result, tmp_path / "pieces.nc", leg)
    assert header(tmp_path / "pieces.nc") == header(tmp_path / "once.nc")
    with netCDF4.Dataset(tmp_path / "pieces.nc") as file:
        assert file["region_subsidence"].coordinates == "region_name"
        assert file["region_subsidence"].grid_mapping == "crs"
    once, pieces = read_result(tmp_path / "once.nc"), read_result(tmp_path / "pieces.nc")
    xr.testing.assert_identical(pieces.drop_attrs(), once.drop_attrs())
    assert sorted(os.listdir(tmp_path)) == ["once.nc", "pieces.nc"] and no_threads_left()


@pytest.mark.parametrize("dtype", [np.float32, np.float64])
def test_the_values_are_those_of_float32_for_every_reader(tmp_path: Path, way: str,
                                                          dtype: Any) -> None:
    result = large_result()
    path = tmp_path / "a.nc"
    write_in_pieces(result, path, dtype=dtype)
    with netCDF4.Dataset(path) as file, h5py.File(path) as bare, xr.open_dataset(path) as decoded:
        file.set_auto_maskandscale(False)
        for name in maps_of(result):
            expected = result[name].values.astype(np.float32)  # IEEE 754 rounding, by numpy
            np.testing.assert_array_equal(decoded[name].values, expected)
            raw = np.where(np.isnan(expected), np.float32(-9999.0), expected)
            np.testing.assert_array_equal(file[name][...], raw)
            np.testing.assert_array_equal(bare[name][...], raw)
    with rasterio.open(f"netcdf:{path}:subsidence") as gis:
        expected = result["subsidence"].values.astype(np.float32)
        np.testing.assert_array_equal(gis.read(masked=True).filled(np.nan), expected)


def test_all_ways_give_one_header_and_about_one_size(tmp_path: Path,
                                                     monkeypatch: pytest.MonkeyPatch) -> None:
    result = large_result()
    write_in_pieces(result, tmp_path / "isal.nc")
    monkeypatch.setattr(chunks, "h5py", None)
    write_in_pieces(result, tmp_path / "library.nc")
    assert header(tmp_path / "isal.nc") == header(tmp_path / "library.nc")
    ratio = (tmp_path / "isal.nc").stat().st_size / (tmp_path / "library.nc").stat().st_size
    assert 0.5 < ratio < 1.15


@pytest.mark.parametrize("turned", ["y", "x"])
def test_rows_and_columns_run_as_those_of_the_frame(tmp_path: Path, turned: str) -> None:
    result = large_result().isel({turned: slice(None, None, -1)})
    write_in_pieces(result, tmp_path / "a.nc")
    back = read_result(tmp_path / "a.nc")
    assert (np.diff(back["y"]) < 0).all() and (np.diff(back["x"]) > 0).all()
    np.testing.assert_array_equal(back["region_subsidence"].sel(y=result["y"], x=result["x"]),
                                  result["region_subsidence"].values.astype(np.float32))


def test_any_order_of_dates_and_any_memory_layout(tmp_path: Path) -> None:
    result = large_result()
    down = result["subsidence"].values
    fixed = down[1:2].astype(np.float32)
    fixed.flags.writeable = False
    with ResultWriter(tmp_path / "a.nc", frame_of(result), ["subsidence"], threads=3) as file:
        file.put("subsidence", 2, np.asfortranarray(down[2:]))
        file.put("subsidence", 0, np.repeat(down[:1], 2, axis=2)[:, :, ::2])
        file.put("subsidence", 1, fixed)
        file.finish(frame_of(result))
    np.testing.assert_array_equal(read_result(tmp_path / "a.nc")["subsidence"],
                                  down.astype(np.float32))


def test_after_a_flush_the_array_may_be_used_again(tmp_path: Path) -> None:
    result = large_result()
    array = np.empty((1, 300, 280))
    with ResultWriter(tmp_path / "a.nc", frame_of(result), ["subsidence"]) as file:
        for step in range(3):
            array[:] = float(step)
            file.put("subsidence", step, array)
            file.flush()
        file.finish(frame_of(result))
    np.testing.assert_array_equal(read_result(tmp_path / "a.nc")["subsidence"][:, 7, 8], [0, 1, 2])


def test_a_map_of_no_date_and_one_nobody_knows(tmp_path: Path) -> None:
    result = control_result(28992)
    result["ground_level"] = result["subsidence"][2].drop_vars("time") + 7.0
    result["ground_level"].attrs = {"units": "m", "long_name": "made up"}
    result["by_case"] = result["region_subsidence"].rename(region="case")
    write_result(result, tmp_path / "a.nc")
    with netCDF4.Dataset(tmp_path / "a.nc") as file:
        assert file["ground_level"].dimensions == ("y", "x")
        assert (file["ground_level"].units, file["ground_level"].grid_mapping) == ("m", "crs")
        assert file["by_case"].dimensions == ("time", "case", "y", "x")
        np.testing.assert_allclose(file["ground_level"][...], result["ground_level"], rtol=6e-8)
        np.testing.assert_allclose(file["by_case"][...], result["by_case"], rtol=6e-8)


FLOATS = st.one_of(arrays(np.float64, (5, 7), elements=st.floats()),
                   arrays(np.float32, (5, 7), elements=st.floats(width=32)))


@given(values=FLOATS, row=st.integers(0, 4), column=st.integers(0, 6))
def test_bytes_are_shuffled_as_the_format_says(values: np.ndarray, row: int, column: int) -> None:
    """HDF5 shuffle: all first bytes, all second bytes, ...; undone here by a transposition."""
    packed = np.empty(4 * 4 * 6, np.uint8)
    infinite = chunks._pack(values, row, column, 4, 6, packed)
    chunk = np.ascontiguousarray(packed.reshape(4, -1).T).view(np.float32).reshape(4, 6)
    with np.errstate(over="ignore"):
        inside = values[row:row + 4, column:column + 6].astype(np.float32)
    expected = np.full((4, 6), -9999.0, np.float32)
    expected[:inside.shape[0], :inside.shape[1]] = np.where(np.isnan(inside), -9999.0, inside)
    np.testing.assert_array_equal(chunk.view(np.uint32), expected.view(np.uint32))
    assert infinite == np.isinf(inside).sum()


# -- what stops it -----------------------------------------------------------------------------


@pytest.mark.parametrize("value", [np.inf, -np.inf, 1e39])  # float32 ends at 3.4e38
def test_the_first_infinite_map_is_named(tmp_path: Path, way: str, value: float) -> None:
    result = large_result()
    result["tilt"].values[1:, 4, 5:8] = value
    with pytest.raises(InputError, match=r"tilt is infinite in 3 places on 2011-01-01"):
        write_in_pieces(result, tmp_path / "a.nc", leg=3)
    assert os.listdir(tmp_path) == [] and no_threads_left()


def test_an_infinite_value_that_is_not_of_a_map(tmp_path: Path) -> None:
    result = control_result(None)
    result["bowl_volume"][1] = np.inf
    with pytest.raises(InputError, match="bowl_volume is infinite in 1 places"):
        write_in_pieces(result, tmp_path / "a.nc")
    assert os.listdir(tmp_path) == [] and no_threads_left()


@pytest.mark.parametrize("failure", [OSError(28, "No space left on device"), RuntimeError("HDF5")])
def test_an_error_of_a_thread_surfaces(tmp_path: Path, monkeypatch: pytest.MonkeyPatch,
                                       failure: Exception) -> None:
    def fail(*_: object) -> int:
        raise failure

    (tmp_path / "a.nc").write_bytes(b"old")
    monkeypatch.setattr(chunks.DirectChunks, "write", fail)
    result = large_result()
    with (
        pytest.raises(CannotDo, match=r"a\.nc' cannot be written: (No space left|.*disk full)"),
        ResultWriter(tmp_path / "a.nc", frame_of(result), ["tilt"]) as file,
    ):
        file.put("tilt", 0, result["tilt"].values)
        file.flush()
    assert os.listdir(tmp_path) == ["a.nc"] and no_threads_left()
    assert (tmp_path / "a.nc").read_bytes() == b"old"
    with pytest.raises(ValueError, match="given up"):
        file.put("tilt", 0, result["tilt"].values)


@pytest.mark.parametrize("place", ["put", "finish"])
def test_an_interrupt_leaves_nothing(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, way: str,
                                     place: str) -> None:
    def stop(*_: object) -> None:
        raise KeyboardInterrupt

    target = (writer.Background, "submit") if place == "put" else (writer, "write_globals")
    monkeypatch.setattr(*target, stop)
    with pytest.raises(KeyboardInterrupt):
        write_in_pieces(large_result(), tmp_path / "a.nc")
    assert os.listdir(tmp_path) == [] and no_threads_left()


@pytest.mark.parametrize("error", [OSError(5, "the input"), KeyboardInterrupt(), ValueError("x")])
@pytest.mark.parametrize("finished", [False, True])
def test_errors_of_the_block_go_through_as_they_are(tmp_path: Path, error: BaseException,
                                                    finished: bool) -> None:
    result = control_result(None)
    with pytest.raises(type(error)) as caught, \
            ResultWriter(tmp_path / "a.nc", frame_of(result), ["tilt"]) as file:
        file.put("tilt", 0, result["tilt"].values)
        if finished:
            file.finish(frame_of(result))
        raise error
    assert caught.value is error
    assert os.listdir(tmp_path) == [] and no_threads_left()


def test_a_folder_that_cannot_be_made(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("x")
    with pytest.raises(CannotDo, match="cannot be written"):
        write_in_pieces(control_result(None), tmp_path / "file" / "a.nc")
    assert no_threads_left()


# -- what a caller may get wrong ---------------------------------------------------------------


def put_twice(file: ResultWriter, values: np.ndarray) -> None:
    file.put("tilt", 0, values)
    file.put("tilt", 2, values[2:])


def other_coordinate(file: ResultWriter, values: np.ndarray) -> None:
    file.put("tilt", 0, values)
    file.finish(xr.Dataset(coords={"x": np.arange(7.0)}))


WRONG = [
    (lambda file, values: file.put("tilt", 1, values), "do not fit from date 1"),
    (lambda file, values: file.put("tilt", 0, values[:, 1:]), "do not fit"),
    (lambda file, values: file.put("tilt", -1, values[:1]), "do not fit"),
    (put_twice, "a date comes twice"),
    (lambda file, values: file.finish(xr.Dataset()), r"never put: \['tilt \(date 0\)'\]"),
    (lambda file, values: (file.put("tilt", 0, values[:2]), file.finish(xr.Dataset())),
     r"never put: \['tilt \(date 2\)'\]"),
    (other_coordinate, r"not as in the frame: \['x'\]"),
    (lambda file, values: file.put("tilt", 0, values), "ended without `finish`"),
]


@pytest.mark.parametrize(("step", "message"), WRONG)
def test_a_file_with_gaps_is_never_made(tmp_path: Path, step: Any, message: str) -> None:
    result = control_result(None)
    with pytest.raises(ValueError, match=message), \
            ResultWriter(tmp_path / "a.nc", frame_of(result), ["tilt"]) as file:
        step(file, result["tilt"].values)
    assert os.listdir(tmp_path) == [] and no_threads_left()


def test_a_map_that_was_not_announced(tmp_path: Path) -> None:
    result = control_result(None)
    with pytest.raises(ValueError, match=r"not as in the frame: .*tilt"), \
            ResultWriter(tmp_path / "a.nc", frame_of(result), ["subsidence"]) as file:
        file.put("subsidence", 0, result["subsidence"].values)
        file.finish(result)
    with pytest.raises(ValueError, match=r"point_x .* is no map"):
        ResultWriter(tmp_path / "a.nc", result, ["point_x"])
    assert os.listdir(tmp_path) == []
