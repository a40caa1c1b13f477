"""What the reader makes of sound files: the same cells from every layout, SI, depth down."""

from __future__ import annotations

import numpy as np
import pytest
from grid_drafts import (
    CELLS,
    DX,
    DY,
    DZ,
    NI,
    NJ,
    NK,
    TOP,
    X0,
    Y0,
    as_table,
    box_draft,
    corner_draft,
    corner_values,
    pressure_values,
    with_crs,
)

from subside.errors import InputError
from subside.grid import edge_depletion, open_grid, summarise
from subside.grid.fields import require_field
from subside.grid.geometry import corners_of_boxes

FULL = (NK, NJ, NI)
SIZE = NK * NJ * NI


def full_boxes():
    """x, y, dx, dy on (k, j, i) instead of (j, i)."""
    draft = box_draft()
    for name in ("x", "y", "dx", "dy"):
        draft.add(name, CELLS, np.broadcast_to(draft.values(name), FULL), units="m")
    return draft


def elevations():
    """Corners as elevations, positive up."""
    draft = corner_draft()
    draft.values("corners")[..., 2] *= -1
    draft.attrs("corners")["positive"] = "up"
    return draft


def elevation_boxes():
    """Boxes as elevations."""
    draft = box_draft()
    for name in ("top", "bottom"):
        draft.variables[name][1] = -draft.values(name)
        draft.attrs(name)["positive"] = "up"
    return draft


def with_origin():
    """float32 corners relative to an origin."""
    draft = corner_draft()
    relative = corner_values() - [X0, Y0, TOP]
    draft.add("corners", (*CELLS, "corner", "xyz"), relative.astype("f4"), units="m",
              positive="down", origin=[X0, Y0, TOP], vertical_datum="mean sea level")
    return draft


def clockwise():
    """Each face gone round the other way."""
    draft = corner_draft()
    draft.variables["corners"][1] = draft.values("corners")[..., [0, 3, 2, 1, 4, 7, 6, 5], :]
    return draft


DRAFTS = [corner_draft, box_draft, full_boxes, elevations, elevation_boxes, with_origin, clockwise]


@pytest.mark.parametrize("table", [False, True], ids=["structured", "cell table"])
@pytest.mark.parametrize("make", DRAFTS)
def test_every_layout_gives_the_same_cells(tmp_path, make, table):
    draft = as_table(make()) if table else make()
    cells = open_grid(draft.write(tmp_path / "grid.nc"))
    k, j, i = np.unravel_index(np.arange(SIZE), FULL)
    centre = np.stack([X0 + DX * (i + 0.5), Y0 + DY * (j + 0.5), TOP + DZ * (k + 0.5)], axis=1)
    assert cells["volume"].values == pytest.approx(np.full(SIZE, DX * DY * DZ), rel=1e-9)
    assert cells["centroid"].values == pytest.approx(centre, rel=1e-12)
    assert cells["pressure"].values == pytest.approx(pressure_values().reshape(3, -1) * 1e5)
    assert cells["edge"].values.tolist() == ((j % (NJ - 1) == 0) | (i % (NI - 1) == 0)).tolist()
    assert str(cells["time"].values[1])[:19] == "2000-12-31T00:00:00"
    assert cells["region_name"].values.tolist() == ["all"]
    assert cells.attrs["vertical_datum"] == "mean sea level"
    found = (cells["corners"].values if "corners" in cells else
             corners_of_boxes(*(cells[n].values for n in
                                ("x", "y", "top", "bottom", "dx", "dy", "azimuth"))))
    # turned to the common sense, but not always from the same first corner
    assert np.sort(found, axis=1) == pytest.approx(
        np.sort(corner_values().reshape(-1, 8, 3), axis=1), rel=1e-12)
    if table:
        assert cells["cell_id"].values.tolist() == list(range(SIZE))
        assert "k" not in cells
    else:
        assert [cells[n].values.tolist() for n in "kji"] == [a.tolist() for a in (k, j, i)]


def test_left_handed_grid_warns_and_is_turned(tmp_path):
    cells = open_grid(clockwise().write(tmp_path / "grid.nc"))
    assert any("left-handed" in w for w in cells.attrs["warnings"])
    assert cells["corners"].values[0] == pytest.approx(corner_values()[0, 0, 0])


