"""Wrong scenarios, points and surveys through the real command: exit 2, one paragraph that names
the place, the value and the way out, and nothing written."""

from __future__ import annotations

import shutil
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path

import netCDF4
import pytest
from invented_fields import X0, Y0
from small_field import append, edit, files_of, write_grid

Change = Callable[[Path], object]


def key(old: str, new: str, file: str = "scenario.toml") -> Change:
    """Put other words in the place of some."""
    return lambda folder: edit(folder, old, new, file)


def more(text: str) -> Change:
    """Add tables at the end."""
    return lambda folder: append(folder, text)


def law(text: str, **tables: str) -> Change:
    """Another `[compaction]` table."""
    return key('law = "linear"\nuniaxial_compressibility = "1e-5 1/bar"', text)


def cm(value: str) -> Change:
    """Another value of the compressibility."""
    return key('"1e-5 1/bar"', value)


def bounds(west: float, south: float, east: float, north: float, spacing: str = "100 m") -> Change:
    """A map with bounds relative to the middle of the field."""
    return more(f'[map]\nspacing = "{spacing}"\n'
                f"bounds = [{X0 + west}, {Y0 + south}, {X0 + east}, {Y0 + north}]\n")


def raw(content: bytes, file: str = "scenario.toml") -> Change:
    """Other bytes in the place of a file."""
    return lambda folder: (folder / file).write_bytes(content)


LINEAR = 'law = "linear"\nuniaxial_compressibility = "1e-5 1/bar"'
COMPACTION = f"[compaction]\n{LINEAR}"
ISOTACH = """law = "isotach"
reference_compressibility = "1e-5 1/bar"
direct_compressibility = "0.5e-5 1/bar"
rate_exponent = 0.02
reference_stress_rate = "3e-4 bar/year"
initial_effective_stress = "300 bar"
"""
EARTH = 'model = "half-space"\npoisson_ratio = 0.25'

