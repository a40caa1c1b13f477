"""Point sources in a homogeneous elastic half-space, in closed form, per unit strength.

Three sources on the axis r = 0 at depth c, seen at radius r and depth z (down positive):

contraction
    The nucleus of strain (centre of compression). Strength: the volume dV [m3] that the rock
    would lose under uniaxial conditions. Mindlin & Cheng (1950), J. Appl. Phys. 21:931;
    Sen (1950); Geertsma (1973), J. Petrol. Technol. 25:734.
closure
    A horizontal crack that closes by the volume dV [m3] and does nothing else: the horizontal
    tensile source of Okada (1985), BSSA 75:1135, and Okada (1992), BSSA 82:1018, with its sign
    turned.
vertical_force
    A buried force [N], down positive. Mindlin (1936), Physics 7:195.

With R1^2 = r^2 + (z-c)^2 and R2^2 = r^2 + (z+c)^2 every displacement is r P (outward) and Q
(down), where P and Q are sums of powers of 1/R1 and 1/R2; the gradients follow from
d/dr R^-n = -n r R^-(n+2). "Outward" is positive away from the axis, so the ground that moves
toward a shrinking source has a negative outward displacement.

The scalar kernels are compiled and meant to be called from compiled loops. They check nothing.
`displacement` and `gradient` take arrays and check their input.
"""

from __future__ import annotations

from math import pi
from typing import Any

import numpy as np
from numba import njit
from numpy.typing import ArrayLike, NDArray

from subside.earth.inputs import (
    require_finite,
    require_known,
    require_poisson_ratio,
    require_positive,
)
from subside.errors import InputError

__all__ = [
    "SOURCES",
    "closure_depth",
    "closure_depth_gradient",
    "closure_over_r2",
    "closure_slopes_over_r2",
    "closure_surface",
    "closure_surface_gradient",
    "contraction_depth",
    "contraction_depth_gradient",
    "contraction_over_r2",
    "contraction_slopes_over_r2",
    "contraction_surface",
    "contraction_surface_gradient",
    "displacement",
    "gradient",
    "vertical_force_depth",
    "vertical_force_depth_gradient",
    "vertical_force_surface",
    "vertical_force_surface_gradient",
    "volume_ratio",
]

Array = NDArray[np.float64]

SOURCES = ("contraction", "closure", "vertical_force")

# "contract" only lets the compiler fuse a multiplication with an addition; NaN and the order of
# sums keep their meaning. Division by zero gives an infinity, as in numpy.
_COMPILED: dict[str, Any] = {"cache": True, "fastmath": {"contract"}, "error_model": "numpy"}


@njit(**_COMPILED)
def contraction_over_r2(r2, c, nu):  # type: ignore[no-untyped-def]
    """(outward/r, downward) at the surface per m3 of contraction, from r^2: no root, no axis."""
    d2 = r2 + c * c
    f = (1.0 - nu) / (pi * d2 * np.sqrt(d2))
    return -f, f * c


@njit(**_COMPILED)
def closure_over_r2(r2, c):  # type: ignore[no-untyped-def]
    """(outward/r, downward) at the surface per m3 of closure, from r^2."""
    d2 = r2 + c * c
    f = 1.5 * c * c / (pi * d2 * d2 * np.sqrt(d2))
    return -f, f * c


@njit(**_COMPILED)
def contraction_slopes_over_r2(r2, c, nu):  # type: ignore[no-untyped-def]
    """Slopes at the surface per m3 of contraction, from r^2; finite on the axis.

    Returns (q, t, s): the horizontal strain tensor is q I + t r r^T, the slope of the downward
    movement is s r, with r the horizontal vector from the source to the target.
    """
    d2 = r2 + c * c
    f = (1.0 - nu) / (pi * d2 * np.sqrt(d2))
    return -f, 3.0 * f / d2, -3.0 * f * c / d2


@njit(**_COMPILED)
def closure_slopes_over_r2(r2, c):  # type: ignore[no-untyped-def]
    """Slopes at the surface per m3 of closure; as `contraction_slopes_over_r2`."""
    d2 = r2 + c * c
    f = 1.5 * c * c / (pi * d2 * d2 * np.sqrt(d2))
    return -f, 5.0 * f / d2, -5.0 * f * c / d2


@njit(**_COMPILED)
def contraction_surface(r, c, nu):  # type: ignore[no-untyped-def]
    """Surface displacement (outward, downward) [m] per m3 of contraction at depth c [m]."""
    over_r, downward = contraction_over_r2(r * r, c, nu)
    return over_r * r, downward


