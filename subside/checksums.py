"""SHA-256 of files, worked out in a thread while the run goes on."""

from __future__ import annotations

import hashlib
import threading
from collections.abc import Iterable
from pathlib import Path

from subside.errors import CannotDo

__all__ = ["Checksums"]

_BYTES_AT_ONCE = 1 << 20


class Checksums:
    """Checksums of files, begun now and asked for later.

    A file is read from start to end, which costs about as much as inflating it; the thread holds
    no lock of the interpreter meanwhile.

    Parameters
    ----------
    files : iterable of Path
        In the order in which they are read.

    Examples
    --------
    >>> with Checksums([Path("pressure.nc")]) as checksums:  # doctest: +SKIP
    ...     compute()
    ...     checksums.of(Path("pressure.nc"))
    """

    def __init__(self, files: Iterable[Path]) -> None:
        self._files = list(dict.fromkeys(files))
        self._found: dict[Path, str | Exception] = {}
        self._stopped = False
        self._thread = threading.Thread(target=self._work, name="checksums", daemon=True)
        self._thread.start()

    def __enter__(self) -> Checksums:
        return self

    def __exit__(self, *_: object) -> None:
        """Leave off what is not done, so that a run that failed ends at once."""
        self._stopped = True
        self._thread.join()

    def of(self, file: Path) -> str:
        """``sha256:`` and the hexadecimal digest of one of the files; waits for it.

        Raises
        ------
        CannotDo
            If the file could not be read.
        """
        self._thread.join()
        found = self._found[file]
        if isinstance(found, Exception):
            reason = getattr(found, "strerror", None) or found
            raise CannotDo(f"input '{file}' cannot be read again for its checksum: {reason}. It "
                           "must stay where it is until the run has ended.") from found
        return found

    def _work(self) -> None:
        for file in self._files:
            try:
                self._found[file] = f"sha256:{self._digest(file)}"
            except Exception as error:  # told by `of`, in the thread that asks
                self._found[file] = error

    def _digest(self, file: Path) -> str:
        digest = hashlib.sha256()
        buffer = bytearray(_BYTES_AT_ONCE)
        view = memoryview(buffer)
        with file.open("rb", buffering=0) as stream:
            while (count := stream.readinto(buffer)) and not self._stopped:
                digest.update(view[:count])
        return digest.hexdigest()
