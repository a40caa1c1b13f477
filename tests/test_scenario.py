"""The scenario file as types: every form of a value comes out as the same SI number."""

from __future__ import annotations

import datetime as dt
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from invented_fields import HALF_SPACE, LINEAR, X0, Y0, write_boxes, write_points, write_scenario

import subside as sd
from subside.errors import InputError
from subside.params import Parameter
from subside.scenario import ByRegion, CellField, Scenario, load_scenario, parameter_value

CM = Parameter("cm", "1/Pa", "compressibility", minimum=0.0, example="1e-5 1/bar")
DELAY = Parameter("delay", "s", "delay time", minimum=0.0, unit_needed=True, example="3 year")
NU = Parameter("nu", "1", "Poisson's ratio", varies=False, maximum=0.5)


def load(folder: Path, text: str) -> Scenario:
    """A scenario of that text."""
    path = folder / "scenario.toml"
    path.write_text(text)
    return load_scenario(path)


# -- values of a parameter ---------------------------------------------------------------------


@pytest.mark.parametrize("raw", ["1e-5 1/bar", "1e-5 bar-1", 1e-10, "1e-10 1/Pa", "1e-10 Pa-1",
                                 "1e-4 1/MPa", {"distribution": "lognorm", "central": "1e-5 1/bar",
                                                "s": 0.3}])
def test_one_number_in_every_form(raw: Any) -> None:
    assert parameter_value(raw, CM, "[t]") == pytest.approx(1e-10, rel=1e-12)


def test_psi() -> None:
    # 1 psi = 4.4482216152605 N / (0.0254 m)^2 = 6894.757293168 Pa (definition of the pound-force)
    value = parameter_value("1e-6 1/psi", CM, "[t]")
    assert value == pytest.approx(1e-6 / 6894.757293168, rel=1e-12)


def test_a_year_is_365_25_days() -> None:
    assert parameter_value("2 year", DELAY, "[t]") == 2 * 365.25 * 86400.0
    with pytest.raises(InputError, match=r"\[t\] delay = 3 has no unit; times and rates need one"):
        parameter_value(3, DELAY, "[t]")
    # a plain number in text has no unit either
    with pytest.raises(InputError, match="'3' has no unit"):
        parameter_value("3", DELAY, "[t]")
    assert parameter_value(0, DELAY, "[t]") == 0.0


def test_a_field_and_values_by_region() -> None:
    assert parameter_value({"field": "cm"}, CM, "[t]") == CellField("cm")
    value = parameter_value({"by_region": {"north": "1e-5 1/bar", "south": 2e-10}}, CM, "[t]",
                            ["north", "south"])
    assert isinstance(value, ByRegion)
    assert value.values == {"north": pytest.approx(1e-10), "south": 2e-10}


def test_a_distribution_of_a_field() -> None:
    raw = {"distribution": "lognorm", "central": {"field": "cm"}}
    assert parameter_value(raw, CM, "[t]") == CellField("cm")


@pytest.mark.parametrize(("raw", "parameter", "part"), [
    ({"field": "a"}, NU, "may not vary"),
    ({"by_region": {"north": 0.2}}, NU, "may not vary"),
    ({"by_region": {"north": "-1 1/Pa"}}, CM, r"\[t\] by_region.north: cm = -1 1/Pa"),
    ({"by_region": {"north": "1 bar"}}, CM, r"\[t\] cm.by_region.north = '1 bar'"),
    ({"by_region": 3}, CM, "is none of: a quantity such as \"1e-5 1/bar\""),
    ({"field": "a", "unit": "b"}, CM, "is none of"),
    ({}, CM, "is none of"),
    ({"from": "overburden", "gradient": "1 MPa/m"}, CM, "not available in this version"),
    (float("inf"), CM, "not a finite number"),
    ([1.0], CM, "is not a quantity"),
    (0.6, NU, "nu = 0.6 is outside its bounds, at most 0.5"),
])
def test_wrong_forms(raw: Any, parameter: Parameter, part: str) -> None:
    with pytest.raises(InputError, match=part):
        parameter_value(raw, parameter, "[t]", ["north"])