@pytest.mark.parametrize(("unit", "factor"), [
    # 1 psi = 6894.757293168 Pa (NIST SP 811)
    ("bar", 1.0), ("barsa", 1.0), ("bara", 1.0), ("MPa", 0.1), ("psi", 1e5 / 6894.757293168),
    ("psia", 1e5 / 6894.757293168), ("Pa", 1e5),
])
def test_pressure_units(tmp_path, unit, factor):
    draft = corner_draft()
    draft.variables["pressure"][1] = pressure_values() * factor
    draft.attrs("pressure")["units"] = unit
    cells = open_grid(draft.write(tmp_path / "grid.nc"))
    assert cells["pressure"].values[0, 0] == pytest.approx(210e5, rel=1e-9)
    assert cells["pressure"].attrs["units"] == "Pa"


def test_feet(tmp_path):
    draft = corner_draft()
    draft.variables["corners"][1] = corner_values() / 0.3048
    draft.attrs("corners")["units"] = "ft"
    cells = open_grid(draft.write(tmp_path / "grid.nc"))
    assert cells["volume"].values[0] == pytest.approx(DX * DY * DZ, rel=1e-9)


def test_survey_feet_under_a_crs_in_survey_feet(tmp_path):
    # 1 US survey foot = 1200/3937 m, exactly; EPSG:2276 has its middle near x 2.5e6, y 7e6 ft
    foot = 1200 / 3937
    draft = corner_draft()
    draft.variables["corners"][1] = (corner_values() - [X0, Y0, 0]) / foot + [2.5e6, 7e6, 0]
    draft.attrs("corners")["units"] = "US_survey_foot"
    cells = open_grid(with_crs(draft, "EPSG:2276").write(tmp_path / "grid.nc"))
    assert cells.attrs["xy_unit_in_m"] == pytest.approx(foot, rel=1e-12)
    assert cells.attrs["warnings"] == []
    assert cells["centroid"].values[0, 0] == pytest.approx(2.5e6 * foot + DX / 2, abs=1e-6)


def test_area_becomes_a_square_and_says_so(tmp_path):
    draft = box_draft()
    draft.drop("dx")
    draft.drop("dy")
    draft.add("area", ("j", "i"), np.full((NJ, NI), 14_400.0), units="m2")
    cells = open_grid(draft.write(tmp_path / "grid.nc"))
    assert cells["dx"].values[0] == cells["dy"].values[0] == pytest.approx(120.0)
    assert any("taken as a square" in w for w in cells.attrs["warnings"])


def test_azimuth_in_radians(tmp_path):
    draft = box_draft()
    draft.add("azimuth", (), np.float64(np.pi / 6), units="radian")
    cells = open_grid(draft.write(tmp_path / "grid.nc"))
    assert cells["azimuth"].values == pytest.approx(np.full(SIZE, 30.0))


def test_inactive_cells_are_dropped_for_their_reasons(tmp_path):
    draft = corner_draft()
    active = np.ones(FULL, "i1")
    active[0, 0, 0] = 0
    draft.add("active", CELLS, active)
    draft.values("pressure")[:, 0, 0, 1] = np.nan  # missing at every step
    draft.values("corners")[0, 0, 1, :, 0] = np.nan  # and its corners do not matter
    draft.values("corners")[0, 0, 2, 4:, 2] = TOP + 1e-9  # no thickness
    cells = open_grid(draft.write(tmp_path / "grid.nc"))
    assert [cells[n].values[0] for n in "kji"] == [0, 0, 3]
    assert cells["pressure"].values == pytest.approx(
        pressure_values().reshape(3, -1)[:, 3:] * 1e5)
    counts = {n: cells.attrs[n] for n in ("cells_in_file", "inactive", "dropped_marked_inactive",
                                          "dropped_without_pressure", "dropped_without_volume")}
    assert list(counts.values()) == [60, 3, 1, 1, 1]
    assert any("1 inactive cell carries a pressure" in w for w in cells.attrs["warnings"])


