"""From the field of a leg's dates to the maps of a result, and where the maps go.

Maps are handed on date by date: into a file that is being written, or into arrays where the caller
wants the result in memory.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Protocol

import numpy as np
import xarray as xr

from subside.errors import PluginError, SubsideError
from subside.hooks.contracts import Quantity
from subside.names import RESULT_VARIABLES
from subside.observe.footprint import Footprints
from subside.observe.map import MapGrid
from subside.observe.request import GRADIENT_NAMES, Request
from subside.quantities.bowl import extremes, volumes
from subside.superposition.interface import Fields

__all__ = [
    "HeldMaps", "MapMaker", "MapSink", "Numbers", "computed", "held_names", "is_local", "map_names",
]

_ON_MAP = {name for name, variable in RESULT_VARIABLES.items() if "y" in variable.dims}
_MOVEMENT = {"subsidence": "down", "displacement_east": "east", "displacement_north": "north"}


class MapSink(Protocol):
    """Takes maps, some dates at a time."""

    def put(self, name: str, first_step: int, values: np.ndarray) -> None:
        """Maps (date, ..., y, x) from a date on; the array is the sink's from then on."""


class HeldMaps:
    """Maps kept in memory."""

    def __init__(self) -> None:
        self.maps: dict[str, list[np.ndarray]] = {}

    def put(self, name: str, first_step: int, values: np.ndarray) -> None:
        """See `MapSink`; dates come in their order."""
        self.maps.setdefault(name, []).append(values)

    def whole(self, name: str) -> np.ndarray:
        """All dates of a map; it is forgotten here."""
        return np.concatenate(self.maps.pop(name))


@dataclass
class Numbers:
    """What is counted on the map at each date, leg after leg."""

    extremes: list[dict[str, np.ndarray]] = field(default_factory=list)
    volume: list[np.ndarray] = field(default_factory=list)
    volume_1cm: list[np.ndarray] = field(default_factory=list)


class MapMaker:
    """Makes the maps of each leg.

    Parameters
    ----------
    frame : Dataset
        Coordinates and attributes of the result.
    request : Request
    grid : MapGrid
    footprints : Footprints
        Of the cells.
    unit : float
        Length of the CRS's own unit, m.
    sink : MapSink
        Of the maps of the result.
    held : HeldMaps
        Of the maps that quantities want at all dates.
    """

    def __init__(self, frame: xr.Dataset, request: Request, grid: MapGrid,
                 footprints: Footprints, unit: float, sink: MapSink, held: HeldMaps) -> None:
        self._frame, self._request, self._grid, self._unit = frame, request, grid, unit
        self._sink, self._held = sink, held
        half = 0.5 * grid.spacing
        self._terms = footprints.terms
        self._shares = footprints.shares(float(grid.x[0]) - half, float(grid.y[0]) + half,
                                         grid.spacing, *grid.shape)
        self._before: dict[str, np.ndarray] = {}
        self.numbers = Numbers()

    def leg(self, first: int, fields: Fields, by_region: Sequence[np.ndarray],
            columns: Sequence[tuple[np.ndarray, np.ndarray]]) -> None:
        """Make the maps from date `first` on.

        Parameters
        ----------
        first : int
            Output date.
        fields : Fields
            Component to (date, pixel).
        by_region : sequence of array (date, pixel)
            Subsidence caused by each region, where it is wanted.
        columns : sequence of (columns, sums (date, term, n))
            From `observe.footprint.column_sums`.
        """
        steps = fields["down"].shape[0]
        shape = (steps, *self._grid.shape)
        maps = {name: fields[part].reshape(shape) for name, part in _MOVEMENT.items()}
        self._count(fields["down"])
        maps["compaction"] = self._compaction(steps, columns).reshape(shape)
        maps |= {name: fields[part].reshape(shape) for name, part in GRADIENT_NAMES.items()
                 if part in fields}
        maps |= self._local(first, steps, maps)
        if by_region:
            stacked = np.stack([values.reshape(shape) for values in by_region], axis=1)
            maps["region_subsidence"] = stacked
        for name in _names_by_leg(self._request):
            self._sink.put(name, first, maps[name])
        for name in held_names(self._request):
            self._held.put(name, first, maps[name].copy())

    def _compaction(self, steps: int,
                    columns: Sequence[tuple[np.ndarray, np.ndarray]]) -> np.ndarray:
        """Volume lost below each pixel over its area, (date, pixel)."""
        total = np.zeros((steps, self._terms, self._shares.shape[1] // self._terms))
        for names, sums in columns:
            total[:, :, names] += sums
        total /= self._grid.pixel_area
        compaction = np.empty((steps, self._shares.shape[0]))
        for step in range(steps):
            compaction[step] = self._shares @ total[step].ravel()
        return compaction

    def _local(self, first: int, steps: int, maps: dict[str, np.ndarray]) -> dict[str, np.ndarray]:
        """Quantities that need no more dates than these and the one before."""
        wanted = [q for q in self._request.quantities if is_local(q)]
        if not wanted:
            return {}
        needed = {need for quantity in wanted for need in quantity.needs}
        back = min(len(self._before), 1)
        window = self._frame.isel(time=slice(first - back, first + steps)).drop_vars(
            list(self._frame.data_vars))
        for name in needed:
            values = maps[name]
            if back:
                values = np.concatenate([self._before[name], values])
            window[name] = (("time", "y", "x"), values)
            self._before[name] = maps[name][-1:].copy()
        return {quantity.name: computed(quantity, window).values[back:] for quantity in wanted}

    def _count(self, down: np.ndarray) -> None:
        numbers, targets, area = self.numbers, self._grid.targets, self._grid.pixel_area
        numbers.extremes.append(extremes(down, targets.x / self._unit, targets.y / self._unit))
        every, deep = volumes(down, area)
        numbers.volume.append(every)
        numbers.volume_1cm.append(deep)


def held_names(request: Request) -> list[str]:
    """The maps that quantities want at all dates."""
    needs = {need for q in request.quantities if not is_local(q) for need in q.needs}
    return sorted(needs & {*_MOVEMENT, *GRADIENT_NAMES, "compaction"})


def is_local(quantity: Quantity) -> bool:
    """Whether a quantity can be computed a few dates at a time, from maps."""
    return quantity.looks_back in (0, 1) and set(quantity.needs) <= {*_MOVEMENT, *GRADIENT_NAMES,
                                                                     "compaction"}


def map_names(request: Request) -> list[str]:
    """The maps of a result, those first that each leg hands on."""
    names = _names_by_leg(request)
    return names + [q.name for q in request.quantities if not is_local(q) and _on_map(q)]


def _names_by_leg(request: Request) -> list[str]:
    names = [*_MOVEMENT, "compaction", *(n for n in GRADIENT_NAMES if n in request.names)]
    names += [q.name for q in request.quantities if is_local(q)]
    return names + (["region_subsidence"] if request.by_region else [])


def _on_map(quantity: Quantity) -> bool:
    return bool({need for need in quantity.needs if need in _ON_MAP})


def computed(quantity: Quantity, result: xr.Dataset) -> xr.DataArray:
    """A plug-in's variable; what goes wrong in it is said to be its fault."""
    try:
        return quantity.compute(result).transpose("time", ...)
    except SubsideError:
        raise
    except Exception as error:
        raise PluginError(f"quantity '{quantity.name}' failed with {type(error).__name__}: "
                          f"{error}; leave it out of [output] quantities and tell its author."
                          ) from error
