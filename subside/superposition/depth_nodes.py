"""How many Chebyshev nodes in depth carry the kernels of an earth model across a band."""

from __future__ import annotations

from typing import Any

import numpy as np

from subside.errors import InputError
from subside.superposition.bands import depth_nodes_guess
from subside.superposition.frame import chebyshev

__all__ = ["depth_nodes"]

_MOST = 40


def depth_nodes(earth: Any, sources: list[str], low: float, high: float, error: float,
                gradient: bool) -> tuple[np.ndarray, np.ndarray]:
    """Nodes and barycentric weights that interpolate the kernels between `low` and `high` (m).

    Parameters
    ----------
    error : float
        Allowed, between the nodes, over the largest value of the kernel at that depth.

    Raises
    ------
    InputError
        If the kernels are not smooth in depth, so that no affordable number is enough.
    """
    count = depth_nodes_guess(low, high, error)
    if count == 1:
        return chebyshev(low, high, 1)
    while count <= _MOST:
        nodes, weights = chebyshev(low, high, count)
        if all(_error(earth, source, low, high, nodes, weights, gradient) <= error
               for source in sources):
            return nodes, weights
        count += max(1, count // 6)
    raise InputError(f"earth model '{earth.name}': its kernels are not smooth between {low:g} and "
                     f"{high:g} m, {_MOST} depths do not carry them to {error:.1g}.")


def _error(earth: Any, source: str, low: float, high: float, nodes: np.ndarray,
           weights: np.ndarray, gradient: bool) -> float:
    radius = low * np.sinh(np.linspace(0.0, 4.0, 41))
    # between the nodes, where the node polynomial is largest, and at both ends
    between = 0.5 * (low + high) - 0.5 * (high - low) * np.cos(np.pi * np.arange(nodes.size + 1)
                                                               / nodes.size)
    share = weights / (between[:, None] - nodes)
    share /= share.sum(axis=1, keepdims=True)
    worst = 0.0
    for known, truth in zip(_kernels(earth, source, radius, nodes, gradient),
                            _kernels(earth, source, radius, between, gradient), strict=True):
        gap = np.abs(np.einsum("dn,fnr->fdr", share, known) - truth)
        worst = max(worst, float((gap.max(axis=(0, 2)) / np.abs(truth).max(axis=(0, 2))).max()))
    return worst


def _kernels(earth: Any, source: str, radius: np.ndarray, depth: np.ndarray,
             gradient: bool) -> list[np.ndarray]:
    """Displacement, strains and slope of a point source: (function, depth, radius) each."""
    radius, depth = np.broadcast_arrays(radius[None, :], depth[:, None])
    zero = np.zeros_like(radius)
    groups = [np.stack(earth.displacement(source, radius, zero, depth))]
    if gradient:
        along, across, slope = earth.gradient(source, radius, zero, depth)
        groups += [np.stack([along, across]), np.asarray(slope)[None]]
    return groups
