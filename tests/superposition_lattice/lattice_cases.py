"""Small invented fields, and the error of one solver's result against the plain sum."""

from __future__ import annotations

import numpy as np
from make_workloads import field_of_cells, raster

from subside.superposition.check import _GROUPS
from subside.superposition.direct import Direct
from subside.superposition.interface import Bodies, Fields, Targets
from subside.superposition.lattice import Lattice

__all__ = ["compare", "error_of", "raster", "small_field", "wells"]


def small_field(*, depth: float = 1500.0, size: float = 200.0, seed: int = 1, columns: int = 12,
                rows: int = 9, layers: int = 3, steps: int = 3, thickness: float = 20.0,
                dip: float = 0.05, throw: float = 40.0, azimuth: float = 30.0,
                active: float = 1.3) -> tuple[Bodies, dict[str, np.ndarray]]:
    """A few hundred cells with both kinds of source."""
    bodies, moment = field_of_cells(columns, rows, layers, size=size, thickness=thickness,
                                    depth=depth, dip=dip, throw=throw, azimuth=azimuth,
                                    active=active, steps=steps, seed=seed)
    share = np.random.default_rng(seed).uniform(0.2, 0.8, bodies.count)
    return bodies, {"contraction": moment * share, "closure": moment * (1 - share)}


def wells(count: int, half: float, seed: int = 3) -> Targets:
    """Scattered surface points."""
    place = np.random.default_rng(seed).uniform(-half, half, (2, count))
    return Targets(place[0], place[1], np.zeros(count))




def error_of(field: Fields, truth: Fields) -> float:
    """Largest difference over the largest value in its group (displacement, slopes, strains)."""
    worst = 0.0
    for group in _GROUPS:
        if group[0] in truth:
            gap = max(np.abs(field[name] - truth[name]).max() for name in group)
            worst = max(worst, gap / max(np.abs(truth[name]).max() for name in group))
    return float(worst)


def compare(bodies: Bodies, moments: dict[str, np.ndarray], targets: Targets, earth: object,
            tolerance: float, gradient: bool = False) -> tuple[float, Lattice]:
    """Error of a forced lattice against the plain sum at a hundredth of the tolerance."""
    solver = Lattice(forced=True)
    field = solver.solve(bodies, moments, targets, earth, tolerance=tolerance, gradient=gradient)
    truth = Direct().solve(bodies, moments, targets, earth, tolerance=0.01 * tolerance,
                           gradient=gradient)
    assert field.keys() == truth.keys()
    assert any("lattice" in note for note in solver.notes)
    return error_of(field, truth), solver
