"""A file is written whole or not at all."""

from __future__ import annotations

import os
import secrets
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from pathlib import Path

from subside.errors import CannotDo

__all__ = ["whole"]


@contextmanager
def whole(path: str | Path) -> Iterator[Path]:
    """Give a temporary name beside `path`; move it there when the block ends without an error.

    The block writes and closes the temporary file. Its bytes are on the disk before the name
    changes, so that no reader ever sees half a file; on any failure, an interrupt from the
    keyboard included, the temporary file is removed and whatever was at `path` stays as it was.
    A missing folder is made. A symbolic link stays a link: the file it points to is replaced.

    Raises
    ------
    CannotDo
        Naming the file and the reason, when the disk is full, the folder is not writable, ...
        Any other exception of the block goes through as it is.
    """
    path = Path(path)
    try:
        target = Path(os.path.realpath(path))
        if target.is_dir():
            raise IsADirectoryError("it is a folder; give the name of a file")
        target.parent.mkdir(parents=True, exist_ok=True)
        # A short name of its own: the final one may already be as long as the disk allows.
        part = target.parent / f".subside-{os.getpid()}-{secrets.token_hex(4)}.part"
        try:
            yield part
            _to_disk(part, os.O_RDWR)
            os.replace(part, target)
        except BaseException:
            with suppress(OSError):
                part.unlink()
            raise
        if os.name == "posix":
            _to_disk(target.parent, os.O_RDONLY)
    except OSError as error:
        raise CannotDo(f"'{path}' cannot be written: {error.strerror or error}. Make room or give "
                       "another place; no half file was left behind.") from error


def _to_disk(path: Path, flags: int) -> None:
    handle = os.open(path, flags)
    try:
        os.fsync(handle)
    finally:
        os.close(handle)
