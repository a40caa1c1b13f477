"""What a check is, and what becomes of its findings: an error at once, or a kept warning."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

from subside.errors import InputError

if TYPE_CHECKING:
    import xarray as xr

__all__ = ["CHECKS", "Check", "Findings", "check", "declare"]

Finder = Callable[["xr.Dataset", float], "str | None"]


@dataclass(frozen=True)
class Check:
    """A named check.

    Attributes
    ----------
    name : str
        The word that `accept` takes.
    severity : str
        ``"error"`` or ``"warning"``.
    acceptable : bool
        Whether the user may turn the error into a warning.
    find : callable or None
        ``find(cells, surface)`` returns the text of what is wrong, or None. None for a check made
        while a file is read.
    """

    name: str
    severity: str
    acceptable: bool
    find: Finder | None = None


CHECKS: dict[str, Check] = {}
"""Every check by name, in the order they run."""


def declare(name: str, severity: str, *, acceptable: bool = False) -> str:
    """Name a check that a reader makes itself; returns the name."""
    CHECKS[name] = Check(name, severity, acceptable)
    return name


def check(name: str, severity: str, *, acceptable: bool = False) -> Callable[[Finder], Finder]:
    """Register ``find(cells, surface) -> text or None`` as the check of that name."""

    def register(find: Finder) -> Finder:
        CHECKS[name] = Check(name, severity, acceptable, find)
        return find

    return register


class Findings:
    """Warnings collected for one file; an error is raised where it is found.

    Parameters
    ----------
    path : Path
        The file, named first in every message.
    accept : iterable of str
        Checks whose errors become warnings; `subside.grid.checks.check_accept` has looked at them.
    """

    def __init__(self, path: Path | str, accept: Iterable[str] = ()) -> None:
        self.path = path
        self.accept = frozenset([accept] if isinstance(accept, str) else accept)
        self.warnings: list[str] = []

    def error(self, text: str, file: Path | None = None) -> InputError:
        """The error of that text, naming the file; for what is not a check but a broken file."""
        return InputError(f"{file or self.path}: {text}")

    def add(self, name: str, text: str, file: Path | None = None) -> None:
        """Take what the check `name` found: keep it as a warning or raise it.

        `file` is the one of several that it was found in.
        """
        found = CHECKS[name]
        warning = text if file is None else f"{file.name}: {text}"
        if found.severity == "warning":
            self.warnings.append(warning)
        elif name in self.accept:
            self.warnings.append(f"accepted ({name}): {warning}")
        elif found.acceptable:
            raise self.error(f"{text} If it is meant so, write accept = [\"{name}\"] under "
                             "[[grid]].", file)
        else:
            raise self.error(text, file)

    def run(self, cells: Any, surface: float) -> None:
        """Run every check that looks at the cell dataset."""
        for one in CHECKS.values():
            if one.find is not None:
                text = one.find(cells, surface)
                if text:
                    self.add(one.name, text)
