"""Radial tables: the kernel of any earth model, computed once per run.

A kernel is tabulated at Chebyshev depths of the sources and over asinh(radius/depth), where it is
smooth whatever the depth, as cubic splines. The number of radii, then that of depths, grows until
values between the nodes agree with the earth model itself.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from subside.errors import InputError
from subside.superposition.interface import Bodies, Targets

__all__ = ["RadialTable"]

_ACCURACY = 1e-8
_MAX_DEPTHS = 64
_RADII = (400, 800, 1600)


@dataclass(frozen=True)
class RadialTable:
    """Cubic pieces of a kernel; see `tiles._fill_table` for their order.

    Attributes
    ----------
    depths, weights : array (nd,)
        Depth nodes in m and their barycentric weights.
    step : float
        Width of an interval in asinh(radius/depth).
    coefficients : array (nd, function, interval, 4)
    error : float
        Largest difference from the earth model between the nodes, over the kernel's own maximum.
    """

    depths: np.ndarray
    weights: np.ndarray
    step: float
    coefficients: np.ndarray
    error: float

    @classmethod
    def covering(cls, earth: Any, source: str, bodies: Bodies, cells: np.ndarray,
                 targets: Targets, gradient: bool) -> RadialTable:
        """A table that reaches every chosen cell from every surface target."""
        low = np.full(3, np.inf)
        high = np.full(3, -np.inf)
        for start in range(0, cells.size, 50_000):
            corners = bodies.corners(cells[start:start + 50_000])
            low = np.minimum(low, corners.min(axis=(0, 1)))
            high = np.maximum(high, corners.max(axis=(0, 1)))
        surface = targets.at_surface
        reach_x = max(high[0] - targets.x[surface].min(), targets.x[surface].max() - low[0])
        reach_y = max(high[1] - targets.y[surface].min(), targets.y[surface].max() - low[1])
        return cls.build(earth, source, float(low[2]), float(high[2]),
                         float(np.hypot(reach_x, reach_y)), gradient)

    @classmethod
    def build(cls, earth: Any, source: str, shallow: float, deep: float, reach: float,
              gradient: bool) -> RadialTable:
        """A table for source depths `shallow` to `deep` and radii up to `reach` (m).

        Raises
        ------
        InputError
            If no affordable table stands for the earth model: its kernel is not smooth.
        """
        top = float(np.arcsinh(1.01 * reach / shallow))
        if deep - shallow < 1e-9 * deep:
            shallow, deep = shallow * (1 - 1e-9), deep * (1 + 1e-9)
        # radii first, on the two outermost depths alone: cheap, and the rest needs no second try
        ends = np.array([shallow, deep])
        for radii in _RADII:
            table = cls._at(earth, source, ends, np.array([1.0, -1.0]), ends, top, radii, gradient)
            if table.error < 0.5 * _ACCURACY:
                break
        count = 6
        while count <= _MAX_DEPTHS and (count > 6 or table.error < 0.5 * _ACCURACY):
            angle = (2 * np.arange(count) + 1) * np.pi / (2 * count)
            depths = 0.5 * (shallow + deep) - 0.5 * (deep - shallow) * np.cos(angle)
            weights = np.sin(angle) * (-1.0) ** np.arange(count)
            table = cls._at(earth, source, depths, weights, 0.5 * (depths[1:] + depths[:-1]), top,
                            radii, gradient)
            if table.error < _ACCURACY:
                return table
            count *= 2
        raise InputError(f"earth model '{earth.name}': its {source} kernel cannot be tabulated to "
                         f"{_ACCURACY:g} (reached {table.error:.1g}) for sources {shallow:g} to "
                         f"{deep:g} m deep; it must be smooth in radius and depth there.")

    @classmethod
    def _at(cls, earth: Any, source: str, depths: np.ndarray, weights: np.ndarray,
            check_depth: np.ndarray, top: float, radii: int, gradient: bool) -> RadialTable:
        """A table on given depths, and its error halfway between its radii at `check_depth`."""
        grid = np.linspace(0.0, top, radii + 1)
        values = _kernel(earth, source, grid, depths, gradient)
        from scipy.interpolate import CubicSpline  # late: it takes longer than most runs need it

        spline = CubicSpline(grid, values, axis=2)
        # pieces in s = (place in the interval, 0 to 1), so that the step is not needed again
        scale = (grid[1] - grid[0]) ** np.arange(3, -1, -1)
        pieces = np.moveaxis(spline.c, (0, 1), (-1, -2)) * scale
        table = cls(depths, weights, float(grid[1]), np.ascontiguousarray(pieces), 0.0)
        check_grid = 0.5 * (grid[1:] + grid[:-1])[::7]
        truth = _kernel(earth, source, check_grid, check_depth, gradient)
        guess = table.values(check_grid, check_depth)
        peak = np.abs(values).max(axis=(0, 2), keepdims=True)
        error = float((np.abs(guess - truth) / np.where(peak > 0, peak, 1.0)).max())
        return cls(depths, weights, table.step, table.coefficients, error)

    def values(self, grid: np.ndarray, depth: np.ndarray) -> np.ndarray:
        """The scaled kernel (depth, function, grid) off the nodes."""
        gap = depth[:, None] - self.depths[None, :]
        share = self.weights / np.where(gap == 0.0, 1e-300, gap)
        share /= share.sum(axis=1, keepdims=True)
        place = grid / self.step
        k = np.minimum(place.astype(int), self.coefficients.shape[2] - 1)
        s = (place - k)[:, None]
        c = self.coefficients[:, :, k, :]
        value = ((c[..., 0] * s[:, 0] + c[..., 1]) * s[:, 0] + c[..., 2]) * s[:, 0] + c[..., 3]
        return np.asarray(np.einsum("dn,nfg->dfg", share, value))


def _kernel(earth: Any, source: str, grid: np.ndarray, depths: np.ndarray,
            gradient: bool) -> np.ndarray:
    """(depth, function, grid): outward, downward times depth^2, and slopes times depth^3."""
    depth = depths[:, None]
    radius = np.sinh(grid)[None, :] * depth
    zero = np.zeros_like(radius)
    outward, down = earth.displacement(source, radius, zero, depth + zero)
    functions = [outward * depth**2, down * depth**2]
    if gradient:
        slopes = earth.gradient(source, radius, zero, depth + zero)
        functions += [slope * depth**3 for slope in slopes]
    values = np.stack([np.broadcast_to(f, radius.shape) for f in functions], axis=1)
    if not np.isfinite(values).all():
        raise InputError(f"earth model '{earth.name}': its {source} kernel is not finite for "
                         f"sources {depths.min():g} to {depths.max():g} m deep.")
    return values
