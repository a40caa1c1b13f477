"""Work handed to a few threads, with a bound on how much of it waits."""

from __future__ import annotations

import threading
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor

__all__ = ["Background"]


class Background:
    """Jobs done by threads in the order they come; the first error ends it.

    Parameters
    ----------
    threads : int
        How many jobs at a time.
    held : int
        The most that may wait or be at work, in the unit of `size` (bytes, say); a job that is
        larger than this goes alone. At least one job for each thread and one more are let in.
    """

    def __init__(self, threads: int, held: int) -> None:
        self._pool = ThreadPoolExecutor(threads, thread_name_prefix="subside-write")
        self._few = threads + 1
        self._held = held
        self._room = threading.Condition()
        self._size = 0
        self._inside = 0
        self._handed = 0
        self._errors: list[tuple[int, BaseException]] = []

    def submit(self, job: Callable[[], None], size: int) -> None:
        """Hand over a job; waits while there is no room. Raises what an earlier job raised."""
        with self._room:
            self._room.wait_for(lambda: self._errors or self._inside < self._few
                                or self._size + size <= self._held)
            if not self._errors:
                self._size += size
                self._inside += 1
        self._raise()
        self._handed += 1
        self._pool.submit(self._run, self._handed, job, size)

    def _run(self, number: int, job: Callable[[], None], size: int) -> None:
        try:
            if not self._errors:
                job()
        except BaseException as error:  # whatever it is, the main thread must hear of it
            self._errors.append((number, error))
        finally:
            with self._room:
                self._size -= size
                self._inside -= 1
                self._room.notify_all()

    def flush(self) -> None:
        """Wait until everything is done. Raises what a job raised."""
        with self._room:
            self._room.wait_for(lambda: self._errors or not self._inside)
        self._raise()

    def _raise(self) -> None:
        if self._errors:
            self.stop()  # jobs before the failed one are at work or done: the first error is known
            raise min(self._errors, key=lambda pair: pair[0])[1]

    def stop(self) -> None:
        """End the threads; what waits is dropped. May be called again."""
        self._pool.shutdown(wait=True, cancel_futures=True)
