"""Start, initial pressure and output dates, through whole runs of a few boxes."""

from __future__ import annotations

import datetime as dt
from functools import reduce
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest
import xarray as xr
from invented_fields import HALF_SPACE, LINEAR, X0, Y0, write_boxes, write_points, write_scenario

import subside as sd
from subside.errors import InputError
from subside.timeline import StartGap, Timeline, make_timeline

YEARS = [0.0, 2.0, 5.0]
PRESSURE = np.array([[300.0, 310.0], [220.0, 290.0], [260.0, 150.0]])  # bar; falls, rises, falls
"""Dates 2000-01-01, 2001-12-31 12:00, 2004-12-31 06:00."""
BILINEAR = """law = "bilinear"
compressibility_before_yield = "0.5e-5 1/bar"
compressibility_after_yield = "3e-5 1/bar"
yield_stress_increase = "40 bar"
unloading_compressibility = "0.3e-5 1/bar"
"""
ISOTACH = """law = "isotach"
reference_compressibility = "1e-5 1/bar"
direct_compressibility = "0.5e-5 1/bar"
rate_exponent = 0.02
reference_stress_rate = "3e-4 bar/year"
initial_effective_stress = "300 bar"
"""


def field(folder: Path, years: list[float], pressure: np.ndarray, *, law: str = LINEAR,
          grid: str = "", more: str = "", initial: list[float] | None = None) -> Path:
    """Two boxes with a pressure history; returns the scenario."""
    folder.mkdir(exist_ok=True)
    fields = {"initial_pressure": (initial, "bar")} if initial else {}
    write_boxes(folder / "grid.nc", [X0, X0 + 500], [Y0, Y0], 2900.0, 2950.0, 500.0, 500.0,
                pressure, years=years, fields=fields)
    write_points(folder / "points.csv", [X0, X0 + 700], [Y0, Y0 + 100])
    path = write_scenario(folder, law=law, earth=HALF_SPACE,
                          more='[points]\nfile = "points.csv"\n' + more)
    path.write_text(path.read_text().replace('"grid.nc"', f'"grid.nc"\n{grid}'))
    return path


def at(pressure: np.ndarray, year: float) -> np.ndarray:
    """Pressure of the cells, linear between its dates."""
    return np.array([np.interp(year, YEARS, column) for column in pressure.T])


def values(result: object) -> np.ndarray:
    """Subsidence at the points (time, point)."""
    return result["point_subsidence"].values  # type: ignore[index]


# -- output dates ------------------------------------------------------------------------------


@pytest.mark.parametrize("law", [LINEAR, BILINEAR, ISOTACH], ids=["linear", "bilinear", "isotach"])
def test_output_between_pressure_dates_is_that_of_a_finer_grid(tmp_path, law):
    """Bit for bit where the law is exact for linear pressure; isotach to its own step error."""
    finer_years = [0.0, 1.0, 2.0, 4.0, 5.0]
    finer = np.array([at(PRESSURE, y) for y in finer_years])
    # 365.25, 4 x 365.25 and 5 x 365.25 days after 2000-01-01
    fine = values(sd.run(field(tmp_path / "fine", finer_years, finer, law=law)))[[1, 3, 4]]
    dates = sd.run(field(tmp_path / "coarse", YEARS, PRESSURE, law=law, more="[output]\ntimes = "
                         "[2000-12-31T06:00:00, 2004-01-01T00:00:00, 2004-12-31T06:00:00]\n"))
    assert dates.sizes["time"] == 3
    np.testing.assert_allclose(values(dates), fine, rtol=2e-8 if law == ISOTACH else 1e-12)


def test_output_at_some_pressure_dates_is_that_part_of_all(tmp_path):
    every = sd.run(field(tmp_path / "all", YEARS, PRESSURE, law=BILINEAR))
    some = sd.run(field(tmp_path / "some", YEARS, PRESSURE, law=BILINEAR,
                        more="[output]\ntimes = [2004-12-31T06:00:00]\n"))
    np.testing.assert_array_equal(values(some)[0], values(every)[-1])
    assert every.sizes["time"] == 3
    assert (values(every)[0] == 0.0).all()


# -- the start ---------------------------------------------------------------------------------


def test_start_at_the_first_step_changes_nothing(tmp_path):
    plain = sd.run(field(tmp_path / "plain", YEARS, PRESSURE))
    same = sd.run(field(tmp_path / "same", YEARS, PRESSURE, more="[time]\nstart = 2000-01-01\n"))
    np.testing.assert_array_equal(values(same), values(plain))
    assert same.attrs["time_start"] == plain.attrs["time_start"]


