"""The benchmarks: makes the workloads, measures, prints ratios.

    python tests/benchmarks/run.py                     W1 to W5, printed only
    python tests/benchmarks/run.py --growth -o docs/benchmarks
    python tests/benchmarks/run.py W1 --quick          a trial of a minute or two

With -o the results are also written as ``results.json``, ``table.md`` and ``growth.png``; what is
measured anew replaces what an earlier run left there, and each keeps its date and machine.
"""

from __future__ import annotations

from pathlib import Path

import click
from bench.ensemble import measure_ensemble
from bench.growth import measure_growth
from bench.machine import about
from bench.plot import draw_growth
from bench.record import Record
from bench.superposition import measure_superposition
from bench.whole_job import has_option, measure_job
from bench.workloads import WORKLOADS, write_workload

PARTS = ("superposition", "job", "ensemble")
BOUNDED = ("W4-wide",)
"""Workloads whose whole job is run inside the memory that is asked for."""


def geometries_of(name: str) -> tuple[str, ...]:
    """How the cells of a workload are stored: W2 both ways."""
    return ("boxes", "corners") if name == "W2" else ("boxes",)


@click.command()
@click.argument("names", nargs=-1, metavar="[WORKLOAD]...")
@click.option("--part", "parts", multiple=True, type=click.Choice(PARTS),
              help="Measure this only. May be repeated; default: all.")
@click.option("--growth", is_flag=True,
              help="Measure growth with cells, map and dates (alone, when no workload is named).")
@click.option("--tolerance", "tolerances", multiple=True, type=float, default=(1e-4,),
              show_default=True, help="Of the superposition. May be repeated.")
@click.option("--repeats", default=5, show_default=True)
@click.option("--pair-steps", default=1e10, show_default=True,
              help="Cell-target-steps that each baseline is timed on.")
@click.option("--memory", default="4GB", show_default=True,
              help="For growth and W4-wide, where subside run has --memory.")
@click.option("--quick", is_flag=True, help="A trial: one repeat, small samples, small growth.")
@click.option("--folder", default=Path("/tmp/w"), show_default=True, help="For the large files.",
              type=click.Path(path_type=Path, file_okay=False))
@click.option("-o", "--output", type=click.Path(path_type=Path, file_okay=False),
              help="Folder of results.json, table.md and growth.png.")
def main(names: tuple[str, ...], parts: tuple[str, ...], growth: bool,
         tolerances: tuple[float, ...], repeats: int, pair_steps: float, memory: str, quick: bool,
         folder: Path, output: Path | None) -> None:
    """Measure the workloads W1, W2, W3, W4, W4-wide, W5 (default: all)."""
    unknown = [name for name in names if name not in WORKLOADS]
    if unknown:
        raise click.BadParameter(f"{unknown[0]} is none of {', '.join(WORKLOADS)}")
    if quick:
        repeats, pair_steps = 1, 1e9
    record = Record(output, about(), quick)
    chosen = names or (() if growth else tuple(WORKLOADS))
    wanted = parts or PARTS
    for name in chosen:
        load = WORKLOADS[name]
        if "superposition" in wanted and name != "W5":  # the superposition of W5 is W1's
            record.add(f"superposition {name}", measure_superposition(
                load, list(tolerances), repeats, pair_steps))
        for geometry in geometries_of(name):
            scenario = write_workload(load, folder, geometry=geometry)
            if scenario is None:
                continue
            if "ensemble" in wanted and name == "W5":
                record.add("ensemble W5", measure_ensemble(load, scenario, repeats))
            elif "job" in wanted:
                bounded = name in BOUNDED and has_option("--memory")
                record.add(f"job {name} {geometry}", measure_job(
                    scenario, repeats, ("--memory", memory) if bounded else ()))
    if growth:
        record.add("growth", measure_growth(folder, memory, repeats, quick))
        if output is not None:
            draw_growth(record.sections["growth"], output / "growth.png")
    click.echo()
    click.echo(record.table())


if __name__ == "__main__":
    main()
