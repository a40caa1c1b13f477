"""`subside init`: a small working scenario."""

from __future__ import annotations

from pathlib import Path

import click

from subside.cli.options import common


@click.command("init")
@click.argument("folder", metavar="DIR", type=click.Path(path_type=Path))
@common
def command(folder: Path, quiet: bool) -> None:
    """Write a small working scenario to start from: grid, benchmarks, survey.

    \b
    Example:
        subside init my-field
        subside run my-field/scenario.toml
    """
    from subside.starter import write_starter

    files = write_starter(folder)
    if not quiet:
        for file in files:
            click.echo(f"wrote {file}")
        click.echo(f"next: subside run {folder / 'scenario.toml'}")
