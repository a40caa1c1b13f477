"""Broken pressure grids: each gives one paragraph with what, value and unit, where, and remedy."""

from __future__ import annotations

import grid_drafts as drafts
import numpy as np
import pytest
from grid_drafts import CELLS, NI, NJ, NK, as_table, box_draft, corner_draft, with_crs

from subside.errors import CannotDo, InputError
from subside.grid import open_grid


def put(name, index, value):
    """Set values of a variable."""
    def change(draft):
        draft.values(name)[index] = value
    return change


def attr(name, **attributes):
    """Set attributes of a variable."""
    return lambda draft: draft.attrs(name).update(attributes)


def drop(name, attribute=None):
    """Take a variable or one of its attributes away."""
    return lambda draft: draft.drop(name, attribute)


def add(name, dims, values, **attributes):
    """Add a variable, or put another in its place."""
    return lambda draft: draft.add(name, dims, values, **attributes)


def scaled(name, factor):
    """Multiply a variable."""
    def change(draft):
        draft.variables[name][1] = draft.values(name) * factor
    return change


def as_float32(name):
    """Store a variable in single precision."""
    def change(draft):
        draft.variables[name][1] = draft.values(name).astype("f4")
    return change


def renamed(old, new):
    """Give a variable another name."""
    def change(draft):
        draft.variables[new] = draft.variables.pop(old)
    return change


def swapped_faces(draft):
    """The bottom face of every cell first."""
    draft.variables["corners"][1] = draft.values("corners")[..., [4, 5, 6, 7, 0, 1, 2, 3], :]


def transposed(draft):
    """(i, j, k) in place of (k, j, i)."""
    draft.variables["pressure"][0] = ("time", "i", "j", "k")
    draft.variables["pressure"][1] = draft.values("pressure").transpose(0, 3, 2, 1)


def one_row_short(draft):
    """Corners of fewer rows than pressure."""
    draft.add("corners", ("k", "row", "i", "corner", "xyz"), draft.values("corners")[:, :-1],
              units="m", positive="down")


CUBE_123 = (1, 2, 3)  # (k, j, i) of the cell that is spoilt
FULL = (NK, NJ, NI)
YEARS = np.array([0.0, 365.0, 730.0])

