"""Cell datasets and laws without a file, and the answer that a compactor must give."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from itertools import pairwise
from typing import Any

import numpy as np
import xarray as xr
from law_cases import BAR, LAWS, YEAR

from subside.api import EarthModel, History, Law, Rock
from subside.compaction.apply import Compactor, State, Strength
from subside.compaction.rock import Block, assign_blocks
from subside.earth_models import HalfSpace
from subside.scenario import CompactionTable
from subside.timeline import TimeAxis

TABLES: dict[str, dict[str, Any]] = {
    "linear": {"uniaxial_compressibility": "1.1e-5 1/bar",
               "unloading_compressibility": "0.4e-5 1/bar"},
    "bilinear": {"compressibility_before_yield": "0.5e-5 1/bar",
                 "compressibility_after_yield": "3e-5 1/bar", "yield_stress_increase": "40 bar",
                 "unloading_compressibility": "0.3e-5 1/bar"},
    "isotach": {"reference_compressibility": "1e-5 1/bar",
                "direct_compressibility": "0.5e-5 1/bar", "rate_exponent": 0.02,
                "reference_stress_rate": "3e-4 bar/year", "initial_effective_stress": "300 bar"},
}
SOFT = HalfSpace(poisson_ratio=0.25)
STIFF = HalfSpace(poisson_ratio=0.25, young_modulus=10e9)


class WholeOnly(Law):
    """A stranger's law that offers `strain` alone and wants the temperature."""

    name = "whole-only"
    needs = ("temperature",)

    def strain(self, history: History, rock: Rock) -> np.ndarray:
        warmth = np.broadcast_to(history.fields["temperature"], history.stress_rise.shape)
        return 1e-10 * history.stress_rise + 1e-6 * (warmth - warmth[0])


class ByDate(WholeOnly):
    """The same by date; what it remembers is an array it was handed."""

    name = "by-date"

    def start(self, rock: Rock) -> Any:
        return (0.0, 0.0)

    def advance(self, state: Any, t0: float, t1: float, rise0: np.ndarray, rise1: np.ndarray,
                fields: Mapping[str, tuple[np.ndarray, np.ndarray]], rock: Rock) -> Any:
        rise, warming = state
        assert (np.asarray(rise) == rise0).all(), "the array kept from the last date has changed"
        before, now = fields["temperature"]
        warming = warming + (now - before)
        return (rise1, warming), 1e-10 * rise1 + 1e-6 * warming


KNOWN = {law.name: law for law in (*LAWS, WholeOnly, ByDate)}


def table(law: str, **more: Any) -> CompactionTable:
    """A `[[compaction]]` table."""
    return CompactionTable(law=law, **TABLES.get(law, {}) | more)


def dataset(cells: int, region: Any = None, names: Sequence[str] = ("all",),
            **fields: tuple[Any, str]) -> xr.Dataset:
    """Cells of 1000 to 2000 m3 numbered from 100 on; further fields as (values, unit)."""
    data: dict[str, Any] = {
        "volume": ("cell", np.linspace(1000.0, 2000.0, cells)),
        "region": ("cell", np.zeros(cells, dtype=int) if region is None else np.array(region)),
        "cell_id": ("cell", np.arange(100, 100 + cells)),
    }
    data |= {name: ("cell", np.array(values, dtype=float), {"units": unit})
             for name, (values, unit) in fields.items()}
    return xr.Dataset(data, coords={"region_name": ("region", list(names))})


def made(tables: Sequence[CompactionTable], cells: xr.Dataset, axis: TimeAxis, *,
         earth: EarthModel = SOFT, streams: Any = None) -> tuple[Compactor, list[Block]]:
    """A compactor with its blocks; every cell 2000 m deep."""
    blocks = assign_blocks(tables, KNOWN, cells, streams)
    depth = np.full(cells.sizes["cell"], 2000.0)
    return Compactor(cells, axis, blocks, earth, depth, streams), blocks


def run(compactor: Compactor, pressure: np.ndarray, legs: Sequence[int],
        parts: Sequence[np.ndarray], fields: Mapping[str, np.ndarray] | None = None,
        ) -> tuple[list[State], Strength]:
    """Every leg (rows legs[n] to legs[n + 1] - 1) of every block of cells, put together."""
    states = [compactor.begin(part) for part in parts]
    rows: list[list[np.ndarray]] = []
    for first, last in pairwise(legs):
        whole = np.full((4, np.diff(compactor.output_range(first, last))[0],
                         pressure.shape[1]), np.nan)
        for state, part in zip(states, parts, strict=True):
            got = compactor.advance(
                state, first, last, pressure[first:last, part],
                {n: v[first:last, part] for n, v in (fields or {}).items()}, keep_strain=True)
            assert got.strain is not None
            closure = np.zeros_like(got.strain) if got.closure is None else got.closure
            for n, values in enumerate((got.volume_lost, got.contraction, closure, got.strain)):
                whole[n][:, part] = values
        rows.append(list(whole))
    lost, contraction, closure, strain = (np.concatenate(some) for some in zip(*rows, strict=True))
    return states, Strength(lost, contraction, closure, strain)


def expected_strain(block: Block, axis: TimeAxis, pressure: np.ndarray,
                    fields: Mapping[str, np.ndarray] | None = None) -> np.ndarray:
    """The law's own `strain` on the dates of both kinds, at the output dates: (nt, cell)."""
    def onto(values: np.ndarray) -> np.ndarray:
        return np.stack([np.interp(axis.union, axis.pressure, c) for c in values.T], axis=1)

    rock = block.rock(slice(None))
    drop = onto((pressure[0] - pressure)[:, block.cells])
    history = History(axis.union, drop, rock.biot * drop,
                      {n: onto(v[:, block.cells]) for n, v in (fields or {}).items()})
    return block.law.strain(history, rock)[np.searchsorted(axis.union, axis.output)]


def years(*numbers: float) -> np.ndarray:
    """Seconds."""
    return np.array(numbers) * YEAR


def falling(steps: int, cells: int, seed: int = 1) -> np.ndarray:
    """Pressure (steps, cell) in Pa, mostly falling, by 0 to 150 bar."""
    rng = np.random.default_rng(seed)
    fall = np.cumsum(rng.uniform(-0.3, 1.0, (steps, cells)), axis=0)
    fall -= fall[0]
    return 300 * BAR - 150 * BAR * fall / steps