def test_an_open_bound_excludes_itself() -> None:
    open_below = Parameter("b", "1", "biot", minimum=0.0, maximum=1.0, open_minimum=True)
    assert parameter_value(1.0, open_below, "[t]") == 1.0
    with pytest.raises(InputError, match="above 0 and at most 1"):
        parameter_value(0.0, open_below, "[t]")


@given(st.recursive(
    st.none() | st.booleans() | st.floats() | st.integers(-10, 10) | st.text(max_size=8),
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(
        st.sampled_from(["field", "by_region", "central", "distribution", "x"]), inner,
        max_size=3), max_leaves=6))
def test_whatever_is_written_gives_a_value_or_a_clear_error(raw: Any) -> None:
    try:
        value = parameter_value(raw, CM, "[t]", ["north"])
    except InputError as error:
        assert "[t]" in str(error)
    else:
        assert isinstance(value, (float, CellField, ByRegion))


# -- the file ----------------------------------------------------------------------------------

SMALL = """
grid = { file = "g.nc" }
compaction = { law = "linear", uniaxial_compressibility = "1e-5 1/bar" }
earth = { model = "half-space", poisson_ratio = 0.25 }
"""


def test_defaults(tmp_path: Path) -> None:
    scenario = load(tmp_path, SMALL)
    assert scenario.grid[0].initial_pressure is None
    assert scenario.compaction[0].horizontal_release == "matched"
    assert scenario.compaction[0].apply_net_to_gross is True
    assert (scenario.solver.method, scenario.solver.tolerance) == ("auto", 1e-4)
    assert scenario.output.times == "all"
    assert scenario.time.start is None and scenario.map is None and scenario.points == []
    assert scenario.earth.surface == 0.0


def test_single_tables_and_lists_are_the_same(tmp_path: Path) -> None:
    tables = '[grid]\nfile = "g.nc"\n[compaction]\nlaw = "linear"\n[earth]\nmodel = "half-space"\n'
    one = load(tmp_path, tables + '[points]\nfile = "p.csv"\n')
    many = load(tmp_path, tables.replace("[grid]", "[[grid]]").replace(
        "[compaction]", "[[compaction]]") + '[[points]]\nfile = "p.csv"\n')
    assert one.grid == many.grid
    assert one.compaction == many.compaction
    assert one.points == many.points


@pytest.mark.parametrize("written", ["1990-01-01", '"1990-01-01"', "1990-01-01T00:00:00",
                                     '"1990-01-01T00:00:00"', '"1990-01-01 00:00"'])
def test_a_date_in_every_form(tmp_path: Path, written: str) -> None:
    scenario = load(tmp_path, SMALL + f"time = {{ start = {written} }}\n"
                                      f"output = {{ times = [{written}] }}\n")
    assert scenario.time.start == dt.datetime(1990, 1, 1)
    assert scenario.output.times == [dt.datetime(1990, 1, 1)]


@pytest.mark.parametrize("written", ["1990", "true", '"1990-13-01"', '"yesterday"', '""',
                                     "07:30:00", "1990-01-01T00:00:00+01:00", "[1990]"])
def test_what_is_no_date(tmp_path: Path, written: str) -> None:
    with pytest.raises(InputError, match=r"start = .*(is not a date|has a time zone)"):
        load(tmp_path, SMALL + f"time = {{ start = {written} }}\n")


def test_lengths(tmp_path: Path) -> None:
    scenario = load(tmp_path, SMALL.replace("poisson_ratio", 'surface = "-12 ft", poisson_ratio')
                    + 'map = { spacing = "0.25 km" }\n')
    assert scenario.earth.surface == pytest.approx(-12 * 0.3048)  # the international foot
    assert scenario.map is not None and scenario.map.spacing == 250.0
    assert scenario.earth.parameters == {"poisson_ratio": 0.25}


