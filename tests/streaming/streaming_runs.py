"""A small field in pillars with eight dates, stored and run in different ways."""

from __future__ import annotations

from itertools import pairwise
from pathlib import Path
from typing import Any

import netCDF4
import numpy as np
import pytest
import xarray as xr
from invented_fields import X0, Y0, write_boxes, write_points, write_scenario

COLUMNS, ROWS, LAYERS, DATES = 9, 8, 3, 8
SAME = 1e-12
"""Of the largest value of a variable: the same sums in another order."""

LAWS = {
    "linear": 'law = "linear"\nuniaxial_compressibility = "1e-5 1/bar"\nhorizontal_release = 0.7',
    "bilinear": 'law = "bilinear"\ncompressibility_before_yield = "0.5e-5 1/bar"\n'
                'compressibility_after_yield = "3e-5 1/bar"\nyield_stress_increase = "35 bar"\n'
                'unloading_compressibility = "0.3e-5 1/bar"',
    "isotach": 'law = "isotach"\nreference_compressibility = "1e-5 1/bar"\n'
               'direct_compressibility = "0.5e-5 1/bar"\nrate_exponent = 0.02\n'
               'reference_stress_rate = "3e-4 bar/year"\ninitial_effective_stress = "200 bar"',
    "whole-only": 'law = "whole-only"',
}
MAP = f'[map]\nspacing = "400 m"\nbounds = [{X0 - 4000}, {Y0 - 4000}, {X0 + 4000}, {Y0 + 4000}]\n'
POINTS = '[points]\nfile = "points.csv"\n'
LATTICE = '[solver]\nmethod = "lattice"\ntolerance = 1e-4\n'
EVERYTHING = ('[output]\nquantities = ["tilt", "slope_east", "horizontal_strain_east", '
              '"horizontal_strain_major", "subsidence_rate", "cell_compaction", '
              '"region_subsidence"]\n')

PLUGIN = '''
"""A law of the whole history and a quantity of all dates."""
from typing import ClassVar

import numpy as np
import xarray as xr

from subside.api import Law, Quantity, hookimpl


class WholeOnly(Law):
    """Remembers the mean of its history: no date can be had without those before and after it."""

    name = "whole-only"
    summary = "as much as the mean rise of stress"
    source = "invented for a test"
    needs = ("temperature",)

    def strain(self, history, rock):
        warmth = np.broadcast_to(history.fields["temperature"], history.stress_rise.shape)
        return (1e-10 * (history.stress_rise + 0.1 * history.stress_rise.mean(axis=0)
                         - 0.1 * history.stress_rise.mean(axis=0) * (history.time == 0)[:, None])
                + 1e-6 * (warmth - warmth[0]))


class ShareOfLast(Quantity):
    """Subsidence over that of the last date."""

    name = "share_of_last"
    summary = "subsidence over that of the last date"
    source = "invented for a test"
    unit = "1"
    long_name = "share of the last date"
    needs: ClassVar[tuple[str, ...]] = ("subsidence",)

    def compute(self, result):
        return result["subsidence"] / (result["subsidence"].isel(time=-1) + 1e-3)


@hookimpl
def subside_compaction_laws():
    return [WholeOnly]


@hookimpl
def subside_quantities():
    return [ShareOfLast]
'''


