"""`open_result`: the result in memory, but for the maps."""

from __future__ import annotations

import os
import sys
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

import numpy as np
import pytest
import xarray as xr
from made_up_results import control_result

from subside.errors import InputError
from subside.export import reader
from subside.export.netcdf import open_result, read_result, write_result


@pytest.fixture
def path(tmp_path: Path) -> Path:
    result = control_result(28992, ny=30, nx=20)
    result["subsidence"][1, 2, 3] = np.nan
    write_result(result, tmp_path / "a.nc")
    return tmp_path / "a.nc"


def test_it_holds_what_read_result_gives(path: Path) -> None:
    lazy = open_result(path)
    assert all(data.dtype == np.float64 for name, data in lazy.items() if "x" in data.dims)
    xr.testing.assert_identical(lazy, read_result(path))


def test_maps_are_read_when_asked_for_and_not_kept(path: Path,
                                                   monkeypatch: pytest.MonkeyPatch) -> None:
    asked = []
    values = reader._Map._values

    def count(self: reader._Map, key: tuple) -> np.ndarray:
        found = values(self, key)
        asked.append((self._name, found.shape))
        return found

    monkeypatch.setattr(reader._Map, "_values", count)
    lazy = open_result(path)
    assert asked == []
    for step in range(3):
        assert lazy["subsidence"][step].values.shape == (30, 20)
    assert float(lazy["tilt"].sel(time="2011-01-01").isel(y=4, x=5)) > 0.0
    assert asked == [("subsidence", (30, 20))] * 3 + [("tilt", ())]
    read_result(path)
    assert len(asked) == 4 + 7  # control_result has 7 maps


@pytest.mark.parametrize("pick", [
    {"time": [2, 0]}, {"y": slice(None, None, -1)}, {"time": -1, "x": slice(3, 17, 4)},
    {"time": 1, "y": [7, 2, 2], "x": [0, 19]}, {"time": slice(0, 0)},
    {"time": np.array([False, True, False])},
    {"y": xr.DataArray([2, 5], dims="place"), "x": xr.DataArray([3, 9], dims="place")},
])
def test_any_part_can_be_asked_for(path: Path, pick: dict) -> None:
    xr.testing.assert_identical(open_result(path)["subsidence"].isel(pick).load(),
                                read_result(path)["subsidence"].isel(pick))


def test_threads_may_ask_at_once(path: Path) -> None:
    lazy, whole = open_result(path), read_result(path)
    names = [name for name in whole if whole[name].dims[-2:] == ("y", "x")] * 20
    with ThreadPoolExecutor(4) as pool:
        for name, values in zip(names, pool.map(lambda n: lazy[n].values, names), strict=True):
            np.testing.assert_array_equal(values, whole[name].values)


@pytest.mark.skipif(sys.platform != "linux", reason="reads /proc")
def test_no_handle_stays_open(path: Path) -> None:
    lazy = open_result(path)
    lazy["tilt"][0].load()
    handles = [os.readlink(f"/proc/self/fd/{n}") for n in os.listdir("/proc/self/fd")
               if os.path.exists(f"/proc/self/fd/{n}")]
    assert str(path) not in handles


def test_another_file_in_its_place_is_not_read(path: Path) -> None:
    lazy = open_result(path)
    write_result(control_result(28992, ny=30, nx=20), path)
    with pytest.raises(InputError, match=r"a\.nc' has changed since it was opened"):
        lazy["subsidence"].load()
    path.unlink()
    with pytest.raises(InputError, match="does not exist"):
        lazy["subsidence"][0].load()


def test_it_can_be_written_again_without_being_loaded(path: Path, tmp_path: Path) -> None:
    write_result(open_result(path), path)  # even over itself
    open_result(path).to_netcdf(tmp_path / "copy.nc", engine="netcdf4")
    with xr.open_dataset(tmp_path / "copy.nc", engine="netcdf4") as copy:
        np.testing.assert_array_equal(copy["tilt"], read_result(path)["tilt"])
