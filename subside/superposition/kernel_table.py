"""Kernels of one band on its lattice, in real space, and their product with the moments.

A kernel is tabulated at all distances between nodes and transformed: no periodic images, and any
earth model comes in through its radial table. Each component is even or odd in x and in y, so a
quarter of the plane and real numbers are enough.
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np
from numba import njit, prange
from scipy.fft import dct, dst

from subside.earth.half_space import (
    closure_over_r2,
    closure_slopes_over_r2,
    contraction_over_r2,
    contraction_slopes_over_r2,
)
from subside.superposition.frame import Frame
from subside.superposition.table import RadialTable

__all__ = ["ODD", "apply_kernels", "kernel_spectra"]

ODD = np.array([(0, 0), (1, 0), (0, 1), (1, 0), (0, 1), (0, 0), (0, 0), (1, 1)], dtype=np.int64)
"""Whether each component (`DISPLACEMENT`, then `GRADIENT`) is odd in x, in y."""


def kernel_spectra(earth: Any, source: str, frame: Frame, components: int,
                   workers: int) -> np.ndarray:
    """Spectra of the kernels of one source kind, a quarter of the plane.

    Returns
    -------
    array (ky, kx, component, depth node)
        Real; `apply_kernels` knows the signs and the factor -i of components odd in one direction.
    """
    rows, columns = frame.y.length // 2 + 1, frame.x.length // 2 + 1
    x, y = np.arange(columns) * frame.x.spacing, np.arange(rows) * frame.y.spacing
    poisson = earth.homogeneous_poisson_ratio
    mixed, step = np.zeros((frame.depths.size, 1, 1, 4)), 1.0
    if poisson is None:
        reach = float(np.hypot(x[-1], y[-1]))
        table = RadialTable.build(earth, source, float(frame.depths[0]), float(frame.depths[-1]),
                                  reach, components > 3)
        mixed, step = _pieces_at(table, frame.depths), table.step
    spectra = np.empty((rows, columns, components, frame.depths.size))
    plane = np.empty((components, rows, columns))
    for n, depth in enumerate(frame.depths):
        if poisson is None:
            _table_planes(plane, x, y, depth, mixed[n], step)
        else:
            _half_space_planes(plane, x, y, depth, source == "closure", poisson)
        for c in range(components):
            half = _half_transform(plane[c], bool(ODD[c, 0]), 1, workers)
            sign = -1.0 if ODD[c].all() else 1.0
            spectra[:, :, c, n] = sign * _half_transform(half, bool(ODD[c, 1]), 0, workers)
    return spectra


def _half_transform(values: np.ndarray, odd: bool, axis: int, workers: int) -> np.ndarray:
    """The Fourier transform of a periodic even or odd sequence from its half, without the -i."""
    if not odd:
        return np.asarray(dct(values, type=1, axis=axis, workers=workers))
    result = np.zeros_like(values)
    inner = (slice(None),) * axis + (slice(1, -1),)
    result[inner] = dst(values[inner], type=1, axis=axis, workers=workers)
    return result


def _pieces_at(table: RadialTable, depths: np.ndarray) -> np.ndarray:
    """The table's cubic pieces at given depths, by barycentric interpolation."""
    gap = depths[:, None] - table.depths[None, :]
    share = table.weights / np.where(gap == 0.0, 1e-300, gap)
    share /= share.sum(axis=1, keepdims=True)
    return np.asarray(np.einsum("dn,n...->d...", share, table.coefficients))


@njit(cache=True, parallel=True, error_model="numpy")
def _half_space_planes(out: np.ndarray, x: np.ndarray, y: np.ndarray, depth: float, closure: bool,
                       poisson: float) -> None:
    """Components at offsets (y, x) from a unit source in a homogeneous half-space."""
    for row in prange(y.size):
        for col in range(x.size):
            r2 = x[col] * x[col] + y[row] * y[row]
            if closure:
                outward, down = closure_over_r2(r2, depth)
                bend, slope = closure_slopes_over_r2(r2, depth)[1:]
            else:
                outward, down = contraction_over_r2(r2, depth, poisson)
                bend, slope = contraction_slopes_over_r2(r2, depth, poisson)[1:]
            _components(out, row, col, x[col], y[row], outward, down, bend, slope)


@njit(cache=True, parallel=True, error_model="numpy")
def _table_planes(out: np.ndarray, x: np.ndarray, y: np.ndarray, depth: float, pieces: np.ndarray,
                  step: float) -> None:
    """The same from cubic pieces `(function, interval, 4)` over asinh(radius/depth)."""
    functions, intervals = pieces.shape[0], pieces.shape[1]
    for row in prange(y.size):
        value = np.empty(functions)
        for col in range(x.size):
            r = math.hypot(x[col], y[row])
            place = math.asinh(r / depth) / step
            k = min(int(place), intervals - 1)
            s = place - k
            for f in range(functions):
                p = pieces[f, k]
                value[f] = ((p[0] * s + p[1]) * s + p[2]) * s + p[3]
            scale = 1.0 / (depth * depth)
            inverse = 1.0 / r if r > 0.0 else 0.0
            outward = value[0] * scale * inverse
            bend, slope = 0.0, 0.0
            if functions > 2:
                # u_r/r from its own function: right on the axis too
                outward = value[3] * scale / depth
                bend = (value[2] - value[3]) * scale / depth * inverse * inverse
                slope = value[4] * scale / depth * inverse
            _components(out, row, col, x[col], y[row], outward, value[1] * scale, bend, slope)


@njit(cache=True)
def _components(out: np.ndarray, row: int, col: int, x: float, y: float, outward: float,
                down: float, bend: float, slope: float) -> None:
    """From (u_r/r, u_z) and the slopes of `contraction_slopes_over_r2` to the components."""
    out[0, row, col] = down
    out[1, row, col] = outward * x
    out[2, row, col] = outward * y
    if out.shape[0] > 3:
        out[3, row, col] = slope * x
        out[4, row, col] = slope * y
        out[5, row, col] = outward + bend * x * x
        out[6, row, col] = outward + bend * y * y
        out[7, row, col] = bend * x * y


@njit(cache=True, parallel=True, fastmath={"contract"})
def apply_kernels(field: np.ndarray, moments: np.ndarray, kernels: np.ndarray,
                  odd: np.ndarray) -> None:
    """Sum over the depth nodes of kernel times moments, in Fourier space.

    Parameters
    ----------
    field : array (ky, kx, component, 2 time), overwritten
        Real and imaginary parts in turn.
    moments : array (ky, kx, node and source, 2 time)
    kernels : array (half of ky, kx, component, node and source)
    odd : array (component, 2)
    """
    rows, columns, components, parts = field.shape
    for row in prange(rows):
        mirrored = row > rows // 2
        # the loop's own counter is unsigned, and its differences would be floats
        k = rows - np.int64(row) if mirrored else np.int64(row)
        total = np.empty(parts, dtype=field.dtype)
        for col in range(columns):
            for c in range(components):
                total[:] = 0.0
                for n in range(moments.shape[2]):
                    kernel = kernels[k, col, c, n]
                    for t in range(parts):
                        total[t] += kernel * moments[row, col, n, t]
                sign = field.dtype.type(-1.0 if mirrored and odd[c, 1] == 1 else 1.0)
                if odd[c, 0] != odd[c, 1]:  # times -i
                    for t in range(0, parts, 2):
                        field[row, col, c, t] = sign * total[t + 1]
                        field[row, col, c, t + 1] = -sign * total[t]
                else:
                    for t in range(parts):
                        field[row, col, c, t] = sign * total[t]