BROKEN: dict[str, tuple[Change, list[str]]] = {
    # keys
    "unknown table": (more("[erath]\nx = 1\n"),
                      ["unknown key 'erath'", "Did you mean 'earth'?"]),
    "unknown key at the top": (key("title =", "titel ="), ["'titel'", "Did you mean 'title'?"]),
    "unknown key of the grid": (key('file = "grid.nc"', 'file = "grid.nc"\ncsr = "EPSG:32631"'),
                                ["'grid.csr'", "Did you mean 'crs'?"]),
    "unknown key of the law": (key("uniaxial_comp", "unaxial_comp"),
                               ["[compaction]", "law 'linear' has no key 'unaxial_compressibility'",
                                "Did you mean 'uniaxial_compressibility'?"]),
    "unknown key of the earth": (key("poisson_ratio", "poison_ratio"),
                                 ["[earth]: model 'half-space' has no key 'poison_ratio'",
                                  "Did you mean 'poisson_ratio'?"]),
    "unknown key of the map": (more('[map]\nspaceing = "100 m"\n'),
                               ["'map.spaceing'", "Did you mean 'spacing'?"]),
    "unknown key of the solver": (key("tolerance = 1e-3", "tolerence = 1e-3"),
                                  ["'solver.tolerence'", "Did you mean 'tolerance'?"]),
    "unknown key of the output": (more('[output]\nfiel = "a.nc"\n'),
                                  ["'output.fiel'", "Did you mean 'file'?"]),
    "unknown key of the time": (more('[time]\nstrat = "2000-01-01"\n'),
                                ["'time.strat'", "Did you mean 'start'?"]),
    "unknown key of the points": (key('[points]\nfile', '[points]\nfils'), ["'points.f"]),
    "missing grid": (key('[grid]\nfile = "grid.nc"\n', ""), ["key 'grid' is missing"]),
    "empty list of grids": (key('[grid]\nfile = "grid.nc"\n', "grid = []\n"),
                            ["[[grid]] is empty", "name at least one"]),
    "missing law": (key('law = "linear"\n', ""), ["'compaction.law' is missing"]),
    "missing key of the law": (law('law = "linear"'),
                               ["law 'linear' needs the key 'uniaxial_compressibility'",
                                'for example uniaxial_compressibility = "1.1e-5 1/bar"']),
    "missing key of the earth": (key("poisson_ratio = 0.25\n", ""),
                                 ["model 'half-space' needs the key 'poisson_ratio'", '"0.25"']),
    # values and units
    "no unit": (cm('"1e-5"'), ["uniaxial_compressibility = '1e-5' has no unit", '"1e-5 1/Pa"']),
    "unit of another kind": (cm('"1e-5 bar"'), ["uniaxial_compressibility = '1e-5 bar'",
                                                "unit 'bar' is not a unit of compressibility"]),
    "unknown unit": (cm('"1e-5 1/barz"'), ["unknown unit '1/barz'", "known are for example"]),
    "gauge unit": (key('file = "grid.nc"', 'file = "grid.nc"\ninitial_pressure = "300 barg"'),
                   ["initial_pressure = '300 barg'", "gauge", "add the atmosphere"]),
    "negative": (cm('"-1e-5 1/bar"'), ["uniaxial_compressibility = -1e-10 1/Pa",
                                       "at least 0 1/Pa"]),
    "too large": (cm('"1e-5 1/Pa"'), ["= 1e-05 1/Pa is outside its bounds", "at most 1e-06 1/Pa"]),
    "NaN as text": (cm('"nan 1/bar"'), ["'nan 1/bar' is not a finite number"]),
    "NaN as a number": (cm("nan"), ["uniaxial_compressibility = nan is not a finite number"]),
    "words": (cm('"soft"'), ["'soft' is not a quantity", 'write "NUMBER UNIT"']),
    "true": (cm("true"), ["= True is not a quantity"]),
    "no unit on a rate": (law(ISOTACH.replace('"3e-4 bar/year"', "3e-4")),
                          ["reference_stress_rate = 0.0003 has no unit",
                           "times and rates need one"]),
    "poisson 0.5": (key("0.25", "0.5"), ["poisson_ratio = 0.5 is outside", "below 0.5"]),
    "poisson by field": (key("0.25", '{ field = "cm" }'),
                         ["poisson_ratio must be one quantity"]),
    "unknown form": (cm('{ fild = "cm" }'), ["is none of: a quantity", "{ field = NAME }"]),
    "an unknown distribution": (cm('{ distribution = "lognrom", central = "1e-5 1/bar" }'),
                                ["'lognrom'", "scipy.stats", "Did you mean 'lognorm'?"]),
    "an unknown key of a distribution": (
        cm('{ distribution = "lognorm", s = 0.3, typo = 3, central = "1e-5 1/bar" }'),
        ["'lognorm' has no key 'typo'", "scale"]),
    "no central value": (cm('{ distribution = "lognorm", s = 0.3 }'),
                         ["needs the key 'central'"]),
    "form of a later version": (cm('{ correlation = "newman", of = "porosity" }'),
                                ["{ correlation = ... } is not available in this version",
                                 "give a quantity"]),
    "tolerance": (key("1e-3", "0.5"), ["solver.tolerance = 0.5", "less than or equal to 0.01"]),
    "method": (key("tolerance = 1e-3", 'method = "direkt"'),
               ["[solver] method = 'direkt'", "Did you mean 'direct'?"]),
    "title of the wrong kind": (key('"small field"', "3"), ["title = 3", "valid string"]),
    # laws, models, regions, fields
    "unknown law": (key('"linear"', '"linaer"'), ["[compaction] law", "'linaer'",
                                                  "Did you mean 'linear'?"]),
    "unknown model": (key('"half-space"', '"half-spaces"'),
                      ["[earth] model", "Did you mean 'half-space'?"]),
    "layers of a later version": (more('[earth.layer]\ntop = "0 m"\n'),
                                  ["model 'half-space' takes no [[earth.layer]] tables"]),
    "unknown field": (cm('{ field = "cmm" }'),
                      ["[compaction] uniaxial_compressibility", "no field 'cmm'",
                       "Did you mean 'cm'?"]),
    "field with gaps": (cm('{ field = "gappy" }'),
                        ["'gappy' has no value in 1 active cell, first (cell=1)", "fill the gaps"]),
    "field of another kind": (cm('{ field = "p0" }'), ["'p0' is in 'Pa', which is not a unit"]),
    "field with an unknown unit": (cm('{ field = "odd" }'),
                                   ["'odd' cannot be used, it has units 'barz'", "'1/Pa'"]),
    "unknown region": (key('law = "linear"', 'law = "linear"\nregions = ["nort"]'),
                       ["no region 'nort'", "Did you mean 'north'?"]),
    "unknown region of a value": (cm('{ by_region = { nord = "1e-5 1/bar" } }'),
                                  ["no region 'nord'", "Did you mean 'north'?"]),
    "no value for a region": (cm('{ by_region = { north = "1e-5 1/bar" } }'),
                              ["by_region gives no value for 'south'", "add it"]),
    "region in two blocks": (
        key(COMPACTION, f'[[compaction]]\nregions = ["north"]\n{LINEAR}\n'
            f'[[compaction]]\nregions = ["south", "north"]\n{LINEAR}'),
        ["[[compaction]] number 2: region 'north' is already in [[compaction]] number 1"]),
    "two rest blocks": (key(COMPACTION, f"[[compaction]]\n{LINEAR}\n[[compaction]]\n{LINEAR}"),
                        ["[[compaction]] number 2", "name no regions"]),
    "cell in no block": (key('law = "linear"', 'law = "linear"\nregions = ["north"]'),
                         ["region 'south' (3 cells) belongs to no [[compaction]]", "add it"]),
    "rebound above loading": (cm('"1e-5 1/bar"\nunloading_compressibility = "2e-5 1/bar"'),
                              ["[compaction]: unloading_compressibility = 2e-05 1/bar",
                               "= 1e-05 1/bar", "give at most the same"]),
    "rebound above loading in a cell": (
        cm('{ field = "cm" }\nunloading_compressibility = "0.9e-5 1/bar"'),
        ["[compaction], (cell=0): unloading_compressibility = 9e-06 1/bar", "= 8e-06 1/bar"]),
    "release in words": (cm('"1e-5 1/bar"\nhorizontal_release = "matchd"'),
                         ["horizontal_release = 'matchd'", "Did you mean 'matched'?"]),
    "release negative": (cm('"1e-5 1/bar"\nhorizontal_release = -1'),
                         ["horizontal_release = -1", "at least 0"]),
    "release as a list": (cm('"1e-5 1/bar"\nhorizontal_release = [1]'),
                          ["horizontal_release = [1] is not a quantity"]),
    "own without stiffness": (cm('"1e-5 1/bar"\nhorizontal_release = "own"'),
                              ["[earth] young_modulus is missing",
                               'young_modulus = "10 GPa"']),
    # earth
    "basement inside a cell": (key(EARTH, 'model = "rigid-basement"\npoisson_ratio = 0.25\n'
                                   'basement_depth = "2940 m"'),
                               ["model = 'rigid-basement'", "and 2940 m", "(cell=0)",
                                "from 2900 to 2950 m", "basement below the cells"]),
    "basement above the ground": (key(EARTH, 'model = "rigid-basement"\npoisson_ratio = 0.25\n'
                                      'basement_depth = "-1 km"'),
                                  ["basement_depth = -1000 m is not below the ground"]),
    "surface below the cells": (key("0.25", '0.25\nsurface = "2910 m"'),
                                ["reach above the surface", "2900 m", "[earth] surface"]),
    # time
    "start before the first step": (more('[time]\nstart = "1999-01-01"\n'),
                                    ["[time] start = 1999-01-01 lies before", "2000-01-01",
                                     "initial_pressure", '"350 bar"']),
    "start after the last step": (more('[time]\nstart = "2010-01-01"\n'),
                                  ["start = 2010-01-01 is not before the last pressure step",
                                   "2001-12-31"]),
    "start is no date": (more('[time]\nstart = "1.1.2000"\n'),
                         ["start = '1.1.2000' is not a date", "YYYY-MM-DD"]),
    "start long ago": (more('[time]\nstart = "0001-01-01"\n'), ["outside the years 1700 to 2250"]),
    "start with a time zone": (more("[time]\nstart = 2000-01-01T00:00:00Z\n"),
                               ["has a time zone"]),
    "initial pressure that jumps": (
        key('file = "grid.nc"', 'file = "grid.nc"\ninitial_pressure = "310 bar"'),
        ["(cell=0): [grid] initial_pressure differs", "by up to 10 bar (310 against 300 bar)",
         "jump in no time", "before the first step"]),
    "initial pressure from an unknown field": (
        key('file = "grid.nc"', 'file = "grid.nc"\ninitial_pressure = { field = "p9" }'),
        ["'p9'", "Did you mean 'p0'?"]),
    "initial pressure above lithostatic": (
        lambda folder: (append(folder, '[time]\nstart = "1999-01-01"\n'),
                        edit(folder, 'file = "grid.nc"',
                             'file = "grid.nc"\ninitial_pressure = "10000 psi"')),
        # 22.7 kPa/m x 2925 m = 663.975 bar; 10000 psi x 6894.757 Pa = 689.476 bar
        ["initial_pressure: 6 active cells", "689.476 bar", "limit 663.975 bar"]),
    "output dates outside": (more('[output]\ntimes = ["2001-01-01", "2003-01-01"]\n'),
                             ["[output] times: 2003-01-01 lies outside", "2000-01-01 to 2001-12-31",
                              "not extrapolated"]),
    "output dates backwards": (more('[output]\ntimes = ["2001-06-01", "2001-01-01"]\n'),
                               ["[output] times", "must increase"]),
    "no output dates": (more("[output]\ntimes = []\n"),
                        ["[output] times is an empty list", '"all"']),
    "output dates in words": (more('[output]\ntimes = "alle"\n'), ["output.times = 'alle'"]),
    # map and output
    "bounds not multiples": (bounds(0, 0, 1050, 1000),
                             ["[map] bounds: xmax - xmin is 1050 m", "multiple", "100 m"]),
    "bounds the wrong way round": (bounds(1000, 0, 0, 1000), ["[map] bounds", "smaller one first"]),
    "one pixel": (bounds(0, 0, 100, 100), ["1 x 1 pixels", "at least 2 x 2", "smaller spacing"]),
    "a giant map": (bounds(0, 0, 1e6, 1e6, "1 m"), ["1000000 x 1000000 pixels",
                                                    "a larger spacing than 1 m"]),
    "bounds without end": (more("[map]\nbounds = [0, 0, inf, 1]\n"), ["map.bounds = inf",
                                                                      "finite number"]),
    "spacing zero": (more('[map]\nspacing = "0 m"\n'), ["[map] spacing = '0 m' must be above"]),
    "spacing in bar": (more('[map]\nspacing = "1 bar"\n'), ["[map] spacing", "unit of length"]),
    "a map quantity without a map": (more('[output]\nquantities = ["tilt"]\n'),
                                     ["[output] quantities: 'tilt' is a map", "add [map]"]),
    "a region map without a map": (more('[output]\nquantities = ["region_subsidence"]\n'),
                                   ["'region_subsidence' is a map", "add [map]"]),
    "a CRS that no map file can hold": (
        lambda folder: (write_grid(folder / "grid.nc", epsg=3377),
                        edit(folder, 'file = "grid.nc"',
                             'file = "grid.nc"\naccept = ["area-of-use"]')),
        ["grid 'grid.nc'", "CRS"]),
    "unknown quantity": (more('[output]\nquantities = ["tlt"]\n'),
                         ["[output] quantities: 'tlt'", "Did you mean 'tilt'?"]),
    "output is a folder": (
        lambda folder: ((folder / "maps").mkdir(), append(folder, '[output]\nfile = "maps"\n')),
        ["maps' is a folder", "name a file"]),
    "output is the grid": (more('[output]\nfile = "grid.nc"\n'),
                           ["grid.nc' is an input of this run", "Name another file"]),
    # files
    "bad TOML": (raw(b"title = \n"), ["is not valid TOML", "line 1"]),
    "not UTF-8": (raw("title = \"Übung\"\n".encode("latin-1")), ["is not text in UTF-8"]),
    "no such grid": (key('"grid.nc"', '"gird.nc"'), ["gird.nc", "no such file"]),
    "no such points": (key('"points.csv"', '"point.csv"'), ["point.csv' does not exist"]),
    "no such survey": (key('"survey.csv"', '"surveys.csv"'), ["surveys.csv' does not exist"]),
    "no such plug-in": (key('title = "small field"', 'plugins = ["law.py"]'),
                        ["law.py' does not exist", "plugins"]),
    "two grids": (key('[grid]\nfile = "grid.nc"',
                      '[[grid]]\nfile = "grid.nc"\n[[grid]]\nfile = "grid.nc"'),
                  ["it has 2 [[grid]] tables", "one by one"]),
    "unknown check": (key('file = "grid.nc"', 'file = "grid.nc"\naccept = ["lithostatik"]'),
                      ["accept", "Did you mean 'lithostatic'?"]),
    "two coordinate systems": (key('file = "grid.nc"', 'file = "grid.nc"\ncrs = "EPSG:28992"'),
                               ["EPSG:28992", "32631"]),
    # points
    "point above the surface": (
        raw(f"name,x,y,depth\nA,{X0},{Y0},\nB,{X0},{Y0},-5\n".encode(), "points.csv"),
        ["points.csv': point 'B' at depth -5 m lies above", "[earth] surface = 0 m",
         "leave its depth out"]),
    "point below the surface of a model that cannot": (
        lambda folder: (edit(folder, EARTH, 'model = "rigid-basement"\npoisson_ratio = 0.25\n'
                             'basement_depth = "4 km"'),
                        (folder / "points.csv").write_text(
                            f"name,x,y,depth\nA,{X0},{Y0},0\nB,{X0},{Y0},100\n")),
        ["[points] 'B', 100 m below the ground", "'rigid-basement'", "at the surface only",
         "leave its depth out"]),
    "name used twice": (key("B,", "A,", "points.csv"),
                        ["points.csv': the name 'A' is used 2 times"]),
    "point without a name": (key("B,", ",", "points.csv"),
                             ["points.csv', line 3, column 'name'", "empty"]),
    "unknown column": (key("name,x [m]", "name,easting [m]", "points.csv"),
                       ["unknown column 'easting'", "Known: depth, name, x, y"]),
    "semicolons": (raw(b"name;x;y\nA;1;2\n", "points.csv"), ["Separate columns with commas"]),
    "column missing": (raw(b"name,x [m]\nA,1\n", "points.csv"), ["has no column 'y'"]),
    "unit of a column": (key("x [m]", "x [bar]", "points.csv"),
                         ["points.csv', column 'x'", "'bar' is not a unit of length"]),
    "NaN in a column": (key(f"B,{X0 + 800}", "B,nan", "points.csv"),
                        ["points.csv', line 3, column 'x': 'nan' is not a finite number"]),
    "decimal comma": (key(f"B,{X0 + 800}", 'B,"500800,0"', "points.csv"),
                      ["line 3, column 'x': '500800,0'", "the decimal sign is a point"]),
    "values too many": (key(f"{Y0 + 300}", f"{Y0 + 300},7", "points.csv"),
                        ["line 3: it has 4 values for 3 columns"]),
    "blank lines count": (raw(b"name,x,y\n\n\nA,1,two\n", "points.csv"),
                          ["line 4, column 'y': 'two'"]),
    "points without rows": (raw(b"name,x,y\n", "points.csv"), ["no rows below"]),
    "points empty": (raw(b"", "points.csv"), ["is empty", "name, x, y"]),
    "points not UTF-8": (raw(b"name,x,y\n\xd6,1,2\n", "points.csv"), ["is not text in UTF-8"]),
    # survey
    "kind": (key("2000-06-01,height", "2000-06-01,hight", "survey.csv"),
             ["survey.csv', line 2: kind 'hight' is none of height"]),
    "date": (key("2001-06-01", "June 2001", "survey.csv"),
             ["survey.csv', line 3: date 'June 2001' is not a date", "YYYY-MM-DD"]),
    "sigma": (key("1519.0,2.0", "1519.0,0", "survey.csv"),
              ["survey.csv', line 3: sigma = 0 mm must be above zero"]),
    "value without a unit": (key("value [mm]", "value", "survey.csv"),
                             ["column 'value' has no unit", "'value [m]'"]),
}