@pytest.mark.parametrize("chunks", [(1, 1, 4, 5), (3, 2, 2, 2), (2, 3, 4, 5), None])
def test_chunks_do_not_show(tmp_path, chunks, monkeypatch):
    import netCDF4

    from subside.grid import layout

    monkeypatch.setattr(layout, "_CELLS_PER_BLOCK", 20)  # a layer at a time
    draft = corner_draft()
    pressure = pressure_values() + np.arange(SIZE).reshape(FULL) / 100
    draft.drop("pressure")
    path = draft.write(tmp_path / "grid.nc")
    with netCDF4.Dataset(path, "a") as file:
        variable = file.createVariable("pressure", "f8", ("time", *CELLS), chunksizes=chunks,
                                       zlib=chunks is not None)
        variable.units = "bar"
        variable[...] = pressure
        active = file.createVariable("active", "i1", CELLS)
        active[...] = np.arange(SIZE).reshape(FULL) % 7 != 3
    cells = open_grid(path)
    keep = np.arange(SIZE) % 7 != 3
    assert cells["pressure"].values == pytest.approx(pressure.reshape(3, -1)[:, keep] * 1e5)


def test_packed_pressure(tmp_path):
    # CF packing: value = stored * scale_factor + add_offset
    draft = corner_draft()
    packed = np.round((pressure_values() - 200.0) / 0.01).astype("i2")
    draft.add("pressure", ("time", *CELLS), packed.astype("f8") * 0.01 + 200.0, units="bar",
              scale_factor=0.01, add_offset=200.0)
    cells = open_grid(draft.write(tmp_path / "grid.nc"))
    assert cells["pressure"].values == pytest.approx(pressure_values().reshape(3, -1) * 1e5)


@pytest.mark.parametrize(("values", "attributes", "names", "first"), [
    ([5, 7], {}, ["region-5", "region-7"], 0),
    ([5, 7], {"flag_values": [7, 6, 5], "flag_meanings": "north idle south"},
     ["north", "south"], 1),
    (["south part", "north"], {}, ["north", "south part"], 1),
])
@pytest.mark.parametrize("table", [False, True])
def test_region_names(tmp_path, values, attributes, names, first, table):
    draft = corner_draft()
    region = np.array(values)[(np.arange(SIZE) >= 30).astype(int)].reshape(FULL)
    draft.add("region", CELLS, region, **attributes)
    cells = open_grid((as_table(draft) if table else draft).write(tmp_path / "grid.nc"))
    assert cells["region_name"].values.tolist() == names
    assert cells["region"].values.tolist() == [first] * 30 + [1 - first] * 30


def test_region_on_j_i_and_as_characters(tmp_path):
    import netCDF4

    path = corner_draft().write(tmp_path / "grid.nc")
    with netCDF4.Dataset(path, "a") as file:
        file.createDimension("letters", 5)
        variable = file.createVariable("region", "S1", ("j", "i", "letters"))
        words = np.where(np.arange(NJ * NI).reshape(NJ, NI) < 10, "north", "south")
        variable[...] = netCDF4.stringtochar(words.astype("S5"))
    cells = open_grid(path)
    assert cells["region_name"].values.tolist() == ["north", "south"]
    assert cells["region"].values.reshape(FULL)[:, 0, 0].tolist() == [0, 0, 0]
    assert cells["region"].values.reshape(FULL)[:, 3, 4].tolist() == [1, 1, 1]


