"""Files that threads read at any place, with a bounded number of them open."""

from __future__ import annotations

import os
import threading
from collections import OrderedDict
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

from subside.errors import InputError

__all__ = ["FileOnDisk", "OpenFiles"]

_MOST = 32


class OpenFiles:
    """Descriptors of files, the one used longest ago closed first.

    Parameters
    ----------
    most : int
        That stay open while nobody reads them.
    """

    def __init__(self, most: int = _MOST) -> None:
        self._most = most
        self._numbers: OrderedDict[Path, int] = OrderedDict()  # not the files: they know this
        self._users: dict[Path, int] = {}
        self._lock = threading.Lock()

    @contextmanager
    def number(self, file: FileOnDisk) -> Iterator[int]:
        """The descriptor of a file, which stays open as long as it is in use here."""
        with self._lock:
            if file.path not in self._numbers:
                self._numbers[file.path] = file.open()
            self._numbers.move_to_end(file.path)
            self._users[file.path] = self._users.get(file.path, 0) + 1
            number = self._numbers[file.path]
            self._close(self._most)
        try:
            yield number
        finally:
            with self._lock:
                self._users[file.path] -= 1

    def _close(self, most: int) -> None:
        spare = len(self._numbers) - most
        for path in [p for p in self._numbers if not self._users.get(p)][:max(spare, 0)]:
            self._users.pop(path, None)
            os.close(self._numbers.pop(path))

    def __len__(self) -> int:
        return len(self._numbers)

    def __reduce__(self) -> tuple[Any, ...]:
        return OpenFiles, (self._most,)

    def __del__(self) -> None:
        self._close(0)


class FileOnDisk:
    """A file that threads read at any place; opened again by its path where it is unpickled.

    Parameters
    ----------
    path : Path
    among : OpenFiles, optional
        The files it is opened among; by itself when left out.
    """

    def __init__(self, path: Path, among: OpenFiles | None = None) -> None:
        self.path = Path(path)
        self.stamp = self._stamp()
        self._among = OpenFiles() if among is None else among

    def _stamp(self, number: int | None = None) -> tuple[int, int]:
        try:
            found = os.stat(self.path if number is None else number)
        except OSError as error:
            raise self._no_way_in(error) from None
        return found.st_size, found.st_mtime_ns

    def _no_way_in(self, error: OSError) -> InputError:
        return InputError(f"{self.path}: the file cannot be opened: {error.strerror}.")

    def check(self, number: int | None = None) -> None:
        """Refuse a file that is no longer the one that was opened first.

        `number` is a descriptor of it, where it is open.
        """
        if self._stamp(number) != self.stamp:
            raise InputError(f"{self.path}: the file has changed since it was opened (size or date "
                             "differ); wait until it is written, then start again.")

    def open(self) -> int:
        """A new descriptor, which the caller closes."""
        self.check()
        try:
            return os.open(self.path, os.O_RDONLY | getattr(os, "O_BINARY", 0))
        except OSError as error:
            raise self._no_way_in(error) from None

    def read(self, place: int, size: int) -> bytes:
        """`size` bytes from byte `place` on."""
        with self._among.number(self) as number:
            self.check(number)
            try:
                content = os.pread(number, size, place)
            except OSError as error:
                raise self.damaged(str(error.strerror)) from None
        if len(content) != size:
            raise self.damaged(f"it ends before byte {place + size}")
        return content

    def damaged(self, reason: str) -> InputError:
        """The error of a file that does not hold what it promises."""
        return InputError(f"{self.path}: the NetCDF file cannot be read ({reason}); it is probably "
                          "truncated or damaged: copy or write it again.")
