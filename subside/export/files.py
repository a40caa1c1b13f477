"""The files an export is about to write: checked before the first of them is made."""

from __future__ import annotations

import re
from collections.abc import Iterable
from pathlib import Path

from subside.errors import InputError

__all__ = ["file_word", "refuse_existing"]


def file_word(text: str) -> str:
    """A name as a piece of a file name: letters, digits, ``-`` and ``_``; never empty."""
    return re.sub(r"[^\w-]+", "-", text).strip("-") or "unnamed"


def refuse_existing(files: Iterable[Path], overwrite: bool) -> None:
    """Raise `InputError` naming the files that would be overwritten without leave."""
    there = [] if overwrite else [file for file in files if file.exists()]
    if there:
        shown = ", ".join(f"'{file}'" for file in there[:3])
        more = f" and {len(there) - 3} more" if len(there) > 3 else ""
        raise InputError(f"{shown}{more} already there; give --overwrite to replace what is there, "
                         "or another place. Nothing was written.")
