"""`subside check`: validate without computing."""

from __future__ import annotations

from pathlib import Path

import click

from subside.cli.options import bars, common, json_option, note_warnings, plugin_option, print_json


@click.command("check")
@click.argument("scenario_file", metavar="SCENARIO", type=click.Path(path_type=Path))
@plugin_option
@json_option
@common
def command(scenario_file: Path, plugins: tuple[Path, ...], as_json: bool, quiet: bool) -> None:
    """Validate a scenario and all it names, and foretell the work.

    Exits 0 when everything is in order, 2 when something is wrong.

    \b
    Example:
        subside check marrow-fen/scenario.toml
    """
    from subside.pipeline import prepare
    from subside.scenario import load_scenario

    note_warnings()
    with bars(quiet) as progress:
        job = prepare(load_scenario(scenario_file), plugins, progress)
    pixels = job.expected_pixels() if job.wants_map else 0
    plan = job.plan(pixels + job.points.x.size)
    laws = sorted({block.law.name for block in job.blocks})
    facts = {
        "title": job.scenario.title or scenario_file.stem,
        "cells": job.bodies.count,
        "pressure_dates": int(job.timeline.axis.pressure.size),
        "output_dates": int(job.timeline.dates.size),
        "points": int(job.points.x.size),
        "map_pixels": pixels,
        "map_extent": "given" if job.scenario.map and job.scenario.map.bounds else "automatic",
        "earth_model": job.earth.name,
        "laws": laws,
        "method": plan.method,
        "pairs": plan.pairs,
        "memory_bytes": plan.memory_bytes,
        "edge_depletion": job.edge_depletion,
        "warnings": job.warnings,
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
            ("laws, earth", f"{', '.join(laws)}; {facts['earth_model']}"),
            ("method", f"{plan.method}, about {plan.pairs:.2g} cell-target pairs"),
            ("memory", f"about {plan.memory_bytes / 1e9:.2f} GB"),
            ("edge depletion", f"{100 * job.edge_depletion:.1f} % of the largest"),
        ):
            click.echo(f"  {label:<14}  {text}")
        for warning in job.warnings:
            click.echo(f"warning: {warning}")

