"""What stops a run leaves nothing behind: no file, no thread."""

from __future__ import annotations

import threading
import time
from pathlib import Path
from typing import Any

import pytest
from streaming_runs import cut_every, small_batches, write_field

from subside.errors import InputError
from subside.pipeline import run
from subside.work import Work


class _Stop(BaseException):
    """As an interrupt from the keyboard: nothing may catch it."""


@pytest.mark.parametrize("kind", [_Stop, RuntimeError, InputError])
@pytest.mark.parametrize("where", ["strength", "take"])
@pytest.mark.parametrize("before", [False, True])
def test_stopped_in_the_third_leg(tmp_path: Path, monkeypatch: pytest.MonkeyPatch,
                                  kind: type[BaseException], where: str, before: bool) -> None:
    """An earlier result stays as it was."""
    scenario = write_field(tmp_path, chunks=(1, 30))
    output = tmp_path / "r.nc"
    if before:
        run(scenario, output=output).close()
    files = {path: path.read_bytes() for path in tmp_path.iterdir()}
    small_batches(monkeypatch)
    cut_every(monkeypatch, 2)
    real, calls = getattr(Work, where), []

    def broken(self: Work, tally: Any, batch: Any, leg: Any, *rest: Any) -> Any:
        if leg.first == 4:
            calls.append(batch)
            if len(calls) > 2:
                raise kind("stopped here")
            time.sleep(0.01)
        return real(self, tally, batch, leg, *rest)

    monkeypatch.setattr(Work, where, broken)
    threads = set(threading.enumerate())
    with pytest.raises(kind, match="stopped here"):
        run(scenario, output=output, workers=3)
    assert len(calls) > 2
    assert {path: path.read_bytes() for path in tmp_path.iterdir()} == files
    deadline = time.monotonic() + 5.0
    while set(threading.enumerate()) - threads and time.monotonic() < deadline:
        time.sleep(0.01)
    assert not set(threading.enumerate()) - threads


def test_a_file_that_ends_too_early(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """The reader fails in a thread of its own, in the second leg."""
    from subside.grid.stream import FileStream

    scenario = write_field(tmp_path, chunks=(1, 30))
    files = set(tmp_path.iterdir())
    cut_every(monkeypatch, 2)
    read = FileStream.read

    def broken(self: FileStream, block: int, first: int, last: int, threads: int = 1) -> Any:
        if first >= 2:
            raise InputError("grid.nc is damaged")
        return read(self, block, first, last, threads)

    monkeypatch.setattr(FileStream, "read", broken)
    threads = set(threading.enumerate())
    with pytest.raises(InputError, match="damaged"):
        run(scenario, output=tmp_path / "r.nc", workers=2)
    assert set(tmp_path.iterdir()) == files
    assert not set(threading.enumerate()) - threads
