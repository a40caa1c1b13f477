"""Published closed forms, the way a user goes: grid file, scenario file, `run`, result.

Everywhere the strain is 1e-5 /bar x 100 bar = 1e-3, and flat bodies are 1 m thick at 1000 m, so
that "per unit e h" is a division by 1e-3 m. Disc: Geertsma (1973), J. Petrol. Technol. 25:734.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from invented_fields import (
    X0,
    Y0,
    disc_corners,
    write_boxes,
    write_corners,
    write_points,
    write_scenario,
)

import subside as sd

C = 1000.0
EH = 1e-3
POINTS = '[points]\nfile = "points.csv"\n'


def _disc(folder: Path, points_x: list[float], *, radius: float = C, n: int = 32,
          earth: str = 'model = "half-space"\npoisson_ratio = 0.25', depth: list | None = None,
          law_more: str = "", drop_bar: float | np.ndarray = 100.0, thickness: float = 1.0):
    corners = disc_corners(radius, C, thickness, n)
    # 220 bar at 1 km stays below the weight of the rock; 120 bar are left
    drop = np.broadcast_to(np.asarray(drop_bar, float), corners.shape[0])
    write_corners(folder / "grid.nc", corners, np.stack([np.full(drop.shape, 220.0), 220.0 - drop]))
    write_points(folder / "points.csv", X0 + np.asarray(points_x),
                 np.full(len(points_x), Y0), depth)
    law = 'law = "linear"\nuniaxial_compressibility = "1e-5 1/bar"\n' + law_more
    return sd.run(write_scenario(folder, law=law, earth=earth, more=POINTS))


def _down(result) -> np.ndarray:
    return result["point_subsidence"].values[-1] / EH


def _east(result) -> np.ndarray:
    return result["point_displacement_east"].values[-1] / EH


# S/C = 2(1-nu)(1 - eta/sqrt(1+eta^2)), eta = depth over radius (Geertsma 1973)
@pytest.mark.parametrize("eta", [0.2, 0.5, 1.0, 2.0])
def test_disc_centre(tmp_path: Path, eta: float) -> None:
    result = _disc(tmp_path, [0.0], radius=C / eta, n=48)
    expected = 1.5 * (1 - eta / np.sqrt(1 + eta**2))
    assert _down(result)[0] == pytest.approx(expected, rel=1e-4)


# A and B of Geertsma's disc by elliptic integrals: S/C 2(1-nu)A, horizontal 2(1-nu)B
@pytest.mark.parametrize(("rho", "a", "b"), [
    (0.5, 0.260553122, 0.081977340), (1.0, 0.178681159, 0.125151537),
    (2.0, 0.051852720, 0.088495500),
])
def test_disc_off_centre(tmp_path: Path, rho: float, a: float, b: float) -> None:
    result = _disc(tmp_path, [rho * C])
    assert _down(result)[0] == pytest.approx(1.5 * a, rel=1e-4)
    assert _east(result)[0] == pytest.approx(-1.5 * b, rel=1e-4)  # toward the disc


def test_disc_axis_underground(tmp_path: Path) -> None:
    """Axis of a disc R = c at depths above, below and near it (closed form by quadrature)."""
    z = [0.0, 0.25, 0.5, 0.75, 0.9, 1.25, 1.5, 2.0]
    expected = [0.43933983, 0.48007705, 0.52968140, 0.60208393, 0.65625655, -0.20880385,
                -0.12803044, -0.03188435]
    result = _disc(tmp_path, [0.0] * len(z), depth=[C * v for v in z])
    assert _down(result) == pytest.approx(expected, rel=1e-4)


def test_jump_across_the_disc_is_its_closure(tmp_path: Path) -> None:
    """Roof minus floor of a uniform closing sheet moves by exactly e h (definition)."""
    result = _disc(tmp_path, [37.0, 37.0], depth=[C - 0.5, C + 0.5])
    roof, floor = _down(result)
    # half a metre off either face: 1 m of the axis profile's slope .38 e h/R lies between them
    assert roof - floor == pytest.approx(1.0, abs=2e-3)


# Centre over 2(1-nu) for pressure falling off from the axis, R = c (exact, checked by quadrature)
@pytest.mark.parametrize(("profile", "expected"), [
    ("parabolic", 0.171572875), ("logarithm", 0.188226406), ("gaussian", 0.344320458),
])
def test_disc_with_uneven_depletion(tmp_path: Path, profile: str, expected: float) -> None:
    radius = 6 * C if profile == "gaussian" else C
    n = 120 if profile == "gaussian" else 80
    corners = disc_corners(radius, C, 1.0, n)
    # mean over each cell by 6 x 6 points of its bilinear map
    s = (np.arange(6) + 0.5) / 6
    u, v = (a.ravel() for a in np.meshgrid(s, s))
    weights = np.stack([(1 - u) * (1 - v), u * (1 - v), u * v, (1 - u) * v])
    places = np.einsum("ncd,cq->nqd", corners[:, :4, :2] - [X0, Y0], weights)
    r = np.hypot(places[..., 0], places[..., 1]) / C
    shape = {"parabolic": lambda r: np.maximum(1 - r**2, 0),
             "logarithm": lambda r: np.maximum(np.log(1 / r), 0),
             "gaussian": lambda r: np.exp(-(r**2) / 2)}[profile](r).mean(axis=1)
    result = _disc(tmp_path, [0.0], radius=radius, n=n, drop_bar=20.0 * shape)
    # each cell carries one pressure: an error of the order of (cell/radius of curvature)^2/24
    assert 5 * _down(result)[0] / 1.5 == pytest.approx(expected, rel=1.5e-3)


@pytest.mark.parametrize("azimuth", [0.0, 30.0, -75.0])
def test_rectangle_seen_from_the_side(tmp_path: Path, azimuth: float) -> None:
    """x .5..2.5, y -1..2, depth 1 (closed form against quadrature); turned with its observer."""
    t = np.radians(azimuth)
    turn = np.array([[np.cos(t), np.sin(t)], [-np.sin(t), np.cos(t)]])  # own axes to east, north
    centre = turn @ [1.5 * C, 0.5 * C]
    write_boxes(tmp_path / "grid.nc", X0 + centre[0], Y0 + centre[1], C - 0.5, C + 0.5, 2 * C,
                3 * C, [[220.0], [120.0]], azimuth=azimuth)
    write_points(tmp_path / "points.csv", [X0], [Y0])
    result = sd.run(write_scenario(tmp_path, more=POINTS))
    own = turn.T @ [_east(result)[0], result["point_displacement_north"].values[-1, 0] / EH]
    assert _down(result)[0] == pytest.approx(0.2298678625, rel=1e-6)
    assert own == pytest.approx([0.2623737807, 0.0590781419], rel=1e-6)


def test_square_as_wide_as_deep(tmp_path: Path) -> None:
    """Half-width = depth, above the centre: (1-nu) 2/3 = 0.5 exactly (solid angle of a cube)."""
    write_boxes(tmp_path / "grid.nc", X0, Y0, C - 0.5, C + 0.5, 2 * C, 2 * C, [[220.0], [120.0]])
    write_points(tmp_path / "points.csv", [X0], [Y0])
    result = sd.run(write_scenario(tmp_path, more=POINTS))
    assert _down(result)[0] == pytest.approx(0.5, rel=1e-6)


def test_long_strip_is_plane_strain(tmp_path: Path) -> None:
    """Half-width a = c, plane strain (Segall 1989): centre 0.75, edge |u_x| 0.384225."""
    write_boxes(tmp_path / "grid.nc", X0, Y0, C - 0.5, C + 0.5, 2 * C, 4000 * C,
                [[220.0], [120.0]], epsg=None)
    write_points(tmp_path / "points.csv", [X0, X0 + C], [Y0, Y0])
    result = sd.run(write_scenario(tmp_path, more=POINTS))
    assert _down(result)[0] == pytest.approx(0.75, rel=1e-5)
    assert _east(result)[1] == pytest.approx(-0.384225, rel=1e-5)


def _small_cube(folder: Path, *, law_more: str = "", more: str = "", earth: str = "") -> object:
    write_boxes(folder / "grid.nc", X0, Y0, C - 2, C + 2, 4.0, 4.0, [[220.0], [120.0]])
    law = 'law = "linear"\nuniaxial_compressibility = "1e-5 1/bar"\n' + law_more
    return sd.run(write_scenario(
        folder, law=law, more=more,
        earth=earth or 'model = "half-space"\npoisson_ratio = 0.25'))


DV = 1e-3 * 4.0**3
"""Volume the small cube loses, m3."""


def test_point_source_facts(tmp_path: Path) -> None:
    """Mogi (1958): u_r/u_z = r/c; half the peak at .766 c; largest u_r .3849 u_z0 at c/sqrt2."""
    r = np.array([0.0, 0.7664, 1 / np.sqrt(2), 0.5, 3.0]) * C
    write_points(tmp_path / "points.csv", X0 + r, np.full(r.size, Y0))
    result = _small_cube(tmp_path, more=POINTS)
    down = result["point_subsidence"].values[-1]
    east = result["point_displacement_east"].values[-1]
    assert down[0] == pytest.approx(0.75 / np.pi * DV / C**2, rel=1e-4)
    assert -east[1:] / down[1:] == pytest.approx(r[1:] / C, rel=1e-4)
    assert down[1] / down[0] == pytest.approx(0.5, rel=1e-3)
    assert -east[2] / down[0] == pytest.approx(0.3849, rel=1e-4)


def test_point_source_tilt_and_strain_on_the_map(tmp_path: Path) -> None:
    """Steepest slope .8587 u_z0/c at c/2 (Mogi 1958); strain from u_r = -A r/R^3."""
    more = ('[map]\nspacing = "100 m"\nbounds = [499050, 5899050, 500950, 5900950]\n'
            '[output]\nquantities = ["tilt", "horizontal_strain_major", "horizontal_strain_minor"]')
    result = _small_cube(tmp_path, more=more).sel(y=Y0)
    peak = 0.75 / np.pi * DV / C**2
    tilt = result["tilt"].values[-1]
    r = result["x"].values - X0
    assert tilt.max() == pytest.approx(0.8587 * peak / C, rel=1e-4)
    assert abs(r[tilt.argmax()]) == pytest.approx(C / 2)
    big_r = np.hypot(r, C)
    radial = -0.75 / np.pi * DV * (1 / big_r**3 - 3 * r**2 / big_r**5)
    hoop = -0.75 / np.pi * DV / big_r**3
    scale = np.abs(hoop).max()
    assert result["horizontal_strain_major"].values[-1] == pytest.approx(
        np.maximum(radial, hoop), abs=1e-4 * scale)
    assert result["horizontal_strain_minor"].values[-1] == pytest.approx(
        np.minimum(radial, hoop), abs=1e-4 * scale)


# Closing crack u_z = 3 c^3 dV/(2 pi R^5) (Okada 1985, horizontal tensile source), nucleus
# u_z = (1-nu) c dV/(pi R^3), and mixtures of horizontal release g; bowl volume 1 + g(1-2nu)
@pytest.mark.parametrize("g", [0.0, 0.3, 1.0, 2.0])
def test_horizontal_release(tmp_path: Path, g: float) -> None:
    r = np.array([0.0, 0.5, 1.5]) * C
    write_points(tmp_path / "points.csv", X0 + r, np.full(r.size, Y0))
    result = _small_cube(tmp_path, law_more=f"horizontal_release = {g}", more=POINTS)
    big_r = np.hypot(r, C)
    down = DV / np.pi * (g * 0.75 * C / big_r**3 + (1 - g) * 1.5 * C**3 / big_r**5)
    out = -DV / np.pi * (g * 0.75 * r / big_r**3 + (1 - g) * 1.5 * r * C**2 / big_r**5)
    assert result["point_subsidence"].values[-1] == pytest.approx(down, rel=1e-4)
    assert result["point_displacement_east"].values[-1] == pytest.approx(out, rel=1e-4, abs=1e-18)
    assert float(result["bowl_volume"][-1]) == pytest.approx(DV * (1 + 0.5 * g), rel=1e-9)


def test_own_release_is_depletion_over_host_modulus(tmp_path: Path) -> None:
    """g e V = a Dp V/M: with Cm = 2/M the release is g = 1/2, with Cm = 1/M it is 1."""
    r = np.array([0.0, 0.7]) * C
    write_points(tmp_path / "points.csv", X0 + r, np.full(r.size, Y0))
    # M = (1-nu)E/((1+nu)(1-2nu)) = 2/Cm at nu .25
    young = 2e10 * 1.25 * 0.5 / 0.75
    earth = f'model = "half-space"\npoisson_ratio = 0.25\nyoung_modulus = {young!r}'
    own = _small_cube(tmp_path, law_more='horizontal_release = "own"', more=POINTS, earth=earth)
    half = _small_cube(tmp_path, law_more="horizontal_release = 0.5", more=POINTS, earth=earth)
    assert own["point_subsidence"].values[-1] == pytest.approx(
        half["point_subsidence"].values[-1], rel=1e-12)


# Rigid basement at depth k under a disc R = c, nu .25: the problem of van Opstal (1974); Hankel
# quadrature, equal to numerical layer propagation, computed independently; r = 0, R and 2R
RIGID = {
    1.05: (0.7919586052, 0.3813626605, 0.0237644620),
    1.1: (0.7484614092, 0.3708376712, 0.0297728586),
    1.25: (0.6439353177, 0.3433180113, 0.0445701294),
    1.5: (0.5386978362, 0.3092095218, 0.0589173187),
    2.0: (0.4562598124, 0.2728296711, 0.0663667597),
    3.0: (0.4260364431, 0.2547235900, 0.0651409463),
    5.0: (0.4276123362, 0.2566619021, 0.0674489307),
}


@pytest.mark.parametrize("ratio", RIGID)
def test_disc_over_a_rigid_basement(tmp_path: Path, ratio: float) -> None:
    earth = (f'model = "rigid-basement"\npoisson_ratio = 0.25\n'
             f'basement_depth = "{ratio * C} m"')
    result = _disc(tmp_path, [0.0, C, 2 * C], earth=earth)
    assert _down(result) == pytest.approx(RIGID[ratio], rel=1e-4)
    volume = EH * np.pi * C**2
    assert float(result["bowl_volume"][-1]) == pytest.approx(volume, rel=1e-6)


def test_volume_of_the_bowl_and_of_the_map(tmp_path: Path) -> None:
    """Bowl 2(1-nu) dV; over a square the share is its solid angle from the source over 2 pi."""
    more = '[map]\nspacing = "100 m"\nbounds = [495000, 5895000, 505000, 5905000]'
    result = _small_cube(tmp_path, more=more)
    total = float(result["bowl_volume"][-1])
    assert total == pytest.approx(1.5 * DV, rel=1e-9)
    a = 5 * C
    share = 4 * np.arctan(a * a / (C * np.sqrt(2 * a * a + C * C))) / (2 * np.pi)
    assert float(result["bowl_volume_map"][-1]) == pytest.approx(share * total, rel=1e-4)


def test_the_seabed_counts_not_the_datum(tmp_path: Path) -> None:
    """A field 1300 m below the datum under 300 m of water moves the seabed as one at 1000 m."""
    write_points(tmp_path / "points.csv", [X0, X0 + 800.0], [Y0, Y0])
    on_land = _small_cube(tmp_path, more=POINTS)["point_subsidence"].values[-1]
    write_boxes(tmp_path / "grid.nc", X0, Y0, C + 298, C + 302, 4.0, 4.0, [[220.0], [120.0]])
    earth = 'model = "half-space"\npoisson_ratio = 0.25\nsurface = "300 m"'
    offshore = sd.run(write_scenario(tmp_path, earth=earth, more=POINTS))
    assert offshore["point_subsidence"].values[-1] == pytest.approx(on_land, rel=1e-12)


def test_thick_disc(tmp_path: Path) -> None:
    """z .9 to 1.1, R = 1: uz/(Cm Dp) at the centre 0.088133295 (exact integral)."""
    result = _disc(tmp_path, [0.0], thickness=0.2 * C)
    assert result["point_subsidence"].values[-1, 0] / (1e-3 * C) == pytest.approx(
        0.088133295, rel=1e-4)
