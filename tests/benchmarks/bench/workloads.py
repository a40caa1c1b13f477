"""The workloads by name, and their files: a pressure grid, a scenario, points."""

from __future__ import annotations

import dataclasses
import shutil
from dataclasses import dataclass
from pathlib import Path

import click
import numpy as np

from bench.field import Field
from bench.grid_writer import write_grid

__all__ = ["WORKLOADS", "Workload", "write_workload"]

_MIDDLE = {"east": 512_000.0, "north": 5_900_000.0}


@dataclass(frozen=True)
class Workload:
    """A field, and what is asked for: a square map of `pixels` over `width` m, or `points`."""

    name: str
    title: str
    field: Field
    pixels: int = 0
    width: float = 0.0
    points: int = 0

    @property
    def spacing(self) -> float:
        """Of the map, m."""
        return self.width / self.pixels

    def with_map(self, pixels: int) -> Workload:
        """The same with another map over the same ground."""
        return dataclasses.replace(self, name=f"{self.name}-map{pixels}", pixels=pixels)

    def with_steps(self, steps: int) -> Workload:
        """The same field with another number of dates over the same years."""
        return dataclasses.replace(self, name=f"{self.name}-t{steps}",
                                   field=dataclasses.replace(self.field, steps=steps))

    def bounds(self) -> tuple[float, float, float, float]:
        """West, south, east, north of the map, m."""
        half = 0.5 * self.width
        east, north = self.field.east, self.field.north
        return east - half, north - half, east + half, north + half

    def pixels_xy(self) -> tuple[np.ndarray, np.ndarray]:
        """Eastings (columns,) and northings (rows,), north first, of the pixel centres, m."""
        west, _, _, north = self.bounds()
        step = (np.arange(self.pixels) + 0.5) * self.spacing
        return west + step, north - step

    def points_xy(self) -> tuple[np.ndarray, np.ndarray]:
        """Seeded places over the field, m."""
        half = 0.7 * max(self.field.half)
        place = np.random.default_rng(self.field.seed).uniform(-half, half, (2, self.points))
        return self.field.east + place[0], self.field.north + place[1]


def _deep(columns: int, layers: int, size: float, thickness: float, steps: int,
          active: float = 0.6, regions: int = 1) -> Field:
    return Field(columns, columns, layers, size, thickness, 2000.0, steps, active=active,
                 regions=regions, **_MIDDLE)


def _shallow(columns: int, steps: int) -> Field:
    return Field(columns, columns, 5, 100.0, 5.0, 300.0, steps, dip=0.003, throw=10.0, **_MIDDLE)


WORKLOADS = {w.name: w for w in (
    Workload("W1", "100 thousand cells, small map", _deep(100, 10, 150.0, 8.0, 20, active=3.0),
             256, 32e3),
    Workload("W2", "2 million cells, 60 dates", _deep(200, 50, 100.0, 4.0, 60), 512, 40e3),
    Workload("W3", "2 million cells, 240 dates, 500 points", _deep(200, 50, 100.0, 4.0, 240),
             points=500),
    Workload("W4", "cells of 100 m at a depth of 300 m", _shallow(200, 60), 512, 28e3),
    Workload("W4-wide", "the same over 40 km, 240 dates", _shallow(400, 240), 512, 44.8e3),
    Workload("W5", "W1 in ten regions, for 1000 realisations",
             _deep(100, 10, 150.0, 8.0, 20, active=3.0, regions=10), 256, 32e3),
)}
"""By name."""

_SCENARIO = """\
# Written by tests/benchmarks/make_workloads.py: an invented field.
title = "{title}"

[[grid]]
file = "pressure.nc"
name = "{name}"
crs = "EPSG:32631"

[[compaction]]
law = "linear"
uniaxial_compressibility = "1.0e-5 1/bar"

[earth]
model = "half-space"
surface = "0 m"
poisson_ratio = 0.25
young_modulus = "10 GPa"

{where}
[solver]
method = "{method}"
tolerance = {tolerance}

[output]
times = "all"
"""


def scenario_text(load: Workload, *, tolerance: float = 1e-4, method: str = "auto",
                  quantities: tuple[str, ...] = ()) -> str:
    """The scenario of a workload."""
    if load.points:
        where = '[points]\nfile = "points.csv"\n'
    else:
        west, south, east, north = load.bounds()
        where = (f'[map]\nbounds = [{west!r}, {south!r}, {east!r}, {north!r}]\n'
                 f'spacing = "{load.spacing!r} m"\n')
    text = _SCENARIO.format(title=f"{load.name}: {load.title}", name=load.name, where=where,
                            method=method, tolerance=tolerance)
    if quantities:
        text += f"quantities = {list(quantities)}\n".replace("'", '"')
    return text


def write_workload(load: Workload, output: Path, *, geometry: str = "boxes",
                   date_chunks: bool = False, cells_times: int = 1, seed: int = 1) -> Path | None:
    """Write grid and scenario into a folder of their own; an existing grid is kept.

    Parameters
    ----------
    geometry : str
        ``"boxes"``, ``"corners"`` (dipping cells, upright pillars) or ``"leaning"`` (corners,
        leaning pillars).
    cells_times : int
        A square number: so many times the cells, in the same field.

    Returns
    -------
    Path or None
        The scenario; None where the disk has no room.
    """
    finer = round(cells_times**0.5)
    field = dataclasses.replace(
        load.field, columns=load.field.columns * finer, rows=load.field.rows * finer,
        size=load.field.size / finer, seed=seed, lean=0.15 if geometry == "leaning" else 0.0)
    name = f"{load.name}-{geometry}" + ("-dates" if date_chunks else "")
    name += (f"-x{cells_times}" if cells_times > 1 else "") + (f"-seed{seed}" if seed != 1 else "")
    folder = output / name
    folder.mkdir(parents=True, exist_ok=True)
    grid = folder / "pressure.nc"
    if not grid.exists():
        needed = field.count * (4 * field.steps + (192 if geometry != "boxes" else 16))
        free = shutil.disk_usage(output).free
        if needed > 0.8 * free:
            click.echo(f"{name}: skipped, it may need {needed / 1e9:.1f} GB of disk and "
                       f"{free / 1e9:.1f} GB are free")
            return None
        click.echo(f"{name}: writing {field.count:,} cells x {field.steps} dates ", nl=False)
        write_grid(grid, field, "boxes" if geometry == "boxes" else "corners", date_chunks,
                   lambda share: click.echo(".", nl=False))
        click.echo(f" {grid.stat().st_size / 1e6:.0f} MB")
    if load.points:
        x, y = load.points_xy()
        rows = "\n".join(f"p{n},{a:.3f},{b:.3f}" for n, (a, b) in enumerate(zip(x, y, strict=True)))
        (folder / "points.csv").write_text(f"name,x,y\n{rows}\n")
    (folder / "scenario.toml").write_text(scenario_text(load))
    return folder / "scenario.toml"