@njit(**_COMPILED)
def closure_surface(r, c):  # type: ignore[no-untyped-def]
    """Surface displacement (outward, downward) [m] per m3 of closure at depth c [m].

    Whatever Poisson's ratio is.
    """
    over_r, downward = closure_over_r2(r * r, c)
    return over_r * r, downward


@njit(**_COMPILED)
def vertical_force_surface(r, c, nu, shear_modulus):  # type: ignore[no-untyped-def]
    """Surface displacement (outward, downward) [m] per newton of downward force at depth c [m]."""
    d2 = r * r + c * c
    d = np.sqrt(d2)
    f = 1.0 / (4.0 * pi * shear_modulus * d)
    return -f * r * (c / d2 + (1.0 - 2.0 * nu) / (d + c)), f * (2.0 * (1.0 - nu) + c * c / d2)


@njit(**_COMPILED)
def contraction_surface_gradient(r, c, nu):  # type: ignore[no-untyped-def]
    """Radial derivatives [1/m2] of `contraction_surface`.

    Returns (outward_by_radius, outward_over_radius, downward_by_radius) =
    (d u_r/dr, u_r/r, d u_z/dr); right on the axis too.
    """
    q, t, s = contraction_slopes_over_r2(r * r, c, nu)
    return q + t * r * r, q, s * r


@njit(**_COMPILED)
def closure_surface_gradient(r, c):  # type: ignore[no-untyped-def]
    """Radial derivatives [1/m2] of `closure_surface`; as `contraction_surface_gradient`."""
    q, t, s = closure_slopes_over_r2(r * r, c)
    return q + t * r * r, q, s * r


@njit(**_COMPILED)
def vertical_force_surface_gradient(r, c, nu, shear_modulus):  # type: ignore[no-untyped-def]
    """Radial derivatives [1/N] of `vertical_force_surface`; as `contraction_surface_gradient`."""
    d2 = r * r + c * c
    d = np.sqrt(d2)
    f = 1.0 / (4.0 * pi * shear_modulus * d)
    m = 1.0 - 2.0 * nu
    p = -f * (c / d2 + m / (d + c))
    slope = f * r * r * (3.0 * c / (d2 * d2) + m * (2.0 * d + c) / (d2 * (d + c) * (d + c)))
    return p + slope, p, -f * r / d2 * (2.0 * (1.0 - nu) + 3.0 * c * c / d2)


@njit(**_COMPILED)
def contraction_depth(r, z, c, nu):  # type: ignore[no-untyped-def]
    """Displacement (outward, downward) [m] at depth z [m] per m3 of contraction at depth c [m]."""
    kappa = 3.0 - 4.0 * nu
    h = z - c
    s = z + c
    i1 = 1.0 / (r * r + h * h)
    i2 = 1.0 / (r * r + s * s)
    a3 = i1 * np.sqrt(i1)
    b3 = i2 * np.sqrt(i2)
    b5 = b3 * i2
    f = -0.25 / pi
    outward = f * r * (a3 + kappa * b3 - 6.0 * z * s * b5)
    return outward, f * (h * a3 - (kappa * s - 2.0 * z) * b3 - 6.0 * z * s * s * b5)


@njit(**_COMPILED)
def contraction_depth_gradient(r, z, c, nu):  # type: ignore[no-untyped-def]
    """Radial derivatives [1/m2] of `contraction_depth`; as `contraction_surface_gradient`."""
    kappa = 3.0 - 4.0 * nu
    h = z - c
    s = z + c
    i1 = 1.0 / (r * r + h * h)
    i2 = 1.0 / (r * r + s * s)
    a3 = i1 * np.sqrt(i1)
    b3 = i2 * np.sqrt(i2)
    a5 = a3 * i1
    b5 = b3 * i2
    b7 = b5 * i2
    f = -0.25 / pi
    p = f * (a3 + kappa * b3 - 6.0 * z * s * b5)
    slope = f * r * r * (-3.0 * a5 - 3.0 * kappa * b5 + 30.0 * z * s * b7)
    downward = f * r * (-3.0 * h * a5 + 3.0 * (kappa * s - 2.0 * z) * b5 + 30.0 * z * s * s * b7)
    return p + slope, p, downward


