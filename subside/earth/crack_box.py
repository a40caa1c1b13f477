"""A box that closes vertically, in a full space: the near part of a closing body underground.

A horizontal crack that closes by dV in an unbounded elastic solid moves it by (force dipoles of
Kelvin's solution)::

    u_i = dV { nu/(4 pi (1-nu)) d_i (1/R) + [delta_iz d_z (1/R) - d_i d_z d_z R/(4(1-nu))]/(2 pi) }

For a body of uniform closure the potentials 1/R and R are integrated over it. For an upright box
the third derivatives of the second are, with u, v, w corner minus point and S the signed sum over
the corners, ``-S[w ln(v+R)]``, ``-S[w ln(u+R)]`` and
``-S[u ln(v+R) + v ln(u+R) - 2 w atan(uv/(wR))]``.
"""

from __future__ import annotations

import math

import numpy as np
from numba import njit

__all__ = ["crack_box_full_space", "crack_full_space"]


@njit(cache=True)
def crack_full_space(east: float, north: float, below: float, nu: float) -> tuple[
        float, float, float]:
    """Displacement (east, north, down) per m3 closed, at a place relative to the crack.

    Parameters
    ----------
    east, north, below : float
        Target minus source, m; `below` is positive when the target is deeper.
    nu : float
        Poisson's ratio.
    """
    r2 = east * east + north * north + below * below
    r = math.sqrt(r2)
    r3 = r * r2
    # derivatives of 1/R and of R with respect to the target
    common = nu / (4 * math.pi * (1 - nu))
    third_h = -1.0 / r3 + 3 * below * below / (r3 * r2)       # d_x d_z d_z R over x
    third_v = -3.0 / r3 + 3 * below * below / (r3 * r2)       # d_z d_z d_z R over z
    factor = 1.0 / (8 * math.pi * (1 - nu))
    across = -common / r3 - factor * third_h
    down = (-common / r3 - 1.0 / (2 * math.pi * r3) - factor * third_v) * below
    return across * east, across * north, down


@njit(cache=True)
def crack_box_full_space(x0: float, x1: float, y0: float, y1: float, z0: float, z1: float,
                         nu: float) -> tuple[float, float, float]:
    """Displacement (x, y, down) of a box of unit closing strain, in the box's own axes.

    Parameters
    ----------
    x0, x1, y0, y1, z0, z1 : float
        The box relative to the target, m; z down.
    nu : float
        Poisson's ratio.

    Notes
    -----
    Finite everywhere, inside and on faces, edges and corners.
    """
    phi_x = phi_y = phi_z = 0.0
    psi_x = psi_y = psi_z = 0.0
    for a in range(2):
        u = x1 if a else x0
        for b in range(2):
            v = y1 if b else y0
            for c in range(2):
                w = z1 if c else z0
                sign = 1.0 if (a + b + c) % 2 == 1 else -1.0
                r = math.sqrt(u * u + v * v + w * w)
                log_u = _log(u, v, w, r)
                log_v = _log(v, w, u, r)
                log_w = _log(w, u, v, r)
                atan_u = math.atan(v * w / (u * r)) if u * r != 0.0 else 0.0
                atan_v = math.atan(w * u / (v * r)) if v * r != 0.0 else 0.0
                atan_w = math.atan(u * v / (w * r)) if w * r != 0.0 else 0.0
                phi_x -= sign * (v * log_w + w * log_v - u * atan_u)
                phi_y -= sign * (w * log_u + u * log_w - v * atan_v)
                phi_z -= sign * (u * log_v + v * log_u - w * atan_w)
                psi_x -= sign * w * log_v
                psi_y -= sign * w * log_u
                psi_z -= sign * (u * log_v + v * log_u - 2 * w * atan_w)
    common = nu / (4 * math.pi * (1 - nu))
    factor = 1.0 / (8 * math.pi * (1 - nu))
    return (common * phi_x - factor * psi_x, common * phi_y - factor * psi_y,
            (common + 1.0 / (2 * math.pi)) * phi_z - factor * psi_z)


@njit(cache=True)
def _log(a: float, b: float, c: float, r: float) -> float:
    """ln(a + R) up to a term that cancels between the two corners on a line along a.

    asinh(a/hypot(b, c)) is that logarithm minus ln hypot(b, c). On the line itself every factor
    that multiplies it is zero.
    """
    rho = math.sqrt(b * b + c * c)
    if rho < 1e-14 * r or rho == 0.0:
        return 0.0
    return np.arcsinh(a / rho)