@pytest.mark.parametrize("label", BROKEN)
def test_broken_scenario(label, field, subside, monkeypatch):
    change, words = BROKEN[label]
    change(field)
    before = files_of(field.parent)
    monkeypatch.chdir(field.parent)
    ended = subside("run", field / "scenario.toml")
    assert ended.code == 2, ended.err
    for word in words:
        assert word in ended.message
    assert str(field) in ended.message  # the file it stands in
    assert ended.out == ""
    assert files_of(field.parent) == before


ONLY_RUN = {"output is a folder", "output is the grid"}


@pytest.mark.parametrize("label", [label for label in BROKEN if label not in ONLY_RUN])
def test_check_finds_it_too(label, field, subside):
    """Whatever stops a run stops the check, which computes nothing."""
    change, words = BROKEN[label]
    change(field)
    ended = subside("check", field / "scenario.toml")
    assert (ended.code, ended.out) == (2, "")
    for word in words:
        assert word in ended.message


def test_the_field_itself_is_sound(field, subside):
    """So that each case above fails by its own change only."""
    ended = subside("run", field / "scenario.toml", "--no-figures")
    assert (ended.code, ended.err) == (0, "")
    assert (field / "scenario.nc").is_file()


@pytest.mark.parametrize("label", ["unknown key of the law", "unknown unit", "not UTF-8"])
def test_as_the_shell_sees_it(label, field):
    change, words = BROKEN[label]
    change(field)
    before = files_of(field)
    command = shutil.which("subside", path=str(Path(sys.executable).parent))
    assert command is not None
    ended = subprocess.run([command, "run", field / "scenario.toml"], capture_output=True,
                           text=True, check=False)
    assert ended.returncode == 2
    assert ended.stdout == ""
    assert ended.stderr.startswith("subside: ") and ended.stderr.count("\n") == 1
    for word in words:
        assert word in ended.stderr
    assert files_of(field) == before