@njit(**_COMPILED)
def closure_depth(r, z, c, nu):  # type: ignore[no-untyped-def]
    """Displacement (outward, downward) [m] at depth z [m] per m3 of closure at depth c [m].

    The crack of the full space, its image (which frees the surface of shear) and the half-space
    solution that takes away the normal traction left over, all from the potential 1/R.
    """
    m = 1.0 - 2.0 * nu
    h = z - c
    s = z + c
    i1 = 1.0 / (r * r + h * h)
    i2 = 1.0 / (r * r + s * s)
    a3 = i1 * np.sqrt(i1)
    b3 = i2 * np.sqrt(i2)
    a5 = a3 * i1
    b5 = b3 * i2
    b7 = b5 * i2
    f = -0.125 / (pi * (1.0 - nu))
    p5 = 3.0 * s * s + 6.0 * (m * c - z) * s + 6.0 * z * c
    q5 = 3.0 * s * s * (s - 2.0 * (1.0 + m) * c - 2.0 * z) + 18.0 * z * c * s
    outward = f * r * (-m * a3 + 3.0 * h * h * a5 + m * b3 + p5 * b5 - 30.0 * z * c * s * s * b7)
    return outward, f * (
        m * h * (a3 - b3) + 3.0 * h * h * h * a5 + q5 * b5 - 30.0 * z * c * s * s * s * b7
    )


@njit(**_COMPILED)
def closure_depth_gradient(r, z, c, nu):  # type: ignore[no-untyped-def]
    """Radial derivatives [1/m2] of `closure_depth`; as `contraction_surface_gradient`."""
    m = 1.0 - 2.0 * nu
    h = z - c
    s = z + c
    i1 = 1.0 / (r * r + h * h)
    i2 = 1.0 / (r * r + s * s)
    a3 = i1 * np.sqrt(i1)
    b3 = i2 * np.sqrt(i2)
    a5 = a3 * i1
    b5 = b3 * i2
    a7 = a5 * i1
    b7 = b5 * i2
    b9 = b7 * i2
    f = -0.125 / (pi * (1.0 - nu))
    p5 = 3.0 * s * s + 6.0 * (m * c - z) * s + 6.0 * z * c
    q5 = 3.0 * s * s * (s - 2.0 * (1.0 + m) * c - 2.0 * z) + 18.0 * z * c * s
    zcs = 30.0 * z * c * s * s
    p = f * (-m * a3 + 3.0 * h * h * a5 + m * b3 + p5 * b5 - zcs * b7)
    slope = f * r * r * (
        3.0 * m * (a5 - b5) - 15.0 * h * h * a7 - 5.0 * p5 * b7 + 7.0 * zcs * b9
    )
    downward = -f * r * (
        3.0 * m * h * (a5 - b5) + 15.0 * h * h * h * a7 + 5.0 * q5 * b7 - 7.0 * zcs * s * b9
    )
    return p + slope, p, downward


@njit(**_COMPILED)
def vertical_force_depth(r, z, c, nu, shear_modulus):  # type: ignore[no-untyped-def]
    """Displacement (outward, downward) [m] at depth z [m] per newton of downward force at c [m]."""
    kappa = 3.0 - 4.0 * nu
    n = 1.0 - nu
    h = z - c
    s = z + c
    d1 = np.sqrt(r * r + h * h)
    d2 = np.sqrt(r * r + s * s)
    a3 = 1.0 / (d1 * d1 * d1)
    b3 = 1.0 / (d2 * d2 * d2)
    b5 = b3 / (d2 * d2)
    f = 1.0 / (16.0 * pi * shear_modulus * n)
    outward = f * r * (
        h * (a3 + kappa * b3)
        - 4.0 * n * (1.0 - 2.0 * nu) / (d2 * (d2 + s))
        + 6.0 * c * z * s * b5
    )
    return outward, f * (
        kappa / d1
        + (8.0 * n * n - kappa) / d2
        + h * h * a3
        + (kappa * s * s - 2.0 * c * z) * b3
        + 6.0 * c * z * s * s * b5
    )


@njit(**_COMPILED)
def vertical_force_depth_gradient(r, z, c, nu, shear_modulus):  # type: ignore[no-untyped-def]
    """Radial derivatives [1/N] of `vertical_force_depth`; as `contraction_surface_gradient`."""
    kappa = 3.0 - 4.0 * nu
    n = 1.0 - nu
    h = z - c
    s = z + c
    d1 = np.sqrt(r * r + h * h)
    d2 = np.sqrt(r * r + s * s)
    a3 = 1.0 / (d1 * d1 * d1)
    b3 = 1.0 / (d2 * d2 * d2)
    a5 = a3 / (d1 * d1)
    b5 = b3 / (d2 * d2)
    b7 = b5 / (d2 * d2)
    f = 1.0 / (16.0 * pi * shear_modulus * n)
    g = 4.0 * n * (1.0 - 2.0 * nu)
    p = f * (h * (a3 + kappa * b3) - g / (d2 * (d2 + s)) + 6.0 * c * z * s * b5)
    slope = f * r * r * (
        -3.0 * h * (a5 + kappa * b5)
        + g * (2.0 * d2 + s) * b3 / ((d2 + s) * (d2 + s))
        - 30.0 * c * z * s * b7
    )
    downward = -f * r * (
        kappa * a3
        + (8.0 * n * n - kappa) * b3
        + 3.0 * h * h * a5
        + 3.0 * (kappa * s * s - 2.0 * c * z) * b5
        + 30.0 * c * z * s * s * b7
    )
    return p + slope, p, downward


