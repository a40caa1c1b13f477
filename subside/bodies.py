"""The cells of a dataset as bodies in space, depth below the ground or seabed."""

from __future__ import annotations

import numpy as np
import xarray as xr
from numba import njit

from subside.compaction.fields import place
from subside.errors import InputError
from subside.grid.geometry import corners_of_boxes
from subside.hooks.contracts import EarthModel
from subside.superposition.interface import Bodies

__all__ = ["bodies_of", "inside_valid_depths"]

_AT_ONCE = 100_000


def bodies_of(cells: xr.Dataset, surface: float) -> Bodies:
    """Views of the dataset's arrays: nothing is copied but what is asked for."""
    column = cells["column"].values if "column" in cells else None
    if "corners" in cells:
        corners = cells["corners"].values

        def corners_of(index: np.ndarray) -> np.ndarray:
            some = corners[index]
            some[..., 2] -= surface
            return np.asarray(some)

        return Bodies(corners.shape[0], corners_of, None, column)
    x, y, top, bottom, dx, dy, azimuth = (
        cells[n].values for n in ("x", "y", "top", "bottom", "dx", "dy", "azimuth"))

    def boxes_of(index: np.ndarray) -> np.ndarray:
        return np.asarray(_gather(x, y, top, bottom, dx, dy, azimuth,
                                  index.astype(np.int64, copy=False), surface))

    return Bodies(top.size, lambda index: corners_of_boxes(*boxes_of(index).T), boxes_of, column)


@njit(cache=True, nogil=True)
def _gather(x: np.ndarray, y: np.ndarray, top: np.ndarray, bottom: np.ndarray, dx: np.ndarray,
            dy: np.ndarray, azimuth: np.ndarray, index: np.ndarray, surface: float) -> np.ndarray:
    boxes = np.empty((index.size, 7))
    for n in range(index.size):
        cell = index[n]
        boxes[n, 0], boxes[n, 1] = x[cell], y[cell]
        boxes[n, 2], boxes[n, 3] = top[cell] - surface, bottom[cell] - surface
        boxes[n, 4], boxes[n, 5], boxes[n, 6] = dx[cell], dy[cell], azimuth[cell]
    return boxes


def inside_valid_depths(bodies: Bodies, earth: EarthModel, cells: xr.Dataset) -> None:
    """Raise `InputError` for a cell outside the depths at which the earth model holds."""
    shallowest, deepest = earth.valid_depths
    if shallowest <= 0.0 and deepest == float("inf"):
        return
    for start in range(0, bodies.count, _AT_ONCE):
        index = np.arange(start, min(start + _AT_ONCE, bodies.count))
        depth = bodies.corners(index)[..., 2]
        outside = (depth.max(axis=1) >= deepest) | (depth.min(axis=1) < shallowest)
        if outside.any():
            cell = int(np.argmax(outside))
            raise InputError(
                f"[earth] model = '{earth.name}' holds for sources between {shallowest:g} and "
                f"{deepest:g} m below the ground or seabed; {place(cells, int(index[cell]))} "
                f"reaches from {depth[cell].min():.6g} to {depth[cell].max():.6g} m. Put the "
                "basement below the cells, or use another model."
            )
