"""Measured values for the curves: what the survey cannot know is taken out, nothing else is."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import xarray as xr

from subside.errors import InputError
from subside.survey.overlay import measured_subsidence, read_survey

TIMES = np.array(["2000-01-01", "2010-01-01", "2020-01-01"], dtype="datetime64[ns]")
DOWN = np.array([[0.0, 0.0, 0.0], [0.02, 0.05, 0.01], [0.03, 0.09, 0.015]])


@pytest.fixture
def result() -> xr.Dataset:
    return xr.Dataset({"point_subsidence": (("time", "point"), DOWN)},
                      coords={"time": TIMES, "point_name": ("point", ["A", "B", "C"])},
                      attrs={"time_start": "2000-01-01T00:00:00"})


def _heights(offsets: list[float], extra: np.ndarray | None = None) -> pd.DataFrame:
    rows = []
    for epoch, offset in enumerate(offsets):
        for n, name in enumerate("ABC"):
            more = 0.0 if extra is None else extra[epoch, n]
            rows.append((name, TIMES[epoch].astype("datetime64[s]"), "height",
                         10.0 + n - DOWN[epoch, n] - more + offset, 0.001))
    return pd.DataFrame(rows, columns=["point", "date", "kind", "value_m", "sigma_m"])


def test_initial_heights_and_datum_errors_are_taken_out(result: xr.Dataset) -> None:
    found = measured_subsidence(_heights([0.004, -0.003, 0.008]), result)
    assert found["value_m"].to_numpy().reshape(3, 3) == pytest.approx(DOWN, abs=1e-12)


def test_a_bowl_of_another_shape_stays_visible(result: xr.Dataset) -> None:
    """Twice the movement: the differences between points double, only the means are fitted."""
    found = measured_subsidence(_heights([0.0, 0.0, 0.0], DOWN), result)
    seen = found["value_m"].to_numpy().reshape(3, 3)
    growth = seen[2] - seen[0]
    assert np.ptp(growth) == pytest.approx(2 * np.ptp(DOWN[2]), abs=1e-12)


def test_subsidence_is_taken_as_it_is(result: xr.Dataset) -> None:
    survey = pd.DataFrame({"point": ["B"], "date": TIMES[1:2].astype("datetime64[s]"),
                           "kind": ["subsidence"], "value_m": [0.07], "sigma_m": [0.002]})
    assert float(measured_subsidence(survey, result)["value_m"].iloc[0]) == 0.07


def test_points_the_result_lacks_are_left_out(result: xr.Dataset) -> None:
    survey = _heights([0.0, 0.0, 0.0]).assign(point="elsewhere")
    assert measured_subsidence(survey, result).empty


HEAD = "point,x [m],y [m],date,kind,value [mm],sigma [mm]\n"


def test_a_survey_file_is_read_in_metres(tmp_path: Path) -> None:
    path = tmp_path / "s.csv"
    path.write_text(HEAD + "A,1,2,2001-05-03,height,1520.5,2\n")
    row = read_survey(path).iloc[0]
    assert (row["value_m"], row["sigma_m"]) == (pytest.approx(1.5205), pytest.approx(0.002))
    assert row["date"] == np.datetime64("2001-05-03")


@pytest.mark.parametrize(("line", "says"), [
    ("A,1,2,2001-05-03,level,1520.5,2", "kind 'level'"),
    ("A,1,2,May 2001,height,1520.5,2", "YYYY-MM-DD"),
    ("A,1,2,2001-05-03,height,1520.5,0", "sigma = 0 mm must be above zero"),
    ("A,1,2,2001-05-03,height,high,2", "'high' is not a finite number"),
])
def test_a_broken_row_is_named(tmp_path: Path, line: str, says: str) -> None:
    path = tmp_path / "s.csv"
    path.write_text(HEAD + line + "\n")
    with pytest.raises(InputError, match="line 2") as caught:
        read_survey(path)
    assert says in str(caught.value)
