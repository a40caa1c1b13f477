"""The lattice method for moments that are held in memory: cells onto coarse lattices by depth, one
convolution, then to the targets.

Every result is checked before it is returned: a plain sum at about 200 targets gives the error
that was reached; a finer lattice, and in the end the plain sum itself, follow if it is too large.
A run that streams uses `summation.Summation` itself.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from concurrent.futures import ThreadPoolExecutor
from typing import Any

import numba
import numpy as np

from subside.superposition.direct import losing_volume
from subside.superposition.interface import Bodies, Fields, Targets
from subside.superposition.summation import ATTEMPTS, Share, Summation, one_blas_thread

__all__ = ["Lattice", "dates_to_check"]

_PIECE = 30_000


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
        self._method = "lattice" if forced else "auto"
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
        self.notes = []
        moments = {source: np.ascontiguousarray(moment, dtype=float)
                   for source, moment in moments.items()}
        alive = {source: losing_volume(moment) for source, moment in moments.items()}
        live = np.any(list(alive.values()), axis=0)
        moments = {source: moment for source, moment in moments.items()
                   if alive[source].any()} or moments
        cells = np.nonzero(live)[0]
        if bodies.column is not None:  # so that pieces hold whole columns
            cells = cells[np.argsort(bodies.column[cells], kind="stable")]
        steps = next(iter(moments.values())).shape[0]
        total, told = float(bodies.count) * targets.x.size * len(moments), 0.0
        fields: Fields = {}
        with one_blas_thread():
            for attempt in range(len(ATTEMPTS)):
                job = Summation(bodies, list(moments), targets, earth, tolerance=tolerance,
                                gradient=gradient, steps=steps, method=self._method,
                                attempt=attempt, live=live)
                job.begin(steps, dates_to_check(moments))
                before = told
                # in the order of memory again within each piece
                pieces = [np.sort(cells[start:start + _PIECE])
                          for start in range(0, cells.size, _PIECE)]

                def fill(some: list[np.ndarray], job: Summation = job) -> Share:
                    share = job.share()
                    for piece in some:
                        job.add(share, piece, {source: np.ascontiguousarray(moment[:, piece])
                                               for source, moment in moments.items()})
                    return share

                workers = numba.get_num_threads()
                with ThreadPoolExecutor(workers) as pool:
                    share, *others = pool.map(fill, [pieces[n::workers] for n in range(workers)])
                for other in others:
                    job.merge(share, other)
                told += 0.5 * (total - told)
                progress(told - before)
                fields = job.fields(share)
                self.name, self.achieved_error = job.method, job.error()
                self.notes += [note for note in job.notes if note not in self.notes]
                if job.accepts(self.achieved_error):
                    break
                self.notes.append(f"the check found an error of {self.achieved_error:.2g}, more "
                                  f"than half the tolerance of {tolerance:g}: refined")
        progress(max(total - told, 0.0))
        return fields


def dates_to_check(moments: Mapping[str, np.ndarray]) -> tuple[int, ...]:
    """The date at which most volume is lost or gained; moments are (date, cell)."""
    # date by date: the magnitudes of all would be another array of that size
    size = np.sum([[np.abs(date).sum() for date in moment] for moment in moments.values()], axis=0)
    return (int(size.argmax()),)