# (label, draft, change, parts of the message)
BROKEN = [
    # units
    ("no units", corner_draft, drop("pressure", "units"),
     ["variable 'pressure' has no units", 'units = "Pa"']),
    ("unknown units", corner_draft, attr("pressure", units="barz"),
     ["'pressure' has units 'barz'", "known are for example Pa"]),
    ("gauge units", corner_draft, attr("pressure", units="barg"),
     ["'pressure' has units 'barg'", "gauge", "add the atmosphere"]),
    ("gauge said", corner_draft, attr("pressure", long_name="gauge pressure"),
     ["'pressure' is described as gauge", "add the atmosphere (about 1.013 bar)"]),
    ("wrong kind of unit", corner_draft, attr("pressure", units="m"),
     ["'pressure' has units 'm'", "not a unit of pressure", "'Pa'"]),
    ("geometry without units", corner_draft, drop("corners", "units"),
     ["variable 'corners' has no units", 'units = "m"']),
    ("box without units", box_draft, drop("dx", "units"), ["variable 'dx' has no units"]),
    ("porosity without units", corner_draft, add("porosity", CELLS, np.full(FULL, 0.2)),
     ["variable 'porosity' has no units", 'units = "1"']),
    # missing and misshapen variables
    ("no pressure", corner_draft, renamed("pressure", "pressures"),
     ["no variable 'pressure'", "(time, k, j, i) or (time, cell)", "Did you mean 'pressures'?",
      "The file has corners, pressures, time"]),
    ("no time", corner_draft, drop("time"), ["no variable 'time'", "date of each pressure step"]),
    ("no geometry", corner_draft, drop("corners"),
     ["neither 'corners' nor", "'x', 'y', 'top', 'bottom', 'dx', 'dy'", "The file has pressure"]),
    ("boxes without dy", box_draft, drop("dy"), ["box variable(s) 'dy'", "(or area)"]),
    ("axes swapped", corner_draft, transposed,
     ["'pressure' has dimensions (time=3, i=5, j=4, k=3)", "expected (time, k, j, i)"]),
    ("shapes differ", corner_draft, one_row_short,
     ["'corners' has dimensions (k=3, row=3, i=5, corner=8, xyz=3)", "pressure has (time=3, k=3",
      "expected corners of (k=3, j=4, i=5, corner=8, xyz=3)"]),
    ("dx on wrong dims", box_draft, add("dx", ("n",), np.ones(7), units="m"),
     ["'dx' has dimensions (n=7)", "expected (k, j, i)"]),
    ("text for numbers", box_draft, add("top", CELLS, np.full(FULL, "deep"), units="m",
                                        positive="down"),
     ["variable 'top' holds text, not numbers", "float64"]),
    # sign and place of depth
    ("positive missing", corner_draft, drop("corners", "positive"),
     ["'corners' has no 'positive' attribute", 'positive = "down"', 'positive = "up"']),
    ("positive misspelt", box_draft, attr("bottom", positive="downward"),
     ["'bottom' has positive = 'downward'", 'positive = "down"']),
    ("elevation as depth", corner_draft,
     lambda d: d.values("corners").__imul__(np.array([1.0, 1.0, -1.0])),
     ["bottom lies above the top in 60 active cells", "(k=0, j=0, i=0)", "median -20", "positive"]),
    ("elevation as depth, faces in order", corner_draft,
     lambda d: d.values("corners").__isub__(np.array([0.0, 0.0, 5000.0])),
     ["depths come out negative (median -2970 m", "positive"]),
    ("bottom above top", corner_draft, swapped_faces,
     ["bottom lies above the top in 60 active cells", "by 20 m", "swap top and bottom"]),
    ("one box upside down", box_draft, put("bottom", CUBE_123, 1990.0),
     ["bottom lies above the top in 1 active cell", "(k=1, j=2, i=3)", "by 30 m"]),
    ("above the surface", corner_draft, put("corners", (0, 2, 3, slice(0, 4), 2), -5.0),
     ["1 active cell reaches above the surface", "(k=0, j=2, i=3)", "depth of -5 m",
      "[earth] surface"]),
    # bodies
    ("negative volume", corner_draft,
     put("corners", CUBE_123, drafts.corner_values()[CUBE_123][[1, 0, 3, 2, 5, 4, 7, 6]]),
     ["1 active cell has a negative volume", "(k=1, j=2, i=3)", "volume -300000 m3",
      "order of its corners"]),
    ("folded to nothing", corner_draft,
     put("corners", (*CUBE_123, slice(0, 8), 2), [2020, 2040, 2040, 2020, 2040, 2020, 2020, 2040]),
     ["1 active cell has a negative volume or is folded", "(k=1, j=2, i=3)"]),
    ("missing corners", corner_draft, put("corners", (*CUBE_123, 5, 0), np.nan),
     ["1 active cell has no corners", "(k=1, j=2, i=3)", "mark them inactive"]),
    ("undeclared fill value", corner_draft, put("corners", (*CUBE_123, 5, 0), 1e30),
     ["1 active cell has no corners", "undeclared fill value", "(k=1, j=2, i=3)"]),
    ("missing box side", box_draft, put("dx", (2, 3), np.nan),
     ["variable 'dx' has no value in 3 active cells", "(k=0, j=2, i=3)"]),
    ("negative side", box_draft, put("dy", (2, 3), -150.0),
     ["dy <= 0", "(k=0, j=2, i=3) (-150 m)"]),
    ("area zero", lambda: area_draft(), put("area", (2, 3), 0.0),
     ["'area' is 0 m2 in (k=0, j=2, i=3)"]),
    ("overlap", corner_draft, put("corners", (*CUBE_123, slice(4, 8), 2), 2045.0),
     ["1 active cell overlaps the cell below", "(k=1, j=2, i=3)", "5 m below the top of (k=2, j=2",
      'accept = ["overlap"]']),
    ("overlapping boxes", box_draft, put("bottom", CUBE_123, 2047.0),
     ["1 active cell overlaps", "7 m below", 'accept = ["overlap"]']),
    # precision
    ("float32 corners", corner_draft, as_float32("corners"),
     ["'corners' is float32", "5800600 m", "precision is only 0.5 m", "'origin' attribute"]),
    ("float32 x", box_draft, as_float32("x"), ["'x' is float32", "0.031 m", "float64"]),
    ("origin of four", corner_draft, attr("corners", origin=[1.0, 2.0, 3.0, 4.0]),
     ["'corners' has origin", "2 or 3 number(s)"]),
    # pressure
    ("gap", corner_draft, put("pressure", (2, *CUBE_123), np.nan),
     ["step 2 (2001-12-31): 1 active cell has no pressure", "(k=1, j=2, i=3)", "fill the gap"]),
    ("appears later", corner_draft, put("pressure", (0, *CUBE_123), np.nan),
     ["step 0 (2000-01-01): 1 active cell has no pressure", "(k=1, j=2, i=3)",
      "there is one at step 1 (2000-12-31)"]),
    ("zero pressure", corner_draft, put("pressure", (1, *CUBE_123), 0.0),
     ["step 1 (2000-12-31): 1 active cell has a pressure <= 0", "(k=1, j=2, i=3), 0 bar",
      "mark them in 'active'", 'accept = ["pressure-not-positive"]']),
    # 22.7 kPa/m x 2030 m = 460.81 bar
    ("lithostatic", corner_draft, put("pressure", (1, *CUBE_123), 900.0),
     ["step 1 (2000-12-31)", "(k=1, j=2, i=3): 900 bar at a depth of 2030 m", "limit 460.81 bar",
      'accept = ["lithostatic"]']),
    # 13000 psi x 6894.757 Pa = 896.318 bar
    ("lithostatic in psi", corner_draft,
     lambda d: (attr("pressure", units="psi")(d), scaled("pressure", 14.5)(d),
                put("pressure", (1, *CUBE_123), 13000.0)(d)),
     ["896.318 bar (13000 psi in the file)"]),
    ("initial pressure too high", corner_draft,
     add("initial_pressure", CELLS, np.full(FULL, 700.0), units="bar"),
     ["initial_pressure: 60 active cells have a pressure above lithostatic", "700 bar"]),
    ("nothing active", corner_draft, add("active", CELLS, np.zeros(FULL, "i1")),
     ["no cell is active", "60 are marked inactive", "check 'active'"]),
    ("no pressure anywhere", corner_draft, put("pressure", ..., np.nan),
     ["no cell is active", "missing value of 'pressure'"]),
    ("nothing solid", corner_draft, put("corners", (..., 2), 2000.0), ["no cell is active"]),
    # dates
    ("no reference date", corner_draft, attr("time", units="days"),
     ["'time' has units 'days'", "no reference date", "days since 1990-01-01"]),
    ("no time units", corner_draft, drop("time", "units"), ["'time' has no units"]),
    ("months", corner_draft, attr("time", units="months since 2000-01-01"),
     ["'months since 2000-01-01'", "differ in length", "days since"]),
    ("calendar", corner_draft, attr("time", calendar="360_day"),
     ["calendar '360_day'", "proleptic_gregorian"]),
    ("impossible date", corner_draft, attr("time", units="days since 2000-13-45"),
     ["'time' (units 'days since 2000-13-45'", "cannot be read as dates"]),
    ("far future", corner_draft, put("time", 2, 1e6), ["reaches the year 4737", "check the unit"]),
    ("missing date", corner_draft, put("time", 1, np.nan), ["'time' has no value at step 1"]),
    ("duplicate date", corner_draft, put("time", 2, 365.0),
     ["step 2 (2000-12-31) repeats step 1", "remove one"]),
    ("backwards", corner_draft, put("time", 2, 10.0),
     ["goes backwards at step 2 (2000-01-11)", "after step 1 (2000-12-31)", "sort the steps"]),
    # fractions and regions
    ("porosity in percent", corner_draft, add("porosity", CELLS, np.full(FULL, 20.0), units="1"),
     ["'porosity' is 20 in (k=0, j=0, i=0)", "percent?", 'accept = ["porosity"]']),
    ("net to gross negative", corner_draft,
     lambda d: (add("net_to_gross", CELLS, np.full(FULL, 0.8), units="1")(d),
                put("net_to_gross", CUBE_123, -0.1)(d)),
     ["'net_to_gross' is -0.1 in (k=1, j=2, i=3)", "outside 0 to 1 in 1 active cell"]),
    ("porosity in time", corner_draft,
     add("porosity", ("time", *CELLS), np.full((3, *FULL), 0.2), units="1"),
     ["'porosity' changes in time", "static"]),
    ("region not listed", corner_draft,
     add("region", CELLS, np.full(FULL, 7), flag_values=[1, 2], flag_meanings="north south"),
     ["region 7, which flag_values does not list (it has 1 (north), 2 (south)), in 60 active",
      "(k=0, j=0, i=0)"]),
    ("region names too few", corner_draft,
     add("region", CELLS, np.full(FULL, 1), flag_values=[1, 2], flag_meanings="north"),
     ["2 flag_values and 1 flag_meanings", "no blank"]),
    ("half a flag", corner_draft, add("region", CELLS, np.full(FULL, 1), flag_values=[1]),
     ["flag_values but not its partner"]),
    ("no region in a cell", corner_draft,
     add("region", CELLS, np.where(np.arange(60).reshape(FULL) == 33, -1, 2), _FillValue=-1),
     ["no region in 1 active cell", "(k=1, j=2, i=3)"]),
    # coordinate systems
    ("crs does not parse", corner_draft,
     lambda d: with_crs(d, "EPSG:32631").attrs("crs").update(crs_wkt="PROJCRS[nonsense"),
     ["variable 'crs'", "does not parse", "EPSG code"]),
    ("crs is empty", corner_draft, add("crs", (), np.int32(0)), ["neither crs_wkt nor CF"]),
    ("grid mapping absent", corner_draft, attr("pressure", grid_mapping="mercator"),
     ["names the variable 'mercator'", "add it or remove"]),
    ("degrees", corner_draft, lambda d: with_crs(d, "EPSG:4326"),
     ["WGS 84 (EPSG:4326)", "degrees", "project the grid"]),
    ("counts to the west", corner_draft, lambda d: with_crs(d, "EPSG:2048"), ["to the west"]),
    ("outside its area", corner_draft, lambda d: with_crs(d, "EPSG:28992"),
     ["outside the area of use of Amersfoort / RD New (EPSG:28992)", "swapped",
      'accept = ["area-of-use"]']),
    ("two kinds of feet", corner_draft,
     lambda d: (with_crs(d, "EPSG:2276"), attr("corners", units="ft")(d)),
     ["'corners' has units 'ft' (0.3048 m)", "0.3048006096 m", "US_survey_foot"]),
    ("two vertical datums", box_draft, attr("bottom", vertical_datum="ground"),
     ["different vertical_datum", "ground, mean sea level"]),
]


