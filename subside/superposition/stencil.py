"""Stencils that carry a smooth field to and from a coarse lattice, and the bound of their error.

The ground low-passes a source at depth d by exp(-k d), so that a lattice a fraction of d wide
carries all that the surface sees. A stencil of `width` lattice nodes stands for a point between
them. Its weights are the least-squares solution, over the wavenumbers k that matter, of

    sum_j L_j(t) exp(i k (x_j - t)) = 1,   each row weighted by k d exp(-k d),

among weights that sum to one exactly (k exp(-k d) is what a row counts for in the plane). They are
stored as polynomials in the offset t.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property, lru_cache

import numpy as np
from numba import njit

__all__ = ["RATIOS", "WIDTHS", "Stencil", "coarsest", "stencil_into"]

WIDTHS = (4, 6, 8, 10, 12)
RATIOS = (5.0, 6.0, 7.0, 8.0, 9.0, 10.0, 11.0, 12.0, 14.0, 16.0, 20.0,
          24.0, 28.0)
"""Depth of the shallowest source over the spacing."""
_ROWS = 60
_REACH = 25.0
"""Largest k d of the least-squares rows: beyond it k d exp(-k d) is below 1e-9."""


@dataclass(frozen=True)
class Stencil:
    """Weights of `width` nodes for a point at offset t from the middle of the two central ones.

    Attributes
    ----------
    ratio : float
        Depth of the shallowest source over the lattice spacing.
    coefficients : array (width, degree + 1)
        Polynomials in t, highest power first; t in units of the spacing, -1/2 to 1/2.
    """

    ratio: float
    coefficients: np.ndarray

    @classmethod
    @lru_cache(maxsize=128)
    def of(cls, width: int, ratio: float) -> Stencil:
        """The stencil of an even width, for sources at least `ratio` spacings deep."""
        degree = width + 4
        offsets = 0.5 * np.cos(np.pi * (2 * np.arange(degree + 1) + 1) / (2 * degree + 2))
        weights = np.stack([_least_squares(width, ratio, t) for t in offsets])
        powers = np.vander(offsets, degree + 1)
        return cls(ratio, np.ascontiguousarray(np.linalg.solve(powers, weights).T))

    @property
    def width(self) -> int:
        """Nodes along one axis."""
        return self.coefficients.shape[0]

    def weights(self, offset: np.ndarray) -> np.ndarray:
        """(n, width) of offsets (n,)."""
        value = np.zeros((offset.size, self.width))
        for column in self.coefficients.T:
            value = value * offset[:, None] + column
        return value

    def symbol(self, wavenumber: np.ndarray, offset: np.ndarray) -> np.ndarray:
        """What the stencil makes of exp(i k x) over exp(i k x) itself: (offset, *wavenumber.shape).

        `wavenumber` is in radians per spacing. Exact would be 1.
        """
        gap = _nodes(self.width) - offset[:, None]
        phase = np.exp(1j * np.multiply.outer(gap, wavenumber))
        return np.asarray(np.einsum("tj,tj...->t...", self.weights(offset), phase))

    @cached_property
    def bounds(self) -> tuple[float, float]:
        """Largest error of one source at the shallowest depth: of displacement, of its derivatives.

        Relative to the largest value of that source's own field (for the derivatives, to the
        smaller of the largest slope and the largest strain), for spreading or for resampling once.

        With S = A(kx, tx) A(ky, ty) - 1 the error symbol in two directions, it is

            max over tx, ty of (1/2 pi) integral |S| F(k) k^n dk dtheta / peak,

        n = 1 for displacement and 2 for derivatives, F = exp(-k d) for contraction and
        (1 + k d) exp(-k d) for closure; the larger of the two is taken.
        """
        x, measure = np.polynomial.legendre.leggauss(64)
        reach = 45.0  # exp(-45) is below the rounding of the result
        kd = 0.5 * reach * (x + 1)
        measure = 0.5 * reach * measure * np.exp(-kd)
        angle = np.pi * (np.arange(12) + 0.5) / 12
        offset = np.linspace(0.0, 0.5, 5)
        east = self.symbol(np.outer(kd, np.cos(angle)) / self.ratio, offset)
        north = self.symbol(np.outer(kd, np.sin(angle)) / self.ratio, offset)
        wrong = np.abs(east[:, None] * north[None, :] - 1.0).mean(axis=3)
        # integrals of F k^n and peaks of the point source's field at unit depth: 1 and 3 for
        # displacement; slopes 3 r/(1+r^2)^(5/2) at r = 1/2 and 15 r/(1+r^2)^(7/2) at r = 1/sqrt 6,
        # strain at the axis 1 and 3
        worst = [
            [wrong @ (measure * kd), wrong @ (measure * (1 + kd) * kd) / 3.0],
            [wrong @ (measure * kd**2) / 0.8587, wrong @ (measure * (1 + kd) * kd**2) / 3.0],
        ]
        return float(np.max(worst[0])), float(np.max(worst[1]))


def coarsest(width: int, tolerance: float, gradient: bool) -> Stencil | None:
    """The stencil of a width on the coarsest lattice that keeps its bound; None without one."""
    for ratio in RATIOS:
        stencil = Stencil.of(width, ratio)
        if stencil.bounds[1 if gradient else 0] <= tolerance:
            return stencil
    return None


@njit(cache=True, nogil=True, fastmath={"contract"})
def stencil_into(out: np.ndarray, coefficients: np.ndarray, offset: float) -> None:
    """Weights at one offset, from coefficients with powers first and nodes last."""
    out[:] = coefficients[0]
    for k in range(1, coefficients.shape[0]):
        for j in range(out.size):
            out[j] = out[j] * offset + coefficients[k, j]


def _nodes(width: int) -> np.ndarray:
    return np.arange(width) - 0.5 * (width - 1)


def _least_squares(width: int, ratio: float, offset: float) -> np.ndarray:
    """Weights at one offset, summing to one by construction."""
    wavenumber = np.linspace(0.0, min(_REACH / ratio, 8.0), _ROWS)
    importance = wavenumber * ratio * np.exp(-wavenumber * ratio)
    phase = np.outer(wavenumber, _nodes(width) - offset)
    rows = np.concatenate([np.cos(phase), np.sin(phase)]) * np.tile(importance, 2)[:, None]
    right = np.concatenate([importance, np.zeros(_ROWS)])
    # a basis of all weights that sum to zero, around equal weights
    basis = np.linalg.qr(np.column_stack([np.ones(width), np.eye(width)[:, 1:]]))[0][:, 1:]
    start = np.full(width, 1.0 / width)
    free = np.linalg.lstsq(rows @ basis, right - rows @ start, rcond=None)[0]
    return np.asarray(start + basis @ free)
