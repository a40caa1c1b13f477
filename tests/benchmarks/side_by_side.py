"""The lattice method beside the plain sum, in one process: ratios, error, memory.

    python tests/benchmarks/side_by_side.py W1 W2

The plain sum is timed on a random part of the cells (its cost is linear in them) and scaled up;
both are repeated in turn and the median taken. Numbers of seconds are this machine's; the ratio is
what may be quoted.
"""

from __future__ import annotations

import resource
import time
from collections.abc import Callable

import click
import numpy as np
from make_workloads import WORKLOADS, Workload, make

from subside.earth_models import HalfSpace
from subside.superposition.direct import Direct
from subside.superposition.interface import Bodies
from subside.superposition.lattice import Lattice

HEADINGS = ("job", "tolerance", "plain s", "lattice s", "ratio", "error", "peak GB")


def _part(load: Workload, count: int) -> tuple[Bodies, dict[str, np.ndarray], float]:
    """Some of the cells that lose volume, and how many times more there are."""
    live = np.nonzero(np.any(load.moments["contraction"], axis=0))[0]
    chosen = np.sort(np.random.default_rng(0).choice(live, min(count, live.size), replace=False))
    bodies = Bodies(chosen.size, lambda index: load.bodies.corners(chosen[index]))
    moments = {kind: np.ascontiguousarray(values[:, chosen])
               for kind, values in load.moments.items()}
    return bodies, moments, live.size / chosen.size


def _seconds(job: Callable[[], object]) -> float:
    start = time.perf_counter()
    job()
    return time.perf_counter() - start


def measure(name: str, tolerance: float, repeats: int, cells: int) -> tuple[str, ...]:
    """One row of the table."""
    load = make(name)
    earth = HalfSpace(poisson_ratio=0.25)
    bodies, moments, scale = _part(load, cells)
    lattice, plain = Lattice(), Direct()
    few, few_moments, _ = _part(load, 5)
    plain.solve(few, few_moments, load.targets, earth, tolerance=tolerance)  # compile
    lattice.solve(load.bodies, {k: v[:1] for k, v in load.moments.items()}, load.targets, earth,
                  tolerance=tolerance)
    slow, fast = [], []
    for _ in range(repeats):
        slow.append(scale * _seconds(
            lambda: plain.solve(bodies, moments, load.targets, earth, tolerance=tolerance)))
        fast.append(_seconds(
            lambda: lattice.solve(load.bodies, load.moments, load.targets, earth,
                                  tolerance=tolerance)))
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1e6
    ratio = float(np.median(slow) / np.median(fast))
    return (name, f"{tolerance:g}", f"{np.median(slow):.0f}", f"{np.median(fast):.1f}",
            f"{ratio:.0f}", f"{lattice.achieved_error:.1e}", f"{peak:.2f}")


@click.command()
@click.argument("names", nargs=-1, type=click.Choice(list(WORKLOADS)))
@click.option("--tolerance", default=1e-4, show_default=True)
@click.option("--repeats", default=3, show_default=True)
@click.option("--cells", default=600, show_default=True, help="Cells the plain sum is timed on.")
def main(names: tuple[str, ...], tolerance: float, repeats: int, cells: int) -> None:
    """Time the lattice method beside the plain sum and print the ratios."""
    click.echo("  ".join(f"{h:>9}" for h in HEADINGS))
    for name in names or ("W1",):
        click.echo("  ".join(f"{v:>9}" for v in measure(name, tolerance, repeats, cells)))


if __name__ == "__main__":
    main()
