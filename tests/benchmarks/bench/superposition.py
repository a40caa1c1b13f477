"""The superposition alone, inside one process: the product beside the baselines, and its error."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import click
import numpy as np

from bench.baselines import Sample, best_tile, per_step_sum, tile_product
from bench.cells import POISSON_RATIO, bodies_of, centres_of, moments_of, targets_of
from bench.timing import in_turn, stopwatch
from bench.workloads import Workload
from subside.earth_models import HalfSpace
from subside.superposition.direct import Direct
from subside.superposition.interface import GRADIENT, Bodies, Fields, Targets
from subside.superposition.lattice import Lattice

__all__ = ["measure_superposition"]

_CHECKED = 300
_CHECKED_DATES = 60
_ALL_STEPS = 64  # the per-step sum costs the same at every step: no more are timed


@dataclass(frozen=True)
class Solved:
    """A field, the error that the solver itself states, and what it says it did."""

    fields: Fields
    stated_error: float
    notes: list[str]


def superpose(bodies: Bodies, moments: np.ndarray, targets: Targets, tolerance: float,
              gradient: bool = False, forced: bool = False) -> Solved:
    """The one place that calls the product's solver. `forced`: a lattice whatever it costs."""
    solver = Lattice(forced=forced)
    fields = solver.solve(bodies, {"contraction": moments}, targets, _earth(),
                          tolerance=tolerance, gradient=gradient)
    return Solved(fields, solver.achieved_error, list(solver.notes))


def _earth() -> Any:
    return HalfSpace(poisson_ratio=POISSON_RATIO)


def measure_superposition(load: Workload, tolerances: list[float], repeats: int,
                          pair_steps: float) -> dict[str, Any]:
    """Seconds, ratios and errors of a workload.

    Parameters
    ----------
    pair_steps : float
        At least so many cell-target-steps of each baseline are timed.
    """
    click.echo(f"{load.name}: cells in memory")
    bodies, moments, targets = bodies_of(load), moments_of(load), targets_of(load)
    total = float(moments.size) * targets.x.size
    chosen = _chosen(moments, targets, pair_steps)
    few, few_moments = _some_cells(bodies, chosen), np.ascontiguousarray(moments[:, chosen])
    sample = Sample(*np.ascontiguousarray(centres_of(load)[chosen].T), few_moments, targets.x,
                    targets.y, POISSON_RATIO)
    tile = best_tile(sample)
    steps = min(_ALL_STEPS, moments.shape[0])
    fewer = sample.part(math.ceil(pair_steps / targets.x.size / steps), steps)
    _same_numbers(sample, tile)
    plain = Direct()

    def direct() -> None:
        plain.solve(few, {"contraction": few_moments}, targets, _earth(),
                    tolerance=tolerances[0])

    superpose(bodies, moments[-2:], targets, tolerances[0])  # compiles
    plain.solve(_some_cells(bodies, chosen[:8]), {"contraction": few_moments[-1:, :8]}, targets,
                _earth(), tolerance=tolerances[0])
    jobs: dict[str, Callable[[], float]] = {
        "tile": lambda: stopwatch(lambda: tile_product(sample, tile)),
        "per_step": lambda: stopwatch(lambda: per_step_sum(fewer)),
        "direct": lambda: stopwatch(direct),
    }
    jobs |= {f"lattice {t:g}": lambda t=t: stopwatch(  # type: ignore[misc]
        lambda: superpose(bodies, moments, targets, t)) for t in tolerances}
    if load.points:
        jobs["forced lattice"] = lambda: stopwatch(
            lambda: superpose(bodies, moments, targets, tolerances[0], forced=True))
    raw = in_turn(jobs, repeats)
    baselines = {"tile": raw["tile"].times(total / sample.pair_steps),
                 "per_step": raw["per_step"].times(total / fewer.pair_steps),
                 "direct": raw["direct"].times(bodies.count / few.count)}
    result: dict[str, Any] = {
        "cells": bodies.count, "targets": targets.x.size, "steps": moments.shape[0],
        "tile_targets_cells": list(tile), "timed_pair_steps": sample.pair_steps,
        "tile_pair_steps_per_s": sample.pair_steps / raw["tile"].median,
        "per_step_pairs_per_s": fewer.pair_steps / raw["per_step"].median,
        "baselines_s": {name: seconds.record() for name, seconds in baselines.items()},
        "lattice": [],
    }
    if load.points:
        result["forced_lattice_s"] = raw["forced lattice"].record()
    truth: _Truth | None = None
    moments = moments[::-math.ceil(moments.shape[0] / _CHECKED_DATES)][::-1]
    for tolerance in tolerances:
        sloped = superpose(bodies, moments, targets, tolerance, gradient=True)
        if truth is None:
            truth = _Truth.of(bodies, moments, targets, sloped.fields, 0.1 * min(tolerances))
        # without slopes the design may be coarser: what was timed is checked too
        solved = superpose(bodies, moments, targets, tolerance)
        errors = truth.errors(sloped.fields)
        errors |= {k: max(v, errors[k]) for k, v in truth.errors(solved.fields).items()}
        seconds = raw[f"lattice {tolerance:g}"]
        row = {
            "tolerance": tolerance, "seconds": seconds.record(),
            "ratio": {n: b.median / seconds.median for n, b in baselines.items()},
            "error": errors, "stated_error": solved.stated_error,
            "notes": solved.notes,
        }
        result["lattice"].append(row)
        click.echo(f"  {tolerance:g}: {seconds.median:.3g} s; ratio to tile + product "
                   f"{row['ratio']['tile']:.0f}, to per-step sum {row['ratio']['per_step']:.0f}, "
                   f"to direct {row['ratio']['direct']:.0f}; errors "
                   + ", ".join(f"{k} {v:.1e}" for k, v in row["error"].items()))
    return result