def area_draft():
    """Boxes with an area instead of dx and dy."""
    draft = box_draft()
    draft.drop("dx")
    draft.drop("dy")
    draft.add("area", ("j", "i"), np.full((NJ, NI), drafts.DX * drafts.DY), units="m2")
    return draft


@pytest.mark.parametrize(("make", "change", "parts"), [b[1:] for b in BROKEN],
                         ids=[b[0] for b in BROKEN])
def test_broken_grid(tmp_path, make, change, parts):
    draft = make()
    change(draft)
    path = draft.write(tmp_path / "broken.nc")
    with pytest.raises(InputError) as caught:
        open_grid(path)
    message = str(caught.value)
    assert message.startswith(str(path))
    assert "\n" not in message
    for part in parts:
        assert part in message


@pytest.mark.parametrize("make", [corner_draft, box_draft])
def test_the_drafts_themselves_are_sound(tmp_path, make):
    # so that each case above fails by its own change only
    cells = open_grid(with_crs(make(), "EPSG:32631").write(tmp_path / "sound.nc"))
    assert cells.attrs["warnings"] == []


def test_places_in_a_cell_table(tmp_path):
    draft = as_table(corner_draft())
    draft.add("cell_id", ("cell",), np.arange(60) + 1000)
    draft.values("pressure")[1, 33] = 900.0
    with pytest.raises(InputError, match=r"\(cell=1033\): 900 bar"):
        open_grid(draft.write(tmp_path / "table.nc"))