_DISPLACEMENT = {
    "contraction": contraction_depth,
    "closure": closure_depth,
    "vertical_force": vertical_force_depth,
}
_GRADIENT = {
    "contraction": contraction_depth_gradient,
    "closure": closure_depth_gradient,
    "vertical_force": vertical_force_depth_gradient,
}


def displacement(
    source: str,
    radius: ArrayLike,
    observation_depth: ArrayLike,
    source_depth: ArrayLike,
    poisson_ratio: float,
    shear_modulus: float | None = None,
) -> tuple[Array, Array]:
    """Displacement of a point source in a homogeneous half-space.

    Parameters
    ----------
    source : {"contraction", "closure", "vertical_force"}
    radius : array_like [m]
        Horizontal distance from the source; broadcast with the depths.
    observation_depth, source_depth : array_like [m]
        Below the free surface, positive down.
    poisson_ratio : float [-]
    shear_modulus : float [Pa], optional
        Needed by "vertical_force" only.

    Returns
    -------
    outward, downward : ndarray, the broadcast shape
        [m per m3 of volume] or, for the force, [m per N]. Outward is positive away from the axis.

    Raises
    ------
    InputError
        Unknown source, a depth or modulus out of range, or a point on the source itself.
    """
    return _evaluate(
        _DISPLACEMENT, source, radius, observation_depth, source_depth, poisson_ratio, shear_modulus
    )


def gradient(
    source: str,
    radius: ArrayLike,
    observation_depth: ArrayLike,
    source_depth: ArrayLike,
    poisson_ratio: float,
    shear_modulus: float | None = None,
) -> tuple[Array, Array, Array]:
    """Radial derivatives of `displacement`, at any depth; parameters and errors as there.

    Returns
    -------
    outward_by_radius, outward_over_radius, downward_by_radius : ndarray, the broadcast shape
        d u_r/dr (radial strain, extension positive), u_r/r (hoop strain), d u_z/dr (tilt),
        [1/m per m3] or, for the force, [1 per N].
    """
    return _evaluate(
        _GRADIENT, source, radius, observation_depth, source_depth, poisson_ratio, shear_modulus
    )


def _evaluate(kernels, source, radius, observation_depth, source_depth, nu, shear_modulus):  # type: ignore[no-untyped-def]
    require_known("kind of source", source, SOURCES)
    require_poisson_ratio(nu)
    require_positive("radius", "m", radius, zero=True)
    require_positive("observation depth", "m", observation_depth, zero=True)
    require_positive("source depth", "m", source_depth, zero=True)
    strength: tuple[float, ...] = ()
    if source == "vertical_force":
        if shear_modulus is None:
            raise InputError("A vertical force needs the shear modulus of the earth: give it.")
        require_positive("shear modulus", "Pa", shear_modulus)
        strength = (shear_modulus,)
    kernel = kernels[source]
    # The kernels are plain arithmetic without branches: uncompiled they take arrays as they are.
    on_arrays = getattr(kernel, "py_func", kernel)
    r, z, c = np.broadcast_arrays(
        *(np.asarray(x, dtype=float) for x in (radius, observation_depth, source_depth))
    )
    with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
        result = tuple(np.asarray(x) for x in on_arrays(r, z, c, nu, *strength))
    require_finite(
        "A point of observation lies on a point source, where the displacement has no limit: "
        "use a finite cell, or move the point.",
        *result,
    )
    return result


def volume_ratio(source: str, poisson_ratio: float) -> float:
    """Volume of the surface bowl over the volume of the source [-].

    2(1-nu) for contraction, 1 for closure (whole bowl, out to infinity). A vertical force has a
    bowl of infinite volume, hence `InputError`.
    """
    require_known("kind of source", source, SOURCES)
    require_poisson_ratio(poisson_ratio)
    if source == "vertical_force":
        raise InputError("The bowl of a vertical force on a half-space has no finite volume.")
    return 2.0 * (1.0 - poisson_ratio) if source == "contraction" else 1.0
