"""Depth bands: which cells share a lattice, and which are cheaper summed one by one.

The spacing follows the shallowest cell, so that a lattice costs as 1/depth^2. Cells are put into
fine classes of depth, and the cheapest way to join neighbouring classes into bands is found by
dynamic programming over an estimate of the time. A band that a plain sum would do faster (few
cells, or a lone shallow one) goes to the plain sum, and one that is seen from few targets is summed
pillar by pillar.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from subside.superposition.census import HARD, Census, Group
from subside.superposition.frame import Axis
from subside.superposition.stencil import Stencil

__all__ = [
    "Band", "Task", "depth_nodes_guess", "direct_seconds", "make_bands", "worth_it",
]

_PAIRS_WORTH_IT = 1e8
"""Cell-target pairs below which the plain sum takes a second at most."""
_TARGETS_WORTH_IT, _DATES_WORTH_IT = 400, 30
"""The check of a faster way is itself a plain sum at about 200 targets and few dates."""

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
    cells_of_pillar : float
        How many cells share an outline, on average.
    level : bool
        Whether all cells have level faces.
    """

    steps: int
    components: int
    sources: int
    targets: int
    x: tuple[float, float]
    y: tuple[float, float]
    closed_form: bool
    cells_of_pillar: float = 1.0
    level: bool = False


Way = Stencil | Literal["pillars", "plain"]
"""How a band is summed: on a lattice with a stencil, pillar by pillar, or plainly."""


@dataclass(frozen=True)
class Band:
    """Some classes of cells, and how they are summed."""

    group: Group
    way: Way
    seconds: float


def worth_it(cells: int, targets: int, dates: int) -> bool:
    """A first look at the size: `make_bands` compares closer costs."""
    large = float(cells) * targets >= _PAIRS_WORTH_IT
    return large and (targets >= _TARGETS_WORTH_IT or dates >= _DATES_WORTH_IT)


def make_bands(census: Census, task: Task, stencils: list[Stencil], depth_error: float,
               forced: bool = False) -> list[Band]:
    """The cheapest partition of the cells.

    Parameters
    ----------
    census : Census
    task : Task
    stencils : list of Stencil
        Those that keep the tolerance; each band takes the cheapest.
    depth_error : float
        Error allowed to the interpolation in depth.
    forced : bool
        Leave out the plain sum wherever a lattice is possible.
    """
    hard = [group for group in census.groups if group.classes == (HARD,)]
    groups = [group for group in census.groups if group.classes != (HARD,)]
    bands = [Band(group, "plain", direct_seconds(group.count, group.points, task))
             for group in hard]
    best: list[tuple[float, int, Group | None, Way]] = [(0.0, 0, None, "plain")]
    for end in range(1, len(groups) + 1):
        joined = groups[end - 1]
        options = []
        for begin in range(end - 1, -1, -1):
            joined = joined if begin == end - 1 else groups[begin].with_(joined)
            seconds, way = _cheapest(joined, task, stencils, depth_error, forced)
            options.append((best[begin][0] + seconds, begin, joined, way))
        best.append(min(options, key=lambda option: option[0]))
    end = len(groups)
    while end > 0:
        total, begin, group, way = best[end]
        assert group is not None
        bands.append(Band(group, way, total - best[begin][0]))
        end = begin
    return bands


def _cheapest(group: Group, task: Task, stencils: list[Stencil], depth_error: float,
              forced: bool) -> tuple[float, Way]:
    options: list[tuple[float, Way]] = [
        (_lattice_seconds(group, task, stencil, depth_error), stencil) for stencil in stencils]
    dearer = _FORCE if forced else 1.0
    options.append((dearer * direct_seconds(group.count, group.points, task), "plain"))
    if task.cells_of_pillar > 1.0:
        options.append((dearer * _pillar_seconds(group, task, depth_error), "pillars"))
    return min(options, key=lambda option: option[0])


def _pillar_seconds(group: Group, task: Task, depth_error: float) -> float:
    """Bringing cells together on depth nodes, then the plain sum over what is left."""
    nodes = depth_nodes_guess(group.top, group.bottom, depth_error)
    sources = nodes * group.count / task.cells_of_pillar
    places = 1.0 if task.level else group.points / group.count
    series = task.steps * task.sources
    together = group.count * places * nodes * series * 2 * _WEIGHT
    pair = _PAIR if task.closed_form else _PAIR_TABLE
    influence = task.targets * sources * group.points / group.count * pair * task.components / 3
    product = (task.targets * sources * places * 2 * series * task.components * _MULTIPLY)
    return float(together + influence + product)


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


def _lattice_seconds(group: Group, task: Task, stencil: Stencil, depth_error: float) -> float:
    spacing, width = group.top / stencil.ratio, stencil.width
    x = Axis.around((group.box[0], group.box[1]), task.x, spacing, width)
    y = Axis.around((group.box[2], group.box[3]), task.y, spacing, width)
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