@pytest.mark.parametrize(("grid", "initial"), [
    ('initial_pressure = "320 bar"', [320.0, 320.0]),
    ("initial_pressure = 32e6", [320.0, 320.0]),
    ('initial_pressure = { field = "initial_pressure" }', [330.0, 340.0]),
    ('initial_pressure = "first"', [300.0, 310.0]),
])
@pytest.mark.parametrize("law", [LINEAR, BILINEAR], ids=["linear", "bilinear"])
def test_start_before_the_first_step(tmp_path, grid, initial, law):
    """As a grid that has the initial pressure as its first step, two years earlier."""
    early = sd.run(field(tmp_path / "early", YEARS, PRESSURE, grid=grid, law=law,
                         initial=[330.0, 340.0], more="[time]\nstart = 1997-12-31T12:00:00\n"))
    whole = sd.run(field(tmp_path / "whole", [-2.0, *YEARS], np.vstack([initial, PRESSURE]),
                         law=law))
    np.testing.assert_array_equal(early["time"].values, whole["time"].values)
    np.testing.assert_allclose(values(early), values(whole), rtol=1e-12)
    assert (values(early)[0] == 0.0).all()
    moved = values(early)[1] != 0.0
    assert moved.all() == ("first" not in grid)


def test_start_after_the_first_step_forgets_what_was_before(tmp_path):
    """Results are zero at the start, whatever the pressure did before it."""
    late = sd.run(field(tmp_path / "late", YEARS, PRESSURE, law=BILINEAR,
                        more="[time]\nstart = 2000-12-31T06:00:00\n"))
    cut = sd.run(field(tmp_path / "cut", [1.0, 2.0, 5.0],
                       np.vstack([at(PRESSURE, 1.0), PRESSURE[1:]]), law=BILINEAR))
    np.testing.assert_array_equal(late["time"].values, cut["time"].values)
    np.testing.assert_allclose(values(late), values(cut), rtol=1e-12)
    assert "compaction before it is not counted" in late.attrs["warnings"]


def test_start_at_a_later_step(tmp_path):
    late = sd.run(field(tmp_path / "late", YEARS, PRESSURE,
                        more="[time]\nstart = 2001-12-31T12:00:00\n"))
    cut = sd.run(field(tmp_path / "cut", YEARS[1:], PRESSURE[1:]))
    np.testing.assert_array_equal(values(late), values(cut))


# -- rows of the run from dates of the file ----------------------------------------------------

FILE = np.array([[0.0, 1.0], [2.0, 3.0], [8.0, 3.0], [9.0, 4.0]])
"""On 2000-01-01 and every 365.25 days after."""


def line(start: dt.datetime | None, initial: np.ndarray | None = None) -> Timeline:
    """The dates of a grid of which only they are known."""
    dates = np.datetime64("2000-01-01", "s") + np.arange(4) * np.timedelta64(8766, "h")
    return make_timeline(xr.Dataset(coords={"time": dates}), start, initial, "all")


@pytest.mark.parametrize(("start", "pressure", "heat"), [
    (None, FILE, FILE),
    (dt.datetime(2000, 12, 31, 6), FILE[1:], FILE[1:]),
    # a quarter of the way from the second date to the third
    (dt.datetime(2001, 4, 1, 13, 30), [[3.5, 3.0], *FILE[2:]], [[3.5, 3.0], *FILE[2:]]),
    # before the file: the initial pressure; another field is as on the first date
    (dt.datetime(1999, 1, 1), [[5.0, 6.0], *FILE], [FILE[0], *FILE]),
])
def test_rows(start: dt.datetime | None, pressure: object, heat: object) -> None:
    """However the rows are asked for; the file is only asked for dates it has."""
    rows = line(start, np.array([5.0, 6.0])).rows

    def read(first: int, last: int) -> np.ndarray:
        assert 0 <= first < last <= 4
        return FILE[first:last]

    wanted, field = np.array(pressure), np.array(heat)
    assert rows.count == len(wanted)
    for cuts in ([0, rows.count], [0, 1, rows.count], [0, 2, rows.count], range(rows.count + 1)):
        legs = list(pairwise(cuts))
        got = [rows.pressure(read, a, b, np.array([5.0, 6.0])) for a, b in legs]
        np.testing.assert_allclose(np.concatenate(got), wanted, rtol=1e-15)
        np.testing.assert_allclose(np.concatenate([rows.field(read, a, b) for a, b in legs]),
                                   field, rtol=1e-15)
    assert (FILE == [[0, 1], [2, 3], [8, 3], [9, 4]]).all()


def test_the_axis_begins_at_the_start() -> None:
    late = line(dt.datetime(2001, 4, 1, 13, 30))
    np.testing.assert_allclose(late.axis.pressure, np.array([0, 0.75, 1.75]) * 8766 * 3600)
    np.testing.assert_array_equal(late.axis.output, late.axis.pressure)
    assert late.dates[0] == late.start == np.datetime64("2001-04-01T13:30")


def test_a_start_before_the_file_needs_an_initial_pressure() -> None:
    rows = line(dt.datetime(1999, 1, 1), np.zeros(2)).rows
    assert rows.given
    with pytest.raises(ValueError, match="initial pressure is needed"):
        rows.pressure(lambda a, b: FILE[a:b], 0, 2)


