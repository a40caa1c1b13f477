"""Finite cells seen from the surface: sampling errs by less than the tolerance, at any shape."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from sources import as_hexahedra, boxes, by_volume, hexahedra, parts_of, solve, targets

from subside.errors import InputError
from subside.superposition import direct
from subside.superposition.rule import surface_rule

SHARE = direct._SHARE_OF_TOLERANCE
UNIT = np.array([[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0],
                 [0, 0, 1], [1, 0, 1], [1, 1, 1], [0, 1, 1]], dtype=float)


def around(corners: np.ndarray, n: int = 13):
    """Targets over the cell and to three depths beside it."""
    centre = corners.mean(axis=0)
    reach = 0.5 * np.ptp(corners[:, :2], axis=0).max() + 3 * corners[:, 2].min()
    line = np.linspace(-reach, reach, n)
    x, y = (a.ravel() for a in np.meshgrid(line, line))
    return targets(centre[0] + x, centre[1] + y)


def errors(got: np.ndarray, wanted: np.ndarray) -> list[float]:
    """Of displacement and of its derivatives, over the largest of each."""
    groups = [slice(0, 3)] + ([slice(3, 8)] if wanted.shape[0] > 3 else [])
    return [float(np.abs(got[g] - wanted[g]).max() / np.abs(wanted[g]).max()) for g in groups]


@st.composite
def cells(draw) -> np.ndarray:
    """A hexahedron with its top at 1 km: small to wide, thin to tall, leaning, dipping, twisted."""
    size = st.floats(-1.0, 0.6)
    width, height = 10 ** draw(size), 10 ** draw(st.floats(-2.0, 0.3))
    corners = UNIT * [width, width * draw(st.floats(0.4, 1.0)), height]
    rng = np.random.default_rng(draw(st.integers(0, 2**32 - 1)))
    corners += rng.uniform(-0.15, 0.15, (8, 3)) * [width * 0.5, width * 0.3, height]
    corners[:, 0] += draw(st.floats(-1.0, 1.0)) * corners[:, 2]
    corners[:, 2] += draw(st.floats(-0.5, 0.5)) * corners[:, 0]
    corners[:, 2] += 1.0 - corners[:, 2].min()
    return 1000.0 * corners


@settings(max_examples=25, deadline=None)
@given(cells(), st.sampled_from(["contraction", "closure"]), st.sampled_from([1e-3, 1e-4, 1e-5]),
       st.booleans())
def test_hexahedron_errs_less_than_the_tolerance(corners, source, tolerance, gradient) -> None:
    """Against its eight parts, each sampled a hundred times more exactly."""
    where = around(corners)
    got = solve(hexahedra(corners), source, where, tolerance=tolerance, gradient=gradient)
    parts = parts_of(corners[None], 1)
    wanted = solve(hexahedra(parts), source, where, moment=by_volume(parts),
                   tolerance=1e-2 * tolerance, gradient=gradient)
    assert max(errors(got, wanted)) < tolerance


@settings(max_examples=25, deadline=None)
@given(width=st.floats(0.01, 20.0), other=st.floats(0.2, 1.0), height=st.floats(0.001, 1.0),
       azimuth=st.floats(-180, 180), source=st.sampled_from(["contraction", "closure"]),
       tolerance=st.sampled_from([1e-3, 1e-4, 1e-6]), gradient=st.booleans())
def test_box_errs_less_than_the_tolerance(width, other, height, azimuth, source, tolerance,
                                          gradient) -> None:
    """Exact or by points, as the solver chooses, against the exact integral (forced)."""
    box = (0.0, 0.0, 1000.0, 1000.0 + 1000 * height, 1000 * width, 1000 * width * other, azimuth)
    where = around(boxes(box).corners(np.arange(1))[0])
    got = solve(boxes(box), source, where, tolerance=tolerance, gradient=gradient)
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(direct, "_EXACT_FROM_POINTS", 0)
        wanted = solve(boxes(box), source, where, gradient=gradient)
    assert max(errors(got, wanted)) < SHARE * tolerance


@pytest.mark.parametrize("source", ["contraction", "closure"])
def test_exact_box_is_its_many_points(source: str) -> None:
    """20 times as wide as deep, turned: closed form against 48 x 48 x 1 and more points."""
    box = boxes((50.0, -20.0, 100.0, 108.0, 4000.0, 3000.0, 25.0))
    where = targets([0, 500, 1990, 2500, 50], [0, -700, 100, 1500, -20])
    exact = solve(box, source, where, gradient=True)
    points = solve(as_hexahedra(box), source, where, tolerance=1e-5, gradient=True)
    # the rule's bound is for the worst case; here it is far on the safe side
    assert max(errors(points, exact)) < 1e-6
    rule = surface_rule(box.corners(np.arange(1)), 1e-6, True)
    assert rule.prod() > 48 * 48


def test_more_points_where_it_matters() -> None:
    """A hundred times deeper is one point; wide in one direction is cut in that one only."""
    corners = boxes((0, 0, 1e5, 1.0001e5, 100, 100, 0), (0, 0, 500, 510, 3000, 100, 0)).corners(
        np.arange(2))
    rule = surface_rule(corners, 1e-5, False)
    assert rule[0].tolist() == [1, 1, 1, 1, 1, 1]
    along = rule[1, :3] * rule[1, 3:]
    assert along[0] > 3 * along[1] >= 3


def test_leaning_pillars() -> None:
    """A cell 12 m thick whose bottom lies 400 m beside its top: going down is going sideways."""
    corners = UNIT * [3000.0, 3000.0, 12.0] + [0.0, 0.0, 1000.0]
    corners[4:, 0] += 400.0 * np.array([1, -1, 1, -1])
    parts = parts_of(corners[None], 1)
    where = around(corners)
    got = solve(hexahedra(corners), "contraction", where, tolerance=1e-5, gradient=True)
    wanted = solve(hexahedra(parts), "contraction", where, moment=by_volume(parts), tolerance=1e-7,
                   gradient=True)
    assert max(errors(got, wanted)) < 1e-5


def test_cell_at_the_surface_is_refused_by_name_and_size() -> None:
    flat = as_hexahedra(boxes((1234.0, 99.0, 0.0, 10.0, 200.0, 200.0, 0.0)))
    with pytest.raises(InputError, match=r"200 m wide reaches up to 0 m .* x = 1234 m, y = 99 m"):
        solve(flat, "contraction", targets([1000.0], 0.0))


def test_box_at_the_surface_is_exact() -> None:
    """The closed form holds up to the surface: contraction of a box 0 to 10 m, at its centre,
    against a point of its own quadrature (computed independently: limit of top = 1e-4 m)."""
    at = solve(boxes((0, 0, 0.0, 10.0, 200.0, 200.0, 0.0)), "contraction", targets([3.0], 2.0))
    near = solve(boxes((0, 0, 1e-4, 10.0, 200.0, 200.0, 0.0)), "contraction", targets([3.0], 2.0))
    assert np.isfinite(at).all()
    assert at == pytest.approx(near, rel=1e-3)
