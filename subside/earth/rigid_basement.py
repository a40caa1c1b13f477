"""Point sources in an elastic layer welded to a rigid basement, seen at the surface.

The problem of van Opstal (1974), Proc. 3rd Congr. Int. Soc. Rock Mech. 2B:1102: zero displacement
at the depth k of the basement. With K = alpha k, d = alpha c and

    D = (3-4 nu) cosh^2 K + (1-2 nu)^2 + K^2

the Hankel kernels at the free surface are (W downward, U inward)

contraction
    W D = (1-nu) [(3-4nu) cosh(2K-d) + cosh d + 2K sinh d]
    U D = (1-nu) [(3-4nu) sinh(2K-d) - sinh d + 2K cosh d]
closure (derived here: by reciprocity it is the normal stress at depth c under a unit load)
    W D = (3-4nu)/2 [cosh(2K-d) + d sinh(2K-d)] + q cosh d - (d/2) sinh d + K (sinh d - d cosh d)
    U D = (3-4nu)/2 d cosh(2K-d) + p sinh d + (d/2) cosh d - d K sinh d
    q = (3-4nu)/2 + (1-2nu)^2 + K^2,  p = 2(1-nu)(1-2nu) + K^2
vertical force (derived here likewise), difference from the half-space, per P/(2 G alpha)
    W D = (b+K) [d sinh d - 2(1-nu) cosh d] + p [(1-2nu) sinh d - d cosh d]
    U D = (b-K) [(1-2nu) sinh d - d cosh d] - p [2(1-nu) cosh d - d sinh d]
    b = q + (3-4nu)/2 e^-2K

What is integrated is the **difference** from the half-space, whose kernels are 2(1-nu) e^-d,
(1+d) e^-d, d e^-d and so on: the half-space part is added in closed form, the difference decays as
exp(-(2K-d)) and has no cancellation when the basement is far. All exponentials decay.

Over a rigid base the whole field dies off exponentially with r/k, because its kernels are analytic
and even in alpha (odd for U): as exp(-y r/k), y the smallest imaginary part of a zero of D, from
1.19 at nu = 0 through 0.956 at 0.25 to 0.739 at 0.5 (computed independently). Beyond `_REACH`
basement depths it is below rounding and set to zero, while the half-space alone would go on as a
power of r.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from subside.earth import half_space, hankel
from subside.earth.half_space import SOURCES
from subside.earth.inputs import require_known, require_poisson_ratio, require_positive
from subside.errors import InputError

__all__ = ["displacement", "gradient", "kernel_difference", "volume_ratio"]

Array = NDArray[np.float64]

_DECAY = 45.0  # exp(-45) = 3e-20: the polynomial factors still leave it below rounding
_REACH = 55.0  # basement depths: exp(-0.739 * 55) = 2e-18
_BLOCK = 4_000_000  # Bessel values at a time


def kernel_difference(
    source: str, K: Array, d: Array, poisson_ratio: float
) -> tuple[Array, Array]:
    """Rigid-basement kernels minus half-space kernels at the surface.

    Parameters
    ----------
    source : {"contraction", "closure", "vertical_force"}
    K, d : ndarray [-]
        Wavenumber times basement depth and times source depth; 0 <= d <= K; broadcast.
    poisson_ratio : float [-]

    Returns
    -------
    W, U : ndarray
        Downward and inward kernels, per m3 of volume; per P/(2 G alpha) for the vertical force.
    """
    nu = poisson_ratio
    n = 1.0 - nu
    m = 1.0 - 2.0 * nu
    kappa = 3.0 - 4.0 * nu
    # Numerators and D are both multiplied by exp(-2K); up = e^d e^-2K and so on.
    e2 = np.exp(-2.0 * K)
    up = np.exp(d - 2.0 * K)
    down = np.exp(-d - 2.0 * K)
    cosh = 0.5 * (up + down)
    sinh = 0.5 * (up - down)
    D = 0.25 * kappa * (1.0 + e2) ** 2 + (m * m + K * K) * e2
    q = 0.5 * kappa + m * m + K * K
    p = 2.0 * n * m + K * K
    if source == "contraction":
        w = n * (kappa * e2 * sinh + cosh + 2.0 * K * sinh - 2.0 * q * down)
        u = n * (-kappa * e2 * cosh - sinh + 2.0 * K * cosh - 2.0 * q * down)
    elif source == "closure":
        w = (
            (0.5 * kappa * e2 + K) * (sinh - d * cosh)
            + q * cosh
            - 0.5 * d * sinh
            - q * (1.0 + d) * down
        )
        u = 0.5 * kappa * d * e2 * sinh + p * sinh + 0.5 * d * cosh - d * K * sinh - q * d * down
    else:
        b = q + 0.5 * kappa * e2
        w = (b + K) * (d * sinh - 2.0 * n * cosh) + p * (m * sinh - d * cosh)
        u = (b - K) * (m * sinh - d * cosh) - p * (2.0 * n * cosh - d * sinh)
    return w / D, u / D


def displacement(
    source: str,
    radius: ArrayLike,
    source_depth: ArrayLike,
    poisson_ratio: float,
    basement_depth: float,
    shear_modulus: float | None = None,
) -> tuple[Array, Array]:
    """Surface displacement of a point source above a rigid basement.

    Parameters
    ----------
    source : {"contraction", "closure", "vertical_force"}
    radius : array_like [m]
        Horizontal distance from the source; broadcast with `source_depth`. Many radii against
        few depths (shapes (q, 1) and (m,)) share their Bessel functions and are fast.
    source_depth : array_like [m]
        Below the free surface; at most the basement depth.
    poisson_ratio : float [-]
    basement_depth : float [m]
    shear_modulus : float [Pa], optional
        Needed by "vertical_force" only.

    Returns
    -------
    outward, downward : ndarray, the broadcast shape
        [m per m3] or, for the force, [m per N].

    Raises
    ------
    InputError
        Unknown source, values out of range, or a source below the basement.
    """
    half = half_space.displacement(source, radius, 0.0, source_depth, poisson_ratio, shear_modulus)
    rest = _difference(
        hankel.to_displacement,
        source,
        radius,
        source_depth,
        poisson_ratio,
        basement_depth,
        shear_modulus,
        half,
    )
    return rest[0], rest[1]


def gradient(
    source: str,
    radius: ArrayLike,
    source_depth: ArrayLike,
    poisson_ratio: float,
    basement_depth: float,
    shear_modulus: float | None = None,
) -> tuple[Array, Array, Array]:
    """Radial derivatives of `displacement`; parameters and errors as there.

    Returns
    -------
    outward_by_radius, outward_over_radius, downward_by_radius : ndarray, the broadcast shape
    """
    half = half_space.gradient(source, radius, 0.0, source_depth, poisson_ratio, shear_modulus)
    rest = _difference(
        hankel.to_gradient,
        source,
        radius,
        source_depth,
        poisson_ratio,
        basement_depth,
        shear_modulus,
        half,
    )
    return rest[0], rest[1], rest[2]


def volume_ratio(source: str, poisson_ratio: float) -> float:
    """Volume of the surface bowl over the volume of the source [-]: 1, for both kinds of volume.

    A vertical force P has no volume to compare with (its bowl holds P (k-c)/M, M the uniaxial
    modulus), hence `InputError`.
    """
    require_known("kind of source", source, SOURCES)
    require_poisson_ratio(poisson_ratio)
    if source == "vertical_force":
        raise InputError("A vertical force has no volume of its own to divide the bowl by.")
    return 1.0


def _difference(transform, source, radius, source_depth, nu, k, shear_modulus, half):  # type: ignore[no-untyped-def]
    """Half-space part plus the transform of the kernel difference, in the broadcast shape."""
    require_positive("basement depth", "m", k)
    r, c = np.broadcast_arrays(
        np.asarray(radius, dtype=float), np.asarray(source_depth, dtype=float)
    )
    if c.size and c.max() > k:
        raise InputError(
            f"A source at {c.max():g} m lies below the rigid basement at {k:g} m: "
            "lower the basement or leave the cell out."
        )
    total = [np.array(part, dtype=float).ravel() for part in half]
    r, c = r.ravel(), c.ravel()
    far = r > _REACH * k
    for part in total:
        part[far] = 0.0
    near = np.flatnonzero(~far)
    if near.size:
        radii, i = np.unique(r[near], return_inverse=True)
        depths, j = np.unique(c[near], return_inverse=True)
        if radii.size * depths.size <= 4 * near.size:
            groups = [(radii, depths, near, i, j)]
        else:  # scattered pairs: one depth at a time
            groups = []
            order = np.argsort(j, kind="stable")
            starts = np.searchsorted(j[order], np.arange(1, depths.size))
            for n, part in enumerate(np.split(order, starts)):
                own, back = np.unique(r[near[part]], return_inverse=True)
                groups.append((own, depths[n : n + 1], near[part], back, np.zeros(part.size, int)))
        for radii, depths, where, i, j in groups:
            for part, value in zip(
                total, _outer(transform, source, radii, depths, nu, k, shear_modulus), strict=True
            ):
                part[where] += value[i, j]
    shape = np.shape(half[0])
    return tuple(part.reshape(shape) for part in total)


def _outer(transform, source, radii, depths, nu, k, shear_modulus):  # type: ignore[no-untyped-def]
    """Transformed kernel difference for every radius (q,) and every depth (m,): arrays (q, m)."""
    upper = _DECAY / (2.0 * k - depths.max())
    alpha, weight = hankel.nodes(upper, radii.max())
    w, u = kernel_difference(source, alpha[:, None] * k, alpha[:, None] * depths, nu)
    scale = alpha[:, None] if source != "vertical_force" else 1.0 / (2.0 * shear_modulus)
    w, u = w * scale, u * scale
    step = max(1, _BLOCK // alpha.size)
    parts = [
        transform(alpha, weight, w, u, radii[n : n + step]) for n in range(0, radii.size, step)
    ]
    return [np.concatenate(pieces) for pieces in zip(*parts, strict=True)]
