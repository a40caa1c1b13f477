"""The result file: round trip, attributes, refusals."""

from __future__ import annotations

import datetime
from pathlib import Path

import netCDF4
import numpy as np
import pytest
import xarray as xr
from made_up_results import control_result
from pyproj import CRS

from subside.errors import InputError
from subside.export.grid_mapping import grid_mapping, metres_per_unit, projected_crs
from subside.export.netcdf import read_result, write_result
from subside.names import RESULT_VARIABLES

CREATED = datetime.datetime(2026, 1, 2, 3, 4, 5, tzinfo=datetime.UTC)


@pytest.mark.parametrize("epsg", [32631, 28992, 3035, 2276, None])
def test_round_trip(tmp_path: Path, epsg: int | None) -> None:
    result = control_result(epsg)
    result["subsidence"][1, 2, 3] = np.nan
    write_result(result, tmp_path / "a.nc")
    back = read_result(tmp_path / "a.nc")
    # maps are float32: 24 bits of mantissa, relative rounding error 2**-24 = 6e-8
    xr.testing.assert_allclose(back.drop_attrs(), result.drop_attrs(), rtol=6e-8, atol=0.0)
    exact = [name for name in result.variables if result[name].dims[-2:] != ("y", "x")]
    for name in exact:
        assert result[name].equals(back[name].astype(result[name].dtype)), name
    assert all(back[name].dtype == np.float64 for name in result if result[name].dtype.kind == "f")
    assert set(back.coords) == {"time", "y", "x", "region_name", "point_name"}
    for key in ("title", "scenario_file", "scenario_text", "xy_unit"):
        assert back.attrs[key] == result.attrs[key]
    assert (CRS(back.attrs["crs_wkt"]) == CRS(epsg)) if epsg else back.attrs["crs_wkt"] == ""


def test_written_twice_it_is_the_same_but_for_one_line_of_history(tmp_path: Path) -> None:
    write_result(control_result(28992), tmp_path / "a.nc", created=CREATED)
    once = read_result(tmp_path / "a.nc")
    write_result(once, tmp_path / "b.nc", created=CREATED)
    twice = read_result(tmp_path / "b.nc")
    line = once.attrs.pop("history")
    assert line.startswith("2026-01-02T03:04:05Z written by subside")
    assert twice.attrs.pop("history") == f"{line}\n{line}"
    xr.testing.assert_identical(once, twice)


def test_attributes_come_from_the_vocabulary(tmp_path: Path) -> None:
    result = control_result(32631)
    result["tilt"].attrs["long_name"] = "said by the caller"
    write_result(result, tmp_path / "a.nc")
    with netCDF4.Dataset(tmp_path / "a.nc") as file:
        for name in ("subsidence", "point_subsidence", "bowl_volume", "region_compaction_volume"):
            assert file[name].units == RESULT_VARIABLES[name].unit
            assert file[name].long_name == RESULT_VARIABLES[name].long_name
        assert file["tilt"].long_name == "said by the caller"
        assert not any(hasattr(v, "standard_name") for n, v in file.variables.items()
                       if n not in ("x", "y", "time"))


def test_positions_are_in_the_unit_of_the_crs(tmp_path: Path) -> None:
    write_result(control_result(2276), tmp_path / "a.nc")
    with netCDF4.Dataset(tmp_path / "a.nc") as file:
        for name in ("x", "y", "point_x", "point_y", "max_subsidence_x", "max_uplift_y"):
            assert file[name].units == "US_survey_foot"
        assert file["point_depth"].units == "m"
    # 1200/3937 m: definition of the US survey foot (Mendenhall order, 1893)
    assert metres_per_unit("US_survey_foot") == pytest.approx(0.3048006096, abs=1e-10)


