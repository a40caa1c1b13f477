"""The parts of the lattice: frame, raster, sampling, spreading, kernels, bands."""

from __future__ import annotations

import functools

import numpy as np
import pytest
from lattice_cases import pillar_field, raster, small_field, wells
from scipy.fft import fft2

from subside.earth_models import HalfSpace, RigidBasement
from subside.superposition.bands import Task, depth_nodes_guess, make_bands
from subside.superposition.census import take_census
from subside.superposition.depth_nodes import depth_nodes
from subside.superposition.direct import Direct, losing_volume
from subside.superposition.frame import Axis, Frame, chebyshev
from subside.superposition.hexahedron import sample_cell
from subside.superposition.interface import Bodies
from subside.superposition.kernel_table import ODD, kernel_spectra
from subside.superposition.referee import plain_sum
from subside.superposition.resample import Raster
from subside.superposition.rule import surface_rule
from subside.superposition.sampling import points_in, sample_into
from subside.superposition.spread import Bins, deposit_bins, extent_of_points, rows_of_cells
from subside.superposition.stencil import Stencil

EARTH = HalfSpace(poisson_ratio=0.25)


def test_raster_is_found_in_any_order_and_only_where_there_is_one() -> None:
    targets = raster(7, 100.0)
    order = np.random.default_rng(0).permutation(targets.x.size)
    x, y = targets.x[order], targets.y[order]
    found = Raster.of(x, y)
    assert found is not None
    assert (x[found.order] == found.x[None, :]).all()
    assert (y[found.order] == found.y[:, None]).all()
    assert Raster.of(x[1:], y[1:]) is None
    assert Raster.of(np.r_[x[1:], x[1]], np.r_[y[1:], y[1]]) is None  # one twice, one missing


@pytest.mark.parametrize("targets", [(-50.0, 400.0), (900.0, 950.0), (-3000.0, -2000.0)])
def test_nothing_wraps_round(targets: tuple[float, float]) -> None:
    axis = Axis.around((0.0, 103.0), targets, 10.0, 6)
    reach = np.add.outer(np.arange(axis.targets) + axis.shift, -np.arange(axis.sources))
    assert np.abs(reach).max() < axis.length / 2
    first, offset = axis.place(np.array(targets))
    assert (first >= 0).all() and (first + 6 <= axis.targets).all()
    assert (np.abs(offset) <= 0.5).all()


def test_fast_sampling_equals_the_plain_one() -> None:
    rng = np.random.default_rng(4)
    cube = np.array([[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0],
                     [0, 0, 1], [1, 0, 1], [1, 1, 1], [0, 1, 1.0]])
    corners = cube * [300.0, 200.0, 10.0] + rng.normal(0, 2.0, (8, 3)) + [0, 0, 900.0]
    rule = np.array([3, 2, 4, 2, 1, 3])
    points = np.empty((points_in(rule), 4))
    assert sample_into(points, corners, rule, np.empty((3, 6))) == 144
    expected = sample_cell(corners, rule)  # in an order of its own
    by_x, expected_by_x = (p[np.lexsort(p.T[:3])] for p in (points, expected))
    assert by_x == pytest.approx(expected_by_x, rel=1e-11, abs=1e-11)
    extent = extent_of_points(corners[None], rule[None])[0]
    seen = [points[:, 0].min(), points[:, 0].max(), points[:, 1].min(), points[:, 1].max(),
            corners[:, 2].min(), corners[:, 2].max()]
    assert extent == pytest.approx(seen, rel=1e-12)


