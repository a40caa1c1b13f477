"""An invented field of any size, computed piece by piece: rotated, dipping, domed, cut by a fault.

Shape and depletion depend on the place in the field and not on the number of cells, so that a
finer grid is the same field. Every value follows from the seed and the cell's numbers alone,
whatever pieces it is asked for in.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numba import njit, prange

__all__ = ["Field"]

_WELLS = 6
_GRADIENT, _ATMOSPHERE = 0.105, 1.01325  # bar per m, bar: a little above fresh water
_NOISE = 2e-3  # bar: about what a flow simulator's solver leaves in a cell


@dataclass(frozen=True)
class Field:
    """A grid of cells (k, j, i) about (`east`, `north`).

    Attributes
    ----------
    columns, rows, layers : int
        Cells along i, j, k.
    size, thickness : float
        Of a cell, m: `size` along i and j, `thickness` down.
    depth : float
        Of the top of the field at its centre, on the upthrown side, without the dome, m.
    steps : int
        Pressure dates, the first without depletion.
    dip : float
        Slope along i.
    throw : float
        Of the fault that cuts the field between the middle columns, m.
    azimuth : float
        Clockwise from north to the direction of j, degrees.
    active : float
        Share of the area inside the oval of active cells; 1.6 or more: all of it.
    lean : float
        Sideways shift of the pillars per m down, along i; corners only.
    regions : int
        Named parts: both sides of the fault, in packets of layers; 1: one part.
    seed : int
    """

    columns: int
    rows: int
    layers: int
    size: float
    thickness: float
    depth: float
    steps: int = 20
    dip: float = 0.02
    throw: float = 60.0
    azimuth: float = 25.0
    active: float = 0.6
    lean: float = 0.0
    regions: int = 1
    seed: int = 1
    east: float = 0.0
    north: float = 0.0

    @property
    def shape(self) -> tuple[int, int, int]:
        """Cells along k, j, i."""
        return self.layers, self.rows, self.columns

    @property
    def count(self) -> int:
        """Cells, active or not."""
        return self.layers * self.rows * self.columns

    @property
    def half(self) -> tuple[float, float]:
        """Half the extent along i and j, m."""
        return 0.5 * self.columns * self.size, 0.5 * self.rows * self.size

    def placed(self, x: np.ndarray, y: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """The field's own x, y (along i and j, m) as easting and northing."""
        turn = np.radians(self.azimuth)
        return (self.east + x * np.cos(turn) + y * np.sin(turn),
                self.north - x * np.sin(turn) + y * np.cos(turn))

    def top(self, x: np.ndarray, y: np.ndarray, behind: np.ndarray) -> np.ndarray:
        """Depth of the top of the field at its own x, y, m; `behind`: on the downthrown side."""
        half_x, half_y = self.half
        dome = 0.05 * self.depth * (1 - (x / half_x) ** 2 - (y / half_y) ** 2)
        return self.depth + self.dip * x - dome + self.throw * behind

    def corners(self, k: np.ndarray, j: np.ndarray, i: np.ndarray) -> np.ndarray:
        """Corners (..., 8, 3) of cells: easting, northing, depth, m; the top face first."""
        k, j, i = np.broadcast_arrays(k, j, i)
        half_x, half_y = self.half
        out = np.empty((*k.shape, 8, 3))
        behind = i >= self.columns // 2
        for n in range(8):
            x = (i + (n % 4 in (1, 2))) * self.size - half_x
            y = (j + (n % 4 in (2, 3))) * self.size - half_y
            z = self.top(x, y, behind) + (k + (n >= 4)) * self.thickness
            out[..., n, 0], out[..., n, 1] = self.placed(x + self.lean * (z - self.depth), y)
            out[..., n, 2] = z
        return out

    def centres(self) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Easting, northing and depth of the top (j, i) of the pillars' middles, m."""
        half_x, half_y = self.half
        j, i = np.meshgrid(np.arange(self.rows), np.arange(self.columns), indexing="ij")
        x, y = (i + 0.5) * self.size - half_x, (j + 0.5) * self.size - half_y
        return *self.placed(x, y), self.top(x, y, i >= self.columns // 2)

    @cached_property
    def place(self) -> tuple[np.ndarray, np.ndarray]:
        """Place in the field, -1 to 1, along j (rows,) and i (columns,)."""
        return ((np.arange(self.rows) + 0.5) * 2 / self.rows - 1,
                (np.arange(self.columns) + 0.5) * 2 / self.columns - 1)

    @cached_property
    def is_active(self) -> np.ndarray:
        """True (j, i) inside the oval."""
        v, u = self.place
        return v[:, None] ** 2 + u[None, :] ** 2 < self.active * 4 / np.pi

    def region(self, k: np.ndarray) -> np.ndarray:
        """Region (k, columns) of the cells in layers `k`, from 0."""
        sides = 1 if self.regions == 1 else 2
        packet = k * (self.regions // sides) // self.layers
        side = (np.arange(self.columns) >= self.columns // 2) * (sides - 1)
        return packet[:, None] * sides + side[None, :]

    def pressure(self, time: slice, k: slice, j: slice, fill: float) -> np.ndarray:
        """Absolute pressure (time, k, j, columns), bar, float32; `fill` in inactive cells.

        Depletion is a bowl over the whole field that saturates at each cell's own pace, and
        cones about wells that start one after another and widen; layers, the sides of the fault
        and single cells differ. It is smooth in space but no sum of a few shapes in time.
        """
        rng = np.random.default_rng(self.seed)
        share = rng.uniform(0.3, 1.0, self.layers)[k]
        pace = rng.uniform(0.5, 3.0, self.layers)[k]
        wells = rng.uniform((-0.6, -0.6, 0.0, 0.1), (0.6, 0.6, 0.6, 0.25), (_WELLS, 4))
        waves = rng.uniform(2.0, 5.0, (2, 2))
        t = np.linspace(0.0, 1.0, self.steps)[time]
        v, u = self.place[0][j], self.place[1]
        cones = np.zeros((t.size, v.size, u.size))
        for x, y, start, width in wells:
            age = np.clip(t - start, 0.0, None)[:, None, None]
            far = (u[None, None, :] - x) ** 2 + (v[None, :, None] - y) ** 2
            cones += 0.25 * (1 - np.exp(-4 * age)) * np.exp(-far / (width**2 * (1 + 3 * age)))
        bowl = np.exp(-1.5 * (v[:, None] ** 2 + u[None, :] ** 2))
        own_pace = np.exp(0.5 * np.sin(waves[0, 0] * u + waves[0, 1])[None, :]
                          * np.cos(waves[1, 0] * v + waves[1, 1])[:, None])
        bowl, own_pace = np.broadcast_arrays(bowl, own_pace)
        start_pressure = (_ATMOSPHERE + _GRADIENT * (
            self.centres()[2][j][None] + (np.arange(self.layers)[k, None, None] + 0.5)
            * self.thickness))
        out = np.empty((t.size, share.size, v.size, u.size), dtype=np.float32)
        numbers = self.columns * (self.rows * np.arange(self.layers)[k, None]
                                  + np.arange(self.rows)[None, j])
        dates = np.arange(self.steps)[time]
        _fill_pressure(out, t, dates, share, pace, np.ascontiguousarray(bowl),
                       np.ascontiguousarray(own_pace), cones, start_pressure,
                       0.4 * _GRADIENT * self.depth, numbers, self.is_active[j],
                       np.float32(fill), self.seed)
        return out


@njit(cache=True)
def _scatter(number, seed):  # type: ignore[no-untyped-def]
    """A number in -0.5 to 0.5 that follows from two integers (mixing by xor, shift, multiply)."""
    h = np.uint64(number) * np.uint64(0x9E3779B97F4A7C15) + np.uint64(seed)
    h = (h ^ (h >> np.uint64(30))) * np.uint64(0xBF58476D1CE4E5B9)
    h = (h ^ (h >> np.uint64(27))) * np.uint64(0x94D049BB133111EB)
    return np.float64(h >> np.uint64(11)) / 9007199254740992.0 - 0.5


@njit(cache=True, parallel=True)
def _fill_pressure(out, t, dates, share, pace, bowl, own_pace, cones, start_pressure, largest,
                   numbers, active, fill, seed):  # type: ignore[no-untyped-def]
    nt, nk, nj, ni = out.shape
    for kj in prange(nk * nj):
        k, j = kj // nj, kj % nj
        for i in range(ni):
            if not active[j, i]:
                for n in range(nt):
                    out[n, k, j, i] = fill
                continue
            cell = numbers[k, j] + i
            drop = largest * share[k] * (1.0 + 0.1 * _scatter(cell, seed))
            if i >= ni // 2:
                drop *= 0.7
            for n in range(nt):
                slow = 1.0 - np.exp(-t[n] * pace[k] * own_pace[j, i])
                noise = _NOISE * _scatter(cell, seed + 7919 * (dates[n] + 1))
                out[n, k, j, i] = (start_pressure[k, j, i] + noise
                                   - drop * (bowl[j, i] * slow + cones[n, j, i]))
