"""The invented fields, each run as it stands, against the numbers pinned beside it."""

from __future__ import annotations

import tomllib
from pathlib import Path

import numpy as np
import pytest

import subside as sd

SCENARIOS = Path(__file__).parents[1] / "scenarios"
FIELDS = sorted(path.parent.name for path in SCENARIOS.glob("*/expected.toml"))


@pytest.fixture(scope="module", params=FIELDS)
def field(request: pytest.FixtureRequest, tmp_path_factory: pytest.TempPathFactory):
    folder = SCENARIOS / request.param
    output = tmp_path_factory.mktemp(request.param) / "bowl.nc"
    sd.run(folder / "scenario.toml", output=output)
    expected = tomllib.loads((folder / "expected.toml").read_text())
    return sd.read_result(output), expected


def test_every_field_has_its_numbers() -> None:
    assert sorted(p.parent.name for p in SCENARIOS.glob("*/scenario.toml")) == FIELDS
    assert len(FIELDS) >= 2


def test_numbers_are_as_pinned(field) -> None:
    result, expected = field
    tolerance = expected["relative_tolerance"]
    for name, by_date in expected["series"].items():
        for date, value in by_date.items():
            got = float(result[name].sel(time=np.datetime64(date)))
            assert got == pytest.approx(value, rel=tolerance), (name, date)
    for name, by_date in expected["points"].items():
        index = list(result["point_name"].values).index(name)
        for date, value in by_date.items():
            got = float(result["point_subsidence"].sel(time=np.datetime64(date))[index])
            assert got == pytest.approx(value, rel=tolerance), (name, date)
    for region, value in expected["region_volume_m3"].items():
        index = list(result["region_name"].values).index(region)
        assert float(result["region_compaction_volume"][-1, index]) == pytest.approx(
            value, rel=tolerance), region


def test_the_field_behaves_as_its_story_says(field) -> None:
    result, expected = field
    low, high = expected["deepest_between_m"]
    assert low < float(result["max_subsidence"].max()) < high
    total = float(result["region_compaction_volume"][-1].sum())
    lost_on_map = float(result["compaction"][-1].sum()) * float(
        abs(result["x"][1] - result["x"][0])) ** 2
    assert lost_on_map == pytest.approx(total, rel=1e-4)  # the map covers the field
    assert float(result.attrs["edge_depletion"]) < 0.05
