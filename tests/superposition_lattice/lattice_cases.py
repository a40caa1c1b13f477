"""Small invented fields, and the error of one solver's result against the plain sum."""

from __future__ import annotations

from collections.abc import Sequence
from concurrent.futures import ThreadPoolExecutor

import numpy as np
from make_workloads import field_of_cells, raster

from subside.superposition.check import _GROUPS
from subside.superposition.direct import Direct
from subside.superposition.interface import Bodies, Fields, Targets
from subside.superposition.lattice import Lattice
from subside.superposition.summation import Summation

__all__ = [
    "cell_pieces", "compare", "error_of", "joined", "pillar_field", "raster", "small_field",
    "streamed", "wells",
]


def small_field(*, depth: float = 1500.0, size: float = 200.0, seed: int = 1, columns: int = 12,
                rows: int = 9, layers: int = 3, steps: int = 3, thickness: float = 20.0,
                dip: float = 0.05, throw: float = 40.0, azimuth: float = 30.0,
                active: float = 1.3) -> tuple[Bodies, dict[str, np.ndarray]]:
    """A few hundred cells with both kinds of source."""
    bodies, moment = field_of_cells(columns, rows, layers, size=size, thickness=thickness,
                                    depth=depth, dip=dip, throw=throw, azimuth=azimuth,
                                    active=active, steps=steps, seed=seed)
    share = np.random.default_rng(seed).uniform(0.2, 0.8, bodies.count)
    return bodies, {"contraction": moment * share, "closure": moment * (1 - share)}


def wells(count: int, half: float, seed: int = 3) -> Targets:
    """Scattered surface points."""
    place = np.random.default_rng(seed).uniform(-half, half, (2, count))
    return Targets(place[0], place[1], np.zeros(count))


def pillar_field(*, columns: int = 6, rows: int = 5, layers: int = 4, depth: float = 1200.0,
                 size: float = 200.0, thickness: float = 25.0, dip: float = 0.0,
                 azimuth: float = 35.0, steps: int = 3, seed: int = 5,
                 boxes: bool = False) -> tuple[Bodies, dict[str, np.ndarray]]:
    """Cells in upright pillars about the origin; layers run slowest, as in a structured grid.

    Without a dip, tops and bottoms are level in each pillar and at another depth in the next. With
    one, outlines are uneven quadrilaterals too. `boxes` are of equal size and level in any case.
    """
    dip = 0.0 if boxes else dip
    rng = np.random.default_rng(seed)
    count = columns * rows
    turn = np.radians(azimuth)
    j, i = np.unravel_index(np.arange(count), (rows, columns))
    u, v = (i + 0.5 - columns / 2) * size, (j + 0.5 - rows / 2) * size
    x, y = u * np.cos(turn) + v * np.sin(turn), -u * np.sin(turn) + v * np.cos(turn)
    square = 0.5 * size * np.array([[-1, -1], [1, -1], [1, 1], [-1, 1.0]])
    outline = square + (0.0 if boxes else rng.uniform(-0.1, 0.1, (count, 4, 2)) * size)
    outline = outline @ np.array([[np.cos(turn), -np.sin(turn)], [np.sin(turn), np.cos(turn)]])
    outline = outline + np.stack([x, y], axis=1)[:, None]
    step = rng.uniform(-0.1, 0.1, count) * depth
    faces = depth + thickness * (np.arange(layers + 1)[:, None] + rng.uniform(0, 0.3, count)) + step
    lean = dip * (outline @ [0.6, 0.8])
    corners = np.empty((layers, count, 8, 3))
    corners[..., :4, :2] = corners[..., 4:, :2] = outline
    corners[..., :4, 2] = faces[:-1, :, None] + lean
    corners[..., 4:, 2] = faces[1:, :, None] + lean * 1.1
    corners = corners.reshape(-1, 8, 3)
    table = np.empty((layers, count, 7))
    table[...] = np.stack([x, y, 0 * x, 0 * x, 0 * x + size, 0 * x + size, 0 * x + azimuth], axis=1)
    table[..., 2], table[..., 3] = faces[:-1], faces[1:]
    table = table.reshape(-1, 7)
    moments = {source: rng.uniform(0.0, 900.0, (steps, layers * count))
               for source in ("contraction", "closure")}
    column = np.tile(np.arange(count), layers).astype(np.int32)
    return Bodies(layers * count, lambda index: corners[index].copy(),
                  (lambda index: table[index].copy()) if boxes else None, column), moments