def test_storage_is_the_one_that_readers_like(tmp_path: Path) -> None:
    result = control_result(32631, ny=300, nx=280)
    result["subsidence"][1, 2, 3] = np.nan
    write_result(result, tmp_path / "a.nc")
    with netCDF4.Dataset(tmp_path / "a.nc") as file:
        file.set_auto_maskandscale(False)
        down = file["subsidence"]
        assert down.dimensions == ("time", "y", "x")
        assert down.dtype == np.float32
        assert down._FillValue == np.float32(-9999) == down[1, 2, 3]
        assert down.chunking() == [1, 256, 256]
        assert down.filters()["zlib"] and down.filters()["complevel"] == 1
        assert down.filters()["shuffle"]
        assert not {"scale_factor", "add_offset"} & set(down.ncattrs())
        assert (np.diff(file["y"][:]) < 0).all() and (np.diff(file["x"][:]) > 0).all()
        # days since 1970 of the three dates, counted with datetime.date.toordinal
        assert file["time"][:].tolist() == [11323.0, 14975.0, 18628.0]
        assert file["time"].dtype == np.float64
        for name in ("x", "y", "time"):
            assert "_FillValue" not in file[name].ncattrs()


def test_south_first_and_east_first_are_turned(tmp_path: Path) -> None:
    result = control_result(32631)
    write_result(result.isel(y=slice(None, None, -1), x=slice(None, None, -1)), tmp_path / "a.nc")
    xr.testing.assert_allclose(read_result(tmp_path / "a.nc")["subsidence"].drop_attrs(),
                               result["subsidence"].drop_attrs(), rtol=6e-8)


def test_transposed_maps_are_put_in_order(tmp_path: Path) -> None:
    result = control_result(32631)
    write_result(result.transpose("x", "y", "region", "time", ...), tmp_path / "a.nc")
    back = read_result(tmp_path / "a.nc")
    assert back["subsidence"].dims == ("time", "y", "x")
    assert back["region_subsidence"].dims == ("time", "region", "y", "x")
    np.testing.assert_allclose(back["subsidence"], result["subsidence"], rtol=6e-8)


def test_points_only(tmp_path: Path) -> None:
    result = control_result(28992).drop_dims(["x", "y"])
    write_result(result, tmp_path / "a.nc")
    back = read_result(tmp_path / "a.nc")
    assert "x" not in back.dims
    np.testing.assert_array_equal(back["point_subsidence"], result["point_subsidence"])
    assert CRS(back.attrs["crs_wkt"]) == CRS(28992)


def test_scenario_texts_longer_than_an_hdf5_attribute_used_to_hold(tmp_path: Path) -> None:
    # 64 KiB is the limit of a compact HDF5 attribute (HDF5 file format specification, IV.A.2.m)
    result = control_result(None)
    result.attrs["scenario_text"] = "ä" * 100_000
    write_result(result, tmp_path / "a.nc")
    assert read_result(tmp_path / "a.nc").attrs["scenario_text"] == "ä" * 100_000


def test_dates_far_away_and_times_of_day_survive(tmp_path: Path) -> None:
    result = control_result(None).isel(time=[0, 1])
    result["time"] = np.array(["1890-03-01T06:30:00", "2190-03-01T18:00:01.5"], "datetime64[ns]")
    write_result(result, tmp_path / "a.nc")
    np.testing.assert_array_equal(read_result(tmp_path / "a.nc")["time"], result["time"])


# -- refusals ----------------------------------------------------------------------------------


def shifted(result: xr.Dataset) -> xr.Dataset:
    x = result["x"].values.copy()
    x[3] += 5.0
    return result.assign_coords(x=x)


def stretched(result: xr.Dataset) -> xr.Dataset:
    x = result["x"].values.copy()
    x[-1] += 40.0
    return result.assign_coords(x=x)


