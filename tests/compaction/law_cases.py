"""Histories and rocks that the tests of the three laws share."""

from __future__ import annotations

from typing import Any

import numpy as np
from hypothesis import strategies as st

from subside.api import History, Rock
from subside.compaction.bilinear import Bilinear
from subside.compaction.isotach import Isotach
from subside.compaction.linear import Linear

BAR, MPA, YEAR = 1e5, 1e6, 365.25 * 86400.0
LAWS = (Linear, Bilinear, Isotach)

VALUES: dict[str, dict[str, Any]] = {
    "linear": {"uniaxial_compressibility": 1.1e-10, "unloading_compressibility": 0.4e-10},
    "bilinear": {
        "compressibility_before_yield": 0.5e-10, "compressibility_after_yield": 3e-10,
        "yield_stress_increase": 6 * MPA, "unloading_compressibility": 0.3e-10,
    },
    "isotach": {
        "reference_compressibility": 1e-10, "direct_compressibility": 0.5e-10,
        "rate_exponent": 0.02, "reference_stress_rate": 3.156e-4 * BAR / YEAR,
        "initial_effective_stress": 300 * BAR,
    },
}


def rock_of(law: Any, **values: Any) -> Rock:
    """The rock the host would hand over: common keys, and None for each optional key left out."""
    rock = {p.name: p.default for p in law.parameters}
    rock |= {"biot": 1.0, "yield_biot": 1.0, "previous_stress_rise": 0.0}
    return Rock(**rock | VALUES[law.name] | values)


def history_of(years: Any, drop: Any, biot: Any = 1.0) -> History:
    """Read-only history; `drop` (nt,) or (nt, cell) in Pa."""
    time = np.asarray(years, dtype=float) * YEAR
    drop = np.array(drop, dtype=float)
    drop = drop.reshape(time.size, -1)
    rise = np.asarray(biot * drop)
    for array in (time, drop, rise):
        array.flags.writeable = False
    return History(time=time, pressure_drop=drop, stress_rise=rise)


@st.composite
def paths(draw: Any, lowest: float = -60.0, highest: float = 350.0) -> tuple[Any, Any]:
    """Years and depletion (Pa) of a piecewise linear history: hours to ten years, both ways."""
    steps = draw(st.lists(st.tuples(
        st.sampled_from([1 / 8766, 0.01, 0.1, 0.5, 1.0, 3.0, 10.0]),
        st.one_of(st.none(), st.floats(lowest, highest)),
    ), min_size=1, max_size=8))
    years, drop = [0.0], [0.0]
    for length, value in steps:
        years.append(years[-1] + length)
        drop.append(drop[-1] if value is None else value * BAR)
    return np.array(years), np.array(drop)


@st.composite
def cut_paths(draw: Any) -> tuple[Any, Any, Any, Any, Any]:
    """A path, the same path with points put between, and where the old points are in it."""
    years, drop = draw(paths())
    inner = draw(st.lists(st.floats(0.001, 0.999), min_size=1, max_size=6))
    finer = np.union1d(years, years[-1] * np.array(inner))
    return years, drop, finer, np.interp(finer, years, drop), np.searchsorted(finer, years)
