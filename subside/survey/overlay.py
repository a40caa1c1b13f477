"""Measured subsidence for the curves: read from a survey file, set against the model's dates."""

from __future__ import annotations

import datetime as dt
from pathlib import Path

import numpy as np
import pandas as pd
import xarray as xr

from subside.api import InputError
from subside.tables import Column, read_table

__all__ = ["measured_subsidence", "read_survey"]

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


def read_survey(path: Path) -> pd.DataFrame:
    """Read a survey file: one observation a row, columns point, x, y, date, kind, value, sigma.

    Returns
    -------
    DataFrame
        Columns point, date, kind, value_m (heights positive up), sigma_m.

    Raises
    ------
    InputError
        A broken table, an unknown kind, a date that is none, a sigma not above zero.
    """
    table = read_table(path, _COLUMNS, "survey")
    dates = []
    for line, kind, text, sigma in zip(table["line"], table["kind"], table["date"], table["sigma"],
                                       strict=True):
        where = f"survey file '{path}', line {line}"
        if kind not in _KINDS:
            raise InputError(f"{where}: kind '{kind}' is none of {', '.join(_KINDS)}.")
        if not sigma > 0:
            raise InputError(f"{where}: sigma = {1000 * sigma:g} mm must be above zero.")
        dates.append(_date(str(text), where))
    return pd.DataFrame({
        "point": table["point"], "date": np.array(dates, dtype="datetime64[s]"),
        "kind": table["kind"], "value_m": table["value"], "sigma_m": table["sigma"]})


def _date(text: str, where: str) -> dt.datetime:
    try:
        date = dt.datetime.fromisoformat(text)
    except ValueError:
        raise InputError(f"{where}: date '{text}' is not a date; write YYYY-MM-DD.") from None
    if date.tzinfo is not None:
        raise InputError(f"{where}: date '{text}' has a time zone; leave it out.")
    return date


def measured_subsidence(survey: pd.DataFrame, result: xr.Dataset) -> pd.DataFrame:
    """Measured subsidence since the start at the result's points, for drawing.

    A height says nothing about the time before its point was first surveyed, and all heights of an
    epoch share the error of its datum. So one initial height for each point and one offset for
    each epoch after the first are fitted, by weighted least squares against the computed
    subsidence, and taken out.

    Parameters
    ----------
    survey : DataFrame
        From `read_survey`.
    result : Dataset
        With `point_subsidence(time, point)`.

    Returns
    -------
    DataFrame
        Columns point, date, value_m (positive down), sigma_m; only kinds `height` and
        `subsidence`, only points of the result.
    """
    columns = ["point", "date", "value_m", "sigma_m"]
    names = [str(n) for n in result["point_name"].values] if "point_name" in result else []
    frame = survey[survey["point"].isin(names)]
    heights = frame[frame["kind"] == "height"].copy()
    if len(heights):
        heights["value_m"] = _to_subsidence(heights, _computed(heights, result, names))
    return pd.concat([heights, frame[frame["kind"] == "subsidence"]])[columns]


def _computed(frame: pd.DataFrame, result: xr.Dataset, names: list[str]) -> np.ndarray:
    """Computed subsidence at the point and date of each row, m; linear between output dates."""
    # zero at the start, which need not be an output date
    start = np.datetime64(str(result.attrs["time_start"]), "s").astype(float)
    at = np.r_[start, result["time"].values.astype("datetime64[s]").astype(float)]
    series = np.vstack([np.zeros(len(names)), result["point_subsidence"].values])
    when = frame["date"].to_numpy("datetime64[s]").astype(float)
    return np.array([np.interp(t, at, series[:, names.index(str(p))])
                     for t, p in zip(when, frame["point"], strict=True)])


def _to_subsidence(heights: pd.DataFrame, computed: np.ndarray) -> np.ndarray:
    """Heights to subsidence: height = initial height - subsidence + offset of the epoch."""
    points, point = np.unique(heights["point"].to_numpy(str), return_inverse=True)
    epochs, epoch = np.unique(heights["date"].to_numpy(), return_inverse=True)
    rows = np.arange(len(heights))
    design = np.zeros((len(heights), points.size + epochs.size - 1))
    design[rows, point] = 1.0
    later = epoch > 0  # the first epoch's offset is part of the initial heights
    design[rows[later], points.size + epoch[later] - 1] = 1.0
    weight = 1.0 / heights["sigma_m"].to_numpy(float)
    height = heights["value_m"].to_numpy(float)
    found = np.linalg.lstsq(design * weight[:, None], (height + computed) * weight, rcond=None)[0]
    return np.asarray(design @ found - height)