def test_not_a_file(tmp_path):
    with pytest.raises(InputError, match="no such file"):
        open_grid(tmp_path / "absent.nc")
    (tmp_path / "folder.nc").mkdir()
    with pytest.raises(InputError, match="a folder"):
        open_grid(tmp_path / "folder.nc")


@pytest.mark.parametrize(("content", "part"), [(b"", "it is empty"), (b"x,y\n1,2\n", "b'x,y")])
def test_not_netcdf(tmp_path, content, part):
    path = tmp_path / "table.nc"
    path.write_bytes(content)
    with pytest.raises(InputError, match=part):
        open_grid(path)


@pytest.mark.parametrize("share", [0.05, 0.3, 0.6, 0.9])
def test_truncated(tmp_path, share):
    path = corner_draft().write(tmp_path / "cut.nc")
    content = path.read_bytes()
    path.write_bytes(content[:int(len(content) * share)])
    with pytest.raises(InputError, match="truncated or damaged"):
        open_grid(path)


@pytest.mark.parametrize("share", [0.03, 0.3, 0.6, 0.99])
@pytest.mark.parametrize("unlimited", ["", "time"])
@pytest.mark.parametrize("kind", ["NETCDF3_CLASSIC", "NETCDF3_64BIT_OFFSET"])
def test_truncated_netcdf_3(tmp_path, kind, unlimited, share):
    # the C library itself reads such a file without complaint
    path = corner_draft().write(tmp_path / "cut.nc", kind, unlimited)
    assert open_grid(path).sizes["cell"] == 60
    content = path.read_bytes()
    path.write_bytes(content[:int(len(content) * share)])
    with pytest.raises(InputError, match="truncated or damaged"):
        open_grid(path)


