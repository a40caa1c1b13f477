"""The check after the fact: a plain sum at chosen targets and steps, against the fast result."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from subside.superposition.interface import DISPLACEMENT, Bodies, Fields, Targets
from subside.superposition.referee import plain_sum
from subside.superposition.sampled import SampledCells

__all__ = ["Check"]

_TARGETS = 200
_FEWEST = 80
_EVALUATIONS = 5e8
"""Cells' sample points times targets beyond which fewer targets are taken, never below `_FEWEST`:
the check must not cost more than what it checks. A tenth of it where the kernel is a table."""
_BLOCKS = 5
"""The map is cut into as many parts each way, and each has a target of its own."""
_GROUPS = (DISPLACEMENT, ("down_by_east", "down_by_north"),
           ("strain_east", "strain_north", "strain_shear"))
"""Components that share a largest value: displacement, slopes, strains."""


@dataclass(frozen=True)
class Check:
    """Reference values at a few targets and steps.

    Attributes
    ----------
    targets, steps : array of int
    reference : Fields
        Component to (step, target).
    """

    targets: np.ndarray
    steps: np.ndarray
    reference: Fields

    @classmethod
    def of(cls, field: Fields, rough: np.ndarray, cells: SampledCells, bodies: Bodies,
           moments: dict[str, np.ndarray], targets: Targets, earth: Any, sampling: float,
           gradient: bool) -> Check:
        """Choose and sum; `rough (target,)` says how ill a target lies on the lattice.

        `cells` are those that lose volume; `sampling` as in `plain_sum`.
        """
        pairs = _EVALUATIONS * (0.1 if earth.homogeneous_poisson_ratio is None else 1.0)
        count = int(np.clip(pairs / cells.points.sum(), _FEWEST, _TARGETS))
        lowest = cells.extent[cells.top.argmin()]
        steps = _steps(field)
        size = np.max([np.abs(field[name][steps]) for name in DISPLACEMENT], axis=(0, 1))
        chosen = _choose(size, size * rough, (0.5 * (lowest[0] + lowest[1]),
                                              0.5 * (lowest[2] + lowest[3])), targets, count)
        few = Targets(targets.x[chosen], targets.y[chosen], targets.depth[chosen])
        late = {source: np.ascontiguousarray(moment[steps]) for source, moment in moments.items()}
        reference = plain_sum(bodies, cells.index, late, few, earth, sampling=sampling,
                              gradient=gradient)
        return cls(chosen, steps, reference)

    def error(self, field: Fields) -> float:
        """Largest difference over the largest value in its group of components."""
        worst = 0.0
        for group in _GROUPS:
            if group[0] not in field:
                continue
            gap = max(float(np.abs(field[name][self.steps][:, self.targets]
                                   - self.reference[name]).max()) for name in group)
            # a wrong field may be large everywhere: then the reference tells the true size
            peak = max(float(_peaks(field[name]).max()) for name in group)
            true = max(float(np.abs(self.reference[name]).max()) for name in group)
            if not np.isfinite(gap + peak):
                return float("inf")
            peak = min(peak, true + gap)
            if gap > 0.0:
                worst = max(worst, gap / peak if peak > 0.0 else float("inf"))
        return worst


def _peaks(values: np.ndarray) -> np.ndarray:
    """Largest magnitude of each step of (time, target), without a copy."""
    return np.asarray(np.maximum(values.max(axis=1), -values.min(axis=1)))


def _steps(field: Fields) -> np.ndarray:
    """Three steps at most: the largest displacement, the largest derivative, the last."""
    steps = [field["down"].shape[0] - 1]
    for group in _GROUPS[:2]:
        if group[0] in field:
            steps.append(int(np.max([_peaks(field[name]) for name in group], axis=0).argmax()))
    return np.unique(steps)


def _choose(size: np.ndarray, estimate: np.ndarray, shallowest: tuple[float, float],
            targets: Targets, count: int) -> np.ndarray:
    """Half where the estimate is largest: overall, and in each part of the map."""
    x, y = targets.x, targets.y
    if x.size <= count:
        return np.arange(x.size)
    chosen = [int(size.argmax()),
              int(np.hypot(x - shallowest[0], y - shallowest[1]).argmin())]
    middle_x, middle_y = 0.5 * (x.min() + x.max()), 0.5 * (y.min() + y.max())
    chosen += [int(np.hypot(x - a, y - b).argmin())
               for a in (x.min(), middle_x, x.max()) for b in (y.min(), middle_y, y.max())]
    ranked = np.argsort(estimate)[::-1]
    chosen += list(ranked[:count // 4])
    column = ((x - x.min()) / max(np.ptp(x), 1e-300) * _BLOCKS * 0.999999).astype(int)
    row = ((y - y.min()) / max(np.ptp(y), 1e-300) * _BLOCKS * 0.999999).astype(int)
    _, first = np.unique((row * _BLOCKS + column)[ranked], return_index=True)
    chosen += list(ranked[first])
    spare = np.random.default_rng(0).permutation(x.size)[:2 * count]
    unique = list(dict.fromkeys([*map(int, chosen), *map(int, spare)]))
    return np.sort(np.array(unique[:count]))