def test_spreading_keeps_volume_and_place() -> None:
    """Constants are exact, and so is the sum of all that was spread: m3 are not lost or made."""
    bodies, moments = small_field()
    corners = bodies.corners(np.arange(bodies.count))
    rule = surface_rule(corners, 1e-6, False)
    extent = extent_of_points(corners, rule)
    stencil = Stencil.of(6, 10.0)
    spacing = extent[:, 4].min() / 10.0
    x, y = (Axis.around((extent[:, n].min(), extent[:, n + 1].max()), (0.0, 1.0), spacing, 6)
            for n in (0, 2))
    depths, weights = chebyshev(extent[:, 4].min(), extent[:, 5].max(), 5)
    bins = Bins.of(extent, x, y)
    assert np.array_equal(np.sort(bins.order), np.arange(bodies.count))
    lattice = np.zeros((y.sources, x.sources * 5 * 2 * 3))
    strength = np.empty((bodies.count, 6))
    for n, moment in enumerate(moments.values()):
        rows_of_cells(strength, moment, bins.order, 3 * n)
    deposit_bins(lattice, strength, corners[bins.order], rule[bins.order], bins.row, bins.column,
                 bins.extra_rows, bins.extra_columns, x.origin, y.origin, spacing,
                 np.ascontiguousarray(stencil.coefficients.T), depths, weights)
    total = lattice.reshape(y.sources, x.sources, 5, 2, 3).sum(axis=(0, 1, 2))
    expected = np.stack([moment.sum(axis=1) for moment in moments.values()])
    assert total == pytest.approx(expected, rel=1e-11)


def test_moments_of_cells_are_put_in_rows() -> None:
    moment = np.random.default_rng(1).normal(size=(19, 1400))  # not a multiple of 8, nor of 512
    cells = np.random.default_rng(2).permutation(1400)[:1100]
    strength = np.full((1100, 25), np.nan)
    rows_of_cells(strength, moment, cells, 4)
    assert np.array_equal(strength[:, 4:23], moment[:, cells].T)
    assert np.isnan(strength[:, :4]).all() and np.isnan(strength[:, 23:]).all()


def test_losing_volume_at_any_date() -> None:
    moment, other = np.zeros((3, 9000)), np.zeros((3, 9000))
    moment[2, 8999], moment[0, 4], other[1, 4500] = -1.0, 1e-300, 2.0
    assert np.flatnonzero(losing_volume(moment, other)).tolist() == [4, 4500, 8999]


@pytest.mark.parametrize("source", ["contraction", "closure"])
def test_half_plane_spectra_equal_the_full_transform(source: str) -> None:
    """Against the two-dimensional transform of the kernel on all offsets of one period."""
    axis = Axis(0.0, 150.0, 5, 5, 0, 16)
    frame = Frame(axis, axis, np.array([1000.0]), np.array([1.0]))
    half = kernel_spectra(EARTH, source, frame, 8, 1)[..., 0]
    offset = np.fft.fftfreq(16, 1 / 16) * 150.0
    east, north = np.meshgrid(offset, offset)
    radius = np.hypot(east, north)
    depth = np.full(radius.shape, 1000.0)
    outward, down = EARTH.displacement(source, radius, 0 * radius, depth)
    along, across, slope = EARTH.gradient(source, radius, 0 * radius, depth)
    with np.errstate(invalid="ignore"):
        e, n = np.nan_to_num(east / radius), np.nan_to_num(north / radius)
    bend = along - across
    planes = [down, outward * e, outward * n, slope * e, slope * n, across + bend * e**2,
              across + bend * n**2, bend * e * n]
    for c, plane in enumerate(planes):
        if ODD[c, 0]:
            plane[:, 8] = 0.0  # the farthest offset stands for both sides: an odd kernel has none
        if ODD[c, 1]:
            plane[8, :] = 0.0
        factor = -1j if ODD[c].sum() == 1 else 1.0
        expected = fft2(plane)[:9, :9]
        assert factor * half[..., c] == pytest.approx(expected, abs=1e-9 * np.abs(expected).max())


@pytest.mark.parametrize("earth", [EARTH, RigidBasement(poisson_ratio=0.3, basement_depth=3000.0)])
def test_depth_nodes_keep_their_error(earth: object) -> None:
    nodes, weights = depth_nodes(earth, ["contraction", "closure"], 1000.0, 1600.0, 1e-6, True)
    depth = np.linspace(1000.0, 1600.0, 38)  # none of them a node
    share = weights / (depth[:, None] - nodes)
    share /= share.sum(axis=1, keepdims=True)
    radius = np.array([0.0, 300.0, 900.0, 2500.0])
    at = np.broadcast_arrays(radius[None, :], nodes[:, None])
    between = np.broadcast_arrays(radius[None, :], depth[:, None])
    known = earth.displacement("closure", at[0], 0 * at[0], at[1])[1]  # type: ignore[attr-defined]
    truth = earth.displacement(  # type: ignore[attr-defined]
        "closure", between[0], 0 * between[0], between[1])[1]
    # 3 for the places between the tested ones
    assert np.abs(share @ known - truth).max() < 3e-6 * np.abs(truth).max()
    assert depth_nodes_guess(500.0, 500.0, 1e-6) == 1


