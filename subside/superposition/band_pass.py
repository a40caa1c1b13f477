"""The lattice of one band at work: take cells in, transform, meet the kernels, read at targets."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numba
import numpy as np
from scipy.fft import fft, ifft, irfft, rfft

from subside.superposition.census import Group
from subside.superposition.columns import column_starts, deposit_columns
from subside.superposition.depth_nodes import depth_nodes
from subside.superposition.frame import Axis, Frame
from subside.superposition.interface import Bodies
from subside.superposition.kernel_table import ODD, apply_kernels, kernel_spectra
from subside.superposition.resample import Raster, Sampler
from subside.superposition.rule import surface_rule
from subside.superposition.spread import Bins, deposit_bins, extent_of_points, strength_of
from subside.superposition.stencil import Stencil

__all__ = ["BandPass"]

_SPECTRA = 4e6
"""Numbers in the spectra of the dates transformed together: arrays of this size are used again by
the allocator, larger ones come as fresh memory, which costs more than the transform."""


class BandPass:
    """One band on its own lattice.

    Cells are put onto sheets, arrays (row, column, depth node, source, time) that add up: each
    thread or worker has a sheet of its own.

    Parameters
    ----------
    group : Group
        What the band's cells amount to.
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
    rule : array of int (column, 6) or None
        How finely the cells of each pillar are sampled, from the census; None without pillars.
    """

    def __init__(self, group: Group, x: np.ndarray, y: np.ndarray, raster: Raster | None,
                 earth: Any, sources: list[str], stencil: Stencil, depth_error: float,
                 components: int, rule: np.ndarray | None) -> None:
        spacing, box = group.top / stencil.ratio, group.box
        depths, weights = depth_nodes(earth, sources, group.top, group.bottom, depth_error,
                                      components > 3)
        self.frame = Frame(
            Axis.around((box[0], box[1]), (x.min(), x.max()), spacing, stencil.width),
            Axis.around((box[2], box[3]), (y.min(), y.max()), spacing, stencil.width),
            depths, weights)
        self._earth, self._sources = earth, sources
        self._stencil, self._components, self._rule = stencil, components, rule
        self._powers = np.ascontiguousarray(stencil.coefficients.T)
        self._kernels: np.ndarray | None = None
        self.sampler = Sampler(x, y, raster, self.frame, stencil)

    @property
    def bytes_per_date(self) -> float:
        """Of one sheet."""
        return 8.0 * self._planes * self.frame.y.sources * self.frame.x.sources

    @property
    def bytes_of_kernels(self) -> float:
        """Kernels, and the spectra of one date at least."""
        plane = 8.0 * self.frame.y.length * (self.frame.x.length + 2)
        spectra = 4 * max(plane * (self._planes + self._components), 8 * _SPECTRA)
        return self._planes * self._components * plane / 4 + spectra

    @property
    def _planes(self) -> int:
        return self.frame.depths.size * len(self._sources)

    @property
    def words(self) -> str:
        """For the record."""
        frame = self.frame
        return (f"lattice {frame.x.sources} x {frame.y.sources} x {frame.depths.size}, spacing "
                f"{frame.x.spacing:.4g} m, stencil of {self._stencil.width}")

    def roughness(self) -> np.ndarray:
        """How ill each target lies between the nodes, (target,)."""
        return self.sampler.roughness()

    def sheet(self, steps: int) -> np.ndarray:
        """An empty sheet."""
        frame = self.frame
        return np.zeros((frame.y.sources, frame.x.sources, frame.depths.size, len(self._sources),
                         steps))

    def deposit(self, sheet: np.ndarray, bodies: Bodies, cells: np.ndarray,
                moments: Mapping[str, np.ndarray], places: np.ndarray, sampling: float) -> None:
        """Add cells to a sheet. Everything here leaves the interpreter free for other threads.

        Parameters
        ----------
        cells : array of int (cell,)
            Those of one column one after another.
        moments : mapping of source to array (time, n)
        places : array of int (cell,)
            Where in `moments` the cells are.
        sampling : float
            Error of one cell's field, relative to itself, that sampling it by points may make; of
            use where cells do not stand in pillars.
        """
        flat = sheet.reshape(sheet.shape[0], -1)
        if bodies.column is None or self._rule is None:
            corners = bodies.corners(cells)
            rule = surface_rule(corners, sampling, self._components > 3)
            self._by_bins(flat, corners, moments, places, rule)
            return
        size = np.diff(column_starts(bodies.column[cells]))
        stands = np.repeat(size > 1, size)
        if not stands.all():
            alone = np.nonzero(~stands)[0]
            self._by_bins(flat, bodies.corners(cells[alone]), moments, places[alone],
                          self._rule[bodies.column[cells[alone]]])
            cells, places = cells[stands], places[stands]
        if cells.size:
            self._by_columns(flat, bodies, cells, moments, places)

    def _by_columns(self, flat: np.ndarray, bodies: Bodies, cells: np.ndarray,
                    moments: Mapping[str, np.ndarray], places: np.ndarray) -> None:
        assert bodies.column is not None and self._rule is not None
        start = column_starts(bodies.column[cells])
        rule = self._rule[bodies.column[cells[start[:-1]]]]
        if bodies.boxes is not None:
            boxes = bodies.boxes(cells)
            top, bottom = boxes[:, 2:3], boxes[:, 3:4]
            outline = bodies.corners(cells[start[:-1]])[:, :4, :2]
        else:
            corners = bodies.corners(cells)
            top, bottom = corners[:, :4, 2], corners[:, 4:, 2]
            outline = corners[start[:-1], :4, :2]
        frame = self.frame
        deposit_columns(flat, np.ascontiguousarray(outline), np.ascontiguousarray(top),
                        np.ascontiguousarray(bottom), rule, start,
                        strength_of(moments, self._sources, places), frame.x.origin,
                        frame.y.origin, frame.x.spacing, self._powers, frame.depths,
                        frame.weights)

    def _by_bins(self, flat: np.ndarray, corners: np.ndarray, moments: Mapping[str, np.ndarray],
                 places: np.ndarray, rule: np.ndarray) -> None:
        frame = self.frame
        bins = Bins.of(extent_of_points(corners, rule), frame.x, frame.y)
        order = bins.order
        deposit_bins(flat, strength_of(moments, self._sources, places[order]), corners[order],
                     rule[order], bins.row, bins.column, bins.extra_rows, bins.extra_columns,
                     frame.x.origin, frame.y.origin, frame.x.spacing, self._powers, frame.depths,
                     frame.weights)

    def add_field(self, result: np.ndarray, sheet: np.ndarray, single: bool) -> None:
        """Add the field of a sheet into result (component, time, target). Main thread only.

        `single`: transforms in single precision will do.
        """
        workers = numba.get_num_threads()
        if self._kernels is None:
            spectra = [kernel_spectra(self._earth, source, self.frame, self._components, workers)
                       for source in self._sources]
            self._kernels = np.stack(spectra, axis=-1).reshape(*spectra[0].shape[:3], -1)
        kind = np.dtype(np.float32 if single else np.float64)
        plane = 2.0 * self.frame.y.length * (self.frame.x.length // 2 + 1)
        steps = sheet.shape[-1]
        batch = int(np.clip(_SPECTRA / (plane * self._planes), 1, steps))
        kernels = self._kernels.astype(kind, copy=False)
        for first in range(0, steps, batch):
            some = sheet[..., first:first + batch]
            self.sampler.add(result, first, self._convolve(some, kernels, workers))

    def _convolve(self, lattice: np.ndarray, kernels: np.ndarray, workers: int) -> np.ndarray:
        """The field on the target nodes: (row, column, component, time)."""
        x, y = self.frame.x, self.frame.y
        rows, columns = lattice.shape[:2]
        series = int(np.prod(lattice.shape[2:]))
        steps = lattice.shape[-1]
        padded = np.zeros((rows, x.length, series), dtype=kernels.dtype)
        padded[:, :columns] = lattice.reshape(rows, columns, series)
        along = rfft(padded, axis=1, workers=workers)
        spectra = np.zeros((y.length, *along.shape[1:]), dtype=along.dtype)
        spectra[:rows] = along
        spectra = fft(spectra, axis=0, workers=workers, overwrite_x=True)
        field = np.empty((y.length, along.shape[1], self._components, steps), dtype=along.dtype)
        apply_kernels(field.view(kernels.dtype), spectra.view(kernels.dtype).reshape(
            y.length, along.shape[1], -1, 2 * steps), kernels, ODD)
        field = ifft(field, axis=0, workers=workers, overwrite_x=True)[y.target_places]
        field = irfft(field, n=x.length, axis=1, workers=workers)
        return np.ascontiguousarray(field[:, x.target_places])
