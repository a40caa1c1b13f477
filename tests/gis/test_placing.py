"""A GIS puts every pixel where it belongs: control cells asked for by map coordinate.

The control cell (last of three dates, second of five rows from the north, third of seven columns)
lies in the middle of nothing: no mirror image, shift or transposition holds its value there.
"""

from __future__ import annotations

import json
from pathlib import Path

import netCDF4
import numpy as np
import pytest
import rasterio
import xarray as xr
from made_up_results import ORIGINS, control_result, control_value

from subside.export.geotiff import GeoTiff
from subside.export.netcdf import write_result

CONTROL = control_value(2, 1, 2)  # 0.002 + 0.2 + 0.1 (1 + 20) / 32 = 0.267625 m


def control_place(epsg: int, spacing: float = 100.0) -> tuple[float, float]:
    x0, y0 = ORIGINS[epsg]  # lower left corner of 5 rows by 7 columns
    return x0 + 2.5 * spacing, y0 + 3.5 * spacing


def open_map(path: Path, name: str = "subsidence"):
    return rasterio.open(f"netcdf:{path}:{name}")


@pytest.mark.parametrize("epsg", list(ORIGINS))
@pytest.mark.parametrize("south_first", [False, True])
def test_netcdf_through_gdal(tmp_path: Path, epsg: int, south_first: bool) -> None:
    result = control_result(epsg)
    if south_first:
        result = result.isel(y=slice(None, None, -1))
    write_result(result, tmp_path / "a.nc")
    x0, y0 = ORIGINS[epsg]
    for name, factor in (("subsidence", 1.0), ("displacement_east", -0.1), ("compaction", 1.5)):
        with open_map(tmp_path / "a.nc", name) as file:
            assert file.crs.to_epsg() == epsg
            assert tuple(file.bounds) == (x0, y0, x0 + 700.0, y0 + 500.0)
            assert file.nodata == -9999.0
            assert file.count == 3
            value = next(file.sample([control_place(epsg)], indexes=3))[0]
            assert value == pytest.approx(factor * CONTROL, rel=1e-6)


def test_netcdf_through_xarray(tmp_path: Path) -> None:
    write_result(control_result(28992), tmp_path / "a.nc")
    x, y = control_place(28992)
    with xr.open_dataset(tmp_path / "a.nc") as file:
        value = file["subsidence"].sel(time="2021-01-01", x=x, y=y)
        assert float(value.squeeze()) == pytest.approx(CONTROL, rel=1e-6)
        assert "point_name" in file["point_subsidence"].coords


@pytest.mark.parametrize("epsg", [2056, 3375, 27700])
def test_other_projection_methods_keep_their_code(tmp_path: Path, epsg: int) -> None:
    # 3375 (oblique Mercator, variant A) is another method pyproj has no CF parameters for
    from pyproj import CRS

    write_result(control_result(32631).assign_attrs(crs_wkt=CRS(epsg).to_wkt()), tmp_path / "a.nc")
    with open_map(tmp_path / "a.nc") as file:
        assert file.crs.to_epsg() == epsg


def test_negative_and_odd_spacing_coordinates(tmp_path: Path) -> None:
    # 12.1 m cells: float32 coordinates lose the georeference there, float64 do not
    result = control_result(32631, spacing=12.1)
    write_result(result, tmp_path / "a.nc")
    with open_map(tmp_path / "a.nc") as file:
        np.testing.assert_allclose(file.bounds, (5e5, 5.9e6, 5e5 + 84.7, 5.9e6 + 60.5), rtol=1e-12)
        value = next(file.sample([control_place(32631, 12.1)], indexes=3))[0]
        assert value == pytest.approx(CONTROL, rel=1e-6)


@pytest.mark.parametrize("origin", [100.0, 200.0, 400.0, -350.0])
def test_small_and_negative_coordinates_without_crs(tmp_path: Path, origin: float) -> None:
    # GDAL takes x of a few hundred without a metre unit for degrees and subtracts 360
    result = control_result(None)
    result = result.assign_coords(x=result["x"] + origin)
    write_result(result, tmp_path / "a.nc")
    with open_map(tmp_path / "a.nc") as file:
        assert file.crs is None
        assert tuple(file.bounds) == (origin, 0.0, origin + 700.0, 500.0)
        value = next(file.sample([(origin + 250.0, 350.0)], indexes=3))[0]
        assert value == pytest.approx(CONTROL, rel=1e-6)


