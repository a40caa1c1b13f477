"""Corner-point cells between vertical edges: volumes, centres, and who touches whom.

Used by the scripts that make the invented fields.  SI units; depth positive down.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

# corners of the lower-index cell and of its neighbour that share a face: across i, across j
SHARED = {0: ((1, 2), (0, 3)), 1: ((3, 2), (0, 1))}


@dataclass
class Cells:
    """Cells between vertical edges: corners (k, j, i, 8, 3) [m], depth down, made into numbers."""

    corners: np.ndarray
    volume: np.ndarray = field(init=False)
    centre: np.ndarray = field(init=False)
    plan_area: np.ndarray = field(init=False)

    def __post_init__(self) -> None:
        """Volume, centroid and plan area, exact: 2 x 2 Gauss points, plain integral down."""
        c = self.corners
        self.volume, self.plan_area = np.zeros(c.shape[:3]), np.zeros(c.shape[:3])
        moment = np.zeros((*c.shape[:3], 3))
        g = 0.5 / np.sqrt(3.0)
        for s in (0.5 - g, 0.5 + g):
            for t in (0.5 - g, 0.5 + g):
                n = np.array([(1 - s) * (1 - t), s * (1 - t), s * t, (1 - s) * t])
                ds = np.array([t - 1, 1 - t, t, -t]) @ c[..., :4, :2]
                dt = np.array([s - 1, -s, s, 1 - s]) @ c[..., :4, :2]
                jacobian = 0.25 * (ds[..., 0] * dt[..., 1] - ds[..., 1] * dt[..., 0])
                top, bottom = n @ c[..., :4, :], n @ c[..., 4:, :]
                thick = (bottom - top)[..., 2]
                mid = 0.5 * (top + bottom)
                self.plan_area += jacobian
                self.volume += jacobian * thick
                moment += (jacobian * thick)[..., None] * mid
        if not (self.volume > 0).all():
            raise ValueError("a cell has no volume or is turned inside out")
        self.centre = moment / self.volume[..., None]


@dataclass
class Links:
    """Pairs of cells that share face area: flat cell numbers, transmissibility [m3], axis."""

    a: np.ndarray
    b: np.ndarray
    transmissibility: np.ndarray
    axis: np.ndarray


def overlap_area(upper: np.ndarray, lower: np.ndarray, width: np.ndarray) -> np.ndarray:
    """Area [m2] that two faces on one vertical plane share, each bounded by straight lines.

    `upper`, `lower` hold the depths [m] of the faces' edges, shape (2 faces, 2 sides, ...);
    `width` is the distance between the sides.  The shared height is piecewise linear, so the
    trapezoid rule between the places where edges cross is exact.
    """

    def crossing(p: np.ndarray, q: np.ndarray) -> np.ndarray:
        d = p - q
        with np.errstate(divide="ignore", invalid="ignore"):
            s = d[0] / (d[0] - d[1])
        return np.clip(np.nan_to_num(s, nan=0.0, posinf=0.0, neginf=0.0), 0.0, 1.0)

    inner = [crossing(upper[0], upper[1]), crossing(lower[0], lower[1])]
    inner += [crossing(upper[0], lower[1]), crossing(upper[1], lower[0])]
    s = np.sort(np.stack([np.zeros_like(width), *inner, np.ones_like(width)]), axis=0)
    highest = np.maximum(*(edge[0] + (edge[1] - edge[0]) * s for edge in upper))
    lowest = np.minimum(*(edge[0] + (edge[1] - edge[0]) * s for edge in lower))
    height = lowest - highest
    return width * np.trapezoid(np.maximum(height, 0.0), s, axis=0)


def connect(cells: Cells, kh: np.ndarray, kv: np.ndarray, active: np.ndarray) -> Links:
    """Every pair of active cells that touch, also across faults, with its transmissibility.

    `kh`, `kv` (k, j, i): permeability along and across the beds [m2].  Half transmissibility
    per area ``k n.d/d.d``, d from the centre of the cell to the centre of its face.
    """
    number = np.arange(kh.size).reshape(kh.shape)
    c, nk = cells.corners, kh.shape[0]
    found: list[tuple[np.ndarray, ...]] = []
    for axis, (near, far) in SHARED.items():
        across = (slice(None),) if axis == 0 else ()
        parts = [(slice(None), *across, slice(None, -1)), (slice(None), *across, slice(1, None))]
        half, edges = [], []
        for part, (p, q) in zip(parts, (near, far), strict=True):
            corner = c[part]
            along = corner[..., q, :2] - corner[..., p, :2]
            width = np.linalg.norm(along, axis=-1)
            normal = np.stack([along[..., 1], -along[..., 0]], -1) / width[..., None]
            way = corner[..., [p, q, p + 4, q + 4], :].mean(-2) - cells.centre[part]
            facing = np.abs((normal * way[..., :2]).sum(-1))
            half.append(kh[part] * facing / (way**2).sum(-1))
            # depths of the face's upper and lower edge at both sides: (upper/lower, side, k, j, i)
            edges.append(np.moveaxis(corner[..., [[p, q], [p + 4, q + 4]], 2], (-2, -1), (0, 1)))
        for ka in range(nk):
            for kb in range(nk):
                upper, lower = np.stack([edges[0][:, :, ka], edges[1][:, :, kb]], axis=1)
                area = overlap_area(upper, lower, width[ka])
                t = area / (1.0 / half[0][ka] + 1.0 / half[1][kb])
                on = (area > 1e-6) & active[parts[0]][ka] & active[parts[1]][kb]
                pair = [number[part][k][on] for part, k in zip(parts, (ka, kb), strict=True)]
                found.append((*pair, t[on], np.full(on.sum(), axis)))
    face = c[:-1, ..., 4:, 2].mean(-1)
    up = kv[:-1] / (face - cells.centre[:-1, ..., 2])
    down = kv[1:] / (cells.centre[1:, ..., 2] - face)
    on = active[:-1] & active[1:]
    t = cells.plan_area[:-1] / (1.0 / up + 1.0 / down)
    found.append((number[:-1][on], number[1:][on], t[on], np.full(on.sum(), 2)))
    return Links(*(np.concatenate(parts) for parts in zip(*found, strict=True)))


def outer_edge(active: np.ndarray) -> np.ndarray:
    """Mark the active cells (k, j, i) with a side on the rim of the grid or on inactive cells."""
    on = np.pad(active, ((0, 0), (1, 1), (1, 1)))
    inside = on[:, :-2, 1:-1] & on[:, 2:, 1:-1] & on[:, 1:-1, :-2] & on[:, 1:-1, 2:]
    return active & ~inside
