"""`subside check`: validate without superposing."""

from __future__ import annotations

from dataclasses import replace
from functools import partial
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from subside.cli.options import (
    bars,
    common,
    json_option,
    loading,
    memory_option,
    note_warnings,
    plugin_option,
    print_json,
    workers_option,
)
from subside.errors import located

if TYPE_CHECKING:
    from subside.outlook import Outlook
    from subside.pipeline import Job
    from subside.progress import Progress


@click.command("check")
@click.argument("scenario_file", metavar="SCENARIO", type=click.Path(path_type=Path))
@memory_option
@workers_option
@plugin_option
@json_option
@common
def command(scenario_file: Path, memory: int | None, workers: int | None,
            plugins: tuple[Path, ...], as_json: bool, quiet: bool) -> None:
    """Validate a scenario and all it names, and foretell the work.

    Exits 0 when everything is in order, 2 when something is wrong.

    \b
    Example:
        subside check marrow-fen/scenario.toml --memory "2 GB"
    """
    with loading():
        from subside.compaction.fields import place
        from subside.outlook import Outlook, expected_map
        from subside.pipeline import prepare
        from subside.scenario import load_scenario

    note_warnings()
    with bars(quiet) as progress:
        job = prepare(load_scenario(scenario_file), plugins, progress)
        grid = expected_map(job) if job.wants_map else None
        outlook = Outlook.of(job, grid, 0, memory, workers, in_memory=False)
        with located(job.where, partial(place, job.cells)):
            _look_through(job, outlook, progress)
    pixels = grid.x.size * grid.y.size if grid is not None else 0
    warnings = [*job.warnings, *outlook.warnings]
    facts: dict[str, Any] = {
        "title": job.scenario.title or scenario_file.stem,
        "cells": job.bodies.count,
        "pressure_dates": int(job.timeline.axis.pressure.size),
        "output_dates": int(job.timeline.dates.size),
        "points": int(job.points.x.size),
        "map_pixels": pixels,
        "map_extent": "given" if job.scenario.map and job.scenario.map.bounds else "automatic",
        "earth_model": job.earth.name,
        "laws": sorted({block.law.name for block in job.blocks}),
        "method": ", ".join(sorted({s.method for s in outlook.work.summations.values()})),
        "pairs": float(job.bodies.count) * (pixels + job.points.x.size),
        "legs": len(outlook.legs),
        "memory_bytes": outlook.memory_bytes,
        "memory_allowed_bytes": memory,
        "edge_depletion": outlook.edge_depletion,
        "warnings": warnings,
    }
    if as_json:
        print_json(facts)
    elif not quiet:
        about = "" if facts["map_extent"] == "given" or not pixels else "about "
        click.echo(f"{facts['title']}: in order")
        for label, text in (
            ("cells", f"{facts['cells']:,}"),
            ("dates", f"{facts['pressure_dates']} of pressure, {facts['output_dates']} of output"),
            ("targets", f"{about}{pixels:,} map pixels, {facts['points']} points"),
            ("laws, earth", f"{', '.join(facts['laws'])}; {facts['earth_model']}"),
            ("method", f"{facts['method']}, about {facts['pairs']:.2g} cell-target pairs, dates in "
             f"{facts['legs']} {'leg' if facts['legs'] == 1 else 'legs'}"),
            ("memory", f"about {outlook.memory_bytes / 1e9:.2f} GB"
             + (f", {memory / 1e9:.2f} GB allowed" if memory is not None else "")),
            ("edge depletion", f"{100 * outlook.edge_depletion:.1f} % of the largest"),
        ):
            click.echo(f"  {label:<14}  {text}")
        for warning in warnings:
            click.echo(f"warning: {warning}")


def _look_through(job: Job, outlook: Outlook, progress: Progress) -> None:
    """All pressures through the checks and the laws, as in a run, and nothing superposed."""
    from subside.crew import Crew

    work = replace(outlook.work, summations={}, by_column=False, by_cell=False)
    total = float(job.bodies.count) * len(outlook.legs)
    with progress.stage("compaction", total, "cells") as advance, \
            Crew(work, outlook.batches, outlook.legs, outlook.threads) as crew:
        for leg in outlook.legs:
            outlook.watched(crew.leg(leg, lambda size: None, advance))
        outlook.finish(job.compactor.warnings(crew.findings))
