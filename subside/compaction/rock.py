"""From the scenario's rock parameters to the numbers of each cell."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager
from types import SimpleNamespace
from typing import Any

import numpy as np
import xarray as xr

from subside.api import COMMON_LAW_PARAMETERS, InputError, Law, Parameter, Rock
from subside.compaction.fields import Streams, field_of_cells, place, scale_of_field
from subside.errors import PluginError, located, nearest
from subside.scenario import ByRegion, CellField, CompactionTable, RockValue, parameter_value

__all__ = ["Block", "Part", "assign_blocks"]

_RELEASE = Parameter("horizontal_release", "1", "horizontal stress released over that of a "
                     "reservoir as stiff as its host", minimum=0.0, example="1.0")


Part = slice | np.ndarray
"""Some of a block's cells: their places in `Block.cells`."""


class Block:
    """One `[[compaction]]` table made ready: its law, its cells, its parameters.

    Attributes
    ----------
    cells : array of int (n,)
        Which cells of the dataset follow this law.
    release : "matched", "own", float or array (n,)
        Horizontal release of its cells.
    """

    def __init__(self, table: CompactionTable, law: Law, where: str, cells: np.ndarray,
                 dataset: xr.Dataset, streams: Streams) -> None:
        self.table = table
        self.law = law
        self.where = where
        self.cells = cells
        self._dataset = dataset
        self._streams = streams
        regions = [str(r) for r in dataset["region_name"].values]
        declared = {p.name: p for p in (*COMMON_LAW_PARAMETERS, *law.parameters)}
        for key in table.parameters:
            if key not in declared:
                raise InputError(f"{where}: law '{law.name}' has no key '{key}'."
                                 + nearest(key, declared))
        self.values: dict[str, RockValue | None] = {}
        for name, parameter in declared.items():
            if name in table.parameters:
                self.values[name] = parameter_value(
                    table.parameters[name], parameter, where, regions)
            elif parameter.required:
                raise InputError(f"{where}: law '{law.name}' needs the key '{name}' "
                                 f"({parameter.meaning}); for example {name} = "
                                 f"\"{parameter.example}\".")
            else:
                self.values[name] = parameter.default
        self._arrays = {name: self._expand(declared[name], value)
                        for name, value in self.values.items()}
        self.release = self._release(regions)
        for name in law.needs:
            scale_of_field(dataset, streams, name, None, self.by_law)
            if name not in streams:
                field_of_cells(dataset, name, None, self.by_law, cells)
        with self.speaking(slice(None)):
            law.check(self.rock(slice(None)))

    @property
    def by_law(self) -> str:
        """Who asks for a field, for messages."""
        return f"{self.where}: law '{self.law.name}'"

    @contextmanager
    def speaking(self, part: Part) -> Iterator[None]:
        """Errors of the law, with this block and the place in the grid put before them.

        `part` says which of the block's cells the law was given.
        """
        try:
            with located(self.where, lambda n: place(self._dataset, int(self.cells[part][n]))):
                yield
        except InputError:
            raise
        except Exception as error:
            raise PluginError(f"{self.where}: law '{self.law.name}' failed with "
                              f"{type(error).__name__}: {error}. This is a fault of the law; "
                              "run again with --debug and tell its author.") from error

    def rock(self, part: Part) -> Rock:
        """Parameters of a part of the block's cells: floats, or arrays (cell,), or None."""
        return SimpleNamespace(**{
            name: _read_only(value[part]) if isinstance(value, np.ndarray) else value
            for name, value in self._arrays.items()
        })

    def _release(self, regions: list[str]) -> Any:
        raw = self.table.horizontal_release
        if raw in ("matched", "own"):
            return raw
        if isinstance(raw, str) and raw.strip()[:1].isalpha():
            raise InputError(f"{self.where} horizontal_release = {raw!r} is none of: \"matched\", "
                             "\"own\", a number, { field = NAME }."
                             + nearest(raw, ("matched", "own")))
        return self._expand(_RELEASE, parameter_value(raw, _RELEASE, self.where, regions))

    def _expand(self, parameter: Parameter, value: RockValue | None) -> Any:
        """A parameter's value for the cells of the block: a float, an array (cell,), or None."""
        if value is None or isinstance(value, (int, float)):
            return value
        if isinstance(value, CellField):
            where = f"{self.where} {parameter.name}"
            scale_of_field(self._dataset, self._streams, value.name, parameter.unit, where)
            if value.name in self._streams:
                raise InputError(f"{where}: the field '{value.name}' changes with time; a rock "
                                 "parameter must not.")
            values = field_of_cells(self._dataset, value.name, parameter.unit, where, self.cells)
            for at in (int(values.argmin()), int(values.argmax())) if values.size else ():
                try:
                    parameter.check(float(values[at]), float(values[at]),
                                    f"{self.where} (field '{value.name}')")
                except InputError as error:
                    raise InputError(str(error), cell=int(self.cells[at])) from None
            return values
        return self._by_region(parameter, value)

    def _by_region(self, parameter: Parameter, value: ByRegion) -> np.ndarray:
        names = [str(r) for r in self._dataset["region_name"].values]
        index = self._dataset["region"].values[self.cells]
        table = np.array([value.values.get(n, np.nan) for n in names])
        numbers = table[index]
        if np.isnan(numbers).any():
            absent = sorted({names[i] for i in index[np.isnan(numbers)]})
            raise InputError(f"{self.where} {parameter.name}: by_region gives no value for "
                             f"'{absent[0]}'; add it, or leave that region to another "
                             "[[compaction]] table.")
        return numbers


