"""Which law on which cell: from the pressure history to the strength of every source.

A source closes vertically and releases horizontal stress. Both are carried as moments in m3, and
every elastic kernel is put together from a closing crack and a nucleus of strain::

    field = closure moment x crack + contraction moment x nucleus
    contraction moment = g e V,   closure moment = (1 - g) e V

with e the strain of the law, V the net bulk volume and g the horizontal release: 1 where the
reservoir is as stiff as its host ("matched"), G_res/G_host for a reservoir that releases
horizontal stress by its own stiffness ("own"). With the secant stiffness of the law,
G_res = (1-2nu)/(2(1-nu)) a Dp/e, the second becomes g e V = a Dp V / M_host, with no division by a
strain that may vanish.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
import xarray as xr

from subside.api import EarthModel, History, InputError
from subside.compaction.rock import Block, field_of_cells, place
from subside.timeline import TimeAxis

__all__ = ["Compaction", "compact"]

_CELLS_AT_ONCE = 50_000
_STRAIN_ALARM = 0.005


@dataclass
class Compaction:
    """What the cells do at the output dates.

    Attributes
    ----------
    strain : array (nt, cell)
        Uniaxial strain, shortening positive.
    contraction, closure : array (nt, cell)
        Moments in m3, see the module.
    volume_lost : array (nt, cell)
        Strain times net bulk volume, m3.
    """

    strain: np.ndarray
    contraction: np.ndarray
    closure: np.ndarray | None
    net_volume: np.ndarray
    warnings: list[str] = field(default_factory=list)

    @property
    def volume_lost(self) -> np.ndarray:
        return self.strain * self.net_volume

    @property
    def moments(self) -> dict[str, np.ndarray]:
        """Moments by source kind; a kind that no cell uses is left out."""
        found = {"contraction": self.contraction}
        if self.closure is not None:
            found["closure"] = self.closure
        return found


def compact(
    dataset: xr.Dataset,
    pressure: np.ndarray,
    axis: TimeAxis,
    blocks: Sequence[Block],
    earth: EarthModel,
    depth: np.ndarray,
    progress: Callable[[int], None] = lambda cells: None,
) -> Compaction:
    """Apply every block's law to its cells.

    Parameters
    ----------
    dataset : Dataset
        The cell dataset.
    pressure : array (np, cell)
        Absolute pressure in Pa at `axis.pressure`; the first row is the initial pressure.
    axis : TimeAxis
    blocks : sequence of Block
        From `assign_blocks`.
    earth : EarthModel
        Its modulus is the host's, for ``horizontal_release = "own"`` and for the warning.
    depth : array (cell,)
        Depth of the cell centres below the ground or seabed, m.
    progress : callable
        Told the number of cells finished since the last call.

    Raises
    ------
    InputError
        From a law, or when a law returns numbers that are not finite.
    """
    cells = dataset.sizes["cell"]
    nt = axis.output.size
    net = np.array(dataset["volume"].values, dtype=float)
    if "net_to_gross" in dataset:
        ratio = np.ones(cells)
        for block in blocks:
            if block.table.apply_net_to_gross:
                ratio[block.cells] = field_of_cells(
                    dataset, "net_to_gross", "1", f"{block.where} apply_net_to_gross", block.cells)
        net *= ratio
    strain = np.zeros((nt, cells))
    contraction = np.zeros((nt, cells))
    rise = np.zeros(cells)
    warnings: list[str] = []
    for block in blocks:
        for start in range(0, block.cells.size, _CELLS_AT_ONCE):
            part = slice(start, start + _CELLS_AT_ONCE)
            index = block.cells[part]
            history = _history(dataset, pressure, axis, block, part)
            law_strain = _strain_of(block, history, part, dataset)
            keep = np.searchsorted(history.time, axis.output)
            strain[:, index] = law_strain[keep]
            drop_stress = history.stress_rise[keep]
            rise[index] = drop_stress[-1]
            contraction[:, index] = net[index] * _released(
                block, part, law_strain[keep], drop_stress, earth, depth[index])
            progress(index.size)
        warnings += _mismatch(block, strain[-1], rise, earth, depth)
    _alarm(strain, dataset, warnings)
    closure = strain * net - contraction
    # A crack share that is only rounding is none: the classic nucleus stays one kernel.
    scale = float(np.abs(contraction).max(initial=0.0))
    has_closure = bool(np.abs(closure).max(initial=0.0) > 1e-14 * scale)
    return Compaction(strain, contraction, closure if has_closure else None, net, warnings)


def _history(dataset: xr.Dataset, pressure: np.ndarray, axis: TimeAxis, block: Block,
             part: slice) -> History:
    """Depletion and fields of some cells on the union of pressure and output dates."""
    index = block.cells[part]
    time = axis.union
    drop = _linear_in_time(axis.pressure, pressure[0, index] - pressure[:, index], time)
    biot = block.rock(part).biot
    fields: dict[str, np.ndarray] = {}
    for name in block.law.needs:
        values = field_of_cells(dataset, name, None, f"{block.where}: law '{block.law.name}'",
                                index)
        if values.ndim > 1:
            values = _linear_in_time(axis.pressure, values, time)
        fields[name] = values
    arrays: Mapping[str, np.ndarray] = {"drop": drop, "rise": biot * drop, **fields}
    for array in arrays.values():
        array.flags.writeable = False
    return History(time=time, pressure_drop=drop, stress_rise=arrays["rise"], fields=fields)


def _linear_in_time(known: np.ndarray, values: np.ndarray, wanted: np.ndarray) -> np.ndarray:
    """Values (np, cell) at `known` times, linear between them, at `wanted` times."""
    if known.size == wanted.size:
        return np.ascontiguousarray(values)
    left = np.clip(np.searchsorted(known, wanted, side="right") - 1, 0, known.size - 2)
    share = ((wanted - known[left]) / (known[left + 1] - known[left]))[:, None]
    return np.asarray(values[left] * (1 - share) + values[left + 1] * share)


def _strain_of(block: Block, history: History, part: slice, dataset: xr.Dataset) -> np.ndarray:
    with block.speaking(part):
        strain = np.asarray(block.law.strain(history, block.rock(part)))
    expected = history.pressure_drop.shape
    if strain.shape != expected:
        raise InputError(f"{block.where}: law '{block.law.name}' returned strain of shape "
                         f"{strain.shape}; (time, cell) = {expected} is expected.")
    if not np.isfinite(strain).all():
        first = int(block.cells[part][np.nonzero(~np.isfinite(strain).all(axis=0))[0][0]])
        raise InputError(f"{block.where}: law '{block.law.name}' gives no finite strain in "
                         f"{place(dataset, first)}; check its parameters there.")
    return strain


def _released(block: Block, part: slice, strain: np.ndarray, stress_rise: np.ndarray,
              earth: EarthModel, depth: np.ndarray) -> np.ndarray:
    """g e, the strain of the contraction part."""
    release = block.release
    if isinstance(release, np.ndarray):
        return np.asarray(strain * release[part])
    if release == "matched":
        return strain
    if release == "own":
        return np.asarray(stress_rise / earth.modulus_at(depth))
    return strain * release


def _mismatch(block: Block, last_strain: np.ndarray, last_rise: np.ndarray, earth: EarthModel,
              depth: np.ndarray) -> list[str]:
    """Says when a reservoir unlike its host is treated as if it were alike.

    Judged at the last output date: strain and stress rise (cell,) of that date.
    """
    if block.table.horizontal_release != "matched" or not earth.has_modulus or not block.cells.size:
        return []
    rise = last_rise[block.cells]
    fell = rise > 0.1 * max(float(rise.max()), 1.0)
    if not fell.any():
        return []
    ratio = np.median(last_strain[block.cells][fell] / rise[fell]
                      * np.broadcast_to(earth.modulus_at(depth[block.cells]), rise.shape)[fell])
    if 0.5 <= ratio <= 2.0:
        return []
    word = "softer" if ratio > 1 else "stiffer"
    return [f"{block.where}: strain over stress rise is {ratio:.2g} times 1/M of the host: the "
            f"reservoir is {word} than its host, and horizontal_release = \"matched\" then "
            "misstates the shape of the bowl (up to about 25 % of the peak at a compressibility "
            "3 times the host's, computed independently by finite elements); consider "
            "horizontal_release = \"own\"."]


def _alarm(strain: np.ndarray, dataset: xr.Dataset, warnings: list[str]) -> None:
    """Sandstone production strain is normally below 0.5 % (common practice, no source)."""
    largest = float(strain.max(initial=0.0))
    if largest > _STRAIN_ALARM:
        cell = int(np.unravel_index(strain.argmax(), strain.shape)[1])
        warnings.append(f"strain reaches {100 * largest:.2g} % in {place(dataset, cell)}; "
                        "sandstone normally stays below 0.5 %: check the compressibility and its "
                        "unit.")
