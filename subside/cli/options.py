"""Options that several commands share, loading without delay, and progress bars."""

from __future__ import annotations

import gc
import re
import sys
import warnings
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any, TypeVar

import click

from subside.errors import InputError
from subside.progress import Progress

__all__ = ["bars", "cluster_option", "common", "json_option", "loading", "memory_option",
           "note_warnings", "plugin_option", "print_json", "workers_option"]

F = TypeVar("F", bound=Callable[..., Any])

plugin_option = click.option(
    "--plugin", "plugins", multiple=True, type=click.Path(path_type=Path), metavar="FILE",
    help="Load a plug-in file (its code runs). May be repeated.")

json_option = click.option("--json", "as_json", is_flag=True, help="Print facts as JSON.")

_MOST_WORKERS = 10_000
_ADDRESS = re.compile(r"([a-z]+://)?([\w.-]+|\[[0-9A-Fa-f:]+\]):(\d+)")


def _memory(context: click.Context, option: click.Parameter, text: str | None) -> int | None:
    from subside.units import parse_memory

    return None if text is None else parse_memory(text, name="--memory")


def _workers(context: click.Context, option: click.Parameter, count: int | None) -> int | None:
    if count is not None and not 1 <= count <= _MOST_WORKERS:
        raise InputError(f"--workers = {count} must be from 1 to {_MOST_WORKERS}; leave it out to "
                         "take as many as the machine has cores.")
    return count


def _cluster(context: click.Context, option: click.Parameter, where: str | None) -> str | None:
    if where is None or where == "local":
        return where
    found = _ADDRESS.fullmatch(where)
    if not found or not 1 <= int(found[3]) <= 65535:
        raise InputError(f"--cluster = '{where}' is neither 'local' nor the address of a Dask "
                         "scheduler, HOST:PORT, for example tcp://10.0.0.5:8786.")
    return where


memory_option = click.option(
    "--memory", metavar="SIZE", callback=_memory,
    help="Most memory to take, such as '2 GB'. Default: from what the machine has free.")

workers_option = click.option(
    "--workers", type=int, metavar="N", callback=_workers,
    help="How many blocks of cells to work on at once. Default: one for each core.")

cluster_option = click.option(
    "--cluster", metavar="ADDRESS", callback=_cluster,
    help="Spread the work over a Dask cluster: the address of its scheduler, such as "
         "tcp://10.0.0.5:8786, or 'local' for processes on this machine.")


def common(function: F) -> F:
    """``--quiet`` and ``--debug``."""
    function = click.option("--debug", is_flag=True, expose_value=False,
                            help="Show the traceback of an error.")(function)
    return click.option("--quiet", "-q", is_flag=True,
                        help="No progress, no summary; errors only.")(function)


@contextmanager
def loading() -> Iterator[None]:
    """Import large libraries: a hundred thousand objects that stay, so nothing to collect.

    Searching them for rubbish while they are made, and again later, takes a third of the start.
    """
    if "numpy" in sys.modules:
        yield
        return
    gc.disable()
    try:
        yield
    finally:
        gc.freeze()
        gc.enable()


def print_json(facts: dict[str, Any]) -> None:
    """Facts on stdout, one JSON object."""
    import json

    click.echo(json.dumps(facts, indent=2, ensure_ascii=False))


def note_warnings() -> None:
    """Warnings of plug-in loading as one line each on stderr."""

    def show(message: Warning | str, *_: Any, **__: Any) -> None:
        click.echo(f"subside: warning: {message}", err=True)

    warnings.showwarning = show


class _Bars(Progress):
    """Progress drawn on a terminal."""

    def __init__(self, rich_progress: Any) -> None:
        self._progress = rich_progress

    @contextmanager
    def stage(self, name: str, total: float, unit: str) -> Iterator[Callable[[float], None]]:
        task = self._progress.add_task(name, total=total, unit=unit)
        yield lambda done: self._progress.advance(task, done)
        self._progress.update(task, completed=total)


@contextmanager
def bars(quiet: bool) -> Iterator[Progress]:
    """Progress bars on a terminal; silent when piped or quiet."""
    if quiet or not sys.stderr.isatty():
        yield Progress()
        return
    from rich.console import Console
    from rich.progress import BarColumn, TaskProgressColumn, TextColumn, TimeRemainingColumn
    from rich.progress import Progress as RichProgress

    columns = (TextColumn("{task.description:>13}"), BarColumn(bar_width=32), TaskProgressColumn(),
               TextColumn("of {task.total:,.0f} {task.fields[unit]}"), TimeRemainingColumn())
    with RichProgress(*columns, console=Console(stderr=True), transient=True) as progress:
        yield _Bars(progress)
