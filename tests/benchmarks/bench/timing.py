"""Repeats in turn, so that whatever else the machine does falls on all alike."""

from __future__ import annotations

import time
from collections.abc import Callable, Mapping
from dataclasses import dataclass

import click
import numpy as np

__all__ = ["Seconds", "in_turn", "stopwatch"]


@dataclass(frozen=True)
class Seconds:
    """Seconds of the repeats, scaled where only a part was timed."""

    values: tuple[float, ...]

    @property
    def median(self) -> float:
        """The middle one."""
        return float(np.median(self.values))

    def times(self, factor: float) -> Seconds:
        """All of them scaled."""
        return Seconds(tuple(factor * v for v in self.values))

    def record(self) -> dict[str, float | int]:
        """For the results file."""
        return {"median": self.median, "lowest": min(self.values), "highest": max(self.values),
                "repeats": len(self.values)}


def stopwatch(job: Callable[[], object]) -> float:
    """Seconds that a job takes."""
    start = time.perf_counter()
    job()
    return time.perf_counter() - start


def in_turn(jobs: Mapping[str, Callable[[], float]], repeats: int) -> dict[str, Seconds]:
    """Every job once, then every job again ...; each returns its seconds."""
    found: dict[str, list[float]] = {name: [] for name in jobs}
    for turn in range(repeats):
        for name, job in jobs.items():
            found[name].append(job())
            click.echo(f"  {turn + 1}/{repeats} {name}: {found[name][-1]:.4g} s")
    return {name: Seconds(tuple(values)) for name, values in found.items()}
