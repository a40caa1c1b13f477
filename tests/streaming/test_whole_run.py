"""A run gives the same whatever is done at a time: dates, cells, threads, storage."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
import xarray as xr
from invented_fields import X0, Y0
from streaming_runs import (
    DATES,
    EVERYTHING,
    LATTICE,
    MAP,
    POINTS,
    assert_same,
    cut_every,
    small_batches,
    write_field,
)

import subside as sd
from subside.errors import InputError
from subside.pipeline import run
from subside.superposition import summation

BETWEEN = ('[time]\nstart = "2000-07-01"\n[output]\ntimes = ["2000-11-15", "2001-01-01", '
           '"2003-03-03", "2003-04-01", "2006-12-01"]\n')
FULL = MAP + POINTS + LATTICE + EVERYTHING.replace('["tilt"', '["share_of_last", "tilt"')


def _plain(scenario: Path, **options: Any) -> xr.Dataset:
    return run(scenario, plugins=[scenario.parent / "plugin.py"], **options)


@pytest.mark.parametrize("law", ["linear", "bilinear", "isotach", "whole-only"])
@pytest.mark.parametrize("dates", ["", BETWEEN])
def test_legs_and_threads(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, law: str,
                          dates: str) -> None:
    scenario = write_field(tmp_path, law, MAP + POINTS + LATTICE + dates, chunks=(3, 50))
    whole = _plain(scenario, workers=1)
    assert whole.attrs["solver_method"].split(", ")[-1] == "lattice"
    assert float(whole["max_subsidence"].max()) > 0.01
    small_batches(monkeypatch)
    for rows, workers in ((1, 3), (3, 1), (3, 3)):
        plans = cut_every(monkeypatch, rows)
        assert_same(_plain(scenario, workers=workers), whole)
        assert law == "whole-only" or len(plans[-1]) == -(-DATES // rows)


@pytest.mark.parametrize("method", [LATTICE, '[solver]\nmethod = "direct"\n'])
def test_every_quantity(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, method: str) -> None:
    more = FULL.replace(LATTICE, method)
    scenario = write_field(tmp_path, "bilinear", more, chunks=(1, 60))
    whole = _plain(scenario, workers=1)
    for name in ("tilt", "horizontal_strain_major", "subsidence_rate", "region_subsidence",
                 "share_of_last", "cell_compaction", "point_subsidence"):
        assert np.abs(whole[name].values).max() > 0.0, name
    small_batches(monkeypatch)
    for rows in (1, 3):
        cut_every(monkeypatch, rows)
        assert_same(_plain(scenario, workers=3), whole)


def test_quantities_agree_with_each_other(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Regions and cells add up to the whole; the rate is the difference over the interval."""
    cut_every(monkeypatch, 2)
    result = _plain(write_field(tmp_path, "bilinear", FULL))
    down = result["subsidence"].values
    # each region is summed on a lattice of its own
    gap = result["region_subsidence"].values.sum(axis=1) - down
    assert np.abs(gap).max() < 2e-4 * np.abs(down).max()
    seconds = (result["time"].values - result["time"].values[0]) / np.timedelta64(1, "s")
    rate = np.diff(down, axis=0) / np.diff(seconds)[:, None, None]
    assert result["subsidence_rate"].values[1:] == pytest.approx(rate, rel=1e-9, abs=1e-20)
    assert result["share_of_last"].values == pytest.approx(down / (down[-1] + 1e-3), rel=1e-12)
    area = 300.0 * 260.0
    lost = result["region_compaction_volume"].values.sum(axis=1)
    assert result["cell_compaction"].values.sum(axis=1) * area == pytest.approx(lost, rel=1e-10)
    # half-space of Poisson ratio 0.25: the bowl holds 2 (1 - nu) = 1.5 m3 for each m3 lost
    assert result["bowl_volume"].values == pytest.approx(1.5 * lost, rel=1e-12)


