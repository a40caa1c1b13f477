"""What must not change: each property through grid file, scenario and `run`.

Elastic superposition is linear; a half-space has no origin and no east; a body has no cells.
"""

from __future__ import annotations

import tempfile
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from invented_fields import X0, Y0, write_boxes, write_corners, write_points, write_scenario

import subside as sd
from subside.superposition.hexahedron import octant_of

few = settings(max_examples=6, deadline=None)
seeds = st.integers(0, 2**32 - 1)
POINTS = '[points]\nfile = "points.csv"\n'
RIGID = 'model = "rigid-basement"\npoisson_ratio = 0.2\nbasement_depth = "3 km"'
HALF = 'model = "half-space"\npoisson_ratio = 0.25'
NAMES = ("point_subsidence", "point_displacement_east", "point_displacement_north")
BOX = ("x", "y", "top", "bottom", "dx", "dy", "azimuth")


def boxes(rng: np.random.Generator, count: int = 6) -> dict[str, np.ndarray]:
    """A few boxes within 2 km, 1 to 2 km deep."""
    top = rng.uniform(1000, 1900, count)
    return {"x": rng.uniform(-1000, 1000, count), "y": rng.uniform(-1000, 1000, count), "top": top,
            "bottom": top + rng.uniform(5, 100, count), "dx": rng.uniform(50, 800, count),
            "dy": rng.uniform(50, 800, count), "azimuth": rng.uniform(-180, 180, count)}


def hexahedra(rng: np.random.Generator, count: int = 4) -> np.ndarray:
    """Dipping, twisted cells; the top face goes round anticlockwise seen from above."""
    ring = np.array([[-1, -1], [1, -1], [1, 1], [-1, 1]]) * 0.5
    corners = np.zeros((count, 8, 3))
    size = rng.uniform(60, 500, (count, 1, 2))
    corners[:, :4, :2] = corners[:, 4:, :2] = ring * size + rng.uniform(-800, 800, (count, 1, 2))
    corners[:, :, :2] += 0.05 * size.min() * rng.uniform(-1, 1, (count, 8, 2))
    height = rng.uniform(20, 80, (count, 1))
    corners[:, :4, 2] = rng.uniform(1000, 1800, (count, 1)) \
        + 0.2 * height * rng.uniform(-1, 1, (count, 4))
    corners[:, 4:, 2] = corners[:, :4, 2] + height * rng.uniform(0.8, 1.2, (count, 4))
    return corners


def pressure(drop: np.ndarray) -> np.ndarray:
    """150 bar at first, (time, cell)."""
    return np.stack([np.full(drop.shape, 150.0), 150.0 - drop])


def places(rng: np.random.Generator, count: int = 8) -> np.ndarray:
    return rng.uniform(-3000, 3000, (count, 2))


def run(body: dict[str, np.ndarray] | np.ndarray, bar: np.ndarray, at: np.ndarray, *,
        earth: str = HALF, law_more: str = "", more: str = "", depth: Any = None,
        tolerance: float = 1e-4, origin: tuple[float, float] = (X0, Y0), law: str = "",
        **grid: Any):
    """Write, run by the plain sum, return the result; coordinates relative to the origin."""
    solver = f'[solver]\nmethod = "direct"\ntolerance = {tolerance}\n'
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        if isinstance(body, dict):
            moved = body | {"x": body["x"] + origin[0], "y": body["y"] + origin[1]}
            write_boxes(folder / "grid.nc", *(moved[n] for n in BOX[:6]), bar,
                        azimuth=moved["azimuth"], **grid)
        else:
            write_corners(folder / "grid.nc", body + np.array([*origin, 0.0]), bar, **grid)
        write_points(folder / "points.csv", at[:, 0] + origin[0], at[:, 1] + origin[1], depth)
        law = law or 'law = "linear"\nuniaxial_compressibility = "1e-5 1/bar"\n'
        return sd.run(write_scenario(folder, law=law + law_more, earth=earth,
                                     more=POINTS + solver + more))


def field(result: Any) -> np.ndarray:
    """Down, east, north at the last date, (3, point)."""
    return np.array([result[n].values[-1] for n in NAMES])


def same(a: np.ndarray, b: np.ndarray, share: float) -> None:
    assert np.abs(a - b).max() <= share * np.abs(a).max()


@few
@given(seeds, st.floats(-1.0, 1.3), st.sampled_from([HALF, RIGID]))
def test_linear_in_depletion(seed: int, factor: float, earth: str) -> None:
    """Also for injection, and over the sum of two histories."""
    rng = np.random.default_rng(seed)
    body, at = boxes(rng), places(rng)
    one, two = rng.uniform(0, 60, (2, 6))
    law = 'horizontal_release = 0.5\n'
    a, b = (field(run(body, pressure(d), at, earth=earth, law_more=law)) for d in (one, two))
    both = field(run(body, pressure(factor * one + two), at, earth=earth, law_more=law))
    same(b + factor * a, both, 1e-10)


