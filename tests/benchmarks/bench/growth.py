"""How seconds and memory of the whole job grow with cells, map and dates."""

from __future__ import annotations

import shutil
from pathlib import Path
from typing import Any

import click

from bench.whole_job import has_option, measure_job
from bench.workloads import WORKLOADS, Workload, write_workload

__all__ = ["measure_growth"]

_LONG = 60.0
"""Seconds of a run that is not repeated."""


def measure_growth(folder: Path, memory: str, repeats: int, quick: bool) -> dict[str, Any]:
    """Each series changes one size of W2 (W1 for a quick trial) and keeps the others.

    Parameters
    ----------
    memory : str
        Handed to `subside run --memory`, where it has that option.
    """
    base = WORKLOADS["W1" if quick else "W2"]
    options: tuple[str, ...] = ()
    if has_option("--memory"):
        options = ("--memory", memory)
    else:
        click.echo("growth: this version of subside run has no --memory; run without")
    pixels = (128, 256, 512) if quick else (256, 512, 1024, 2048)
    dates = (2, 5, 20) if quick else (2, 15, 60, 240)
    series: dict[str, list[tuple[float, Workload, int]]] = {
        "cells": [(base.field.count * n, base, n) for n in ((1, 4) if quick else (1, 4, 16))],
        "pixels": [(n * n, base.with_map(n), 1) for n in pixels],
        "dates": [(n, base.with_steps(n), 1) for n in dates],
    }
    found: dict[str, Any] = {"base": base.name, "memory": memory if options else None}
    for name, sizes in series.items():
        found[name] = []
        for size, load, finer in sizes:
            row = _one(folder, load, finer, options, min(repeats, 3))
            if row is not None:
                found[name].append({"size": size} | row)
    return found


def _one(folder: Path, load: Workload, finer: int, options: tuple[str, ...],
         repeats: int) -> dict[str, Any] | None:
    """One size; its files are removed again, for they are large."""
    scenario = write_workload(load, folder / "growth", cells_times=finer)
    if scenario is None:
        return None
    output = 16.0 * load.pixels**2 * load.field.steps
    free = shutil.disk_usage(folder).free
    row = None
    if 2.5 * output > 0.8 * free:
        click.echo(f"{load.name}: skipped, the result may need {2.5 * output / 1e9:.1f} GB of disk "
                   f"and {free / 1e9:.1f} GB are free")
    else:
        try:
            row = measure_job(scenario, repeats, options, long=_LONG)
        except click.ClickException as error:
            click.echo(f"{load.name}: {error.format_message()}")
            row = {"failed": error.format_message()[-300:]}
    shutil.rmtree(scenario.parent)
    return row
