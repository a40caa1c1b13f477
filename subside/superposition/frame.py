"""The lattice of one depth band: where its nodes lie, under the sources and under the targets."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numba import njit
from scipy.fft import next_fast_len

__all__ = ["Axis", "Frame", "barycentric", "chebyshev"]


@dataclass(frozen=True)
class Axis:
    """One direction of the lattice; sources and targets stand on the same endless row of nodes.

    A point at x has the place (x - origin) / spacing; its stencil starts at the node numbered
    floor(place), and nodes are numbered so that the point then lies amid the stencil's nodes.

    Attributes
    ----------
    origin, spacing : float
        m.
    sources, targets : int
        Number of nodes that sources spread onto and that targets are read from.
    shift : int
        Number of the first target node, counted from the first source node.
    length : int
        Period of the transforms: even, and more than twice the largest distance from a source
        node to a target node, so that nothing wraps round and kernels can be stored by symmetry.
    """

    origin: float
    spacing: float
    sources: int
    targets: int
    shift: int
    length: int

    @classmethod
    def around(cls, sources: tuple[float, float], targets: tuple[float, float], spacing: float,
               width: int) -> Axis:
        """The axis that holds two intervals (m), for stencils of `width` nodes."""
        origin = sources[0] - 1e-6 * spacing
        count = int((sources[1] - origin) / spacing) + width + 1
        shift = int(np.floor((targets[0] - origin) / spacing - 1e-6))
        reached = int((targets[1] - origin) / spacing) - shift + width + 1
        longest = max(abs(shift - count + 1), abs(shift + reached - 1))
        return cls(origin, spacing, count, reached, shift, _fast_even(2 * longest + 2))

    def place(self, x: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """First target node (counted from the first target node) and offset of each place."""
        place = (x - self.origin) / self.spacing
        whole = np.floor(place)
        return (whole - self.shift).astype(np.int64), place - whole - 0.5

    @property
    def target_places(self) -> np.ndarray:
        """Where the target nodes stand in one period."""
        return (np.arange(self.targets) + self.shift) % self.length


@dataclass(frozen=True)
class Frame:
    """The two axes and the depth nodes.

    Attributes
    ----------
    x, y : Axis
    depths, weights : array (p,)
        Chebyshev nodes over the band's depths (m) and their barycentric weights.
    """

    x: Axis
    y: Axis
    depths: np.ndarray
    weights: np.ndarray


def chebyshev(low: float, high: float, count: int) -> tuple[np.ndarray, np.ndarray]:
    """Chebyshev nodes of the first kind over an interval and their barycentric weights."""
    angle = (2 * np.arange(count) + 1) * np.pi / (2 * count)
    nodes = 0.5 * (low + high) - 0.5 * (high - low) * np.cos(angle)
    return nodes, np.sin(angle) * (-1.0) ** np.arange(count)


@njit(cache=True, nogil=True, error_model="numpy")
def barycentric(out: np.ndarray, depth: float, depths: np.ndarray, weights: np.ndarray) -> None:
    """Barycentric interpolation: the shares of the depth nodes."""
    total = 0.0
    for d in range(depths.size):
        gap = depth - depths[d]
        if gap == 0.0:
            out[:] = 0.0
            out[d] = 1.0
            return
        out[d] = weights[d] / gap
        total += out[d]
    for d in range(depths.size):
        out[d] /= total


def _fast_even(least: int) -> int:
    """The next even length that the Fourier transform likes."""
    return 2 * int(next_fast_len(-(-least // 2), real=True))
