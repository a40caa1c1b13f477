"""From scenario to result: signs, both strengths of a source, and what a run warns of."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
from invented_fields import X0, Y0, write_boxes, write_points, write_scenario

import subside as sd
from subside.errors import InputError

POINTS = '[points]\nfile = "points.csv"\n'
AROUND = np.array([[0, 0], [900, 0], [-900, 0], [0, 900], [0, -900]], dtype=float)
LAW = 'law = "linear"\nuniaxial_compressibility = "1e-5 1/bar"\n'
E_MATCHED = 0.25
"""Host with M = 1/Cm = 1e10 Pa: E = M (1+nu)(1-2nu)/(1-nu) = M 5/6 at nu = .25."""


def run(folder: Path, *, drop: Any = 100.0, law: str = LAW, earth: str = "", more: str = POINTS,
        fields: Any = None, depth: Any = None, years: Any = None, cells: int = 1):
    """A cube of 20 m, 1 km deep (the host may have a modulus)."""
    drop = np.atleast_1d(np.asarray(drop, float))
    steps = np.concatenate([[0.0], drop])[:, None] * np.ones(cells)
    x = X0 + 20.0 * np.arange(cells)
    write_boxes(folder / "grid.nc", x, np.full(cells, Y0), 990.0, 1010.0, 20.0, 20.0, 220.0 - steps,
                fields=fields, years=years)
    write_points(folder / "points.csv", X0 + AROUND[:, 0], Y0 + AROUND[:, 1], depth)
    return sd.run(write_scenario(folder, law=law, more=more, earth=(
        'model = "half-space"\npoisson_ratio = 0.25\n' + earth)))


def field(result: Any) -> np.ndarray:
    return np.array([result[f"point_{n}"].values[-1] for n in (
        "subsidence", "displacement_east", "displacement_north")])


CLOSED = {
    # u_z = dV/pi [g (1-nu) c/R^3 + (1-g)(3/2) c^3/R^5], u_r likewise times -r/c
    g: lambda r, g=g: 20.0**3 * 1e-3 / np.pi * (
        g * 0.75 * 1e3 / np.hypot(r, 1e3) ** 3 + (1 - g) * 1.5 * 1e9 / np.hypot(r, 1e3) ** 5)
    for g in (0.0, 0.4, 1.0, 2.5)
}
R = np.hypot(*AROUND.T)


@pytest.mark.parametrize("g", CLOSED)
@pytest.mark.parametrize("kind", ["number", "field"])
def test_two_strengths(tmp_path: Path, g: float, kind: str) -> None:
    """Closing crack + g (nucleus - crack), surface closed forms of both (Mindlin and Cheng 1950;
    Okada 1985); a cube of 20 m at 1 km is a point to 2e-5."""
    release = f"{g}" if kind == "number" else '{ field = "release" }'
    result = run(tmp_path, law=LAW + f"horizontal_release = {release}\n",
                 fields={"release": ([g], "1")})
    down = CLOSED[g](R)
    got = field(result)
    scale = 1e-4 * max(1.0, g) * CLOSED[1.0](0.0)
    assert got[0] == pytest.approx(down, rel=1e-4, abs=scale)
    toward = -down[:, None] * AROUND / 1e3
    assert got[1:] == pytest.approx(toward.T, rel=1e-4, abs=scale)
    # volume 2(1-nu) g + (1-g)
    assert float(result["bowl_volume"][-1]) == pytest.approx(8.0 * (1.5 * g + 1 - g), rel=1e-9)


def test_depletion_sinks_and_injection_lifts(tmp_path: Path) -> None:
    """Down positive; toward the body when it shrinks, away when it swells."""
    sinks = field(run(tmp_path, drop=100.0))
    lifts = field(run(tmp_path, drop=-5.0))
    assert (sinks[0] > 0).all() and (lifts[0] < 0).all()
    assert (sinks[[1, 2], [1, 3]] < 0).all() and (sinks[[1, 2], [2, 4]] > 0).all()
    assert lifts == pytest.approx(sinks / -20, rel=1e-10, abs=1e-18)


def test_over_and_under_a_shrinking_body(tmp_path: Path) -> None:
    """The roof sinks, the floor rises."""
    result = run(tmp_path, depth=[900.0, 900.0, 900.0, 1100.0, 1100.0])
    assert float(result["point_subsidence"][-1, 0]) > 0
    write_points(tmp_path / "points.csv", [X0], [Y0], [1100.0])
    below = sd.run(tmp_path / "scenario.toml")
    assert float(below["point_subsidence"][-1, 0]) < 0


@pytest.mark.parametrize(("ratio", "g"), [(1.0, 1.0), (0.5, 0.5), (3.0, 3.0)])
def test_own_release(tmp_path: Path, ratio: float, g: float) -> None:
    """g = a Dp/(e M_host): a host `1/ratio` as stiff as 1/Cm gives g = ratio; g = 1 is matched."""
    young = 1e10 * 5 / 6 / ratio
    own = field(run(tmp_path, law=LAW + 'horizontal_release = "own"\n',
                    earth=f"young_modulus = {young}\n"))
    number = field(run(tmp_path, law=LAW + f"horizontal_release = {g}\n"))
    assert own == pytest.approx(number, rel=1e-9, abs=1e-15)


def test_own_release_needs_the_stiffness_of_the_host(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="young_modulus is missing"):
        run(tmp_path, law=LAW + 'horizontal_release = "own"\n')


@pytest.mark.parametrize(("ratio", "word"), [(0.3, "stiffer"), (0.45, "stiffer"), (0.6, None),
                                             (1.0, None), (1.9, None), (2.2, "softer"),
                                             (7.0, "softer")])
def test_mismatch_of_stiffness_is_said(tmp_path: Path, ratio: float, word: str | None) -> None:
    """Cm M_host outside 0.5 to 2 with g left at 1: a warning with the number."""
    young = 1e10 * 5 / 6 * ratio
    said = run(tmp_path, earth=f"young_modulus = {young}\n").attrs["warnings"]
    if word is None:
        assert "host" not in said
    else:
        assert f"{ratio:.2g} times 1/M of the host" in said
        assert f"{word} than its host" in said
        assert 'horizontal_release = "own"' in said
    # told by the scenario: nothing to say
    quiet = run(tmp_path, earth=f"young_modulus = {young}\n",
                law=LAW + 'horizontal_release = "own"\n').attrs["warnings"]
    assert "host" not in quiet


def test_mismatch_is_judged_at_one_date(tmp_path: Path) -> None:
    """An output date halfway down the pressure history: strain and stress of the same date."""
    more = POINTS + '[output]\ntimes = ["2005-01-01"]\n'
    said = run(tmp_path, earth=f"young_modulus = {1e10 * 5 / 6}\n", drop=[30.0, 100.0],
               years=[0, 5, 20], more=more).attrs["warnings"]
    assert "host" not in said


def test_tilt_and_strain_against_differences_of_a_fine_map(tmp_path: Path) -> None:
    """Central differences over 20 m at 1 km depth err by (h/c)^2/6, some 1e-4, of the largest."""
    more = (f'[map]\nspacing = "20 m"\nbounds = [{X0}, {Y0 - 300}, {X0 + 800}, {Y0 + 300}]\n'
            '[output]\nquantities = ["tilt", "slope_east", "slope_north", '
            '"horizontal_strain_east", "horizontal_strain_north", "horizontal_strain_shear", '
            '"horizontal_strain_major", "horizontal_strain_minor"]')
    result = run(tmp_path, more=more, cells=30)
    down, east, north = (result[n].values[-1] for n in (
        "subsidence", "displacement_east", "displacement_north"))
    h = 20.0

    def by_east(a: np.ndarray) -> np.ndarray:
        return ((a[:, 2:] - a[:, :-2]) / (2 * h))[1:-1]

    def by_north(a: np.ndarray) -> np.ndarray:
        return ((a[:-2] - a[2:]) / (2 * h))[:, 1:-1]  # the first row is the northernmost

    wanted = {"slope_east": by_east(down), "slope_north": by_north(down),
              "horizontal_strain_east": by_east(east), "horizontal_strain_north": by_north(north),
              "horizontal_strain_shear": 0.5 * (by_north(east) + by_east(north))}
    wanted["tilt"] = np.hypot(wanted["slope_east"], wanted["slope_north"])
    mean = 0.5 * (wanted["horizontal_strain_east"] + wanted["horizontal_strain_north"])
    ring = np.hypot(0.5 * (wanted["horizontal_strain_east"] - wanted["horizontal_strain_north"]),
                    wanted["horizontal_strain_shear"])
    wanted |= {"horizontal_strain_major": mean + ring, "horizontal_strain_minor": mean - ring}
    for name, values in wanted.items():
        got = result[name].values[-1][1:-1, 1:-1]
        assert np.abs(got - values).max() < 1e-3 * np.abs(values).max(), name


def test_automatic_map_of_a_run(tmp_path: Path) -> None:
    """No bounds, no points: on every edge subsidence is about 1 % of the peak or less, and half a
    coarse step (1/47 of the map) further in it is more."""
    result = run(tmp_path, more="")
    last = result["subsidence"].values[-1]
    edges = np.concatenate([last[0], last[-1], last[:, 0], last[:, -1]])
    assert edges.max() < 0.0105 * last.max()
    assert last[last.shape[0] // 2, 0] > 0.006 * last.max()
    spacing = float(result["x"][1] - result["x"][0])
    assert float(result["y"][0] - result["y"][1]) == spacing
    west = float(result["x"][0]) - spacing / 2
    assert west / spacing == pytest.approx(round(west / spacing), abs=1e-9)
    assert float(result["max_subsidence"][-1]) == last.max()


def test_nothing_depleted_nothing_moves(tmp_path: Path) -> None:
    """A whole result of zeros, no division by a peak that is not there."""
    result = run(tmp_path, drop=0.0, more='[map]\n[output]\nquantities = ["tilt", '
                 '"subsidence_rate", "horizontal_strain_major"]')
    for name in ("subsidence", "compaction", "tilt", "subsidence_rate", "bowl_volume", "max_uplift",
                 "horizontal_strain_major"):
        assert np.isfinite(result[name].values).all() and not result[name].values.any(), name


def test_extremes_are_sought_on_the_map_and_at_points(tmp_path: Path) -> None:
    """The map lies to the side; the deepest place is the benchmark above the cube."""
    more = POINTS + f'[map]\nspacing = "100 m"\nbounds = [{X0 + 500}, {Y0}, {X0 + 900}, {Y0 + 300}]'
    result = run(tmp_path, more=more)
    assert float(result["max_subsidence"][-1]) == pytest.approx(CLOSED[1.0](0.0), rel=1e-4)
    assert float(result["max_subsidence_x"][-1]) == X0
    assert float(result["max_subsidence_y"][-1]) == Y0
    assert float(result["bowl_volume_map"][-1]) < 0.05 * float(result["bowl_volume"][-1])


@pytest.mark.parametrize(("spacing", "said"), [("3 km", True), ("500 m", False)])
def test_a_map_too_coarse_for_its_field_is_said(tmp_path: Path, spacing: str, said: bool) -> None:
    warnings = run(tmp_path, more=f'[map]\nspacing = "{spacing}"\n').attrs["warnings"]
    assert ("wider than the shallowest cell" in warnings) == said