def test_paths_are_relative_to_the_file(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    (tmp_path / "a").mkdir()
    load(tmp_path / "a", SMALL)
    monkeypatch.chdir(tmp_path)
    assert load_scenario("a/scenario.toml").resolve("g.nc") == tmp_path / "a" / "g.nc"
    assert load_scenario("a/scenario.toml").resolve("/x/g.nc") == Path("/x/g.nc")


def test_the_record_keys_are_no_keys_of_the_file(tmp_path: Path) -> None:
    for key in ("path", "text", "checksum"):
        with pytest.raises(InputError, match=f"unknown key '{key}'"):
            load(tmp_path, f'{key} = "x"\n' + SMALL)


def test_text_and_checksum_are_those_of_the_file(tmp_path: Path) -> None:
    import hashlib

    scenario = load(tmp_path, SMALL + 'title = "Südfeld"\n')
    assert scenario.title == "Südfeld"
    assert scenario.text == (tmp_path / "scenario.toml").read_text()
    digest = hashlib.sha256((tmp_path / "scenario.toml").read_bytes()).hexdigest()
    assert scenario.checksum == digest


# -- the files of the grid ---------------------------------------------------------------------


def with_files(written: str) -> str:
    """A scenario whose grid has these files, in TOML."""
    return SMALL.replace('"g.nc"', written)


def test_one_file_a_list_or_a_pattern(tmp_path: Path) -> None:
    for name in ("p2.nc", "p1.nc", "q.nc"):
        (tmp_path / name).touch()
    (tmp_path / "p3.nc").mkdir()  # a folder is no file
    assert load(tmp_path, SMALL).grid[0].file == ("g.nc",)
    assert load(tmp_path, SMALL).grid_files() == {"g.nc": tmp_path / "g.nc"}
    found = load(tmp_path, with_files('["q.nc", "p2.nc"]')).grid_files()
    assert list(found.items()) == [("q.nc", tmp_path / "q.nc"), ("p2.nc", tmp_path / "p2.nc")]
    both = {n: tmp_path / n for n in ("p1.nc", "p2.nc")}
    assert load(tmp_path, with_files('"p*.nc"')).grid_files() == both
    assert load(tmp_path, with_files('["p*.nc", "q.nc"]')).grid_files() == (
        both | {"q.nc": tmp_path / "q.nc"})


def test_a_pattern_is_relative_to_the_scenario_and_only_its_star_is_special(
        tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    folder = tmp_path / "run [1]?"
    folder.mkdir()
    (folder / "p1.nc").touch()
    scenario = tmp_path / "scenario.toml"
    load(tmp_path, with_files('"run [1]?/p*.nc"'))
    monkeypatch.chdir(folder)
    files = load_scenario(scenario).grid_files()
    assert files == {"run [1]?/p1.nc": folder / "p1.nc"}
    load(tmp_path, with_files(f'"{folder.as_posix()}/*.nc"'))
    assert list(load_scenario(scenario).grid_files().values()) == [folder / "p1.nc"]


@pytest.mark.parametrize(("written", "part"), [
    ('"p*.nc"', r"grid.file = 'p\*.nc' matches no file in '.*'; check the pattern, which is "
                "relative to the scenario file"),
    ('["q.nc", "q.nc"]', "grid.file names 'q.nc' twice"),
    ('["q.nc", "./q.nc"]', "grid.file names './q.nc' twice"),
    ('["q.nc", "q*"]', "grid.file names 'q.nc' twice"),
])
def test_files_that_do_not_do(tmp_path: Path, written: str, part: str) -> None:
    (tmp_path / "q.nc").touch()
    scenario = load(tmp_path, with_files(written))
    for use in (scenario.grid_files, lambda: sd.run(tmp_path / "scenario.toml")):
        with pytest.raises(InputError, match=rf"scenario '.*scenario\.toml': {part}"):
            use()


@pytest.mark.parametrize("written", ["3", "[]", '[""]', '["a.nc", 3]', '""', "true", '[["a.nc"]]'])
def test_what_is_no_file(tmp_path: Path, written: str) -> None:
    with pytest.raises(InputError, match=r"scenario '.*': grid\.file = .* is no file; write a"):
        load(tmp_path, with_files(written))


HISTORY = [[300.0, 290.0], [270.0, 280.0], [220.0, 260.0], [200.0, 255.0], [190.0, 250.0]]


def write_dates(path: Path, first: int, last: int) -> Path:
    """Dates `first` to ``last - 1`` of two boxes."""
    return write_boxes(path, [X0, X0 + 500], [Y0, Y0], 2900.0, 2950.0, 500.0, 500.0,
                       HISTORY[first:last], years=[float(n) for n in range(first, last)])


@pytest.mark.parametrize(("ranges", "names", "written"), [
    ([(0, 1), (1, 2), (2, 3), (3, 4), (4, 5)], "bdace", '"part-*.nc"'),
    ([(0, 3), (2, 4), (3, 5)], "cab", '["part-a.nc", "part-b.nc", "part-c.nc"]'),
])
def test_a_run_of_several_files_is_that_of_one(tmp_path: Path, ranges: list[tuple[int, int]],
                                               names: str, written: str) -> None:
    import hashlib
    import json

    write_points(tmp_path / "points.csv", [X0, X0 + 700], [Y0, Y0 + 100])
    write_dates(tmp_path / "whole.nc", 0, len(HISTORY))
    more = '[points]\nfile = "points.csv"\n[map]\nspacing = "500 m"'
    whole = sd.run(write_scenario(tmp_path, grid="whole.nc", law=LINEAR, more=more,
                                  name="whole.toml"), output=tmp_path / "whole-result.nc")
    for (first, last), name in zip(ranges, names, strict=True):
        write_dates(tmp_path / f"part-{name}.nc", first, last)
    path = write_scenario(tmp_path, grid="X", law=LINEAR, more=more)
    path.write_text(path.read_text().replace('"X"', written))
    parts = sd.run(path, output=tmp_path / "result.nc")
    assert parts.sizes["time"] == len(HISTORY)
    for name in ("subsidence", "displacement_east", "point_subsidence", "bowl_volume"):
        np.testing.assert_array_equal(parts[name].values, whole[name].values)
    sums = json.loads(parts.attrs["input_checksums"])
    files = [f"part-{name}.nc" for name in names]
    assert set(sums) == {"scenario.toml", "points.csv", *files}
    for name in files:
        digest = hashlib.sha256((tmp_path / name).read_bytes()).hexdigest()
        assert sums[name] == f"sha256:{digest}"
    with pytest.raises(InputError, match=r"part-a\.nc' is an input of this run"):
        sd.run(path, output=tmp_path / "part-a.nc", overwrite=True)


# -- every form of a rock value through a run --------------------------------------------------


@pytest.fixture(scope="module")
def boxes(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Two boxes in two regions whose compressibilities are 1 and 3 times 1e-5 1/bar."""
    folder = tmp_path_factory.mktemp("boxes")
    write_boxes(folder / "grid.nc", [X0, X0 + 500], [Y0, Y0], 2900.0, 2950.0, 500.0, 500.0,
                [[300.0, 300.0], [200.0, 200.0]], region=np.array([1, 2]), names="north south",
                fields={"cm": ([1e-5, 3e-5], "1/bar"), "half": ([0.5, 0.5], "%"),
                        "net_to_gross": ([0.5, 1.0], "1")})
    write_points(folder / "points.csv", [X0, X0 + 700], [Y0, Y0 + 100])
    return folder


def subsidence(folder: Path, law: str) -> np.ndarray:
    """Last subsidence at the points."""
    path = write_scenario(folder, law=law, earth=HALF_SPACE, more='[points]\nfile = "points.csv"')
    return sd.run(path)["point_subsidence"].values[-1]


def test_field_and_regions_and_blocks_agree(boxes: Path) -> None:
    field = subsidence(boxes, 'law = "linear"\nuniaxial_compressibility = { field = "cm" }')
    region = subsidence(boxes, 'law = "linear"\nuniaxial_compressibility = { by_region = '
                               '{ north = "1e-5 1/bar", south = "3e-5 1/bar" } }')
    north = 'law = "linear"\nregions = ["north"]\nuniaxial_compressibility = "1e-5 1/bar"'
    rest = 'law = "linear"\nuniaxial_compressibility = "3e-5 1/bar"'
    path = write_scenario(boxes, law=f"{north}\n[[compaction]]\n{rest}",
                          more='[points]\nfile = "points.csv"')
    path.write_text(path.read_text().replace("[compaction]\nlaw", "[[compaction]]\nlaw", 1))
    blocks = sd.run(path)["point_subsidence"].values[-1]
    np.testing.assert_allclose(region, field, rtol=1e-12)
    np.testing.assert_allclose(blocks, field, rtol=1e-12)
    plain = subsidence(boxes, LINEAR)
    assert (field > 1.5 * plain).all()


def test_biot_scales_the_strain_of_the_linear_law(boxes: Path) -> None:
    np.testing.assert_allclose(subsidence(boxes, LINEAR + "\nbiot = 0.7"),
                               0.7 * subsidence(boxes, LINEAR), rtol=1e-12)


def test_net_to_gross_may_be_left_out_of_account(boxes: Path) -> None:
    with_it = subsidence(boxes, LINEAR)
    without = subsidence(boxes, LINEAR + "\napply_net_to_gross = false")
    # a compressibility of half in the first box does the same as half its thickness
    doubled = subsidence(boxes, 'law = "linear"\napply_net_to_gross = false\n'
                         'uniaxial_compressibility = { by_region = '
                         '{ north = "0.5e-5 1/bar", south = "1e-5 1/bar" } }')
    np.testing.assert_allclose(with_it, doubled, rtol=1e-12)
    assert (without > with_it).all()


def test_forms_of_horizontal_release(boxes: Path) -> None:
    matched = subsidence(boxes, LINEAR)
    number = subsidence(boxes, LINEAR + "\nhorizontal_release = 1.0")
    np.testing.assert_allclose(number, matched, rtol=1e-12)
    text = subsidence(boxes, LINEAR + '\nhorizontal_release = "0.5"')
    field = subsidence(boxes, LINEAR + '\nhorizontal_release = { field = "net_to_gross" }')
    percent = subsidence(boxes, LINEAR + '\nhorizontal_release = { field = "half" }')
    region = subsidence(boxes, LINEAR + "\nhorizontal_release = { by_region = "
                                        "{ north = 0.5, south = 1.0 } }")
    none = subsidence(boxes, LINEAR + "\nhorizontal_release = 0")
    np.testing.assert_allclose(region, field, rtol=1e-12)
    np.testing.assert_allclose(text, 0.5 * (matched + none), rtol=1e-9)  # linear in g
    # 0.5 %, that is 0.005
    np.testing.assert_allclose(percent, none + 0.005 * (matched - none), rtol=1e-9)
    assert not np.allclose(none, matched, rtol=0.01)


def test_own_release_is_matched_where_reservoir_and_host_are_alike(boxes: Path) -> None:
    """g = 1 if Cm = (1+nu)(1-2nu)/((1-nu)E): E = 1.25 x 0.5 / (0.75 x 1e-10 1/Pa)."""
    young = 1.25 * 0.5 / (0.75 * 1e-10)
    law = LINEAR + '\nhorizontal_release = "own"'
    path = write_scenario(boxes, law=law, earth=f"{HALF_SPACE}\nyoung_modulus = {young!r}",
                          more='[points]\nfile = "points.csv"')
    own = sd.run(path)["point_subsidence"].values[-1]
    np.testing.assert_allclose(own, subsidence(boxes, LINEAR), rtol=1e-9)