def test_fields_come_in_si(tmp_path):
    draft = corner_draft()
    draft.add("cm", CELLS, np.full(FULL, 1.1), units="1e-5 bar-1")
    draft.add("stiffness", ("j", "i"), np.full((NJ, NI), 2.0), units="GPa")
    draft.add("permeability", CELLS, np.full(FULL, 3.0), units="mD")
    draft.add("porosity", CELLS, np.full(FULL, 20.0), units="%")
    draft.add("saturation", ("time", *CELLS), np.full((3, *FULL), 0.3), units="1")
    draft.add("temperature", CELLS, np.full(FULL, 80.0), units="degC")
    draft.add("warmth", ("time", *CELLS), np.full((3, *FULL), 80.0), units="degC")
    draft.add("nameless", CELLS, np.full(FULL, 4.0))
    draft.add("odd", CELLS, np.full(FULL, 4.0), units="widget")
    cells = open_grid(draft.write(tmp_path / "grid.nc"))
    si = {"stiffness": (2e9, "Pa"), "permeability": (3 * 9.869233e-16, "m2"),
          "porosity": (0.2, "1"), "saturation": (0.3, "1"), "temperature": (353.15, "K"),
          "warmth": (353.15, "K")}
    for name, (value, unit) in si.items():
        assert cells[name].values.flat[0] == pytest.approx(value), name
        assert cells[name].attrs["units"] == unit, name
    assert cells["saturation"].dims == ("time", "cell")
    for name, part in [("nameless", "no units attribute"), ("odd", "unknown unit 'widget'")]:
        assert "units" not in cells[name].attrs
        assert cells[name].values[0] == 4.0
        with pytest.raises(InputError, match=f"test uses the field '{name}', but .*{part}"):
            require_field(cells, name, "1/Pa", "test")
    with pytest.raises(InputError, match=r"in a unit like '1/Pa', but .* in 'Pa'"):
        require_field(cells, "stiffness", "1/Pa", "test")
    with pytest.raises(InputError, match="Did you mean 'porosity'"):
        require_field(cells, "porosty", "1", "test")


def test_only_wanted_fields(tmp_path):
    draft = corner_draft()
    for name in ("one", "two"):
        draft.add(name, CELLS, np.full(FULL, 1.0), units="1")
    cells = open_grid(draft.write(tmp_path / "grid.nc"), fields=["two"])
    assert "two" in cells and "one" not in cells


def test_missing_value_in_a_field_matters_when_it_is_used(tmp_path):
    draft = corner_draft()
    values = np.full(FULL, 1e-10)
    values[1, 2, 3] = np.nan
    draft.add("cm", CELLS, values, units="1/Pa")
    cells = open_grid(draft.write(tmp_path / "grid.nc"))
    with pytest.raises(InputError, match=r"no value in 1 active cell, first \(k=1, j=2, i=3\)"):
        require_field(cells, "cm", "1/Pa", "uniaxial_compressibility")


@pytest.mark.parametrize(("initial", "expected"), [
    ("first", 210e5), ("215 bar", 215e5), (2.2e7, 2.2e7), ({"field": "before"}, 211e5),
])
def test_initial_pressure(tmp_path, initial, expected):
    draft = corner_draft()
    draft.add("before", CELLS, np.full(FULL, 21.1), units="MPa")
    path = draft.write(tmp_path / "grid.nc")
    cells = open_grid(path, initial_pressure=initial, fields=[])
    assert cells["initial_pressure"].values == pytest.approx(np.full(SIZE, expected))


@pytest.mark.parametrize(("units", "values", "last"), [
    ("days since 2000-01-01", [0, 365, 730.5], "2001-12-31T12:00:00"),
    ("hours since 1999-12-31 12:00:00", [12, 24, 36.5], "2000-01-02T00:30:00"),
    # 10^-8 day is 0.9 ms: rounded to whole seconds
    ("days since 2000-01-01", [0, 1, 2 - 1e-8], "2000-01-03T00:00:00"),
    ("seconds since 1970-01-01T00:00:00Z", [0, 1, 2], "1970-01-01T00:00:02"),
])
def test_dates(tmp_path, units, values, last):
    draft = corner_draft()
    draft.values("time")[:] = values
    draft.attrs("time")["units"] = units
    cells = open_grid(draft.write(tmp_path / "grid.nc"))
    assert str(cells["time"].values[2])[:19] == last


def test_no_crs_is_allowed_and_the_scenario_may_name_one(tmp_path):
    path = corner_draft().write(tmp_path / "grid.nc")
    assert open_grid(path).attrs["crs_wkt"] == ""
    cells = open_grid(path, crs="EPSG:32631")
    assert cells.attrs["crs_wkt"].startswith("PROJCRS")
    both = with_crs(corner_draft(), "EPSG:32631").write(tmp_path / "both.nc")
    assert open_grid(both, crs="EPSG:32631").attrs["crs_wkt"] == cells.attrs["crs_wkt"]


