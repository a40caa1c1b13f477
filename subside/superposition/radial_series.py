"""Radial series: the kernel of any earth model as a short Chebyshev series, found once per run.

With R the distance from source to target and d the source's depth, the variables are
v = sqrt(d/R), which is 1 right above the source and falls towards 0 far away, and d. In them
kernels are smooth everywhere, on the axis too: in a homogeneous half-space the functions below are
even powers of v, the eighth at most, but for a constant. Some 25 terms stand for a kernel to 1e-6,
and a series needs no look-up.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy.fft import dct

from subside.errors import InputError
from subside.superposition.frame import chebyshev

__all__ = ["RadialSeries"]

_TERMS = (17, 33, 65, 129)
_DEPTHS = (5, 9, 17, 33, 65)
_CHECKED = 23
"""Places, on and off both ends, at which a series is compared with the earth model."""


@dataclass(frozen=True)
class RadialSeries:
    """Chebyshev series in v at some depths of the source.

    Functions, with u_r outward and u_z downward per m3: R^3 u_r/r, R^2 u_z, and with derivatives
    d R^4 (du_r/dr - u_r/r)/r^2, d R^3 (du_z/dr)/r.

    Attributes
    ----------
    low : float
        Smallest v; series are in 2 (v - low)/(1 - low) - 1.
    depths, weights : array (nd,)
        Depth nodes in m and their barycentric weights.
    terms : array (nd, function, 4 n + 1)
    error : float
        Largest difference from the earth model at places between the nodes, over the largest value
        of each function.
    """

    low: float
    depths: np.ndarray
    weights: np.ndarray
    terms: np.ndarray
    error: float

    @classmethod
    def build(cls, earth: Any, source: str, shallow: float, deep: float, reach: float,
              gradient: bool, accuracy: float) -> RadialSeries:
        """Series for source depths `shallow` to `deep` and radii up to `reach` (m).

        Raises
        ------
        InputError
            If the earth model's kernel is not finite, or not smooth enough for `accuracy`.
        """
        if deep - shallow < 1e-9 * deep:
            shallow, deep = shallow * (1 - 1e-9), deep * (1 + 1e-9)
        low = float(np.sqrt(shallow / np.hypot(shallow, reach))) * (1 - 1e-9)
        ends = np.array([shallow, deep])
        for count in _TERMS:  # on the two outermost depths alone: the rest needs no second try
            series = cls._at(earth, source, low, ends, np.array([1.0, -1.0]), ends, count, gradient)
            if series.error < 0.25 * accuracy:
                break
        if series.error < 0.25 * accuracy:
            for depths in _DEPTHS:
                nodes, weights = chebyshev(shallow, deep, depths)
                between = np.linspace(shallow, deep, 2 * depths + 1)
                series = cls._at(earth, source, low, nodes, weights, between, count, gradient)
                if series.error < 0.5 * accuracy:
                    return series._shortened(0.5 * accuracy)
        raise InputError(f"earth model '{earth.name}': its {source} kernel cannot be put as a "
                         f"series to {accuracy:g} (reached {series.error:.1g}) for sources "
                         f"{shallow:g} to {deep:g} m deep; it must be smooth in radius and depth "
                         "there.")

    @classmethod
    def _at(cls, earth: Any, source: str, low: float, depths: np.ndarray, weights: np.ndarray,
            check_depths: np.ndarray, count: int, gradient: bool) -> RadialSeries:
        """Series of `count` terms at given depths, and their error at others."""
        angle = (np.arange(count) + 0.5) * np.pi / count
        v = 0.5 * (1 + low) + 0.5 * (1 - low) * np.cos(angle)
        values = _functions(earth, source, v, depths, gradient)
        terms = dct(values, type=2, axis=2) / count
        terms[:, :, 0] *= 0.5
        series = cls(low, depths, weights, terms, 0.0)
        # the last one is as near to the axis as the quotients of the derivatives can go
        check = low + (1 - low) * np.append(np.linspace(0.0, 1.0, _CHECKED)[:-1], 1 - 1e-5)
        truth = _functions(earth, source, check, check_depths, gradient)
        peak = np.abs(values).max(axis=(0, 2))[:, None]
        gap = np.abs(series.values(check, check_depths) - truth) / np.where(peak > 0, peak, 1.0)
        return cls(low, depths, weights, terms, float(gap.max()))

    def _shortened(self, accuracy: float) -> RadialSeries:
        """Without the last terms, as far as together they are below `accuracy`."""
        size = np.abs(self.terms).max(axis=0)
        peak = np.abs(self.terms).sum(axis=2).max(axis=0)[:, None]
        tail = np.cumsum((size / np.where(peak > 0, peak, 1.0)).max(axis=0)[::-1])[::-1]
        needed = max(int((tail > accuracy).sum()), 1)
        terms = np.zeros((*self.terms.shape[:2], 4 * -(-(needed - 1) // 4) + 1))
        kept = min(needed, self.terms.shape[2])
        terms[:, :, :kept] = self.terms[:, :, :kept]
        return RadialSeries(self.low, self.depths, self.weights, terms, self.error + accuracy)

    def at(self, depth: np.ndarray) -> np.ndarray:
        """The series (depth, function, term) at any depths of the source within the nodes'."""
        gap = depth[:, None] - self.depths[None, :]
        share = self.weights / np.where(gap == 0.0, 1e-300, gap)
        share /= share.sum(axis=1, keepdims=True)
        return np.asarray(np.einsum("dn,nfk->dfk", share, self.terms))

    def values(self, v: np.ndarray, depth: np.ndarray) -> np.ndarray:
        """The functions (depth, function, v)."""
        place = 2.0 * (v - self.low) / (1.0 - self.low) - 1.0
        return np.asarray(np.polynomial.chebyshev.chebval(
            place, np.moveaxis(self.at(depth), 2, 0)))


def _functions(earth: Any, source: str, v: np.ndarray, depths: np.ndarray,
               gradient: bool) -> np.ndarray:
    """(depth, function, v), see `RadialSeries`; v below 1."""
    depth = depths[:, None] + np.zeros_like(v)[None, :]
    distance = depth / v**2
    radius = distance * np.sqrt((1.0 - v) * (1.0 + v) * (1.0 + v**2))
    zero = np.zeros_like(radius)
    outward, down = earth.displacement(source, radius, zero, depth)
    functions = [outward / radius * distance**3, down * distance**2]
    if gradient:
        along, across, slope = earth.gradient(source, radius, zero, depth)
        functions += [(along - across) / radius**2 * depth * distance**4,
                      slope / radius * depth * distance**3]
    values = np.stack([np.broadcast_to(f, radius.shape) for f in functions], axis=1)
    if not np.isfinite(values).all():
        raise InputError(f"earth model '{earth.name}': its {source} kernel is not finite for "
                         f"sources {depths.min():g} to {depths.max():g} m deep.")
    return values
