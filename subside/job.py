"""A scenario made ready."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import xarray as xr

from subside.compaction.apply import Compactor
from subside.compaction.rock import Block
from subside.grid.stream import Stream
from subside.hooks.contracts import EarthModel
from subside.observe.points import Points
from subside.observe.request import Request
from subside.scenario import Scenario
from subside.superposition.interface import Bodies
from subside.timeline import Timeline

__all__ = ["Job"]


@dataclass
class Job:
    """A scenario made ready: everything read and checked but the pressures, nothing computed."""

    scenario: Scenario
    timeline: Timeline
    cells: xr.Dataset
    streams: dict[str, Stream]
    blocks: list[Block]
    compactor: Compactor
    earth: EarthModel
    bodies: Bodies
    depth: np.ndarray
    points: Points
    request: Request
    warnings: list[str]

    @property
    def wants_map(self) -> bool:
        """A scenario without points gets a map."""
        return self.scenario.map is not None or not self.points.x.size

    @property
    def unit(self) -> float:
        """Length of the CRS's own unit, m."""
        return float(self.cells.attrs["xy_unit_in_m"])

    @property
    def where(self) -> str:
        """For messages."""
        return f"scenario '{self.scenario.path}'"

    @property
    def initial(self) -> np.ndarray | None:
        """Pressure at the start (cell,), Pa, where the scenario gives it."""
        given = self.scenario.grid[0].initial_pressure is not None
        return self.cells["initial_pressure"].values if given else None