def test_netcdf_5_cannot_be_checked(tmp_path):
    path = corner_draft().write(tmp_path / "five.nc", "NETCDF3_64BIT_DATA")
    with pytest.raises(InputError, match="write it as NetCDF-4"):
        open_grid(path)


def test_unknown_ending(tmp_path):
    path = tmp_path / "grid.xyz"
    path.write_text("")
    with pytest.raises(InputError, match=r"no reader takes files ending in '.xyz'.*\.nc"):
        open_grid(path)


def test_a_giant_is_refused_before_it_is_read(tmp_path):
    import netCDF4

    path = tmp_path / "giant.nc"
    with netCDF4.Dataset(path, "w") as file:
        for name, size in {"time": 3, "k": 10_000, "j": 100_000, "i": 100_000, "corner": 8,
                           "xyz": 3}.items():
            file.createDimension(name, size)
        for name, dims in {"pressure": ("time", *CELLS),
                           "corners": (*CELLS, "corner", "xyz")}.items():
            file.createVariable(name, "f4", dims, chunksizes=(1,) * len(dims))
    with pytest.raises(CannotDo, match=r"claims 1e\+14 cells and 3 steps.*GiB"):
        open_grid(path)


def test_lists_for_numbers(tmp_path):
    import netCDF4

    path = corner_draft().write(tmp_path / "ragged.nc")
    with netCDF4.Dataset(path, "a") as file:
        ragged = file.createVLType(np.float64, "ragged")
        file.createVariable("active", ragged, CELLS)
    with pytest.raises(InputError, match="'active' holds a list in each cell"):
        open_grid(path)


