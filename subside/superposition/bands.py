"""Depth bands: which cells share a lattice, and which are cheaper summed one by one.

The spacing follows the shallowest cell, so that a lattice costs as 1/depth^2. Cells are put into
fine classes of depth, and the cheapest way to join neighbouring classes into bands is found by
dynamic programming over an estimate of the time. A band that a plain sum would do faster (few
cells, or a lone shallow one) goes to the plain sum.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from subside.superposition.frame import Axis
from subside.superposition.sampled import MANY_POINTS, SampledCells
from subside.superposition.stencil import Stencil

__all__ = ["Band", "Task", "depth_nodes_guess", "direct_seconds", "make_bands"]

_STEP = 1.12
"""Ratio of depths within a fine class."""
_CLASSES = 40

# Seconds on two cores of 2024, measured; only their ratios matter for the choice.
_MULTIPLY = 1 / 2.0e10
_WEIGHT = 1 / 1.5e9
_TRANSFORM = 5.0e-10
_KERNEL = 1.0e-8
_APPLY = 5.0e-10
_READ = 1.2e-9
_PAIR = 1 / 1.0e9
_PAIR_TABLE = 1 / 5e7
_FORCE = 1e4
"""How much dearer the plain sum is made where a lattice is asked for."""
_LARGEST = 1.5e9
"""Bytes of kernels and spectra of one step beyond which no lattice is made."""


@dataclass(frozen=True)
class Task:
    """Size of a superposition.

    Attributes
    ----------
    steps, components, sources : int
    targets : int
    x, y : tuple of float
        Smallest and largest x and y of the targets, m.
    closed_form : bool
        Whether the kernel is one (a radial table is slower in the plain sum).
    """

    steps: int
    components: int
    sources: int
    targets: int
    x: tuple[float, float]
    y: tuple[float, float]
    closed_form: bool


@dataclass(frozen=True)
class Band:
    """Some cells, and the stencil of their lattice; no stencil means the plain sum."""

    which: np.ndarray
    stencil: Stencil | None
    seconds: float


def make_bands(cells: SampledCells, task: Task, stencils: list[Stencil], depth_error: float,
               forced: bool = False) -> list[Band]:
    """The cheapest partition of the cells.

    Parameters
    ----------
    cells : SampledCells
    task : Task
    stencils : list of Stencil
        Those that keep the tolerance; each band takes the cheapest.
    depth_error : float
        Error allowed to the interpolation in depth.
    forced : bool
        Leave out the plain sum wherever a lattice is possible.
    """
    easy = cells.points <= MANY_POINTS
    hard = np.nonzero(~easy)[0]
    bands = []
    if hard.size:
        bands.append(Band(hard, None, direct_seconds(hard.size, MANY_POINTS * hard.size, task)))
    if not easy.any():
        return bands
    shallow, deep = float(cells.top[easy].min()), float(cells.top[easy].max())
    count = int(np.clip(np.ceil(np.log(deep / shallow) / np.log(_STEP)), 1, _CLASSES))
    edges = np.geomspace(shallow, deep, count + 1)[1:-1]
    number = np.searchsorted(edges, cells.top, side="right")
    classes = [_Group.of(cells, np.nonzero(easy & (number == n))[0]) for n in range(count)]
    groups = [group for group in classes if group is not None]
    best: list[tuple[float, int, Stencil | None]] = [(0.0, 0, None)]
    for end in range(1, len(groups) + 1):
        joined = groups[end - 1]
        options = []
        for begin in range(end - 1, -1, -1):
            joined = joined if begin == end - 1 else groups[begin].with_(joined)
            seconds, stencil = _cheapest(joined, task, stencils, depth_error, forced)
            options.append((best[begin][0] + seconds, begin, stencil))
        best.append(min(options, key=lambda option: option[0]))
    end = len(groups)
    while end > 0:
        total, begin, stencil = best[end]
        which = np.concatenate([group.which for group in groups[begin:end]])
        bands.append(Band(np.sort(which), stencil, total - best[begin][0]))
        end = begin
    return bands


@dataclass(frozen=True)
class _Group:
    which: np.ndarray
    count: int
    points: float
    widths: tuple[float, float]
    box: np.ndarray
    top: float
    bottom: float

    @classmethod
    def of(cls, cells: SampledCells, which: np.ndarray) -> _Group | None:
        if not which.size:
            return None
        extent = cells.extent[which]
        box = np.array([extent[:, 0].min(), -extent[:, 1].max(), extent[:, 2].min(),
                        -extent[:, 3].max()])
        widths = (float((extent[:, 1] - extent[:, 0]).sum()),
                  float((extent[:, 3] - extent[:, 2]).sum()))
        return cls(which, which.size, float(cells.points[which].sum()), widths, box,
                   float(cells.top[which].min()), float(cells.bottom[which].max()))

    def with_(self, other: _Group) -> _Group:
        """Both together, but for their cells' numbers."""
        return _Group(self.which, self.count + other.count, self.points + other.points,
                      (self.widths[0] + other.widths[0], self.widths[1] + other.widths[1]),
                      np.minimum(self.box, other.box), min(self.top, other.top),
                      max(self.bottom, other.bottom))


def _cheapest(group: _Group, task: Task, stencils: list[Stencil], depth_error: float,
              forced: bool) -> tuple[float, Stencil | None]:
    costs = [(_lattice_seconds(group, task, stencil, depth_error), stencil) for stencil in stencils]
    seconds, stencil = min(costs, key=lambda cost: cost[0], default=(np.inf, None))
    plain = direct_seconds(group.count, group.points, task) * (_FORCE if forced else 1.0)
    return (seconds, stencil) if seconds < plain else (plain, None)


def direct_seconds(cells: float, points: float, task: Task) -> float:
    """What the plain sum takes."""
    pair = _PAIR if task.closed_form else _PAIR_TABLE
    return task.targets * (points * pair * task.components / 3
                           + cells * 2 * task.steps * task.components * task.sources * _MULTIPLY)


def depth_nodes_guess(low: float, high: float, error: float) -> int:
    """Chebyshev nodes in depth: the kernels are singular at depth zero, beyond the interval.

    The interpolation errs as rho^-p, rho = c + sqrt(c^2 - 1) with c = (high + low)/(high - low).
    """
    if high - low < 1e-9 * high:
        return 1
    rho = np.exp(np.arccosh((high + low) / (high - low)))
    return max(int(np.ceil(np.log(10.0 / error) / np.log(rho))), 2)


def _lattice_seconds(group: _Group, task: Task, stencil: Stencil, depth_error: float) -> float:
    spacing, width = group.top / stencil.ratio, stencil.width
    x = Axis.around((group.box[0], -group.box[1]), task.x, spacing, width)
    y = Axis.around((group.box[2], -group.box[3]), task.y, spacing, width)
    nodes = depth_nodes_guess(group.top, group.bottom, depth_error)
    plane = float(x.length) * y.length
    series = task.steps * task.sources
    if 8.0 * plane * nodes * task.sources * (task.components / 4 + 2) > _LARGEST:
        return float("inf")
    entries = float(nodes)
    for total in group.widths:
        entries *= width + total / group.count / spacing
    spreading = (group.count * entries * 2 * series * _MULTIPLY
                 + group.points * width**2 * nodes * _WEIGHT)
    transforms = ((series * nodes + task.steps * task.components) * plane * np.log2(plane)
                  * _TRANSFORM)
    kernels = task.sources * task.components * nodes * plane * _KERNEL
    applying = series * task.components * nodes * plane * _APPLY
    reading = task.steps * task.components * task.targets * width * _READ
    return float(spreading + transforms + kernels + applying + reading)
