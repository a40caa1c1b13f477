"""Measured subsidence for the curves: read from a survey file, set against the model's dates."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import xarray as xr

from subside.api import InputError
from subside.tables import Column, read_table

__all__ = ["measured_subsidence"]

_KINDS = ("height", "height_difference", "subsidence", "east", "north", "line_of_sight")
_COLUMNS = [
    Column("point", None), Column("x", "m", plain_unit="m"), Column("y", "m", plain_unit="m"),
    Column("date", None), Column("kind", None), Column("value", "m"), Column("sigma", "m"),
    Column("from_point", None, required=False), Column("reference_date", None, required=False),
    Column("los_east", "1", required=False, plain_unit="1"),
    Column("los_north", "1", required=False, plain_unit="1"),
    Column("los_up", "1", required=False, plain_unit="1"),
    Column("depth", "m", required=False, plain_unit="m"), Column("network", None, required=False),
    Column("soil_class", None, required=False),
]


def measured_subsidence(path: Path, result: xr.Dataset) -> pd.DataFrame:
    """Measured subsidence since the start at the result's points.

    A height says nothing about the time before the first survey of its point; such a point is set
    to the model at that first survey, and later surveys are drawn relative to it.

    Parameters
    ----------
    path : Path
        Survey file: one observation a row, columns point, x, y, date, kind, value, sigma.
    result : Dataset
        With `point_subsidence(time, point)`.

    Returns
    -------
    DataFrame
        Columns point, date, value_m (positive down), sigma_m; only kinds `height` and
        `subsidence`, only points of the result.

    Raises
    ------
    InputError
        A broken table, an unknown kind, a date that is none.
    """
    table = read_table(path, _COLUMNS, "survey")
    for row, kind in enumerate(table["kind"], start=2):
        if kind not in _KINDS:
            raise InputError(f"survey file '{path}', row {row}: kind '{kind}' is none of "
                             f"{', '.join(_KINDS)}.")
    dates = np.empty(table["date"].size, dtype="datetime64[s]")
    for row, text in enumerate(table["date"]):
        try:
            dates[row] = np.datetime64(str(text), "s")
        except ValueError:
            raise InputError(f"survey file '{path}', row {row + 2}: '{text}' is not a date; write "
                             "YYYY-MM-DD.") from None
    if (table["sigma"] <= 0).any():
        row = int(np.argmax(table["sigma"] <= 0))
        raise InputError(f"survey file '{path}', row {row + 2}: sigma = "
                         f"{1000 * table['sigma'][row]:g} mm must be above zero.")
    frame = pd.DataFrame({"point": table["point"], "date": dates, "kind": table["kind"],
                          "value_m": table["value"], "sigma_m": table["sigma"]})
    frame = frame[frame["kind"].isin(["height", "subsidence"])]
    parts = [_relative(group, result, str(name)) for name, group in frame.groupby("point")
             if "point_name" in result and name in result["point_name"].values]
    columns = ["point", "date", "value_m", "sigma_m"]
    return pd.concat(parts)[columns] if parts else pd.DataFrame(columns=columns)


def _relative(group: pd.DataFrame, result: xr.Dataset, name: str) -> pd.DataFrame:
    group = group.sort_values("date").copy()
    heights = group["kind"] == "height"
    if heights.any():
        index = int(np.nonzero(result["point_name"].values == name)[0][0])
        model = result["point_subsidence"].values[:, index]
        days = result["time"].values.astype("datetime64[s]").astype(float)
        first = group.loc[heights].iloc[0]
        at = float(np.datetime64(first["date"], "s").astype(float))
        group.loc[heights, "value_m"] = (np.interp(at, days, model) + first["value_m"]
                                         - group.loc[heights, "value_m"])
    return group
