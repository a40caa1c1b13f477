"""A superposition that takes its cells in pieces and its dates in legs.

The field is linear in the cells, so pieces of cells can be worked on by any thread or machine: each
adds what it has into a share of its own, and shares add up. At the end of a leg the shares become
the field of the leg's dates. Nothing holds all cells at all dates.

Matrix products in here are small and made by many threads: whoever calls limits the matrix library
to one thread (`one_blas_thread`).
"""

from __future__ import annotations

import threading
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from threadpoolctl import threadpool_limits

from subside.superposition.band_pass import BandPass
from subside.superposition.bands import Task, make_bands, worth_it
from subside.superposition.census import Census, take_census
from subside.superposition.check import Check
from subside.superposition.direct import DirectSum, losing_volume
from subside.superposition.interface import DISPLACEMENT, GRADIENT, Bodies, Fields, Targets
from subside.superposition.pillars import PillarPass
from subside.superposition.resample import Raster
from subside.superposition.stencil import WIDTHS, coarsest

__all__ = ["ATTEMPTS", "Share", "Summation", "one_blas_thread"]

# Shares of the tolerance: sampling the cells, spreading and resampling together, depth nodes.
# The bound of a stencil takes all waves at their worst together: single cells were seen to err by a
# quarter of it at most, fields of many cells by far less. The check guards what is taken on that.
_SAMPLING, _STENCILS, _DEPTHS = 0.1, 4.0, 0.2
_ACCEPTED = 0.5
"""Part of the tolerance that the check must find kept: it does not see every target."""
ATTEMPTS = (1.0, 0.1, 0.01, 0.0)
"""Parts of the tolerance that designs aim at in turn as checks fail; 0 is the plain sum."""
_CHECKED_TOGETHER = 16
"""Pieces of cells that the check sums at a time."""
_SINGLE = 3.5e-7
"""Error of single precision in the transforms, over the largest movement (measured: up to 3.2e-7).
"""
_WAITING_BYTES = 6.4e7
"""Moments that wait for the plain sum before it is made."""
_COMPILED_LOOP = threading.Lock()
"""The plain sum's loops use all threads themselves: one call at a time."""


@dataclass
class Share:
    """What some pieces of cells amount to over a leg; see `Summation.merge`.

    Attributes
    ----------
    sheets : list
        For each band its lattice, or None while no cell with a moment came.
    plain : array (component, date, target) or None
        Field of the cells that are summed plainly.
    waiting : list of (cells, moments)
        Cells that the plain sum still has to take.
    kept : list of (cells, moments)
        Moments of all cells at the dates that will be checked.
    """

    sheets: list[np.ndarray | None]
    plain: np.ndarray | None = None
    waiting: list[tuple[np.ndarray, dict[str, np.ndarray]]] = field(default_factory=list)
    kept: list[tuple[np.ndarray, dict[str, np.ndarray]]] = field(default_factory=list)


def one_blas_thread() -> threadpool_limits:
    """While it lasts, threads of the matrix library do not get into the way of our own."""
    return threadpool_limits(limits=1, user_api="blas")


