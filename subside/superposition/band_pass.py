"""The lattice of one band at work: spread, transform, meet the kernels, transform back, read."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numba
import numpy as np
from scipy.fft import fft, ifft, irfft, rfft

from subside.superposition.depth_nodes import depth_nodes
from subside.superposition.frame import Axis, Frame
from subside.superposition.interface import Bodies
from subside.superposition.kernel_table import ODD, apply_kernels, kernel_spectra
from subside.superposition.resample import Raster, Sampler
from subside.superposition.sampled import SampledCells
from subside.superposition.spread import Bins, gather, spread
from subside.superposition.stencil import Stencil

__all__ = ["BandPass"]

_CELLS_AT_ONCE = 60_000
_LATTICE_BYTES = 4e8
"""Moments on the lattice; more steps than fit are taken in turn."""
_SPECTRA_BYTES = 1e8
"""Spectra of the steps transformed together."""


class BandPass:
    """One band on its own lattice.

    Parameters
    ----------
    bodies, cells
        All bodies, and the band's cells among them.
    x, y : array (target,)
        m.
    raster : Raster or None
        How the targets form a regular grid.
    earth : EarthModel
    sources : list of str
    stencil : Stencil
    depth_error : float
        Allowed to the interpolation in depth.
    components : int
        3, or 8 with the gradient.
    """

    def __init__(self, bodies: Bodies, cells: SampledCells, x: np.ndarray, y: np.ndarray,
                 raster: Raster | None, earth: Any, sources: list[str], stencil: Stencil,
                 depth_error: float, components: int) -> None:
        low, high = float(cells.top.min()), float(cells.bottom.max())
        spacing, extent = low / stencil.ratio, cells.extent
        depths, weights = depth_nodes(earth, sources, low, high, depth_error, components > 3)
        self.frame = Frame(
            Axis.around((extent[:, 0].min(), extent[:, 1].max()), (x.min(), x.max()), spacing,
                        stencil.width),
            Axis.around((extent[:, 2].min(), extent[:, 3].max()), (y.min(), y.max()), spacing,
                        stencil.width),
            depths, weights)
        self._workers = numba.get_num_threads()
        self._bodies, self._stencil, self._components = bodies, stencil, components
        self._bins = Bins.of(extent, self.frame.x, self.frame.y, stencil.width)
        self._cells = cells
        self.sampler = Sampler(x, y, raster, self.frame, stencil)
        kernels = [kernel_spectra(earth, source, self.frame, components, self._workers)
                   for source in sources]
        self._kernels = np.stack(kernels, axis=-1).reshape(*kernels[0].shape[:3], -1)

    def add(self, result: np.ndarray, moments: list[np.ndarray],
            done: Callable[[float], None]) -> None:
        """Add the band's field to result (component, time, target).

        `moments` holds one array (time, cell) for each source; `done` hears of shares of the work.
        """
        steps = result.shape[1]
        planes = self.frame.depths.size * len(moments)
        nodes = self.frame.y.sources * self.frame.x.sources
        block = int(np.clip(_LATTICE_BYTES / (8.0 * nodes * planes), 1, steps))
        plane = 8.0 * self.frame.y.length * (self.frame.x.length + 2)
        batch = int(np.clip(_SPECTRA_BYTES / (plane * (planes + self._components)), 1, block))
        for start in range(0, steps, block):
            part = [moment[start:start + block] for moment in moments]
            lattice = self._spread(part)
            done(0.5 * part[0].shape[0] / steps)
            for first in range(0, part[0].shape[0], batch):
                some = lattice[..., first:first + batch]
                self.sampler.add(result, start + first, self._convolve(some))
                done(0.5 * some.shape[-1] / steps)

    def _spread(self, moments: list[np.ndarray]) -> np.ndarray:
        """Moments on the lattice: (row, column, depth node, source, time)."""
        frame, bins = self.frame, self._bins
        shape = (frame.y.sources, frame.x.sources, frame.depths.size, len(moments),
                 moments[0].shape[0])
        lattice = np.zeros(shape)
        flat = lattice.reshape(shape[0], -1)
        powers = np.ascontiguousarray(self._stencil.coefficients.T)
        turns = bins.turns(_CELLS_AT_ONCE)
        # one room for all turns: fresh memory is slow
        most = max(int(np.diff(bins.strips)[strips].sum()) for strips in turns)
        room = np.empty((most, len(moments) * shape[-1]))
        for strips in turns:
            cells = np.concatenate([np.arange(bins.strips[s], bins.strips[s + 1]) for s in strips])
            size = np.diff(bins.strips)[strips]
            end = np.cumsum(size)
            chosen = bins.order[cells]
            index = self._cells.index[chosen]
            rank = np.argsort(index)
            strength = room[:index.size]
            gather(strength, tuple(moments), index[rank], rank)
            spread(flat, end - size, end, strength, self._bodies.corners(index),
                   self._cells.rule[chosen], bins.row[cells], bins.column[cells],
                   bins.extra_rows[cells], bins.extra_columns[cells], frame.x.origin,
                   frame.y.origin, frame.x.spacing, powers, frame.depths, frame.weights)
        return lattice

    def _convolve(self, lattice: np.ndarray) -> np.ndarray:
        """The field on the target nodes: (row, column, component, time)."""
        x, y = self.frame.x, self.frame.y
        steps = lattice.shape[-1]
        spectra = rfft(lattice, n=x.length, axis=1, workers=self._workers)
        spectra = fft(spectra, n=y.length, axis=0, workers=self._workers)
        rows, columns = spectra.shape[:2]
        field = np.empty((rows, columns, self._components, steps), dtype=complex)
        apply_kernels(field.view(float), spectra.view(float).reshape(rows, columns, -1, 2 * steps),
                      self._kernels, ODD)
        field = ifft(field, axis=0, workers=self._workers, overwrite_x=True)[y.target_places]
        field = irfft(field, n=x.length, axis=1, workers=self._workers)
        return np.ascontiguousarray(field[:, x.target_places])