def test_a_law_that_fails_on_the_way_names_the_cell(field, subside):
    """Effective stress 300 bar, and one cell of the second block loaded backwards by 310 bar."""
    with netCDF4.Dataset(field / "grid.nc", "a") as grid:
        grid["pressure"][:, 4] = [300.0, 450.0, 610.0]
    edit(field, COMPACTION, f'[[compaction]]\nregions = ["north"]\n{LINEAR}\n'
                            f'[[compaction]]\n{ISOTACH}')
    ended = subside("run", field / "scenario.toml")
    assert ended.code == 2
    assert ("[[compaction]] number 2, (cell=4): the vertical effective stress is -10 bar"
            in ended.message)
    assert "raise initial_effective_stress" in ended.message
    assert not (field / "scenario.nc").exists()


# -- broken grids ------------------------------------------------------------------------------


def _spoil(name: str, index: object, value: float) -> Change:
    def change(folder: Path) -> None:
        with netCDF4.Dataset(folder / "grid.nc", "a") as grid:
            grid[name][index] = value
    return change


def _without_units(folder: Path) -> None:
    with netCDF4.Dataset(folder / "grid.nc", "a") as grid:
        grid["pressure"].delncattr("units")


def _upside_down(folder: Path) -> None:
    with netCDF4.Dataset(folder / "grid.nc", "a") as grid:
        grid["top"].positive = "up"


