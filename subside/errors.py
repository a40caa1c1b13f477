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
from collections.abc import Iterable

__all__ = ["CannotDo", "CheckFailed", "InputError", "PluginError", "SubsideError", "nearest"]


class SubsideError(Exception):
    """Base of every error a user is meant to read. `exit_code` is what the command returns."""

    exit_code = 3


class InputError(SubsideError):
    """A file, key, cell or option of the user's is wrong."""

    exit_code = 2


class PluginError(InputError):
    """A plug-in is missing, broken, misspelt, or clashes with another."""


class CheckFailed(SubsideError):
    """The computation is done, and an audit or a permitted limit is not met."""

    exit_code = 1


class CannotDo(SubsideError):
    """It could not be done here: disk, memory, a worker, or an optional package that is missing."""

    exit_code = 3


def nearest(word: str, known: Iterable[str]) -> str:
    """A hint "; did you mean ...? Known: ..." for an unknown word (empty when nothing is known)."""
    options = sorted(known)
    if not options:
        return ""
    match = difflib.get_close_matches(word, options, n=1, cutoff=0.5)
    hint = f" Did you mean '{match[0]}'?" if match else ""
    return f"{hint} Known: {', '.join(options)}."