@pytest.mark.parametrize("dialect", ["WKT2_2019", "WKT1_GDAL"])
@pytest.mark.parametrize("code", ["EPSG:3035", "EPSG:32631"])
def test_dialects_of_wkt_are_one_system(tmp_path, code, dialect):
    # EPSG:3035 counts north first in the register, WKT1 cannot say so
    from pyproj import CRS, Transformer

    x, y = Transformer.from_crs(4326, CRS(code), always_xy=True).transform(3.0, 52.0)
    draft = corner_draft()
    draft.values("corners")[...] += [x - X0, y - Y0, 0.0]
    with_crs(draft, code).attrs("crs")["crs_wkt"] = CRS(code).to_wkt(dialect)
    cells = open_grid(draft.write(tmp_path / "grid.nc"), crs=code)
    found = CRS.from_wkt(cells.attrs["crs_wkt"]).to_json_dict()["id"]
    assert found == {"authority": "EPSG", "code": int(code[5:])}
    assert cells.attrs["warnings"] == []


def test_vertical_datum_from_a_compound_system(tmp_path):
    draft = corner_draft()
    draft.drop("corners", "vertical_datum")
    cells = open_grid(with_crs(draft, "EPSG:32631+5730").write(tmp_path / "grid.nc"))
    assert cells.attrs["vertical_datum"] == "European Vertical Reference Frame 2000"
    assert cells.attrs["crs_name"] == "WGS 84 / UTM zone 31N (EPSG:32631)"


def test_surface_moves_the_limits(tmp_path):
    # ground 100 m above the datum: a cell 50 m above the datum lies in the ground
    draft = corner_draft()
    draft.values("corners")[..., 2] -= TOP + 50
    draft.variables["pressure"][1] = np.full((3, *FULL), 5.0)
    path = draft.write(tmp_path / "shallow.nc")
    assert open_grid(path, surface=-100.0).sizes["cell"] == SIZE
    with pytest.raises(InputError, match=r"depths come out negative|above the surface"):
        open_grid(path, surface=0.0)


WARNINGS = [
    ("gauge", lambda d: d.drop("pressure", "long_name"), "does not say gauge or absolute"),
    ("datum", lambda d: d.drop("corners", "vertical_datum"), "no vertical_datum"),
    ("hydrostatic", lambda d: d.variables["pressure"].__setitem__(1, pressure_values() * 0.07),
     # 14.7 bar over 1.013 + 0.0981 x 2030 = 200.2 bar
     "0.0734 times hydrostatic"),
    ("jump", lambda d: d.values("pressure").__setitem__((1, 1, 2, 3), 80.0),
     "changes by 130 bar in one step in (k=1, j=2, i=3)"),
    ("identical", lambda d: d.values("pressure").__setitem__(2, d.values("pressure")[1]),
     "step 2 (2001-12-31) is identical to step 1"),
    ("twisted", lambda d: d.values("corners").__setitem__(
        (1, 2, 3, 1, slice(0, 2)), [X0 + 3 * DX + 30, Y0 + 2 * DY + 105]),
     "1 active cell has a positive volume but is twisted at a corner, first (k=1, j=2, i=3)"),
    ("local", lambda d: (with_crs(d, "EPSG:32631"),
                         d.values("corners").__isub__([X0, Y0, 0.0])), "local coordinates?"),
    ("both", lambda d: d.add("x", ("j", "i"), np.zeros((NJ, NI)), units="m"),
     "taken from 'corners'; the file's x are not used"),
]


@pytest.mark.parametrize(("change", "part"), [w[1:] for w in WARNINGS],
                         ids=[w[0] for w in WARNINGS])
def test_warnings(tmp_path, change, part):
    draft = corner_draft()
    change(draft)
    found = open_grid(draft.write(tmp_path / "grid.nc")).attrs["warnings"]
    assert len(found) == 1
    assert part in found[0]


def test_a_bed_that_pinches_out_is_no_twisted_cell(tmp_path):
    draft = corner_draft()
    draft.values("corners")[:, :, 4, [5, 6], 2] = draft.values("corners")[:, :, 4, [1, 2], 2]
    cells = open_grid(draft.write(tmp_path / "grid.nc"))
    assert cells.attrs["warnings"] == []
    assert cells["volume"].values.reshape(FULL)[0, 0, 4] == pytest.approx(DX * DY * DZ / 2)


