"""Options that several commands share, and progress bars."""

from __future__ import annotations

import sys
import warnings
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any, TypeVar

import click

from subside.progress import Progress

__all__ = ["bars", "common", "json_option", "note_warnings", "plugin_option", "print_json"]

F = TypeVar("F", bound=Callable[..., Any])

plugin_option = click.option(
    "--plugin", "plugins", multiple=True, type=click.Path(path_type=Path), metavar="FILE",
    help="Load a plug-in file (its code runs). May be repeated.")

json_option = click.option("--json", "as_json", is_flag=True, help="Print facts as JSON.")


def common(function: F) -> F:
    """``--quiet`` and ``--debug``."""
    function = click.option("--debug", is_flag=True, expose_value=False,
                            help="Show the traceback of an error.")(function)
    return click.option("--quiet", "-q", is_flag=True,
                        help="No progress, no summary; errors only.")(function)


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
