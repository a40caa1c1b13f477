"""The check after the fact: a plain sum at chosen targets and dates, against the fast result."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from subside.superposition.interface import DISPLACEMENT, Bodies, Fields, Targets
from subside.superposition.radial_series import RadialSeries
from subside.superposition.referee import plain_sum

__all__ = ["SAMPLING", "Check"]

_GROUPS = (DISPLACEMENT, ("down_by_east", "down_by_north"),
          ("strain_east", "strain_north", "strain_shear"))
"""Components that share a largest value: displacement, slopes, strains."""
SAMPLING = 0.1
"""Share of the tolerance that sampling the cells may cost the check itself.

A result is accepted at half the tolerance, so that with this share four tenths are left for what
the chosen targets do not show. The share is a bound over all shapes of cells; most fields come
nowhere near it."""
_TARGETS = 200
_FEWEST = 80
_EVALUATIONS = 2e9
"""Sample points times targets beyond which fewer targets are taken, never below `_FEWEST`: the
check must not cost more than what it checks. A tenth of it where kernels are series."""
_BLOCKS = 5
"""The map is cut into as many parts each way, and each has a target of its own."""


@dataclass(frozen=True)
class Check:
    """Reference values at a few targets and dates.

    One or two dates are enough for all: the fast result is linear in the moments, through
    influences that are the same at every date, so that its error at another date, or of a
    difference between two dates (a rate), is that of the same influences under other moments. It
    needs no figure of its own as long as those moments lie where the checked ones do; the error of
    a rate is then as large, over the largest rate, as the figure found here over the largest
    displacement.

    Attributes
    ----------
    targets : array of int (chosen,)
        Numbers of the targets.
    reference : Fields
        Component to (date, chosen).
    """

    targets: np.ndarray
    reference: Fields

    @staticmethod
    def affordable(points: float, earth: Any) -> int:
        """Number of targets for cells of so many sample points in all."""
        pairs = _EVALUATIONS * (0.1 if earth.homogeneous_poisson_ratio is None else 1.0)
        return int(np.clip(pairs / max(points, 1.0), _FEWEST, _TARGETS))

    @staticmethod
    def choose(size: np.ndarray, rough: np.ndarray, shallowest: tuple[float, float],
               targets: Targets, count: int = _TARGETS) -> np.ndarray:
        """Which targets to check: half of them where the estimate of the error is largest.

        Parameters
        ----------
        size : array (target,)
            Largest magnitude of the movement over the checked dates, m.
        rough : array (target,)
            How ill a target lies on the lattice; `size * rough` is the estimate. A quarter of the
            targets are those where it is largest, another is the largest in each part of the map.
        shallowest : tuple of float
            x and y of the shallowest cell, m; the target nearest to it is always among them, as
            are the one that moves most and those at the corners and amid the sides of the map.
        targets : Targets
        count : int
            How many.

        Returns
        -------
        array of int (count or fewer,)
            Ascending; the rest is drawn at random, always the same.
        """
        return _choose(size, size * rough, shallowest, targets, count)

    @classmethod
    def at(cls, chosen: np.ndarray, bodies: Bodies, cells: np.ndarray,
           moments: Mapping[str, np.ndarray], targets: Targets, earth: Any, *, tolerance: float,
           gradient: bool, series: Mapping[str, RadialSeries] | None = None) -> Check:
        """Sum plainly at the chosen targets.

        Parameters
        ----------
        chosen : array of int
            Numbers of targets, from `choose`.
        cells, moments, series
            As in `plain_sum`: the moments are those of just these cells, at the checked dates.
        targets : Targets
            All of them, at the surface.
        tolerance : float
            Of the result; the check itself may err by `SAMPLING` of it.
        """
        few = Targets(targets.x[chosen], targets.y[chosen], targets.depth[chosen])
        reference = plain_sum(bodies, cells, moments, few, earth, sampling=SAMPLING * tolerance,
                              gradient=gradient, series=series)
        return cls(chosen, reference)

    def with_(self, other: Check) -> Check:
        """Both together: of other cells, at the same targets and dates."""
        return Check(self.targets, {name: values + other.reference[name]
                                    for name, values in self.reference.items()})

    def error(self, field: Fields, peaks: Mapping[str, float]) -> float:
        """Largest difference over the largest value in its group of components.

        Parameters
        ----------
        field : Fields
            The fast result: component to (date, chosen), at the checked dates and targets.
        peaks : mapping of str to float
            Largest magnitude of each component over all dates and all targets.

        Returns
        -------
        float
            Infinite where the result is not finite.
        """
        worst = 0.0
        for group in _GROUPS:
            if group[0] not in field:
                continue
            gap = max(float(np.abs(field[name] - self.reference[name]).max(initial=0.0))
                      for name in group)
            peak = max(float(peaks[name]) for name in group)
            if not np.isfinite(gap + peak):
                return float("inf")
            # a wrong field may be large everywhere: then the reference tells the true size
            true = max(float(np.abs(self.reference[name]).max(initial=0.0)) for name in group)
            peak = min(peak, true + gap)
            if gap > 0.0:
                worst = max(worst, gap / peak if peak > 0.0 else float("inf"))
        return worst


def _choose(size: np.ndarray, estimate: np.ndarray, shallowest: tuple[float, float],
            targets: Targets, count: int) -> np.ndarray:
    """See `Check.choose`; `estimate (target,)` of the error."""
    x, y = targets.x, targets.y
    if x.size <= count:
        return np.arange(x.size)
    ranked = np.argsort(estimate)[::-1]
    chosen = [int(size.argmax()),
              int(np.hypot(x - shallowest[0], y - shallowest[1]).argmin())]
    middle_x, middle_y = 0.5 * (x.min() + x.max()), 0.5 * (y.min() + y.max())
    chosen += [int(np.hypot(x - a, y - b).argmin())
               for a in (x.min(), middle_x, x.max()) for b in (y.min(), middle_y, y.max())]
    chosen += list(ranked[:count // 4])
    column = ((x - x.min()) / max(np.ptp(x), 1e-300) * _BLOCKS * 0.999999).astype(int)
    row = ((y - y.min()) / max(np.ptp(y), 1e-300) * _BLOCKS * 0.999999).astype(int)
    _, first = np.unique((row * _BLOCKS + column)[ranked], return_index=True)
    chosen += list(ranked[first])
    spare = np.random.default_rng(0).permutation(x.size)[:2 * count]
    unique = list(dict.fromkeys([*map(int, chosen), *map(int, spare)]))
    return np.sort(np.array(unique[:count]))