def test_edge_depletion_and_summary(tmp_path):
    draft = corner_draft()
    region = np.where(np.arange(NI) < 3, "west", "east")
    draft.add("region", CELLS, np.broadcast_to(region, FULL))
    draft.add("porosity", CELLS, np.full(FULL, 0.2), units="1")
    draft.add("net_to_gross", CELLS, np.full(FULL, 0.5), units="1")
    cells = open_grid(with_crs(draft, "EPSG:32631").write(tmp_path / "grid.nc"))
    # the middle falls by 20.2 bar, the edge by 0.2 bar
    assert edge_depletion(cells, 210e5) == pytest.approx(0.2 / 20.2)
    # from 212 bar: 22.2 and 2.2 bar
    assert edge_depletion(cells, 212e5) == pytest.approx(2.2 / 22.2)
    facts = summarise(cells, 212e5)
    assert facts["edge_depletion_share"] == pytest.approx(2.2 / 22.2)
    assert facts["cut_off"].startswith("the depleted area is cut off by the grid")
    assert "10 %" in facts["cut_off"]
    west, east = facts["regions"]["west"], facts["regions"]["east"]
    assert (west["cells"], east["cells"]) == (36, 24)
    assert west["bulk_volume_m3"] == pytest.approx(36 * DX * DY * DZ)
    assert west["pore_volume_m3"] == pytest.approx(36 * DX * DY * DZ * 0.1)
    assert (west["shallowest_m"], west["deepest_m"]) == (2000.0, 2060.0)
    assert west["mean_thickness_m"] == pytest.approx(DZ)
    assert west["mean_initial_pressure_bar"] == pytest.approx(212.0)
    # 3 of 36 cells fell by 20 bar more
    assert west["mean_last_pressure_bar"] == pytest.approx(209.8 - 20.0 * 3 / 36)
    assert west["largest_depletion_bar"] == pytest.approx(22.2)
    assert east["largest_depletion_bar"] == pytest.approx(2.2)
    assert facts["dates"] == ["2000-01-01", "2000-12-31", "2001-12-31"]
    assert facts["extent_m"] == {"x_min": X0, "x_max": X0 + NI * DX, "y_min": Y0,
                                 "y_max": Y0 + NJ * DY}
    assert facts["crs"] == "WGS 84 / UTM zone 31N (EPSG:32631)"
    import json

    json.dumps(facts)


def test_mean_pressure_is_weighted_with_volume(tmp_path):
    # two cells, 3 : 1 in volume, 200 and 240 bar: mean 210 bar
    draft = corner_draft()
    draft.values("corners")[0, 0, 0, 4:, 2] = TOP + 15.0
    draft.values("corners")[0, 0, 1, 4:, 2] = TOP + 5.0
    active = np.zeros(FULL, "i1")
    active[0, 0, :2] = 1
    draft.add("active", CELLS, active)
    draft.values("pressure")[:, 0, 0, 0], draft.values("pressure")[:, 0, 0, 1] = 200.0, 240.0
    facts = summarise(open_grid(draft.write(tmp_path / "grid.nc")))
    assert facts["total"]["mean_initial_pressure_bar"] == pytest.approx(210.0)
    assert facts["total"]["mean_thickness_m"] == pytest.approx(10.0)


def test_no_change_of_pressure_is_not_cut_off(tmp_path):
    draft = corner_draft()
    draft.variables["pressure"][1] = np.full((3, *FULL), 210.0)
    facts = summarise(open_grid(draft.write(tmp_path / "grid.nc")))
    assert facts["edge_depletion_share"] == 0.0
    assert facts["cut_off"] is None


def test_the_demo_field_reads_without_a_warning():
    from pathlib import Path

    path = Path(__file__).parents[2] / "scenarios" / "marrow-fen" / "pressure.nc"
    cells = open_grid(path)
    assert cells.attrs["warnings"] == []
    assert edge_depletion(cells) < 0.05
