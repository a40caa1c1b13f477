"""Six boxes in two regions, three pressure dates, points, a survey: as small as a run gets."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from invented_fields import X0, Y0, write_boxes

SCENARIO = """\
title = "small field"

[grid]
file = "grid.nc"

[compaction]
law = "linear"
uniaxial_compressibility = "1e-5 1/bar"

[earth]
model = "half-space"
poisson_ratio = 0.25

[points]
file = "points.csv"

[survey]
file = "survey.csv"

[solver]
tolerance = 1e-3
"""

POINTS = f"""\
name,x [m],y [m]
A,{X0},{Y0}
B,{X0 + 800},{Y0 + 300}
"""

SURVEY = f"""\
point,x [m],y [m],date,kind,value [mm],sigma [mm]
A,{X0},{Y0},2000-06-01,height,1520.0,2.0
A,{X0},{Y0},2001-06-01,height,1519.0,2.0
"""


@dataclass(frozen=True)
class Outcome:
    """What a command left."""

    code: int
    out: str
    err: str

    @property
    def message(self) -> str:
        """The one paragraph of an error; fails where there is more or less than that."""
        assert self.err.startswith("subside: ")
        assert self.err.count("\n") == 1 and self.err.endswith("\n"), self.err
        assert "Traceback" not in self.err
        return self.err.removeprefix("subside: ").rstrip()


def write_grid(path: Path, *, fall: float = 100.0, initial: float = 300.0,
               fields: dict[str, tuple[Any, str]] | None = None, epsg: int | None = 32631) -> Path:
    """Six boxes at 2900 to 2950 m, the first three in region north, the others in south."""
    x, y = (a.ravel() for a in np.meshgrid(X0 + 300.0 * np.arange(3), Y0 + 300.0 * np.arange(2)))
    pressure = initial - fall * np.array([0.0, 0.6, 1.0])[:, None] * np.ones(6)
    pressure[1:, 0] += 10.0
    return write_boxes(path, x, y, 2900.0, 2950.0, 300.0, 300.0, pressure, years=[0, 1, 2],
                       region=np.array([1, 1, 1, 2, 2, 2]), names="north south", epsg=epsg,
                       fields=fields)


def write_field(folder: Path) -> Path:
    """All files of the small field."""
    folder.mkdir(parents=True)
    write_grid(folder / "grid.nc", fields={
        "cm": (np.linspace(0.8e-5, 1.2e-5, 6), "1/bar"),
        "gappy": (np.array([1e-5, np.nan, 1e-5, 1e-5, 1e-5, 1e-5]), "1/bar"),
        "odd": (np.full(6, 1e-5), "barz"),
        "temperature": (np.full(6, 90.0), "degC"),
        "p0": (np.full(6, 320.0), "bar"),
        "release": (np.linspace(0.5, 1.0, 6), "1"),
    })
    (folder / "scenario.toml").write_text(SCENARIO)
    (folder / "points.csv").write_text(POINTS)
    (folder / "survey.csv").write_text(SURVEY)
    return folder


def edit(folder: Path, old: str, new: str, file: str = "scenario.toml") -> Path:
    """Replace a piece of text that stands in a file once; returns the scenario."""
    path = folder / file
    text = path.read_text()
    assert text.count(old) == 1, (old, text.count(old))
    path.write_text(text.replace(old, new))
    return folder / "scenario.toml"


def append(folder: Path, text: str) -> Path:
    """Add tables to the scenario."""
    path = folder / "scenario.toml"
    path.write_text(path.read_text() + text)
    return path


def files_of(folder: Path) -> set[str]:
    """Everything below a folder."""
    return {p.relative_to(folder).as_posix() for p in folder.rglob("*")}