def write_field(folder: Path, law: str = "linear", more: str = MAP + POINTS + LATTICE,
                earth: str = 'model = "half-space"\npoisson_ratio = 0.25',
                chunks: tuple[int, int] | None = None) -> Path:
    """The scenario; its pressures fall unevenly, and rise again in some cells."""
    folder.mkdir(parents=True, exist_ok=True)
    rng = np.random.default_rng(11)
    k, j, i = np.unravel_index(np.arange(LAYERS * ROWS * COLUMNS), (LAYERS, ROWS, COLUMNS))
    u, v = (i - COLUMNS / 2) * 300.0, (j - ROWS / 2) * 260.0
    turn = np.radians(25.0)
    x = X0 + u * np.cos(turn) + v * np.sin(turn)
    y = Y0 - u * np.sin(turn) + v * np.cos(turn)
    top = 1300.0 + 0.03 * u + 60.0 * k
    far = np.exp(-(u**2 + v**2) / 1.5e6)
    fall = 80.0 * far * rng.uniform(0.4, 1.0, x.size) + 1.0
    pace = np.array([0.0, 0.1, 0.35, 0.7, 1.0, 0.9, 0.6, 0.95])[:, None]
    pressure = 220.0 - fall * (pace + 0.02 * np.sin(np.arange(DATES)[:, None] * (1 + k)))
    warm = 90.0 - 2.0 * far * np.arange(DATES)[:, None]
    write_boxes(folder / "grid.nc", x, y, top, top + 60.0, 300.0, 260.0, pressure, azimuth=25.0,
                region=1 + (v > 0).astype(int), names="south north",
                fields={"temperature": (warm, "degC")})
    store(folder / "grid.nc", chunks)
    write_points(folder / "points.csv", X0 + np.array([0.0, 700.0, -2500.0]),
                 Y0 + np.array([0.0, 400.0, 900.0]))
    (folder / "plugin.py").write_text(PLUGIN)
    return write_scenario(folder, law=LAWS[law], earth=earth, more=more)


def store(path: Path, chunks: tuple[int, int] | None) -> None:
    """Lay the variables in time out in chunks of (dates, cells), compressed; None: in one piece."""
    old = path.with_suffix(".old.nc")
    path.rename(old)
    with netCDF4.Dataset(old) as source, netCDF4.Dataset(path, "w") as file:
        for name, size in source.dimensions.items():
            file.createDimension(name, len(size))
        for name, variable in source.variables.items():
            how: dict[str, Any] = {}
            if variable.ndim == 2 and chunks is not None:
                how = {"zlib": True, "complevel": 1, "chunksizes": tuple(
                    min(a, b) for a, b in zip(chunks, variable.shape, strict=True))}
            copy = file.createVariable(name, variable.dtype, variable.dimensions, **how)
            copy.setncatts(variable.__dict__)
            copy[...] = variable[...]
    old.unlink()


def cut_every(monkeypatch: pytest.MonkeyPatch, rows_of_a_leg: int) -> list[list[tuple[int, int]]]:
    """Legs of so many dates, as little memory would have them; the plans that were made."""
    from subside import outlook

    plans = []

    def plan(_needs: Any, rows: int, _chunk: int, whole: bool, _memory: Any, _at: int
             ) -> list[tuple[int, int]]:
        edges = [0, rows] if whole else [*range(0, rows, rows_of_a_leg), rows]
        plans.append(list(pairwise(edges)))
        return plans[-1]

    monkeypatch.setattr(outlook, "plan_legs", plan)
    return plans


def small_batches(monkeypatch: pytest.MonkeyPatch, cells: int = 20) -> None:
    """Many batches of a few pillars each, in place of one."""
    from subside import batches

    monkeypatch.setattr(batches, "_CELLS", cells)


def assert_same(found: xr.Dataset, wanted: xr.Dataset, same: float = SAME) -> None:
    """Every variable of two results, relative to its own largest."""
    assert set(found.variables) == set(wanted.variables)
    for name in wanted.variables:
        a, b = found[name].values, wanted[name].values
        assert a.shape == b.shape and a.dtype.kind == b.dtype.kind, name
        if b.dtype.kind != "f":
            assert (a == b).all(), name
            continue
        assert np.isfinite(b).all(), name
        assert np.abs(a - b).max(initial=0.0) <= same * np.abs(b).max(initial=0.0), name
    for key in ("warnings", "solver_method"):
        assert found.attrs[key] == wanted.attrs[key]
    assert float(found.attrs["edge_depletion"]) == pytest.approx(
        float(wanted.attrs["edge_depletion"]), rel=same)
