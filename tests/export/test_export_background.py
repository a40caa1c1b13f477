"""Work in threads: bounded, in order, and its first error heard."""

from __future__ import annotations

import threading
import time

import pytest

from subside.export.background import Background


@pytest.mark.parametrize(("held", "size", "inside"), [
    (10, 4, 3),  # threads + 1 are always let in, whatever their size
    (10, 2, 5),  # 5 x 2 = 10
    (1, 100, 3),
])
def test_no_more_waits_than_was_allowed(held: int, size: int, inside: int) -> None:
    work = Background(2, held)
    gate = threading.Event()
    handed = []

    def hand_over() -> None:
        for number in range(12):
            work.submit(lambda: gate.wait(10), size)  # type: ignore[arg-type, return-value]
            handed.append(number)

    caller = threading.Thread(target=hand_over)
    caller.start()
    deadline = time.monotonic() + 5.0
    while len(handed) < inside and time.monotonic() < deadline:
        time.sleep(0.001)
    time.sleep(0.05)  # time to hand over one too many
    assert len(handed) == inside
    gate.set()
    caller.join(10)
    work.flush()
    assert len(handed) == 12
    work.stop()


def test_the_error_of_the_earliest_job_is_raised_whichever_came_first() -> None:
    work = Background(2, 100)
    late = threading.Event()

    def early_job() -> None:
        late.wait(10)
        raise ValueError("the earlier job")

    def late_job() -> None:
        late.set()
        raise ValueError("the later job")

    done = []
    work.submit(early_job, 1)
    work.submit(late_job, 1)
    with pytest.raises(ValueError, match="the earlier job"):
        work.flush()
    with pytest.raises(ValueError, match="the earlier job"):
        work.submit(lambda: done.append(1), 1)
    assert done == []


def test_stopping_drops_what_waits() -> None:
    work = Background(1, 100)
    begun, gate, done = threading.Event(), threading.Event(), []

    def first() -> None:
        begun.set()
        gate.wait(10)
        done.append(0)

    work.submit(first, 1)
    for number in range(1, 5):
        work.submit(lambda n=number: done.append(n), 1)
    begun.wait(10)
    threading.Timer(0.05, gate.set).start()
    work.stop()
    assert done == [0]
