"""The compiled box formulas over arrays that broadcast, with their input checked."""

from __future__ import annotations

import numpy as np
from numba import njit
from numpy.typing import ArrayLike, NDArray

from subside.earth.box import box_depth, box_surface, box_surface_gradient, sheet_surface
from subside.earth.inputs import require_finite, require_poisson_ratio, require_positive

Array = NDArray[np.float64]


@njit(cache=True)
def _loop_surface(x0, x1, y0, y1, top, bottom, nu, out):  # type: ignore[no-untyped-def]
    for n in range(x0.size):
        out[:, n] = box_surface(x0[n], x1[n], y0[n], y1[n], top[n], bottom[n], nu)


@njit(cache=True)
def _loop_gradient(x0, x1, y0, y1, top, bottom, nu, out):  # type: ignore[no-untyped-def]
    for n in range(x0.size):
        out[:, n] = box_surface_gradient(x0[n], x1[n], y0[n], y1[n], top[n], bottom[n], nu)


@njit(cache=True)
def _loop_depth(x0, x1, y0, y1, z0, z1, z, nu, out):  # type: ignore[no-untyped-def]
    for n in range(x0.size):
        out[:, n] = box_depth(x0[n], x1[n], y0[n], y1[n], z0[n], z1[n], z[n], nu)


@njit(cache=True)
def _loop_sheet(x0, x1, y0, y1, depth, nu, out):  # type: ignore[no-untyped-def]
    for n in range(x0.size):
        out[:, n] = sheet_surface(x0[n], x1[n], y0[n], y1[n], depth[n], nu)


def boxes_surface(
    x0: ArrayLike,
    x1: ArrayLike,
    y0: ArrayLike,
    y1: ArrayLike,
    top: ArrayLike,
    bottom: ArrayLike,
    nu: float,
) -> Array:
    """`box_surface` of arrays that broadcast: ndarray (6, ...) [m per unit strain].

    Raises
    ------
    InputError
        A size that is not positive, a top above the surface, nu out of range.
    """
    return _broadcast(_loop_surface, 6, nu, (x0, x1, y0, y1, top, bottom))


def boxes_surface_gradient(
    x0: ArrayLike,
    x1: ArrayLike,
    y0: ArrayLike,
    y1: ArrayLike,
    top: ArrayLike,
    bottom: ArrayLike,
    nu: float,
) -> Array:
    """`box_surface_gradient` of arrays that broadcast: ndarray (10, ...) [per unit strain].

    Raises
    ------
    InputError
        As `boxes_surface`, and a point on the edge of a box that reaches the surface.
    """
    return _broadcast(_loop_gradient, 10, nu, (x0, x1, y0, y1, top, bottom))


def boxes_depth(
    x0: ArrayLike,
    x1: ArrayLike,
    y0: ArrayLike,
    y1: ArrayLike,
    z0: ArrayLike,
    z1: ArrayLike,
    z: ArrayLike,
    nu: float,
) -> Array:
    """`box_depth` of arrays that broadcast: ndarray (3, ...) [m per unit strain].

    Raises
    ------
    InputError
        As `boxes_surface`, and a point above the surface.
    """
    require_positive("observation depth", "m", z, zero=True)
    return _broadcast(_loop_depth, 3, nu, (x0, x1, y0, y1, z0, z1, z))


def sheets_surface(
    x0: ArrayLike, x1: ArrayLike, y0: ArrayLike, y1: ArrayLike, depth: ArrayLike, nu: float
) -> Array:
    """`sheet_surface` of arrays that broadcast: ndarray (6, ...) [m per (unit strain times m)].

    Raises
    ------
    InputError
        As `boxes_surface`; and a point on the edge of a sheet at the surface.
    """
    return _broadcast(_loop_sheet, 6, nu, (x0, x1, y0, y1, depth))


def _broadcast(loop, outputs, nu, values):  # type: ignore[no-untyped-def]
    require_poisson_ratio(nu)
    arrays = np.broadcast_arrays(*(np.asarray(v, dtype=float) for v in values))
    x0, x1, y0, y1, top = arrays[:5]
    require_positive("length of a cell along x", "m", x1 - x0)
    require_positive("length of a cell along y", "m", y1 - y0)
    require_positive("depth of the top of a cell", "m", top, zero=True)
    if len(arrays) > 5:
        require_positive("thickness of a cell", "m", arrays[5] - top)
    out = np.empty((outputs, x0.size))
    loop(*(a.ravel() for a in arrays), float(nu), out)
    require_finite(
        "A point of observation lies on the edge of a cell that reaches the surface, where the "
        "strain is infinite: move the point.",
        out,
    )
    return out.reshape((outputs, *x0.shape))