def test_a_reader_that_forgot_something(tmp_path):
    from subside.grid import HeldStream
    from subside.grid.checks import Findings, run_checks

    cells = open_grid(corner_draft().write(tmp_path / "grid.nc"))
    with pytest.raises(InputError, match=r"returned nothing for 'volume'.*tell its author"):
        run_checks(cells.drop_vars("volume"), 0.0, Findings("grid.xyz"),
                   HeldStream(cells["pressure"].values))


def test_two_coordinate_systems(tmp_path):
    path = with_crs(corner_draft(), "EPSG:32631").write(tmp_path / "grid.nc")
    with pytest.raises(InputError, match=r"EPSG:32631\) but crs = \"EPSG:23031\".*remove the wro"):
        open_grid(path, crs="EPSG:23031")
    with pytest.raises(InputError, match="crs = \"EPSG:1\" is no coordinate system"):
        open_grid(path, crs="EPSG:1")


def test_accept_turns_an_error_into_a_warning(tmp_path):
    draft = corner_draft()
    draft.values("pressure")[1, 1, 2, 3] = 900.0
    path = draft.write(tmp_path / "high.nc")
    cells = open_grid(path, accept=["lithostatic"])
    assert any(w.startswith("accepted (lithostatic)") and "900 bar" in w
               for w in cells.attrs["warnings"])


@pytest.mark.parametrize(("word", "part"), [
    ("lithostatik", "Did you mean 'lithostatic'"),
    ("negative-volume", "cannot be accepted, nothing sensible"),
    ("pressure-jump", "it is a warning already"),
])
def test_unknown_word_in_accept(tmp_path, word, part):
    path = corner_draft().write(tmp_path / "grid.nc")
    with pytest.raises(InputError, match=part):
        open_grid(path, accept=[word])


@pytest.mark.parametrize(("initial", "part"), [
    ("350", "has no unit"), ({"field": "p0"}, "field 'p0', which the grid does not have"),
    ({"fields": "p0"}, "write \"first\""), (float("nan"), "not a finite number"),
    ("700 bar", "initial_pressure: 60 active cells have a pressure above lithostatic"),
])
def test_bad_initial_pressure(tmp_path, initial, part):
    path = corner_draft().write(tmp_path / "grid.nc")
    with pytest.raises(InputError, match=part):
        open_grid(path, initial_pressure=initial)


def test_the_sea_above_the_seabed_weighs_too(tmp_path):
    # rock 22.7 kPa/m x (2030 - 1500) m = 120.31 bar, sea 1025 kg/m3 x 9.81 m/s2 x 1500 m =
    # 150.829 bar: 271.139 bar in all. Hydrostatic, 9.81 kPa/m x 2030 m = 199.1 bar, lies above the
    # rock alone and must pass.
    draft = corner_draft()
    draft.values("pressure")[...] = 199.1
    assert open_grid(draft.write(tmp_path / "sea.nc"), surface=1500.0).sizes["cell"] == 60
    draft.values("pressure")[1, 1, 2, 3] = 271.2
    with pytest.raises(InputError, match=r"271\.2 bar at a depth of 2030 m \(limit 271\.139 bar, "
                       r"22\.7 kPa/m below the surface plus 150\.829 bar of sea water above it\)"):
        open_grid(draft.write(tmp_path / "high.nc"), surface=1500.0)
    draft.values("pressure")[1, 1, 2, 3] = 271.1
    assert open_grid(draft.write(tmp_path / "just.nc"), surface=1500.0).sizes["cell"] == 60


def test_the_ground_above_the_datum_carries_no_sea(tmp_path):
    # ground 100 m above the datum: 22.7 kPa/m x 2130 m = 483.51 bar
    draft = corner_draft()
    draft.values("pressure")[1, 1, 2, 3] = 484.0
    with pytest.raises(InputError, match=r"limit 483\.51 bar, 22\.7 kPa/m below the surface\)"):
        open_grid(draft.write(tmp_path / "high.nc"), surface=-100.0)
