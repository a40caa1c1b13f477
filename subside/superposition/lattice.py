"""The lattice method: cells onto coarse lattices by depth, one convolution, then to the targets.

Every result is checked before it is returned: a plain sum at about 200 targets gives the error
that was reached; a finer lattice, and in the end the plain sum itself, follow if it is too large.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from threadpoolctl import threadpool_limits

from subside.superposition.band_pass import BandPass
from subside.superposition.bands import Task, make_bands
from subside.superposition.check import Check
from subside.superposition.direct import Direct
from subside.superposition.interface import DISPLACEMENT, GRADIENT, Bodies, Fields, Targets
from subside.superposition.resample import Raster
from subside.superposition.sampled import SampledCells, losing_volume, part_of
from subside.superposition.stencil import WIDTHS, coarsest

__all__ = ["Lattice"]

# Shares of the tolerance: sampling the cells, spreading and resampling together, depth nodes.
# The bound of a stencil takes all waves at their worst together: single cells were seen to err by a
# quarter of it at most, fields of many cells by far less. The check guards what is taken on that.
_SAMPLING, _STENCILS, _DEPTHS = 0.1, 4.0, 0.2
_REFEREE = 0.2
"""How much finer than the result the check samples the cells."""
_ACCEPTED = 0.5
"""Part of the tolerance that the check must find kept: it does not see every target."""
_ATTEMPTS = (1.0, 0.1, 0.01)
"""Parts of the tolerance that the first design aims at, and those after a failed check."""


class Lattice:
    """The lattice method, with the plain sum for bands of cells where that is cheaper.

    Parameters
    ----------
    forced : bool
        Use a lattice even where the plain sum would be faster.

    Attributes
    ----------
    name : str
        ``"lattice"``, or ``"direct"`` after a `solve` that summed all cells plainly.
    achieved_error : float
        Of the last `solve`: error at the checked targets over the largest displacement (slopes and
        strains over their own largest); where all was summed plainly, the bound of the sampling of
        cells.
    notes : list of str
        What the last `solve` did.
    """

    def __init__(self, forced: bool = False) -> None:
        self._forced = forced
        self.name = "lattice"
        self.achieved_error = 0.0
        self.notes: list[str] = []

    def solve(
        self,
        bodies: Bodies,
        moments: Mapping[str, np.ndarray],
        targets: Targets,
        earth: Any,
        *,
        tolerance: float,
        gradient: bool = False,
        progress: Callable[[float], None] = lambda pairs: None,
    ) -> Fields:
        """See `subside.superposition.interface.Solver`."""
        self.name, self.notes, self.achieved_error = "lattice", [], 0.0
        tell = _Progress(progress, float(bodies.count) * targets.x.size * len(moments))
        strong = {source: np.ascontiguousarray(moment, dtype=float)
                  for source, moment in moments.items()}
        strong = {source: moment for source, moment in strong.items()
                  if losing_volume(moment).any()}
        ground, deep = targets.at_surface, ~targets.at_surface
        with threadpool_limits(limits=1, user_api="blas"):
            if not strong or deep.all() or (gradient and deep.any()):
                # no field, nothing for a lattice, or what the plain sum has to refuse
                field = self._plain(bodies, moments, targets, earth, tolerance, gradient)
            elif not deep.any():
                field = self._on_ground(_Job.of(bodies, strong, targets, earth, gradient),
                                        tolerance, tell)
            else:
                parts = [np.nonzero(ground)[0], np.nonzero(deep)[0]]
                above = _Job.of(bodies, strong, _some(targets, parts[0]), earth, gradient)
                fields = [self._on_ground(above, tolerance, tell),
                          Direct().solve(bodies, strong, _some(targets, parts[1]), earth,
                                         tolerance=tolerance)]
                self.notes.append(f"plain sum for {parts[1].size} targets below the surface")
                order = np.argsort(np.concatenate(parts))
                field = {name: np.concatenate([f[name] for f in fields], axis=1)[:, order]
                         for name in DISPLACEMENT}
        tell.finish()
        return field

    def _plain(self, bodies: Bodies, moments: Mapping[str, np.ndarray], targets: Targets,
               earth: Any, tolerance: float, gradient: bool) -> Fields:
        self.name, self.achieved_error = "direct", _SAMPLING * tolerance
        self.notes.append("plain sum for all cells")
        return Direct().solve(bodies, moments, targets, earth, tolerance=tolerance,
                              gradient=gradient)

    def _on_ground(self, job: _Job, tolerance: float, tell: _Progress) -> Fields:
        """The field at surface targets, designed, computed, checked, and refined if need be."""
        check = None
        for part in _ATTEMPTS:
            cells = SampledCells.of(job.bodies, job.live, _SAMPLING * part * tolerance,
                                    job.gradient)
            field, rough = self._attempt(job, cells, part * tolerance, tell)
            if rough is None:
                self.name, self.achieved_error = "direct", _SAMPLING * part * tolerance
                return field
            if check is None:
                check = Check.of(field, rough, cells, job.bodies, job.moments, job.targets,
                                 job.earth, _REFEREE * _SAMPLING * tolerance, job.gradient)
            self.achieved_error = check.error(field)
            if self.achieved_error <= _ACCEPTED * tolerance:
                return field
            self.notes.append(f"the check found an error of {self.achieved_error:.2g}, more than "
                              f"half the tolerance of {tolerance:g}: refined")
        self.notes.append("no lattice kept the tolerance")
        return self._plain(job.bodies, job.moments, job.targets, job.earth, tolerance, job.gradient)

    def _attempt(self, job: _Job, cells: SampledCells, tolerance: float,
                 tell: _Progress) -> tuple[Fields, np.ndarray | None]:
        """One design: the field, and the roughness of the shallowest lattice (None without one)."""
        # a stencil errs twice, in spreading and in resampling
        stencils = [coarsest(width, 0.5 * _STENCILS * tolerance, job.gradient) for width in WIDTHS]
        possible = [stencil for stencil in stencils if stencil is not None]
        bands = make_bands(cells, job.task, possible, _DEPTHS * tolerance, self._forced)
        result = np.zeros((job.task.components, job.task.steps, job.task.targets))
        raster = Raster.of(job.targets.x, job.targets.y)
        total = sum(band.seconds for band in bands)
        rough = None
        for band in bands:
            chosen = cells.chosen(band.which)
            share = band.seconds / total
            if band.stencil is None:
                job.add_plainly(result, chosen.index, tolerance)
                self._note(chosen, "plain sum")
                tell.part(share)
                continue
            band_pass = BandPass(job.bodies, chosen, job.targets.x, job.targets.y, raster,
                                 job.earth, list(job.moments), band.stencil, _DEPTHS * tolerance,
                                 job.task.components)
            frame = band_pass.frame
            self._note(chosen, f"lattice {frame.x.sources} x {frame.y.sources} x "
                       f"{frame.depths.size}, spacing {frame.x.spacing:.4g} m, stencil of "
                       f"{band.stencil.width}")
            band_pass.add(result, list(job.moments.values()), _share_of(tell, share))
            rough = band_pass.sampler.roughness()
        names = DISPLACEMENT + (GRADIENT if job.gradient else ())
        return dict(zip(names, result, strict=True)), rough

    def _note(self, cells: SampledCells, method: str) -> None:
        self.notes.append(f"{cells.index.size} cells {cells.top.min():.4g} to "
                          f"{cells.bottom.max():.4g} m deep: {method}")


@dataclass(frozen=True)
class _Job:
    """What is asked for at the surface."""

    bodies: Bodies
    live: np.ndarray
    moments: dict[str, np.ndarray]
    targets: Targets
    earth: Any
    gradient: bool
    task: Task

    @classmethod
    def of(cls, bodies: Bodies, moments: dict[str, np.ndarray], targets: Targets, earth: Any,
           gradient: bool) -> _Job:
        live = np.nonzero(losing_volume(*moments.values()))[0]
        task = Task(
            steps=next(iter(moments.values())).shape[0], components=8 if gradient else 3,
            sources=len(moments), targets=targets.x.size,
            x=(float(targets.x.min()), float(targets.x.max())),
            y=(float(targets.y.min()), float(targets.y.max())),
            closed_form=earth.homogeneous_poisson_ratio is not None)
        return cls(bodies, live, moments, targets, earth, gradient, task)

    def add_plainly(self, result: np.ndarray, index: np.ndarray, tolerance: float) -> None:
        """Add some cells by the plain sum."""
        moments = {source: moment[:, index] for source, moment in self.moments.items()}
        field = Direct().solve(part_of(self.bodies, index), moments, self.targets, self.earth,
                               tolerance=tolerance, gradient=self.gradient)
        for total, values in zip(result, field.values(), strict=True):
            total += values


class _Progress:
    """Tells of pairs, never more in all than there are."""

    def __init__(self, progress: Callable[[float], None], total: float) -> None:
        self._progress, self._left, self._total = progress, total, total

    def part(self, share: float) -> None:
        """A share of the whole work is done."""
        pairs = min(share * self._total, self._left)
        self._left -= pairs
        self._progress(pairs)

    def finish(self) -> None:
        """All is done."""
        self._progress(self._left)
        self._left = 0.0


def _share_of(tell: _Progress, share: float) -> Callable[[float], None]:
    return lambda part: tell.part(share * part)


def _some(targets: Targets, which: np.ndarray) -> Targets:
    return Targets(targets.x[which], targets.y[which], targets.depth[which])