def _read_only(values: np.ndarray) -> np.ndarray:
    view = values.view()
    view.flags.writeable = False
    return view


def assign_blocks(tables: Sequence[CompactionTable], laws: Mapping[str, type[Any]],
                  dataset: xr.Dataset, streams: Streams | None = None) -> list[Block]:
    """Each cell to exactly one block.

    Parameters
    ----------
    tables : sequence of CompactionTable
        The scenario's `[[compaction]]`.
    laws : mapping
        Law class by name.
    dataset : Dataset
        The cell dataset.
    streams : mapping of str to mapping, optional
        Attributes of the fields in time, which are not in the dataset; see `fields`.

    Raises
    ------
    InputError
        Unknown region, a region in two blocks, two blocks without regions, a cell in no block.
    """
    names = [str(r) for r in dataset["region_name"].values]
    region = dataset["region"].values
    owner = np.full(len(names), -1)
    rest: int | None = None
    for number, table in enumerate(tables):
        where = _where(tables, number)
        if table.regions is None:
            if rest is not None:
                raise InputError(f"{where}: two [[compaction]] tables name no regions; only one "
                                 "may take the cells that no other names.")
            rest = number
            continue
        for name in table.regions:
            if name not in names:
                raise InputError(f"{where}: the grid has no region '{name}'."
                                 + nearest(name, names))
            index = names.index(name)
            if owner[index] >= 0:
                raise InputError(f"{where}: region '{name}' is already in "
                                 f"{_where(tables, int(owner[index]))}; a cell belongs to one "
                                 "block.")
            owner[index] = number
    present = np.unique(region)
    if rest is None:
        orphan = [names[r] for r in present if owner[r] < 0]
        if orphan:
            count = int((region == names.index(orphan[0])).sum())
            raise InputError(f"region '{orphan[0]}' ({count} cells) belongs to no "
                             "[[compaction]] table; add it to one, or leave 'regions' out of one "
                             "table to take the rest.")
    else:
        owner[owner < 0] = rest
    blocks = []
    for number, table in enumerate(tables):
        cells = np.nonzero(owner[region] == number)[0].astype(np.int32)
        blocks.append(Block(table, laws[table.law](), _where(tables, number), cells, dataset,
                            streams or {}))
    return blocks


def _where(tables: Sequence[CompactionTable], number: int) -> str:
    return "[compaction]" if len(tables) == 1 else f"[[compaction]] number {number + 1}"