@few
@given(seeds, st.sampled_from([(1e6, -1e6), (12345.678, 3.21)]), st.booleans())
def test_moving_everything_changes_nothing(seed: int, shift: tuple[float, float],
                                           corners: bool) -> None:
    """By a million metres: nothing is lost but the coordinates' own rounding (1e-9 m)."""
    rng = np.random.default_rng(seed)
    body = hexahedra(rng) if corners else boxes(rng)
    at = places(rng)
    bar = pressure(rng.uniform(10, 90, 4 if corners else 6))
    depth = np.where(np.arange(8) % 4 == 0, 700.0, 0.0).tolist()
    here = field(run(body, bar, at, depth=depth, epsg=None))
    there = field(run(body, bar, at, depth=depth, epsg=None,
                      origin=(X0 + shift[0], Y0 + shift[1])))
    same(here, there, 1e-10)


@few
@given(seeds, st.floats(-180, 180), st.booleans())
def test_turning_everything_turns_the_field(seed: int, degrees: float, corners: bool) -> None:
    """Clockwise, as azimuth; underground points among them."""
    rng = np.random.default_rng(seed)
    a = np.radians(degrees)
    turn = np.array([[np.cos(a), -np.sin(a)], [np.sin(a), np.cos(a)]])  # row vectors, clockwise
    body = hexahedra(rng) if corners else boxes(rng)
    at = places(rng)
    bar = pressure(rng.uniform(10, 90, 4 if corners else 6))
    depth = np.where(np.arange(8) % 4 == 0, 700.0, 0.0).tolist()
    if isinstance(body, dict):
        plan = np.column_stack([body["x"], body["y"]]) @ turn
        turned: Any = body | {"x": plan[:, 0], "y": plan[:, 1],
                              "azimuth": body["azimuth"] + degrees}
    else:
        turned = body.copy()
        turned[..., :2] = body[..., :2] @ turn
    law = 'horizontal_release = 0.3\n'
    base = field(run(body, bar, at, depth=depth, law_more=law))
    got = field(run(turned, bar, at @ turn, depth=depth, law_more=law))
    same(base[0], got[0], 1e-9)
    same(base[1:].T @ turn, got[1:].T, 1e-9)


@few
@given(seeds, st.sampled_from([HALF, RIGID]))
def test_splitting_cells_changes_nothing(seed: int, earth: str) -> None:
    """In eight at the trilinear midplanes, so in x, y and z: to the tolerance asked for."""
    rng = np.random.default_rng(seed)
    body, at = hexahedra(rng), places(rng)
    drop = rng.uniform(10, 90, 4)
    parts = np.array([octant_of(c, n) for c in body for n in range(8)])
    depth = np.where(np.arange(8) % 4 == 0, 700.0, 0.0).tolist() if earth == HALF else None
    law = 'horizontal_release = 0.5\n'
    whole = run(body, pressure(drop), at, earth=earth, tolerance=1e-6, depth=depth, law_more=law)
    split = run(parts, pressure(np.repeat(drop, 8)), at, earth=earth, tolerance=1e-6, depth=depth,
                law_more=law)
    same(field(whole), field(split), 1e-6)
    assert float(split["bowl_volume"][-1]) == pytest.approx(float(whole["bowl_volume"][-1]),
                                                            rel=1e-10)


@few
@given(seeds, st.sampled_from(["x", "y", "z"]))
def test_splitting_boxes_changes_nothing(seed: int, axis: str) -> None:
    rng = np.random.default_rng(seed)
    body, at = boxes(rng), places(rng)
    drop = rng.uniform(10, 90, 6)
    share = rng.uniform(0.2, 0.8, 6)
    halves = []
    for lower, size in ((np.zeros(6), share), (share, 1 - share)):
        part = dict(body)
        if axis == "z":
            height = body["bottom"] - body["top"]
            part["top"] = body["top"] + lower * height
            part["bottom"] = part["top"] + size * height
        else:
            length = body["d" + axis]
            off = (lower + size / 2 - 0.5) * length
            a = np.radians(body["azimuth"])
            east, north = (np.cos(a), -np.sin(a)) if axis == "x" else (np.sin(a), np.cos(a))
            part["x"], part["y"] = body["x"] + off * east, body["y"] + off * north
            part["d" + axis] = size * length
        halves.append(part)
    split = {n: np.concatenate([h[n] for h in halves]) for n in BOX}
    depth = np.where(np.arange(8) % 4 == 0, 700.0, 0.0).tolist()
    same(field(run(body, pressure(drop), at, tolerance=1e-6, depth=depth)),
         field(run(split, pressure(np.tile(drop, 2)), at, tolerance=1e-6, depth=depth)), 1e-6)


