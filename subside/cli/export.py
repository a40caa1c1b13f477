"""`subside export`: a result as files of another kind."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager, suppress
from pathlib import Path

import click

from subside.cli.options import common, note_warnings, plugin_option


@click.command("export")
@click.argument("result_file", metavar="RESULT", type=click.Path(path_type=Path))
@click.option("--to", "kind", required=True, metavar="KIND",
              help="Kind of file: geotiff, or a plug-in's.")
@click.option("-o", "--output", "folder", required=True, type=click.Path(path_type=Path),
              metavar="DIR", help="Folder for the files; it is made.")
@click.option("--variable", "variables", multiple=True, metavar="NAME",
              help="Only this variable. May be repeated. Default: every map.")
@click.option("--overwrite", is_flag=True, help="Replace files that are there.")
@plugin_option
@common
def command(result_file: Path, kind: str, folder: Path, variables: tuple[str, ...],
            overwrite: bool, plugins: tuple[Path, ...], quiet: bool) -> None:
    """Write a result as files of another kind.

    \b
    Example:
        subside export bowl.nc --to geotiff -o maps
    """
    from subside.export.netcdf import read_result
    from subside.hooks.registry import registry

    note_warnings()
    for file in plugins:
        registry.load_file(file)
    exporter = registry.get("exporter", kind, "--to")()
    result = read_result(result_file)
    with _made(folder):
        files = exporter.export(result, folder, overwrite, variables or None)
    if not quiet:
        click.echo(f"{len(files)} files in {folder}")


@contextmanager
def _made(folder: Path) -> Iterator[None]:
    """Make a folder with its parents; take away again what stayed empty after an error."""
    from subside.errors import CannotDo

    new = [p for p in (folder, *folder.parents) if not p.exists()]
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise CannotDo(f"folder '{folder}' cannot be made: {error.strerror or error}; name another "
                       "with -o.") from None
    try:
        yield
    except BaseException:
        for path in new:
            with suppress(OSError):
                path.rmdir()
        raise
