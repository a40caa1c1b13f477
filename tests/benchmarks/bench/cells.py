"""A workload in memory, for what is measured inside one process: cells, moments, targets."""

from __future__ import annotations

import numpy as np

from bench.workloads import Workload
from subside.grid.geometry import corners_of_boxes
from subside.superposition.interface import Bodies, Targets

__all__ = ["POISSON_RATIO", "bodies_of", "centres_of", "moments_of", "targets_of"]

POISSON_RATIO = 0.25
_COMPRESSIBILITY = 1e-5  # 1/bar


def bodies_of(load: Workload) -> Bodies:
    """The active cells as upright boxes, layer by layer."""
    field = load.field
    j, i = np.nonzero(field.is_active)
    east, north, top = (values[j, i] for values in field.centres())
    pillars = j.size

    def boxes(index: np.ndarray) -> np.ndarray:
        k, pillar = index // pillars, index % pillars
        upper = top[pillar] + k * field.thickness
        size = np.full(index.size, field.size)
        return np.column_stack([east[pillar], north[pillar], upper, upper + field.thickness, size,
                                size, np.full(index.size, field.azimuth)])

    return Bodies(pillars * field.layers, lambda index: corners_of_boxes(*boxes(index).T),
                  boxes, np.tile(np.arange(pillars), field.layers))


def centres_of(load: Workload) -> np.ndarray:
    """Centres (cell, 3) of the same cells: easting, northing, depth, m."""
    bodies = bodies_of(load)
    assert bodies.boxes is not None
    boxes = bodies.boxes(np.arange(bodies.count))
    return np.column_stack([boxes[:, 0], boxes[:, 1], 0.5 * (boxes[:, 2] + boxes[:, 3])])


def moments_of(load: Workload) -> np.ndarray:
    """Volume that the same cells lose (date, cell), m3: compressibility, depletion, volume."""
    field = load.field
    active = field.is_active
    pillars = int(active.sum())
    factor = _COMPRESSIBILITY * field.size**2 * field.thickness
    out = np.empty((field.steps, pillars * field.layers))
    for k in range(field.layers):
        pressure = field.pressure(slice(None), slice(k, k + 1), slice(None), 0.0)[:, 0][:, active]
        out[:, k * pillars:(k + 1) * pillars] = factor * (pressure[0] - pressure.astype(float))
    return out


def targets_of(load: Workload) -> Targets:
    """The map's pixels row by row, or the points; on the surface."""
    if load.points:
        x, y = load.points_xy()
    else:
        x, y = (values.ravel() for values in np.meshgrid(*load.pixels_xy()))
    return Targets(x, y, np.zeros(x.size))