@pytest.mark.parametrize("chunks", [(1, 10**6), (DATES, 10**6), (1, 37), (3, 50), (DATES, 25)])
def test_storage_of_the_file(tmp_path: Path, monkeypatch: pytest.MonkeyPatch,
                             chunks: tuple[int, int]) -> None:
    whole = run(write_field(tmp_path / "one", "isotach"), workers=2)
    small_batches(monkeypatch)
    cut_every(monkeypatch, 3)
    other = run(write_field(tmp_path / "two", "isotach", chunks=chunks), workers=2)
    assert_same(other, whole)


def test_several_storage_blocks(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Blocks cut pillars here, for a cell table knows nothing of them."""
    from subside.grid import selection

    scenario = write_field(tmp_path, "bilinear", chunks=(2, 30))
    whole = run(scenario, workers=1)
    monkeypatch.setattr(selection.make_blocks, "__defaults__", (40,))
    job = sd.pipeline.prepare(scenario)
    assert len(job.streams["pressure"].blocks) == 3
    cut_every(monkeypatch, 2)
    for workers in (1, 3):
        assert_same(run(scenario, workers=workers), whole)


def test_cells_that_begin_to_lose_later(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Which cells of a pillar take part differs from leg to leg."""
    import netCDF4

    scenario = write_field(tmp_path, "linear")
    with netCDF4.Dataset(tmp_path / "grid.nc", "r+") as file:
        values = file["pressure"][...]
        cells = np.arange(values.shape[1])
        for late in (1, 2, 3):
            values[: 2 * late, cells % 4 == late] = 220.0
        file["pressure"][...] = values
    whole = run(scenario, workers=1)
    small_batches(monkeypatch)
    cut_every(monkeypatch, 3)
    assert_same(run(scenario, workers=3), whole)


@pytest.mark.parametrize("dates", ["", BETWEEN])
def test_a_file_is_the_result_in_memory(tmp_path: Path, monkeypatch: pytest.MonkeyPatch,
                                        dates: str) -> None:
    """Maps are stored as float32."""
    more = FULL if not dates else FULL.replace("[output]\n", dates)
    scenario = write_field(tmp_path, "bilinear", more)
    held = _plain(scenario)
    cut_every(monkeypatch, 3)
    with _plain(scenario, output=tmp_path / "r.nc", workers=3) as written:
        assert written.sizes == held.sizes
        for name in held.data_vars:
            a, b = written[name].values, held[name].values
            if b.dtype.kind == "f":
                assert np.abs(a - b).max() <= 1.3e-7 * np.abs(b).max(), name
            else:
                assert (a == b).all(), name
        assert written.attrs["warnings"] == held.attrs["warnings"]
    assert sorted(p.name for p in tmp_path.iterdir()) == [
        "grid.nc", "plugin.py", "points.csv", "r.nc", "scenario.toml"]


def test_the_memory_asked_for_cuts_legs_and_nothing_else(
        tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    from subside import legs, outlook

    scenario = write_field(tmp_path, "isotach")
    plans = []
    plan = legs.plan_legs

    def spy(*args: Any) -> list[tuple[int, int]]:
        plans.append(plan(*args))
        return plans[-1]

    monkeypatch.setattr(outlook, "plan_legs", spy)
    whole = run(scenario, workers=2)
    job = sd.pipeline.prepare(scenario)
    grid = outlook.look_ahead(job, None, 2, sd.progress.Progress())
    needs = outlook.Outlook.of(job, grid, 0, None, 2, in_memory=True).needs
    monkeypatch.setattr(legs, "memory_in_use", lambda: 0.0)
    tight = run(scenario, workers=2, memory=needs.fixed + 3.2 * needs.per_date)
    assert len(plans[0]) == 1 and plans[-1] == [(0, 3), (3, 6), (6, 8)]
    assert_same(tight, whole)


def test_nothing_depleted_on_a_lattice(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    import netCDF4

    scenario = write_field(tmp_path)
    with netCDF4.Dataset(tmp_path / "grid.nc", "r+") as file:
        file["pressure"][...] = 220.0
    cut_every(monkeypatch, 3)
    result = run(scenario)
    assert not result["subsidence"].values.any() and not result["bowl_volume"].values.any()


def test_a_failed_check_makes_the_run_anew(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """The result is that of the finer design, with a note; nothing of the first is left over."""
    scenario = write_field(tmp_path, "isotach", MAP + POINTS + LATTICE + EVERYTHING)
    good = run(scenario)
    accepts, refused = summation.Summation.accepts, []

    def doubtful(self: summation.Summation, error: float) -> bool:
        if self.method == "lattice" and self._part == 1.0:
            refused.append(error)
            return False
        return accepts(self, error)

    monkeypatch.setattr(summation.Summation, "accepts", doubtful)
    cut_every(monkeypatch, 3)
    with run(scenario, output=tmp_path / "r.nc") as result:
        assert refused and "refined" in result.attrs["solver_notes"]
        assert result.attrs["warnings"] == good.attrs["warnings"]
        assert result.sizes == good.sizes
        for name in ("subsidence", "tilt", "region_compaction_volume", "bowl_volume"):
            a, b = result[name].values, good[name].values
            assert np.abs(a - b).max() <= 1e-4 * np.abs(b).max(), name
    assert not list(tmp_path.glob("*.part*"))


def test_findings_do_not_depend_on_legs(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A cell above lithostatic pressure is one cell, a date that repeats itself one date.

    The start lies between the first two dates, of which the first row needs both.
    """
    import netCDF4

    more = MAP + LATTICE + '[time]\nstart = "2000-07-01"\n'
    scenario = write_field(tmp_path, more=more)
    text = scenario.read_text().replace('file = "grid.nc"',
                                        'file = "grid.nc"\naccept = ["lithostatic"]')
    scenario.write_text(text)
    with netCDF4.Dataset(tmp_path / "grid.nc", "r+") as file:
        file["pressure"][1, 17] = 900.0
        file["pressure"][5] = file["pressure"][4]
    said = run(scenario, workers=1).attrs["warnings"]
    assert "is identical to step 4" in said and "1 active cell has" in said
    small_batches(monkeypatch)
    for rows in (2, 3):
        cut_every(monkeypatch, rows)
        assert run(scenario, workers=3).attrs["warnings"] == said


def test_what_is_wrong_is_the_same_whoever_finds_it(tmp_path: Path,
                                                    monkeypatch: pytest.MonkeyPatch) -> None:
    import netCDF4

    scenario = write_field(tmp_path, chunks=(2, 50))
    with netCDF4.Dataset(tmp_path / "grid.nc", "r+") as file:
        file["pressure"][5, 40], file["pressure"][6, 3], file["pressure"][5, 77] = -3.0, -1.0, -2.0
    messages = set()
    for workers, rows in ((1, 8), (3, 1), (3, 3)):
        with monkeypatch.context() as patch:
            small_batches(patch)
            cut_every(patch, rows)
            with pytest.raises(InputError) as error:
                run(scenario, workers=workers)
        messages.add(str(error.value))
    assert len(messages) == 1
    assert "step 5" in messages.pop()


def test_an_automatic_map_does_not_depend_on_legs(tmp_path: Path,
                                                  monkeypatch: pytest.MonkeyPatch) -> None:
    """The volume is largest before the last date, so that two dates are looked at beforehand."""
    import netCDF4

    scenario = write_field(tmp_path, "linear", '[map]\nspacing = "500 m"\n')
    with netCDF4.Dataset(tmp_path / "grid.nc", "r+") as file:
        file["pressure"][-1] = 220.0 - 0.3 * (220.0 - file["pressure"][-2])
    whole = run(scenario, workers=1)
    assert whole.sizes["x"] > 10
    small_batches(monkeypatch)
    cut_every(monkeypatch, 3)
    assert_same(run(scenario, workers=3), whole)
    assert abs(float(whole["x"].mean()) - X0) < 600 and abs(float(whole["y"].mean()) - Y0) < 600