GRIDS: dict[str, tuple[Change, list[str]]] = {
    "no units": (_without_units, ["variable 'pressure' has no units", 'units = "Pa"']),
    "gap": (_spoil("pressure", (1, 3), float("nan")),
            ["step 1 (2000-12-31)", "has no pressure", "(cell=3)", "fill the gap"]),
    "too high": (_spoil("pressure", (2, 3), 900.0),
                 ["(cell=3): 900 bar", "limit 663.975 bar", 'accept = ["lithostatic"]']),
    "negative": (_spoil("pressure", (2, 3), -1.0), ["pressure <= 0", "-1 bar", "(cell=3)"]),
    "inside out": (_spoil("bottom", 3, 2800.0), ["(cell=3)"]),
    "top up, bottom down": (_upside_down, ["6 active cells reach above the surface", "-2900 m"]),
    "repeated date": (_spoil("time", 2, 365.25), ["step 2 (2000-12-31) repeats step 1"]),
    "not NetCDF": (raw(b"x,y\n1,2\n", "grid.nc"), ["grid.nc"]),
    "nothing in it": (raw(b"", "grid.nc"), ["it is empty"]),
    "cut short": (lambda folder: raw((folder / "grid.nc").read_bytes()[:3000], "grid.nc")(folder),
                  ["truncated or damaged"]),
}


@pytest.mark.parametrize("command", ["inspect", "check", "run"])
@pytest.mark.parametrize("label", GRIDS)
def test_broken_grid(label, command, field, subside):
    change, words = GRIDS[label]
    change(field)
    before = files_of(field)
    ended = subside(command, field / ("grid.nc" if command == "inspect" else "scenario.toml"))
    assert (ended.code, ended.out) == (2, "")
    assert str(field / "grid.nc") in ended.message
    for word in words:
        assert word in ended.message
    assert files_of(field) == before


def test_net_to_gross_with_a_hole_gives_no_hole_in_the_map(field, subside):
    write_grid(field / "grid.nc", fields={
        "net_to_gross": ([0.8, 0.8, 0.8, 0.8, float("nan"), 0.8], "1")})
    ended = subside("run", field / "scenario.toml")
    assert ended.code == 2
    assert "'net_to_gross' has no value in 1 active cell, first (cell=4)" in ended.message
    assert not (field / "scenario.nc").exists()
