"""Hankel transforms of surface kernels: from wavenumber to radius, by Gauss-Legendre panels.

An axially symmetric field over a layered earth is

    downward(r) =  1/(2 pi) int W(k) J0(k r) k^p dk,
    outward(r)  = -1/(2 pi) int U(k) J1(k r) k^p dk,

with p = 1 for sources of volume and p = 0 for a vertical force (U is counted inward). The kernels
given here must decay: the integral stops at an upper wavenumber where they are below rounding.
The panels are no longer than the kernel's own length nor than two radians of the Bessel function
at the largest radius; twelve points a panel then leave rounding errors only.
"""

from __future__ import annotations

from math import ceil, pi

import numpy as np
from numpy.typing import NDArray
from scipy.special import j0, j1

__all__ = ["PANEL_POINTS", "nodes", "to_displacement", "to_gradient"]

Array = NDArray[np.float64]

PANEL_POINTS = 12
_KERNEL_PANELS = 16  # over the decay of the kernel, when the radius is small
_PHASE_PER_PANEL = 6.0  # radians of J0(k r) in one panel: 12 points err by 1e-15 of its size


def nodes(upper: float, largest_radius: float) -> tuple[Array, Array]:
    """Nodes and weights of the wavenumber integral from 0 to `upper`.

    Parameters
    ----------
    upper : float [1/m]
        Where the kernels have decayed.
    largest_radius : float [m]
        The panels resolve the oscillation of the Bessel functions out to here.

    Returns
    -------
    wavenumber, weight : ndarray (n,) [1/m]
    """
    panels = max(_KERNEL_PANELS, ceil(upper * largest_radius / _PHASE_PER_PANEL))
    x, w = np.polynomial.legendre.leggauss(PANEL_POINTS)
    half = 0.5 * upper / panels
    centres = half * (2.0 * np.arange(panels) + 1.0)
    return (centres[:, None] + half * x).ravel(), np.tile(half * w, panels)


def to_displacement(
    wavenumber: Array, weight: Array, vertical: Array, inward: Array, radius: Array
) -> tuple[Array, Array]:
    """Displacement at every radius for every column of kernels.

    Parameters
    ----------
    wavenumber, weight : ndarray (n,) [1/m]
        From `nodes`.
    vertical, inward : ndarray (n, m)
        W k^p and U k^p at the nodes, one column per source depth.
    radius : ndarray (q,) [m]

    Returns
    -------
    outward, downward : ndarray (q, m)
    """
    phase = radius[:, None] * wavenumber
    w = weight[:, None] / (2.0 * pi)
    return -j1(phase) @ (inward * w), j0(phase) @ (vertical * w)


def to_gradient(
    wavenumber: Array, weight: Array, vertical: Array, inward: Array, radius: Array
) -> tuple[Array, Array, Array]:
    """Radial derivatives; arguments as `to_displacement`.

    Returns
    -------
    outward_by_radius, outward_over_radius, downward_by_radius : ndarray (q, m)
        d u_r/dr, u_r/r and d u_z/dr; right at r = 0, where J1(x)/x is 1/2.
    """
    phase = radius[:, None] * wavenumber
    w = (wavenumber * weight / (2.0 * pi))[:, None]
    first = j1(phase)
    ratio = np.divide(first, phase, out=np.full_like(phase, 0.5), where=phase > 1e-8)
    hoop = -ratio @ (inward * w)
    radial = -(j0(phase) - ratio) @ (inward * w)
    return radial, hoop, -first @ (vertical * w)
