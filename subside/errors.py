"""The exceptions of the project, and how a command ends on each of them.

SubsideError
 ├─ InputError        the user's input is wrong                          exit 2
 │   └─ PluginError   a plug-in is missing, broken, or clashes           exit 2
 ├─ CheckFailed       an audit or a permitted limit is not met           exit 1
 └─ CannotDo          disk, memory, a worker, a missing optional package exit 3

Every message is one paragraph: what is wrong, the value with its unit, where (file, key, k/j/i
or name), and what to do.
"""

from __future__ import annotations

import difflib
from collections.abc import Callable, Iterable, Iterator
from contextlib import contextmanager

__all__ = ["CannotDo", "CheckFailed", "InputError", "PluginError", "SubsideError", "located",
           "nearest"]


class SubsideError(Exception):
    """Base of every error a user is meant to read. `exit_code` is what the command returns."""

    exit_code = 3


class InputError(SubsideError):
    """A file, key, cell or option of the user's is wrong.

    Parameters
    ----------
    message : str
    cell : int, optional
        Number of the cell it is about among the cells at hand (a law's arrays); whoever knows which
        cells those are puts the place in the file into words.
    """

    exit_code = 2

    def __init__(self, message: str, *, cell: int | None = None) -> None:
        super().__init__(message)
        self.cell = cell


class PluginError(InputError):
    """A plug-in is missing, broken, misspelt, or clashes with another."""


class CheckFailed(SubsideError):
    """The computation is done, and an audit or a permitted limit is not met."""

    exit_code = 1


class CannotDo(SubsideError):
    """It could not be done here: disk, memory, a worker, or an optional package that is missing."""

    exit_code = 3


@contextmanager
def located(where: str, place: Callable[[int], str] | None = None) -> Iterator[None]:
    """Put `where` (a file, a table) before the message of an `InputError` of the block.

    `place` puts the number of a cell, where the error has one, into words.
    """
    try:
        yield
    except InputError as error:
        at = f", {place(error.cell)}" if place is not None and error.cell is not None else ""
        raise type(error)(f"{where}{at}: {error}") from error


def nearest(word: str, known: Iterable[str]) -> str:
    """A hint "; did you mean ...? Known: ..." for an unknown word (empty when nothing is known)."""
    options = sorted(known)
    if not options:
        return ""
    match = difflib.get_close_matches(word, options, n=1, cutoff=0.5)
    hint = f" Did you mean '{match[0]}'?" if match else ""
    return f"{hint} Known: {', '.join(options)}."
