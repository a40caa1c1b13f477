"""What the product is measured against: plain sums over point sources at the centres of cells.

Both give three components. Point sources are cheaper than the finite cells of the product, and
the seconds are those of a part of the cells, scaled up: both favour the baselines.
"""

from __future__ import annotations

import time
from dataclasses import dataclass

import numpy as np
from numba import njit, prange
from threadpoolctl import threadpool_limits

__all__ = ["Sample", "best_tile", "per_step_sum", "tile_product"]

_TILES = ((128, 128), (256, 128), (256, 256), (512, 128), (512, 256))
"""Targets and cells of a tile that are tried: the best depends on the cache."""


@dataclass(frozen=True)
class Sample:
    """Some cells as points, with their moments, and all targets.

    Attributes
    ----------
    x, y, depth : array (cell,)
        m.
    moments : array (step, cell)
        m3.
    target_x, target_y : array (target,)
        On the surface, m.
    poisson : float
    """

    x: np.ndarray
    y: np.ndarray
    depth: np.ndarray
    moments: np.ndarray
    target_x: np.ndarray
    target_y: np.ndarray
    poisson: float

    @property
    def pair_steps(self) -> float:
        """Cells x targets x steps."""
        return float(self.moments.size) * self.target_x.size

    def part(self, cells: int, steps: int) -> Sample:
        """The first cells and the last steps."""
        return Sample(self.x[:cells], self.y[:cells], self.depth[:cells],
                      self.moments[-steps:, :cells], self.target_x, self.target_y, self.poisson)


def per_step_sum(sample: Sample) -> np.ndarray:
    """The sum as it is usually compiled: (step, component, target), every step on its own."""
    out = np.empty((sample.moments.shape[0], 3, sample.target_x.size))
    for step, moment in enumerate(sample.moments):
        _sum(out[step], sample.target_x, sample.target_y, sample.x, sample.y, sample.depth,
             np.ascontiguousarray(moment), sample.poisson)
    return out


def tile_product(sample: Sample, tile: tuple[int, int]) -> np.ndarray:
    """The sum as a matrix product: (step, component, target).

    The influence of a tile of cells on a tile of targets is computed once, stays in the cache,
    and is multiplied with the moments of all steps.
    """
    targets, cells = tile
    steps, count = sample.moments.shape
    blocks = -(-count // cells)
    fill = blocks * cells - count
    moments = np.pad(sample.moments, ((0, 0), (0, fill)))
    moments = np.ascontiguousarray(moments.reshape(steps, blocks, cells).transpose(1, 0, 2))
    x, y, depth = (np.pad(v, (0, fill), mode="edge") for v in (sample.x, sample.y, sample.depth))
    out = np.empty((steps, 3, sample.target_x.size))
    with threadpool_limits(limits=1, user_api="blas"):  # the tiles are spread over the threads
        _tiles(out, sample.target_x, sample.target_y, x, y, depth, moments, sample.poisson,
               min(targets, sample.target_x.size))
    return out


def best_tile(sample: Sample) -> tuple[int, int]:
    """The fastest of a few tile sizes on this machine, by trial on the first cells."""
    part = sample.part(256, sample.moments.shape[0])
    seconds = {}
    for tile in _TILES:
        tile_product(part, tile)
        start = time.perf_counter()
        tile_product(part, tile)
        seconds[tile] = time.perf_counter() - start
    return min(seconds, key=lambda tile: seconds[tile])


# Mindlin & Cheng 1950, J. Appl. Phys. 21:931: a nucleus of strain below a free surface. Written
# here once more, so that the baselines owe nothing to the product.


@njit(cache=True, fastmath=True, parallel=True, error_model="numpy")
def _sum(out, tx, ty, x, y, depth, moment, poisson):  # type: ignore[no-untyped-def]
    factor = (1.0 - poisson) / np.pi
    for target in prange(tx.size):
        down = east = north = 0.0
        px, py = tx[target], ty[target]
        for cell in range(x.size):
            dx, dy, d = px - x[cell], py - y[cell], depth[cell]
            far2 = dx * dx + dy * dy + d * d
            f = moment[cell] / (far2 * np.sqrt(far2))
            down += f * d
            east -= f * dx
            north -= f * dy
        out[0, target], out[1, target] = factor * down, factor * east
        out[2, target] = factor * north


@njit(cache=True, fastmath=True, parallel=True, error_model="numpy")
def _tiles(out, tx, ty, x, y, depth, moments, poisson, width):  # type: ignore[no-untyped-def]
    factor = (1.0 - poisson) / np.pi
    blocks, steps, cells = moments.shape
    for tile in prange(-(-tx.size // width)):
        first = tile * width
        count = min(width, tx.size - first)
        px, py = tx[first:first + count], ty[first:first + count]
        influence = np.empty((cells, 3 * count))
        product, total = np.empty((steps, 3 * count)), np.zeros((steps, 3 * count))
        for block in range(blocks):
            for cell in range(cells):
                cx, cy = x[block * cells + cell], y[block * cells + cell]
                d = depth[block * cells + cell]
                row = influence[cell]
                for n in range(count):
                    dx, dy = px[n] - cx, py[n] - cy
                    far2 = dx * dx + dy * dy + d * d
                    f = factor / (far2 * np.sqrt(far2))
                    row[n], row[count + n], row[2 * count + n] = f * d, -f * dx, -f * dy
            np.dot(moments[block], influence, product)
            total += product
        for step in range(steps):
            for c in range(3):
                out[step, c, first:first + count] = total[step, c * count:(c + 1) * count]
