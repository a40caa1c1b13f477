"""Seeded workloads of the benchmarks: rotated, inclined, faulted fields of invented cells.

`python tests/benchmarks/make_workloads.py W1` prints a summary; `make(name)` gives the arrays.
"""

from __future__ import annotations

import sys
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from subside.superposition.interface import Bodies, Targets

__all__ = ["WORKLOADS", "Workload", "field_of_cells", "make", "raster"]


@dataclass(frozen=True)
class Workload:
    """Cells, their moments (time, cell) in m3, and targets."""

    name: str
    bodies: Bodies
    moments: dict[str, np.ndarray]
    targets: Targets

    @property
    def live_pairs(self) -> float:
        """Pairs of a cell that loses volume and a target."""
        return float(np.any(self.moments["contraction"], axis=0).sum()) * self.targets.x.size


def field_of_cells(columns: int, rows: int, layers: int, *, size: float, thickness: float,
                   depth: float, dip: float = 0.02, throw: float = 60.0, azimuth: float = 25.0,
                   active: float = 0.6, steps: int = 20,
                   seed: int = 1) -> tuple[Bodies, np.ndarray]:
    """A rotated dome cut by one fault: cells of `size` m, layer by layer, and their moments.

    Returns
    -------
    Bodies, array (steps, cell)
        Cells outside the oval that holds the share `active` of the area lose no volume.
    """
    rng = np.random.default_rng(seed)
    count = columns * rows * layers
    layer, row, column = np.unravel_index(np.arange(count), (layers, rows, columns))
    half_x, half_y = 0.5 * columns * size, 0.5 * rows * size
    turn = np.radians(azimuth)
    oval = np.sqrt(active * 4 / np.pi)

    def corners(index: np.ndarray) -> np.ndarray:
        out = np.empty((index.size, 8, 3))
        behind = column[index] >= columns // 2
        for n in range(8):
            u = column[index] + (n % 4 in (1, 2))
            v = row[index] + (n % 4 in (2, 3))
            x, y = u * size - half_x, v * size - half_y
            height = 0.05 * depth * (1 - (x / half_x) ** 2 - (y / half_y) ** 2)
            z = (depth + dip * x - height + throw * behind
                 + (layer[index] + (n >= 4)) * thickness)
            out[:, n, 0] = x * np.cos(turn) + y * np.sin(turn)
            out[:, n, 1] = -x * np.sin(turn) + y * np.cos(turn)
            out[:, n, 2] = z
        return out

    x = (column + 0.5) * size / half_x - 1
    y = (row + 0.5) * size / half_y - 1
    inside = x**2 + y**2 < oval**2
    strain = 1e-3 * np.exp(-(x**2 + y**2)) * rng.uniform(0.3, 1.0, layers)[layer]
    strain *= inside * rng.uniform(0.5, 1.0, count)
    time = np.linspace(0.0, 1.0, steps + 1)[1:]
    speed = rng.uniform(0.5, 3.0, layers)[layer].astype(np.float64)
    moments = np.empty((steps, count))
    for step, t in enumerate(time):
        moments[step] = strain * size * size * thickness * (1 - np.exp(-speed * t))
    return Bodies(count, corners), moments


def raster(pixels: int, half: float) -> Targets:
    """A square map about the origin."""
    line = np.linspace(-half, half, pixels) + 13.0
    x, y = np.meshgrid(line, line[::-1])
    return Targets(x.ravel(), y.ravel(), np.zeros(x.size))


def _workload(name: str, targets: Callable[[], Targets], **field: float) -> Workload:
    bodies, moments = field_of_cells(**field)  # type: ignore[arg-type]
    return Workload(name, bodies, {"contraction": moments}, targets())


WORKLOADS: dict[str, Callable[[], Workload]] = {
    "W1": lambda: _workload("W1", lambda: raster(256, 16e3), columns=100, rows=100, layers=10,
                            size=150.0, thickness=8.0, depth=2000.0, active=1.3, steps=20),
    "W2": lambda: _workload("W2", lambda: raster(512, 20e3), columns=200, rows=200, layers=50,
                            size=100.0, thickness=4.0, depth=2000.0, active=0.6, steps=60),
    "W4": lambda: _workload("W4", lambda: raster(512, 14e3), columns=200, rows=200, layers=5,
                            size=100.0, thickness=5.0, depth=300.0, throw=10.0, dip=0.003,
                            active=0.6, steps=60),
}
"""By name, smallest first."""


def make(name: str) -> Workload:
    """One of `WORKLOADS`."""
    return WORKLOADS[name]()


if __name__ == "__main__":
    for chosen in sys.argv[1:] or WORKLOADS:
        load = make(chosen)
        live = int(np.any(load.moments["contraction"], axis=0).sum())
        print(f"{chosen}: {load.bodies.count} cells, {live} losing volume, {load.targets.x.size} "
              f"targets, {load.moments['contraction'].shape[0]} steps")