@few
@given(seeds)
def test_sum_of_regions_is_the_whole(seed: int) -> None:
    """Maps of each region add up to the map; their volumes to the volume lost and the bowl."""
    rng = np.random.default_rng(seed)
    body, at = boxes(rng), places(rng)
    more = (f'[map]\nspacing = "500 m"\nbounds = [{X0 - 5000}, {Y0 - 4000}, {X0 + 5000}, '
            f'{Y0 + 4000}]\n[output]\nquantities = ["region_subsidence", "cell_compaction"]')
    region = np.array([0, 1, 2, 0, 1, 2])
    result = run(body, pressure(rng.uniform(-20, 90, 6)), at, more=more, region=region,
                 names="north middle south")
    parts = result["region_subsidence"].sum("region").values
    same(result["subsidence"].values, parts, 1e-12)
    volume = result["region_compaction_volume"].values[-1]
    rounding = 1e-12 * np.abs(volume).max()  # injection and depletion may nearly cancel
    assert volume.sum() * 1.5 == pytest.approx(float(result["bowl_volume"][-1]), abs=rounding)
    area = body["dx"] * body["dy"]
    lost = result["cell_compaction"].values[-1] * area
    assert [lost[region == n].sum() for n in range(3)] == pytest.approx(
        volume, rel=1e-9, abs=rounding)
    # the map covers all cells, so it holds all of what they lose
    assert float(result["compaction"][-1].sum()) * 500.0**2 == pytest.approx(
        lost.sum(), rel=1e-9, abs=1e3 * rounding)


@few
@given(seeds, st.floats(-80.0, 400.0), st.sampled_from([HALF, RIGID]), st.booleans())
def test_moving_the_datum_changes_nothing(seed: int, shift: float, earth: str,
                                          corners: bool) -> None:
    """Surface, cells, basement and points lower by the same: the ground knows no datum."""
    rng = np.random.default_rng(seed)
    body: Any = hexahedra(rng) if corners else boxes(rng)
    at = places(rng)
    bar = pressure(rng.uniform(10, 90, 4 if corners else 6))
    lower = body + np.array([0.0, 0.0, shift]) if corners else body | {
        "top": body["top"] + shift, "bottom": body["bottom"] + shift}
    moved = earth.replace('"3 km"', f'"{3000 + shift!r} m"') + f'\nsurface = "{shift!r} m"'
    deep = earth == HALF
    one = run(body, bar, at, earth=earth, depth=[600.0] * 4 + [0.0] * 4 if deep else None)
    two = run(lower, bar, at, earth=moved,
              depth=[600.0 + shift] * 4 + [shift] * 4 if deep else None)
    same(field(one), field(two), 1e-9)
    assert two["point_depth"].values == pytest.approx(one["point_depth"].values, abs=1e-9)
    assert float(two["bowl_volume"][-1]) == pytest.approx(float(one["bowl_volume"][-1]), rel=1e-12)


LAWS = {
    "linear": ('law = "linear"\nuniaxial_compressibility = "1e-5 1/bar"\n', 1e-12),
    "bilinear": ('law = "bilinear"\ncompressibility_before_yield = "1e-5 1/bar"\n'
                 'compressibility_after_yield = "4e-5 1/bar"\nyield_stress_increase = "37 bar"\n',
                 1e-12),
    "isotach": ('law = "isotach"\nreference_compressibility = "1e-5 1/bar"\n'
                'direct_compressibility = "0.5e-5 1/bar"\nrate_exponent = 0.02\n'
                'reference_stress_rate = "3e-4 bar/yr"\ninitial_effective_stress = "150 bar"\n',
                1e-5),
}


@pytest.mark.parametrize("law", LAWS)
def test_half_the_time_step_changes_nothing(law: str) -> None:
    """Pressure falls along a straight line: more dates on it say nothing new. The isotach law
    integrates in substeps and is allowed 1e-5."""
    rng = np.random.default_rng(5)
    body, at = boxes(rng), places(rng)
    drop = rng.uniform(40, 90, 6)
    text, share = LAWS[law]

    def at_years(years: list[float]):
        bar = 150.0 - np.outer(np.array(years) / years[-1], drop)
        return field(run(body, bar, at, law=text, years=years))

    coarse = at_years([0.0, 10.0, 20.0])
    same(coarse, at_years([0.0, 5.0, 10.0, 15.0, 20.0]), share)
    same(coarse, at_years([0.0, 3.0, 4.0, 11.0, 20.0]), share)


@few
@given(seeds)
def test_elevation_upward_is_depth_downward(seed: int) -> None:
    rng = np.random.default_rng(seed)
    body, at = boxes(rng), places(rng)
    bar = pressure(rng.uniform(10, 90, 6))
    same(field(run(body, bar, at)), field(run(body, bar, at, positive="up")), 1e-14)


@few
@given(seeds)
def test_corners_going_round_the_other_way(seed: int) -> None:
    """A left-handed grid is the same ground; underground points tell inside from outside."""
    rng = np.random.default_rng(seed)
    body, at = hexahedra(rng), places(rng)
    at[:2] = body[0, :, :2].mean(axis=0)
    depth = [float(body[0, :, 2].mean()), float(body[0, :, 2].mean() - 50)] + [0.0] * 6
    bar = pressure(rng.uniform(10, 90, 4))
    right = field(run(body, bar, at, depth=depth))
    left = field(run(body[:, [0, 3, 2, 1, 4, 7, 6, 5]], bar, at, depth=depth))
    same(right, left, 1e-10)