BROKEN = [
    (shifted, r"x is not evenly spaced: x\[3\] = 500355"),
    (stretched, "x is not evenly spaced"),
    (lambda r: r.isel(x=[0]), "one pixel wide along x; a GIS needs at least 2 x 2"),
    (lambda r: r.isel(y=[0]), "one pixel wide along y"),
    (lambda r: r.assign_coords(x=r["x"].astype(np.float32) * 0 + 7.0), "not evenly spaced"),
    (lambda r: r.isel(time=[0, 2, 1]), "times do not increase: 2011-01-01.* after 2021-01-01"),
    (lambda r: r.assign(tilt=r["tilt"] / 0.0), "tilt is infinite in 35 places on 2001-01-01"),
    (lambda r: r.assign_attrs(crs_wkt="PROJCRS[nonsense"), "is not a coordinate reference system"),
    (lambda r: r.assign_attrs(crs_wkt=CRS(4326).to_wkt()), "WGS 84' is Geographic 2D CRS, not"),
    (lambda r: r.assign_attrs(crs_wkt=CRS(5513).to_wkt()), "axes of the CRS 'S-JTSK / Krovak' run"),
    (lambda r: r.assign_attrs(crs_wkt=CRS(3857).to_wkt()), "CF has no grid mapping for"),
    (lambda r: r.assign_attrs(xy_unit="km"), "x and y are said to be in 'km' but"),
    (lambda r: r.drop_vars("x"), "the map has no coordinate 'x'"),
]


@pytest.mark.parametrize(("broken", "message"), BROKEN)
def test_what_a_gis_would_misplace_is_refused(tmp_path: Path, broken, message: str) -> None:
    with pytest.raises(InputError, match=message):
        write_result(broken(control_result(32631)), tmp_path / "a.nc")
    assert list(tmp_path.iterdir()) == []


def test_reading_what_is_not_a_result(tmp_path: Path) -> None:
    with pytest.raises(InputError, match=r"none\.nc' does not exist"):
        read_result(tmp_path / "none.nc")
    (tmp_path / "text.nc").write_text("not NetCDF at all")
    with pytest.raises(InputError, match=r"text\.nc' cannot be read as a NetCDF result"):
        read_result(tmp_path / "text.nc")
    control_result(None).drop_vars("point_name").to_netcdf(tmp_path / "other.nc", engine="netcdf4")
    with pytest.raises(InputError, match="not a result of `subside run`"):
        read_result(tmp_path / "other.nc")


@pytest.mark.parametrize("share", [0.02, 0.3, 0.6, 0.99])
def test_reading_a_truncated_result(tmp_path: Path, share: float) -> None:
    path = tmp_path / "a.nc"
    write_result(control_result(32631, ny=200, nx=200), path)
    data = path.read_bytes()
    path.write_bytes(data[: int(share * len(data))])
    with pytest.raises(InputError, match="truncated"):
        read_result(path)


# -- the CRS -----------------------------------------------------------------------------------


@pytest.mark.parametrize("epsg", [32631, 28992, 27700, 3035, 2276, 31370, 2056, 3375, 2193, 2154])
def test_the_wkt_is_ascii_and_still_the_epsg_code(epsg: int) -> None:
    wkt = grid_mapping(projected_crs(CRS(epsg).to_wkt()))["crs_wkt"]
    assert wkt.isascii() and "USAGE" not in wkt
    assert CRS(wkt) == CRS(epsg)
    assert CRS(wkt).to_epsg() == epsg


def test_compound_and_bound_crs_give_their_projected_part() -> None:
    assert projected_crs("EPSG:28992+5709").to_epsg() == 28992
    bound = CRS("+proj=utm +zone=31 +ellps=intl +towgs84=-87,-98,-121 +units=m +type=crs")
    assert bound.is_bound and not projected_crs(bound.to_wkt()).is_bound


def test_oblique_stereographic_parameters() -> None:
    # EPSG registry, conversion 19914 "RD New": 52 deg 9' 22.178" N, 5 deg 23' 15.5" E, 0.9999079
    mapping = grid_mapping(projected_crs("EPSG:28992"))
    assert mapping["grid_mapping_name"] == "stereographic"
    assert mapping["latitude_of_projection_origin"] == pytest.approx(52 + 9 / 60 + 22.178 / 3600)
    assert mapping["longitude_of_projection_origin"] == pytest.approx(5 + 23 / 60 + 15.5 / 3600)
    assert mapping["scale_factor_at_projection_origin"] == 0.9999079
    assert (mapping["false_easting"], mapping["false_northing"]) == (155_000.0, 463_000.0)