class Summation:
    """The field of all cells at some targets.

    Parameters
    ----------
    bodies : Bodies
    sources : sequence of str
        Kinds of moments that may come.
    targets : Targets
    earth : EarthModel
    tolerance : float
        Error allowed, relative to the largest displacement of the job.
    gradient : bool
        Also the `GRADIENT` components (targets at the surface only).
    steps : int
        Dates of the whole job, for the choice of the method.
    method : str
        ``"auto"``, ``"direct"``, or ``"lattice"``: a lattice even where the plain sum is cheaper.
    attempt : int
        Which of `ATTEMPTS`.
    live : array of bool (cell,), optional
        Cells that may have moments; all when left out.

    Attributes
    ----------
    names : tuple of str
        Components of the field.
    notes : list of str
        What is done, for the record.
    """

    def __init__(self, bodies: Bodies, sources: Sequence[str], targets: Targets, earth: Any, *,
                 tolerance: float, gradient: bool, steps: int, method: str = "auto",
                 attempt: int = 0, live: np.ndarray | None = None) -> None:
        self.names = DISPLACEMENT + (GRADIENT if gradient else ())
        self._bodies, self._sources, self._targets = bodies, list(sources), targets
        self._earth, self._gradient, self._tolerance = earth, gradient, tolerance
        self._part = ATTEMPTS[attempt]
        self._ground = np.nonzero(targets.at_surface)[0]
        self._deep = np.nonzero(~targets.at_surface)[0]
        self.notes: list[str] = []
        self._bands: list[BandPass | PillarPass] = []
        self._band_of = np.full(128, -1, dtype=np.int8)
        self._census: Census | None = None
        everything = np.arange(bodies.count) if live is None else np.nonzero(live)[0]
        plain_only = (method == "direct" or self._part == 0.0 or not self._ground.size
                      or (gradient and self._deep.size > 0) or not everything.size
                      or (method == "auto"
                          and not worth_it(everything.size, self._ground.size, steps)))
        if not plain_only:
            self._design(method == "lattice", steps, live)
        if not self._bands:
            self.notes.append("plain sum over all cells")
        elif self._deep.size:
            self.notes.append(f"plain sum for {self._deep.size} targets below the surface")
        aim = tolerance * (self._part or 1.0)
        self._plain = DirectSum(bodies, targets, earth, tolerance=aim, gradient=gradient,
                                cells=everything)
        self._plain_ground = DirectSum(bodies, _some(targets, self._ground), earth, tolerance=aim,
                                       gradient=gradient, cells=everything)
        self._plain_deep = DirectSum(bodies, _some(targets, self._deep), earth, tolerance=aim,
                                     gradient=gradient, cells=everything)
        # its error is some 1e-7 of the largest movement; from date to date, where the movement may
        # be as small as one part in so many dates, it must not matter either
        self._single = _SINGLE * max(steps, 10) <= 0.25 * aim and not gradient
        # moments that are only checked: what rounding them does is far below what is looked for
        self._kind = np.float32 if tolerance >= 1e-5 else np.float64
        self._room = np.zeros((len(self.names), 0, targets.x.size))
        self._keep: tuple[int, ...] = ()
        self._steps = 0
        self._checked: _Checked | None = None
        self._error = 0.0

    @property
    def method(self) -> str:
        """``"lattice"`` if any cell goes onto one, ``"pillars"``, else ``"direct"``."""
        if any(isinstance(band, BandPass) for band in self._bands):
            return "lattice"
        return "pillars" if self._bands else "direct"

    @property
    def bytes_per_date(self) -> tuple[float, float]:
        """Of one share, and of the result."""
        share = sum(band.bytes_per_date for band in self._bands)
        result = 8.0 * len(self.names) * self._targets.x.size
        return share + (result if not self._bands else 0.0), result

    @property
    def fixed_bytes(self) -> float:
        """Kernels and spectra of the largest band, and the moments that are checked."""
        largest = max((band.bytes_of_kernels for band in self._bands), default=0.0)
        kept = 12.0 * len(self._sources) * self._bodies.count if self._bands else 0.0
        return largest + kept

    def _design(self, forced: bool, steps: int, live: np.ndarray | None) -> None:
        aim = self._part * self._tolerance
        census = take_census(self._bodies, _SAMPLING * aim, self._gradient, live)
        x, y = self._targets.x[self._ground], self._targets.y[self._ground]
        column = self._bodies.column
        pillars = 0 if column is None else np.unique(column).size
        task = Task(
            steps=steps, components=len(self.names), sources=len(self._sources), targets=x.size,
            x=(float(x.min()), float(x.max())), y=(float(y.min()), float(y.max())),
            closed_form=self._earth.homogeneous_poisson_ratio is not None,
            cells_of_pillar=self._bodies.count / pillars if pillars else 1.0,
            level=self._bodies.boxes is not None)
        # a stencil errs twice, in spreading and in resampling
        stencils = [coarsest(width, 0.5 * _STENCILS * aim, self._gradient) for width in WIDTHS]
        possible = [stencil for stencil in stencils if stencil is not None]
        raster = Raster.of(x, y)
        bands = make_bands(census, task, possible, _DEPTHS * aim, forced)
        if all(band.way == "plain" for band in bands):
            return
        self._census = census
        for band in sorted(bands, key=lambda band: band.group.top):
            group = band.group
            extent = f"{group.count} cells {group.top:.4g} to {group.bottom:.4g} m deep: "
            if band.way == "plain":
                self.notes.append(extent + "plain sum")
                continue
            self._band_of[list(group.classes)] = len(self._bands)
            if band.way == "pillars":
                self._bands.append(PillarPass(
                    self._bodies, census, group, x, y, self._earth, self._sources, _DEPTHS * aim,
                    len(self.names), _SAMPLING * aim))
            else:
                self._bands.append(BandPass(group, x, y, raster, self._earth, self._sources,
                                            band.way, _DEPTHS * aim, len(self.names),
                                            census.rule))
            self.notes.append(extent + self._bands[-1].words)

    @property
    def keep(self) -> tuple[int, ...]:
        """Dates of the leg that will be checked."""
        return self._keep

    # -- one leg -----------------------------------------------------------------------------

    def begin(self, steps: int, keep: Sequence[int] = ()) -> None:
        """A leg of some dates; those in `keep` are better ones for the check than any before."""
        self._steps = steps
        self._keep = tuple(sorted(set(keep))) if self._bands else ()
        if self._keep:
            self._checked, self._error = None, 0.0

    def share(self) -> Share:
        """An empty share of the leg."""
        return Share([None] * len(self._bands))

    def add(self, share: Share, cells: np.ndarray, moments: Mapping[str, np.ndarray]) -> None:
        """Add cells to a share.

        Parameters
        ----------
        share : Share
            No two threads may add to one share at a time.
        cells : array of int (m,)
        moments : mapping of source to array (dates of the leg, m)
            m3.
        """
        places = np.nonzero(losing_volume(*moments.values()))[0]
        if not places.size:
            return
        some = cells[places]
        if self._keep:
            dates = list(self._keep)
            late = {source: moment[dates][:, places].astype(self._kind)
                    for source, moment in moments.items()}
            share.kept.append((some.astype(np.int32), late))
        if self._census is None:
            self._wait(share, some, moments, places)
            return
        band_of = self._band_of[self._census.number[some]]
        column = self._bodies.column
        for n in np.unique(band_of):
            which = places[band_of == n]
            if n < 0:
                self._wait(share, cells[which], moments, which)
                continue
            if column is not None:
                which = which[np.argsort(column[cells[which]], kind="stable")]
            sheet = share.sheets[n]
            if sheet is None:
                sheet = share.sheets[n] = self._bands[n].sheet(self._steps)
            self._bands[n].deposit(sheet, self._bodies, cells[which], moments, which,
                                   _SAMPLING * self._part * self._tolerance)
        if self._deep.size:
            self._add_deep(share, cells, moments)

    def _wait(self, share: Share, cells: np.ndarray, moments: Mapping[str, np.ndarray],
              places: np.ndarray) -> None:
        share.waiting.append((cells, {s: moment[:, places] for s, moment in moments.items()}))
        waiting = sum(m.nbytes for _, some in share.waiting for m in some.values())
        if waiting > _WAITING_BYTES:
            self._sum_plainly(share)

    def _sum_plainly(self, share: Share) -> None:
        if not share.waiting:
            return
        cells = np.concatenate([cells for cells, _ in share.waiting])
        moments = {source: np.concatenate([some[source] for _, some in share.waiting], axis=1)
                   for source in share.waiting[0][1]}
        share.waiting.clear()
        with _COMPILED_LOOP:
            if self._census is None:
                self._plain.add(self._plain_of(share), cells, moments)
            else:
                part = np.zeros((len(self.names), self._steps, self._ground.size))
                self._plain_ground.add(part, cells, moments)
                self._plain_of(share)[:, :, self._ground] += part

    def _add_deep(self, share: Share, cells: np.ndarray, moments: Mapping[str, np.ndarray]) -> None:
        with _COMPILED_LOOP:
            part = np.zeros((len(self.names), self._steps, self._deep.size))
            self._plain_deep.add(part, cells, moments)
            self._plain_of(share)[:, :, self._deep] += part

    def _plain_of(self, share: Share) -> np.ndarray:
        if share.plain is None:
            share.plain = np.zeros((len(self.names), self._steps, self._targets.x.size))
        return share.plain

    def merge(self, share: Share, other: Share) -> None:
        """Add another share of the same leg into `share`; the other is used up."""
        for n, sheet in enumerate(other.sheets):
            mine = share.sheets[n]
            if mine is None:
                share.sheets[n] = sheet
            elif sheet is not None:
                mine += sheet
            other.sheets[n] = None
        if share.plain is None:
            share.plain = other.plain
        elif other.plain is not None:
            share.plain += other.plain
        share.waiting += other.waiting
        share.kept += other.kept

    def fields(self, share: Share, again: bool = False) -> Fields:
        """The field of the leg's dates from the sum of all its shares, which is used up.

        `again`: the arrays that were given last time are no longer needed, and may be used again.
        """
        self._sum_plainly(share)
        result = share.plain
        if result is None:
            shape = (len(self.names), self._steps, self._targets.x.size)
            if again and self._room.shape[1] >= self._steps:
                result = self._room[:, :self._steps]
                result[:] = 0.0
            else:
                result = self._room = np.zeros(shape)
        part = (result if self._ground.size == result.shape[2] else
                np.zeros((len(self.names), self._steps, self._ground.size)))
        for n, band in enumerate(self._bands):
            sheet, share.sheets[n] = share.sheets[n], None
            if sheet is not None:
                band.add_field(part, sheet, self._single)
        if part is not result and self._bands:
            result[:, :, self._ground] += part
        if share.kept:  # nothing was lost at those dates otherwise
            self._remember(result, share)
        return dict(zip(self.names, result, strict=True))

    # -- the check ---------------------------------------------------------------------------

    def _remember(self, result: np.ndarray, share: Share) -> None:
        """Keep what the check needs of this leg's dates."""
        field = result[:, list(self._keep)][:, :, self._ground]
        self._checked = _Checked(share.kept, field)

    def error(self) -> float:
        """Error at the checked targets and dates over the largest value at those dates.

        Slopes and strains over their own largest.

        Where all cells were summed plainly, the bound of their sampling.
        """
        if not self._bands:
            return self._plain.error
        if self._checked is not None and self._checked.kept:
            self._error = self._check(self._checked)
        return self._error

    def _check(self, checked: _Checked) -> float:
        """See `error`; what was kept is used up."""
        targets = _some(self._targets, self._ground)
        assert self._census is not None
        rough = np.max([band.roughness() for band in self._bands], axis=0)
        highest = min(self._census.groups, key=lambda group: group.top).highest
        size = np.abs(checked.field[:3]).max(axis=(0, 1))
        chosen = Check.choose(size, rough, (float(highest[0]), float(highest[1])), targets,
                              Check.affordable(self._census.points, self._earth))
        check = None
        while checked.kept:  # some at a time: those of all cells would be a second copy
            some = [checked.kept.pop() for _ in range(min(_CHECKED_TOGETHER, len(checked.kept)))]
            part = Check.at(
                chosen, self._bodies, np.concatenate([cells for cells, _ in some]),
                {source: np.concatenate([moments[source] for _, moments in some], axis=1)
                 for source in some[0][1]},
                targets, self._earth, tolerance=self._tolerance, gradient=self._gradient)
            check = part if check is None else check.with_(part)
        assert check is not None
        peaks = np.abs(checked.field).max(axis=(1, 2))
        return check.error(dict(zip(self.names, checked.field[:, :, chosen], strict=True)),
                           dict(zip(self.names, peaks, strict=True)))

    def accepts(self, error: float) -> bool:
        """Whether a result with this error may be handed out."""
        return not self._bands or error <= _ACCEPTED * self._tolerance


@dataclass(frozen=True)
class _Checked:
    """The dates that are checked: moments, and the field (component, date, target)."""

    kept: list[tuple[np.ndarray, dict[str, np.ndarray]]]
    field: np.ndarray


def _some(targets: Targets, which: np.ndarray) -> Targets:
    return Targets(targets.x[which], targets.y[which], targets.depth[which])