def joined(fields: Sequence[tuple[Bodies, dict[str, np.ndarray]]]
           ) -> tuple[Bodies, dict[str, np.ndarray]]:
    """Several fields as one."""
    edges = np.cumsum([0] + [bodies.count for bodies, _ in fields])

    def corners(index: np.ndarray) -> np.ndarray:
        out = np.empty((index.size, 8, 3))
        for n, (bodies, _) in enumerate(fields):
            mine = (index >= edges[n]) & (index < edges[n + 1])
            out[mine] = bodies.corners(index[mine] - edges[n])
        return out

    moments = {source: np.concatenate([m[source] for _, m in fields], axis=1)
               for source in fields[0][1]}
    return Bodies(int(edges[-1]), corners), moments


def cell_pieces(count: int, pieces: int, seed: int) -> list[np.ndarray]:
    """All cells in an order of their own, cut anywhere."""
    rng = np.random.default_rng(seed)
    cuts = np.sort(rng.choice(np.arange(1, count), min(pieces, count) - 1, replace=False))
    return np.split(rng.permutation(count), cuts)


def streamed(bodies: Bodies, moments: dict[str, np.ndarray], targets: Targets, earth: object, *,
             pieces: Sequence[np.ndarray] | None = None, cuts: Sequence[int] = (), shares: int = 1,
             tolerance: float = 1e-5, gradient: bool = False, method: str = "lattice",
             check: Sequence[int] = ()) -> tuple[Fields, Summation]:
    """The field from pieces of cells, legs that end at `cuts`, and shares of their own threads.

    The dates in `check` are kept for the check.
    """
    steps = next(iter(moments.values())).shape[0]
    job = Summation(bodies, list(moments), targets, earth, tolerance=tolerance, gradient=gradient,
                    steps=steps, method=method)
    pieces = [np.arange(bodies.count)] if pieces is None else pieces
    legs = []
    for first, last in zip([0, *cuts], [*cuts, steps], strict=True):
        job.begin(last - first, [date - first for date in check if first <= date < last])
        parts = [job.share() for _ in range(shares)]

        def work(n: int, first: int = first, last: int = last, parts: list = parts) -> None:
            for cells in pieces[n::shares]:
                job.add(parts[n], cells, {source: np.ascontiguousarray(moment[first:last, cells])
                                          for source, moment in moments.items()})

        with ThreadPoolExecutor(shares) as pool:
            list(pool.map(work, range(shares)))
        for other in parts[1:]:
            job.merge(parts[0], other)
        legs.append(job.fields(parts[0]))
    return {name: np.concatenate([leg[name] for leg in legs]) for name in legs[0]}, job


def error_of(field: Fields, truth: Fields) -> float:
    """Largest difference over the largest value in its group (displacement, slopes, strains)."""
    worst = 0.0
    for group in _GROUPS:
        if group[0] in truth:
            gap = max(np.abs(field[name] - truth[name]).max() for name in group)
            worst = max(worst, gap / max(np.abs(truth[name]).max() for name in group))
    return float(worst)


def compare(bodies: Bodies, moments: dict[str, np.ndarray], targets: Targets, earth: object,
            tolerance: float, gradient: bool = False) -> tuple[float, Lattice]:
    """Error of a forced lattice against the plain sum at a hundredth of the tolerance."""
    solver = Lattice(forced=True)
    field = solver.solve(bodies, moments, targets, earth, tolerance=tolerance, gradient=gradient)
    truth = Direct().solve(bodies, moments, targets, earth, tolerance=0.01 * tolerance,
                           gradient=gradient)
    assert field.keys() == truth.keys()
    assert any("lattice" in note for note in solver.notes)
    return error_of(field, truth), solver
