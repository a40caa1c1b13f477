"""GeoTIFF: names, refusals, overwriting."""

from __future__ import annotations

import sys
from pathlib import Path

import numpy as np
import pytest
from made_up_results import control_result

from subside.errors import CannotDo, InputError
from subside.export.geotiff import GeoTiff


def test_every_map_and_date_has_a_file(tmp_path: Path) -> None:
    files = GeoTiff().export(control_result(32631), tmp_path, False)
    # 6 maps and 2 regions, 3 dates
    assert len(files) == 24 and all(file.is_file() for file in files)
    assert tmp_path / "region_subsidence_south_2021-01-01.tif" in files
    assert sorted(tmp_path.iterdir()) == sorted(files)


def test_nothing_is_written_when_one_file_is_there(tmp_path: Path) -> None:
    there = tmp_path / "tilt_2011-01-01.tif"
    there.write_text("mine")
    with pytest.raises(InputError, match=r"tilt_2011-01-01\.tif' already there; give --overwrite"):
        GeoTiff().export(control_result(32631), tmp_path, False)
    assert list(tmp_path.iterdir()) == [there] and there.read_text() == "mine"
    GeoTiff().export(control_result(32631), tmp_path, True, ("tilt",))
    assert there.read_bytes()[:2] == b"II"  # TIFF 6.0: the byte order comes first


def test_several_dates_in_a_day_have_several_files(tmp_path: Path) -> None:
    result = control_result(32631).isel(time=[0, 1])
    result["time"] = np.array(["2001-01-01T00:00", "2001-01-01T12:30"], "datetime64[ns]")
    files = GeoTiff().export(result, tmp_path, False, ("tilt",))
    assert [f.name for f in files] == ["tilt_2001-01-01T000000.tif", "tilt_2001-01-01T123000.tif"]


def test_region_names_cannot_leave_the_folder(tmp_path: Path) -> None:
    result = control_result(32631).assign_coords(region_name=("region", ["../a", ".. a"]))
    files = GeoTiff().export(result, tmp_path, False, ("region_subsidence",))
    assert len(set(files)) == 6 and {file.parent for file in files} == {tmp_path}


@pytest.mark.parametrize(("result", "variables", "message"), [
    (control_result(None), None, "needs a coordinate reference system and this result has none"),
    (control_result(32631).drop_dims(["x", "y"]), None, "has no map"),
    (control_result(32631), ("subsidense",), r"no map 'subsidense'\. Did you mean 'subsidence'"),
    (control_result(32631).isel(x=[0, 1, 3]), None, "x is not evenly spaced"),
])
def test_refusals(tmp_path: Path, result, variables, message: str) -> None:
    with pytest.raises(InputError, match=message):
        GeoTiff().export(result, tmp_path, False, variables)
    assert list(tmp_path.iterdir()) == []


def test_without_rasterio_the_install_line_is_told(tmp_path: Path, monkeypatch) -> None:
    monkeypatch.setitem(sys.modules, "rasterio", None)
    with pytest.raises(CannotDo, match=r'pip install "subside\[geotiff\]"'):
        GeoTiff().export(control_result(32631), tmp_path, False)


def test_it_comes_in_through_the_hook() -> None:
    from subside.export.builtin import subside_exporters

    assert GeoTiff in subside_exporters()
