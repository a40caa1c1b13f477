"""How many Gauss-Legendre points stand for a finite cell, seen from the surface."""

from __future__ import annotations

from functools import lru_cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

from subside.earth.inputs import require_known, require_positive

__all__ = ["gauss_order", "gauss_reach"]

# (factor, power) of the measured bound factor n^power rho^-2n; see `gauss_order`.
_BOUND = {
    ("horizontal", "displacement"): (7.0, 1.0),
    ("vertical", "displacement"): (4.0, 1.0),
    ("horizontal", "gradient"): (12.0, 2.0),
    ("vertical", "gradient"): (9.0, 2.0),
}
_DIRECTIONS = 3.0  # the errors of two horizontal directions and the vertical one add up


def gauss_order(
    half_size: ArrayLike,
    distance: ArrayLike,
    tolerance: float,
    direction: str = "horizontal",
    quantity: str = "displacement",
) -> NDArray[np.int64]:
    """Gauss points per direction that keep a cell's surface field within `tolerance`.

    Parameters
    ----------
    half_size : array_like [m]
        Half the cell's length along the direction; broadcast with `distance`.
    distance : array_like [m]
        Depth of the cell's top (its face nearest to the surface).
    tolerance : float [-]
        Largest error anywhere on the surface over the largest value anywhere of the cell's own
        field, all three directions taken together when each has its own order from here.
    direction : {"horizontal", "vertical"}
    quantity : {"displacement", "gradient"}

    Returns
    -------
    ndarray of int, the broadcast shape

    Raises
    ------
    InputError
        Unknown words, a size below zero, a distance or tolerance not above zero (a cell that
        reaches the surface has no such order: use the exact box).

    Notes
    -----
    Gauss quadrature of a function whose nearest singularity lies on the Bernstein ellipse of sum
    of half-axes rho errs as rho^-2n. Seen from the surface above a cell with delta =
    distance/half_size, the singularity is at i delta for a horizontal direction and at
    -(1 + delta) for the vertical:

        horizontal rho = delta + sqrt(delta^2 + 1),
        vertical   rho = 1 + delta + sqrt((1 + delta)^2 - 1).

    Measured here (computed independently: contraction and closure, lines, squares and strips of
    20 depths, columns of half-width 0, 0.3 and 3 depths, half_size/distance 0.01 to 3, errors
    from 1 to 1e-9, points of observation out to 5 depths beyond the edge), the error of one
    direction is below

        displacement   6.8 n   rho^-2n horizontal,   4.0 n   rho^-2n vertical,
        gradient      11.8 n^2 rho^-2n horizontal,   8.9 n^2 rho^-2n vertical,

    and reaches it for closure at half_size/distance = 3 (horizontal) and for small cells
    (vertical). The order returned is the least n for which three times the bound is below the
    tolerance. Over a rigid basement the rest of the kernel is smoother in the source's place
    than this half-space part, so that the rule holds there too.
    """
    require_positive("half-size of a cell", "m", half_size, zero=True)
    require_positive("depth of the top of a cell", "m", distance)
    ratio = np.asarray(half_size, dtype=float) / np.asarray(distance, dtype=float)
    most = 8
    reach = gauss_reach(most, tolerance, direction, quantity)
    while ratio.size and ratio.max() > reach[-1]:
        most *= 2
        reach = gauss_reach(most, tolerance, direction, quantity)
    return np.asarray(1 + np.searchsorted(reach, ratio), dtype=np.int64)


@lru_cache(maxsize=64)
def gauss_reach(most: int, tolerance: float, direction: str,
                quantity: str) -> NDArray[np.float64]:
    """Largest half_size/distance for which 1, 2, ... `most` Gauss points do; see `gauss_order`.

    Returns
    -------
    ndarray (most,)
        Ascending, read-only.

    Raises
    ------
    InputError
        As `gauss_order`.
    """
    require_known("direction", direction, ("horizontal", "vertical"))
    require_known("quantity", quantity, ("displacement", "gradient"))
    require_positive("tolerance", "-", tolerance)
    factor, power = _BOUND[direction, quantity]
    n = np.arange(1, most + 1)
    # ln rho is asinh(delta) across and acosh(1 + delta) down; it must reach half of this
    decay = np.maximum(np.log(_DIRECTIONS * factor * n**power / tolerance) / n, 0.0)
    across = direction == "horizontal"
    with np.errstate(divide="ignore"):
        # 2 sinh(x/2)^2 is cosh(x) - 1
        reach = 1.0 / (np.sinh(0.5 * decay) if across else 2.0 * np.sinh(0.25 * decay) ** 2)
    reach = np.maximum.accumulate(reach)  # at tolerances above 1 a larger n may do worse
    reach.flags.writeable = False
    return reach
