"""`subside inspect`: what is in a pressure grid."""

from __future__ import annotations

from pathlib import Path

import click

from subside.cli.options import common, json_option, note_warnings, plugin_option, print_json


@click.command("inspect")
@click.argument("grid", metavar="GRID", type=click.Path(path_type=Path))
@click.option("--crs", metavar="CODE", help="Coordinate system where the file names none, such as "
              "EPSG:32631.")
@click.option("--accept", multiple=True, metavar="CHECK",
              help="Turn a named check into a warning. May be repeated.")
@click.option("--surface", default="0 m", show_default=True, metavar="DEPTH",
              help="Depth of the ground or seabed in the grid's vertical datum.")
@plugin_option
@json_option
@common
def command(grid: Path, crs: str | None, accept: tuple[str, ...], surface: str,
            plugins: tuple[Path, ...], as_json: bool, quiet: bool) -> None:
    """Cells, regions, depth, pressure history, units, and every check of a pressure grid.

    \b
    Example:
        subside inspect marrow-fen/pressure.nc
    """
    from subside.grid import open_grid, summarise
    from subside.hooks.registry import registry
    from subside.units import parse_quantity

    note_warnings()
    for file in plugins:
        registry.load_file(file)
    cells = open_grid(grid, crs=crs, accept=accept,
                      surface=parse_quantity(surface, "m", name="--surface"))
    facts = summarise(cells)
    if as_json:
        print_json(facts)
    elif not quiet:
        _print(facts)


def _print(facts: dict) -> None:
    """The region table and the rest, in field units."""
    dropped = ", ".join(f"{count} {why.replace('_', ' ')}"
                        for why, count in facts["dropped"].items() if count)
    extent = facts["extent_m"]
    for label, text in (
        ("file", f"{facts['file']} ({facts['layout']})"),
        ("cells", f"{facts['active_cells']:,} active of {facts['cells_in_file']:,}"
         + (f" ({dropped})" if dropped else "")),
        ("crs", facts["crs"] or "none named"),
        ("vertical datum", facts["vertical_datum"] or "not stated"),
        ("x", f"{extent['x_min']:.0f} to {extent['x_max']:.0f} m"),
        ("y", f"{extent['y_min']:.0f} to {extent['y_max']:.0f} m"),
        ("dates", f"{len(facts['dates'])}, {facts['dates'][0]} to {facts['dates'][-1]}"),
        ("edge depletion", f"{100 * facts['edge_depletion_share']:.1f} % of the largest"),
    ):
        click.echo(f"{label:<14}  {text}")
    click.echo()
    headings = ("region", "cells", "bulk Mm3", "pore Mm3", "depth m", "cell m", "first bar",
                "last bar", "fall bar")
    rows = [_row(name, part) for name, part in facts["regions"].items()]
    rows.append(_row("all", facts["total"]))
    widths = [max(len(row[n]) for row in [headings, *rows]) for n in range(len(headings))]
    for row in [headings, *rows]:
        click.echo("  ".join(text.ljust(w) if n == 0 else text.rjust(w)
                             for n, (text, w) in enumerate(zip(row, widths, strict=True))))
    click.echo("\ncell m: mean thickness of a cell; first, last: mean pressure weighted with "
               "volume; fall: largest depletion")
    for warning in [*facts["warnings"], *filter(None, [facts["cut_off"]])]:
        click.echo(f"warning: {warning}")


def _row(name: str, part: dict) -> tuple[str, ...]:
    pore = part["pore_volume_m3"]
    return (
        name, f"{part['cells']:,}", f"{part['bulk_volume_m3'] / 1e6:.1f}",
        "-" if pore is None else f"{pore / 1e6:.1f}",
        f"{part['shallowest_m']:.0f}-{part['deepest_m']:.0f}", f"{part['mean_thickness_m']:.1f}",
        f"{part['mean_initial_pressure_bar']:.1f}", f"{part['mean_last_pressure_bar']:.1f}",
        f"{part['largest_depletion_bar']:.1f}",
    )