def test_initial_and_first_pressure_are_compared_where_both_are_there() -> None:
    initial = np.zeros(2)
    assert not line(None).compares
    assert line(None, initial).compares
    assert line(dt.datetime(2001, 1, 1), initial).compares
    assert not line(dt.datetime(1999, 1, 1), initial).compares


def test_the_worst_gap_of_blocks_in_any_order() -> None:
    """Cells 7 and 2 differ most, by 5 bar: the lower is named. 1e-5 of the pressure passes."""
    initial = np.full(10, 300e5)
    first = initial + np.array([0, 1, 5, 0, 0, 3, 0, -5, 0, 0]) * 1e5
    parts = [np.array([7, 8]), np.array([0, 1, 2]), np.array([3, 4, 5, 6, 9])]
    for order in (parts, parts[::-1], [np.arange(10)]):
        gap = reduce(StartGap.worse, (StartGap.of(initial[c], first[c], c) for c in order))
        assert gap == StartGap(2, 300e5, 305e5)
    with pytest.raises(InputError, match=r"start date 2000-01-01 by up to 5 bar \(300 against "
                                         r"305 bar\)") as caught:
        line(None, initial).refuse_gap(gap)
    assert caught.value.cell == 2
    line(None, initial).refuse_gap(StartGap(0, 300e5, 300e5 + 299))
    with pytest.raises(InputError):
        line(None, initial).refuse_gap(StartGap(0, 300e5, 300e5 + 301))


# -- the initial pressure ----------------------------------------------------------------------


def test_an_initial_pressure_that_agrees_with_the_first_step_changes_nothing(tmp_path):
    plain = sd.run(field(tmp_path / "plain", YEARS, PRESSURE))
    for number, grid in enumerate(('initial_pressure = "first"',
                                   'initial_pressure = { field = "initial_pressure" }')):
        given = sd.run(field(tmp_path / f"given{number}", YEARS, PRESSURE, grid=grid,
                             initial=[300.0, 310.0]))
        np.testing.assert_array_equal(values(given), values(plain))


def test_the_grids_own_initial_pressure_counts_only_where_the_scenario_asks(tmp_path):
    plain = sd.run(field(tmp_path / "plain", YEARS, PRESSURE))
    silent = sd.run(field(tmp_path / "silent", YEARS, PRESSURE, initial=[330.0, 340.0]))
    np.testing.assert_array_equal(values(silent), values(plain))


@pytest.mark.parametrize(("grid", "more", "part"), [
    ('initial_pressure = { field = "initial_pressure" }', "",
     r"\(cell=1\): \[grid\] initial_pressure differs .* by up to 35 bar \(345 against 310 bar\)"),
    ('initial_pressure = "first"', "[time]\nstart = 2001-12-31T12:00:00\n",
     r"differs from the pressure on the start date 2001-12-31 by up to 80 bar"),
    ('initial_pressure = "0 bar"', "[time]\nstart = 1999-01-01\n",
     r"initial_pressure: 2 active cells have a pressure <= 0.*0 bar"),
    ('initial_pressure = "70 MPa"', "[time]\nstart = 1999-01-01\n",
     r"initial_pressure: 2 active cells have a pressure above lithostatic.*700 bar"),
    ('initial_pressure = { field = "p" }', "", "'p', which the grid does not have"),
    ('initial_pressure = { fields = "p" }', "", "write \"first\", a quantity such as"),
    ('initial_pressure = "last"', "", "'last' is not a quantity"),
    ("initial_pressure = []", "", r"initial_pressure = \[\] is not a quantity"),
    ("initial_pressure = false", "", "initial_pressure = False is not a quantity"),
    ("", "[time]\nstart = 1999-01-01\n", "so the initial pressure is not known"),
])
def test_wrong_initial_pressure(tmp_path, grid, more, part):
    path = field(tmp_path, YEARS, PRESSURE, grid=grid, more=more, initial=[330.0, 345.0])
    with pytest.raises(InputError, match=part):
        sd.run(path)


def test_accept_lets_a_high_initial_pressure_pass(tmp_path):
    path = field(tmp_path, YEARS, PRESSURE, grid='initial_pressure = "70 MPa"\n'
                 'accept = ["lithostatic"]', more="[time]\nstart = 1999-01-01\n")
    assert "accepted (lithostatic): initial_pressure" in sd.run(path).attrs["warnings"]


# -- one step ----------------------------------------------------------------------------------


def test_a_grid_of_one_step(tmp_path):
    """Alone it says nothing; with an earlier start and an initial pressure it does."""
    path = field(tmp_path / "one", [0.0], PRESSURE[:1])
    with pytest.raises(InputError, match=r"one pressure step \(2000-01-01\).*give more steps"):
        sd.run(path)
    path = field(tmp_path / "two", [0.0], PRESSURE[:1], grid='initial_pressure = "330 bar"',
                 more="[time]\nstart = 1999-01-01\n")
    assert (values(sd.run(path))[-1] > 0.0).all()
