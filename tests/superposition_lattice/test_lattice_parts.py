"""The parts of the lattice: frame, raster, sampling, spreading, kernels, bands."""

from __future__ import annotations

import numpy as np
import pytest
from lattice_cases import raster, small_field, wells
from scipy.fft import fft2

from subside.earth_models import HalfSpace, RigidBasement
from subside.superposition.bands import Task, depth_nodes_guess, make_bands
from subside.superposition.depth_nodes import depth_nodes
from subside.superposition.direct import Direct
from subside.superposition.frame import Axis, Frame, chebyshev
from subside.superposition.hexahedron import sample_cell
from subside.superposition.interface import Bodies
from subside.superposition.kernel_table import ODD, kernel_spectra
from subside.superposition.referee import plain_sum
from subside.superposition.resample import Raster
from subside.superposition.sampled import SampledCells, losing_volume
from subside.superposition.sampling import points_in, sample_into
from subside.superposition.spread import Bins, extent_of_points, gather, spread
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
    cells = SampledCells.of(bodies, np.arange(bodies.count), 1e-6, False)
    stencil = Stencil.of(6, 10.0)
    spacing = cells.top.min() / 10.0
    x, y = (Axis.around((cells.extent[:, n].min(), cells.extent[:, n + 1].max()), (0.0, 1.0),
                        spacing, 6) for n in (0, 2))
    depths, weights = chebyshev(cells.top.min(), cells.bottom.max(), 5)
    bins = Bins.of(cells.extent, x, y, 6)
    lattice = np.zeros((y.sources, x.sources * 5 * 2 * 3))
    for strips in bins.turns(100):
        for colour_mate in strips[1:] - strips[:-1]:
            assert colour_mate % 2 == 0
        part = np.concatenate([np.arange(bins.strips[s], bins.strips[s + 1]) for s in strips])
        size = np.diff(bins.strips)[strips]
        end = np.cumsum(size)
        chosen = bins.order[part]
        strength = np.empty((chosen.size, 6))
        rank = np.argsort(chosen)
        gather(strength, tuple(moments.values()), chosen[rank], rank)
        spread(lattice, end - size, end, strength, bodies.corners(chosen), cells.rule[chosen],
               bins.row[part], bins.column[part], bins.extra_rows[part], bins.extra_columns[part],
               x.origin, y.origin, spacing, np.ascontiguousarray(stencil.coefficients.T), depths,
               weights)
    total = lattice.reshape(y.sources, x.sources, 5, 2, 3).sum(axis=(0, 1, 2))
    expected = np.stack([moment.sum(axis=1) for moment in moments.values()])
    assert total == pytest.approx(expected, rel=1e-11)


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


def test_bands_divide_all_cells_and_spare_the_lone_shallow_one() -> None:
    bodies, moments = small_field(columns=60, rows=60)
    live = np.nonzero(losing_volume(*moments.values()))[0]

    def corners(index: np.ndarray) -> np.ndarray:
        out = bodies.corners(index)
        out[index == live[0], :, 2] -= out[index == live[0], :, 2].min() - 60.0
        return out

    cells = SampledCells.of(Bodies(bodies.count, corners), live, 1e-6, False)
    task = Task(60, 3, 1, 500_000, (-8e3, 8e3), (-8e3, 8e3), True)
    bands = make_bands(cells, task, [Stencil.of(8, 10.0)], 1e-5)
    assert np.array_equal(np.sort(np.concatenate([b.which for b in bands])), np.arange(live.size))
    lone = [band for band in bands if 0 in band.which]
    assert lone[0].which.size == 1 and lone[0].stencil is None
    assert all(band.stencil is not None for band in bands if 0 not in band.which)


@pytest.mark.parametrize("gradient", [False, True])
@pytest.mark.parametrize("earth", [EARTH, RigidBasement(poisson_ratio=0.3, basement_depth=3000.0)])
def test_the_referee_is_the_plain_sum(earth: object, gradient: bool) -> None:
    bodies, moments = small_field()
    targets = wells(50, 4000.0)
    expected = Direct().solve(bodies, moments, targets, earth, tolerance=1e-8, gradient=gradient)
    found = plain_sum(bodies, np.arange(bodies.count), moments, targets, earth, sampling=1e-9,
                      gradient=gradient)
    for name, values in expected.items():
        assert found[name] == pytest.approx(values, abs=1e-11 * np.abs(values).max())