def test_no_contradictory_georeference_is_written(tmp_path: Path) -> None:
    write_result(control_result(3035), tmp_path / "a.nc")
    with netCDF4.Dataset(tmp_path / "a.nc") as file:
        assert file["crs"].dtype == np.int32 and file["crs"].shape == ()
        assert not {"spatial_ref", "GeoTransform"} & set(file["crs"].ncattrs())
        maps = [v for v in file.variables.values() if v.dimensions[-2:] == ("y", "x")]
        assert len(maps) == 7
        assert {v.grid_mapping for v in maps} == {"crs"}
        assert not hasattr(file, "crs_note")
    write_result(control_result(None), tmp_path / "b.nc")
    with netCDF4.Dataset(tmp_path / "b.nc") as file:
        assert "crs" not in file.variables
        assert not any(hasattr(v, "grid_mapping") for v in file.variables.values())
        assert file.crs_note.startswith("none")


def test_missing_values_are_missing_in_a_gis(tmp_path: Path) -> None:
    result = control_result(32631)
    result["subsidence"][1, 2, 3] = np.nan
    write_result(result, tmp_path / "a.nc")
    with open_map(tmp_path / "a.nc") as file:
        assert file.read(2, masked=True).mask.sum() == 1


# -- the compliance checker --------------------------------------------------------------------


def messages(path: Path, version: str) -> list[str]:
    """Every message of any priority."""
    from compliance_checker.runner import CheckSuite, ComplianceChecker

    CheckSuite.load_all_available_checkers()
    report = path.with_suffix(f".{version}.json")
    ComplianceChecker.run_checker(str(path), [f"cf:{version}"], 0, "strict",
                                  output_filename=str(report), output_format="json")
    checks = json.loads(report.read_text())[f"cf:{version}"]
    return [text for group in ("high", "medium", "low")
            for check in checks[f"{group}_priorities"] for text in check["msgs"]]


@pytest.mark.parametrize("version", ["1.8", "1.11"])
@pytest.mark.parametrize("epsg", [32631, 28992, 3035])
def test_the_checker_has_nothing_to_say(tmp_path: Path, epsg: int, version: str) -> None:
    write_result(control_result(epsg), tmp_path / "a.nc")
    assert messages(tmp_path / "a.nc", version) == []


def test_the_checker_speaks_when_there_is_reason(tmp_path: Path) -> None:
    write_result(control_result(32631), tmp_path / "a.nc")
    with netCDF4.Dataset(tmp_path / "a.nc", "a") as file:
        file["subsidence"].standard_name = "land_subsidence"
    assert any("land_subsidence" in text for text in messages(tmp_path / "a.nc", "1.11"))


@pytest.mark.parametrize("kind", ["points only", "no crs"])
def test_the_checker_on_results_without_map_or_crs(tmp_path: Path, kind: str) -> None:
    result = control_result(None) if kind == "no crs" else control_result(32631)
    write_result(result.drop_dims(["x", "y"]) if kind == "points only" else result,
                 tmp_path / "a.nc")
    assert messages(tmp_path / "a.nc", "1.11") == []


# -- GeoTIFF -----------------------------------------------------------------------------------


@pytest.mark.parametrize("epsg", list(ORIGINS))
def test_geotiff_control_point(tmp_path: Path, epsg: int) -> None:
    result = control_result(epsg).isel(y=slice(None, None, -1), x=slice(None, None, -1))
    files = GeoTiff().export(result, tmp_path, False, ("subsidence",))
    assert [f.name for f in files] == [f"subsidence_{y}-01-01.tif" for y in (2001, 2011, 2021)]
    x0, y0 = ORIGINS[epsg]
    with rasterio.open(files[2]) as file:
        assert file.crs.to_epsg() == epsg
        assert tuple(file.bounds) == (x0, y0, x0 + 700.0, y0 + 500.0)
        value = next(file.sample([control_place(epsg)]))[0]
        assert value == pytest.approx(CONTROL, rel=1e-6)
        assert file.dtypes == ("float32",) and np.isnan(file.nodata)
        assert file.tags()["units"] == "m" and file.tags()["long_name"] == "subsidence"
        assert file.tags()["datetime"] == "2021-01-01T00:00:00"
        assert file.tags()["TIFFTAG_DATETIME"] == "2021:01:01 00:00:00"
        structure = file.tags(ns="IMAGE_STRUCTURE")
        assert (structure["LAYOUT"], structure["COMPRESSION"], structure["PREDICTOR"]) == (
            "COG", "DEFLATE", "3")