def _chosen(moments: np.ndarray, targets: Targets, pair_steps: float) -> np.ndarray:
    """Random cells, enough of them for `pair_steps`, in whole tiles."""
    steps, cells = moments.shape
    wanted = 512 * math.ceil(pair_steps / (512.0 * targets.x.size * steps))
    return np.sort(np.random.default_rng(0).choice(cells, min(wanted, cells), replace=False))


def _same_numbers(sample: Sample, tile: tuple[int, int]) -> None:
    """Both baselines have to give the same field, or they are not worth timing."""
    small = sample.part(700, 2)
    one, other = per_step_sum(small), tile_product(small, tile)
    gap = float(np.abs(one - other).max() / np.abs(one).max())
    if not gap < 1e-11:
        raise SystemExit(f"the baselines differ by {gap:.2g} of their largest value")


def _some_cells(bodies: Bodies, chosen: np.ndarray) -> Bodies:
    boxes, column = bodies.boxes, bodies.column
    assert boxes is not None and column is not None
    return Bodies(chosen.size, lambda index: bodies.corners(chosen[index]),
                  lambda index: boxes(chosen[index]), column[chosen])


@dataclass(frozen=True)
class _Truth:
    """The plain sum over finite cells at a few hundred targets, and the largest values."""

    chosen: np.ndarray
    fields: Fields
    largest: dict[str, float]

    @classmethod
    def of(cls, bodies: Bodies, moments: np.ndarray, targets: Targets, field: Fields,
           tolerance: float) -> _Truth:
        """At the extremes of `field`, and at random."""
        extremes = [int(np.abs(values[-1]).argmax()) for values in field.values()]
        rng = np.random.default_rng(5)
        chosen = np.union1d(extremes, rng.choice(
            targets.x.size, min(_CHECKED, targets.x.size), replace=False))
        click.echo(f"  plain sum at {chosen.size} targets, for the error")
        places = Targets(targets.x[chosen], targets.y[chosen], targets.depth[chosen])
        fields = Direct().solve(bodies, {"contraction": moments}, places, _earth(),
                                tolerance=tolerance, gradient=True)
        return cls(chosen, fields, {
            group: max(float(np.abs(values(field, name)).max()) for name in names)
            for group, (names, values) in _GROUPS.items()})

    def errors(self, field: Fields) -> dict[str, float]:
        """Largest error of each group over its largest value on the whole map at any date."""
        here = {name: values[:, self.chosen] for name, values in field.items()}
        return {group: max(float(np.abs(values(here, n) - values(self.fields, n)).max())
                           for n in names) / self.largest[group]
                for group, (names, values) in _GROUPS.items() if names[0] in field}


def _plain(field: Fields, name: str) -> np.ndarray:
    return field[name]


def _rate(field: Fields, name: str) -> np.ndarray:
    """Change from date to date: dates are evenly spaced, so a ratio needs no interval."""
    return np.diff(field[name], axis=0)


_GROUPS: dict[str, tuple[tuple[str, ...], Callable[[Fields, str], np.ndarray]]] = {
    "displacement": (("down", "east", "north"), _plain),
    "slope": (GRADIENT[:2], _plain),
    "strain": (GRADIENT[2:], _plain),
    "rate": (("down",), _rate),
}