@pytest.mark.parametrize("boxes", [False, True])
def test_the_census_counts_every_cell_once(boxes: bool) -> None:
    bodies, _ = pillar_field(boxes=boxes, columns=9, rows=8)
    live = np.random.default_rng(0).uniform(size=bodies.count) < 0.8
    census = take_census(bodies, 1e-6, False, live)
    corners = bodies.corners(np.flatnonzero(live))
    assert ((census.number >= 0) == live).all()
    assert census.count == live.sum()
    assert census.points == surface_rule(corners, 1e-6, False).prod(axis=1).sum()
    for group in census.groups:
        mine = bodies.corners(np.flatnonzero(census.number == group.classes[0]))
        assert group.count == mine.shape[0]
        assert group.box == pytest.approx([mine[..., 0].min(), mine[..., 0].max(),
                                           mine[..., 1].min(), mine[..., 1].max()], abs=1e-9)
        assert (group.top, group.bottom) == pytest.approx((mine[..., 2].min(), mine[..., 2].max()))
        assert group.widths == pytest.approx((np.ptp(mine[..., 0], axis=1).sum(),
                                              np.ptp(mine[..., 1], axis=1).sum()))
        shallowest = mine[mine[..., 2].min(axis=1).argmin(), :, :2]
        assert group.highest == pytest.approx(
            0.5 * (shallowest.min(axis=0) + shallowest.max(axis=0)), abs=1e-9)
    tops = [group.top for group in census.groups]
    assert tops == sorted(tops)
    whole = functools.reduce(lambda a, b: a.with_(b), census.groups)
    assert (whole.count, whole.top, whole.bottom) == (
        live.sum(), pytest.approx(corners[..., 2].min()), pytest.approx(corners[..., 2].max()))
    assert set(whole.classes) == set(census.number[live])


def test_bands_divide_all_cells_and_spare_the_lone_shallow_one() -> None:
    bodies, moments = small_field(columns=60, rows=60)
    live = losing_volume(*moments.values())
    first = np.flatnonzero(live)[0]

    def corners(index: np.ndarray) -> np.ndarray:
        out = bodies.corners(index)
        out[index == first, :, 2] -= out[index == first, :, 2].min() - 60.0
        return out

    census = take_census(Bodies(bodies.count, corners), 1e-6, False, live)
    task = Task(60, 3, 1, 500_000, (-8e3, 8e3), (-8e3, 8e3), True)
    bands = make_bands(census, task, [Stencil.of(8, 10.0)], 1e-5)
    classes = [n for band in bands for n in band.group.classes]
    assert sorted(classes) == sorted(set(census.number[live]))
    assert sum(band.group.count for band in bands) == live.sum()
    lone = [band for band in bands if census.number[first] in band.group.classes]
    assert lone[0].group.count == 1 and lone[0].way == "plain"
    assert all(isinstance(band.way, Stencil) for band in bands if band is not lone[0])


@pytest.mark.parametrize("gradient", [False, True])
@pytest.mark.parametrize("earth", [EARTH, RigidBasement(poisson_ratio=0.3, basement_depth=3000.0)])
def test_the_referee_is_the_plain_sum(earth: object, gradient: bool) -> None:
    bodies, moments = small_field()
    targets = wells(50, 4000.0)
    expected = Direct().solve(bodies, moments, targets, earth, tolerance=1e-8, gradient=gradient)
    found = plain_sum(bodies, np.arange(bodies.count), moments, targets, earth, sampling=1e-9,
                      gradient=gradient)
    # kernels without a closed form are series there, made to 1e-8
    same = 1e-11 if earth is EARTH else 1e-8
    for name, values in expected.items():
        assert found[name] == pytest.approx(values, rel=0, abs=same * np.abs(values).max())
