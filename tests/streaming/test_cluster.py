"""The same run on the workers of a Dask cluster, some of which die."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import pytest
from streaming_runs import (
    EVERYTHING,
    LATTICE,
    MAP,
    POINTS,
    assert_same,
    cut_every,
    small_batches,
    write_field,
)

from subside import cluster as cluster_module
from subside.errors import CannotDo, InputError
from subside.pipeline import run
from subside.progress import Progress

distributed = pytest.importorskip("distributed")
WORKERS = 3


@pytest.fixture(scope="module")
def address() -> Iterator[str]:
    """A scheduler with three workers that are started again when they die."""
    with distributed.LocalCluster(n_workers=WORKERS, threads_per_worker=1, processes=True,
                                  dashboard_address="127.0.0.1:0", silence_logs=50) as cluster:
        yield cluster.scheduler_address


@pytest.fixture(autouse=True)
def many_parts(monkeypatch: pytest.MonkeyPatch) -> None:
    """Four legs of a dozen batches."""
    small_batches(monkeypatch)
    cut_every(monkeypatch, 2)


class Watching(Progress):
    """Adds up what is told, and does something after the third part of a leg in the middle."""

    def __init__(self, then: Callable[[], None] = lambda: None, after: int = 16) -> None:
        self.done, self.total, self.calls = 0.0, 0.0, 0
        self._then, self._after = then, after

    @contextmanager
    def stage(self, name: str, total: float, unit: str) -> Iterator[Callable[[float], None]]:
        if name != "superposition":
            yield lambda done: None
            return
        self.total = total

        def advance(done: float) -> None:
            self.done += done
            self.calls += 1
            if self.calls == self._after:
                self._then()

        yield advance


def _pids(address: str) -> dict[str, int]:
    with distributed.Client(address) as client:
        client.wait_for_workers(WORKERS)
        return client.run(os.getpid)


def test_the_same_numbers_as_threads(tmp_path: Path, address: str) -> None:
    scenario = write_field(tmp_path, "bilinear", MAP + POINTS + LATTICE + EVERYTHING,
                           chunks=(3, 50))
    here, there = Watching(), Watching()
    threads = run(scenario, workers=2, progress=here)
    assert_same(run(scenario, cluster=address, progress=there), threads)
    assert here.done == here.total == there.done == there.total > 0


def test_a_cluster_of_its_own(tmp_path: Path) -> None:
    scenario = write_field(tmp_path, "isotach", chunks=(3, 50))
    threads = run(scenario, workers=3)
    assert_same(run(scenario, cluster="local", workers=3), threads)


def test_plug_ins_go_along(tmp_path: Path, address: str) -> None:
    """The workers know nothing of the file; the law wants a second field in time."""
    scenario = write_field(tmp_path, "whole-only")
    plugins = [tmp_path / "plugin.py"]
    threads = run(scenario, plugins=plugins)
    assert_same(run(scenario, plugins=plugins, cluster=address), threads)


def test_workers_that_do_not_see_the_file_are_sent_blocks(
        tmp_path: Path, address: str, monkeypatch: pytest.MonkeyPatch) -> None:
    scenario = write_field(tmp_path, "isotach", chunks=(2, 50))
    threads = run(scenario)
    monkeypatch.setattr(cluster_module.ClusterCrew, "_workers_see_files", lambda self: False)
    read, asked = cluster_module._read, []

    def spy(work: Any, block: int, first: int, last: int) -> Any:
        asked.append((block, first, last))
        return read(work, block, first, last)

    monkeypatch.setattr(cluster_module, "_read", spy)
    assert_same(run(scenario, cluster=address), threads)
    assert {(first, last) for _, first, last in asked} == {(0, 2), (2, 4), (4, 6), (6, 8)}


def test_a_worker_that_dies_and_comes_back(tmp_path: Path, address: str) -> None:
    scenario = write_field(tmp_path, "bilinear", MAP + POINTS + LATTICE + EVERYTHING)
    threads = run(scenario)
    victim = next(iter(_pids(address).values()))
    watching = Watching(lambda: os.kill(victim, signal.SIGKILL))
    assert_same(run(scenario, cluster=address, progress=watching), threads)
    assert watching.calls > 16
    assert victim not in _pids(address).values()


def test_a_worker_that_dies_for_good(tmp_path: Path) -> None:
    scenario = write_field(tmp_path, "isotach")
    threads = run(scenario)
    with distributed.LocalCluster(n_workers=0, dashboard_address="127.0.0.1:0",
                                  silence_logs=50) as cluster:
        command = [sys.executable, "-m", "distributed.cli.dask_worker", cluster.scheduler_address,
                   "--no-nanny", "--nthreads", "1", "--no-dashboard", "--local-directory",
                   str(tmp_path)]
        workers = [subprocess.Popen(command, stderr=subprocess.DEVNULL) for _ in range(WORKERS)]
        try:
            assert set(_pids(cluster.scheduler_address).values()) == {w.pid for w in workers}
            watching = Watching(workers[1].kill)
            assert_same(run(scenario, cluster=cluster.scheduler_address, progress=watching),
                        threads)
            assert watching.calls > 16
            assert workers[1].wait(5) == -signal.SIGKILL
            assert all(w.poll() is None for w in (workers[0], workers[2]))
        finally:
            for worker in workers:
                worker.kill()
                worker.wait()


def test_what_is_wrong_is_said_as_by_threads(tmp_path: Path, address: str) -> None:
    import netCDF4

    scenario = write_field(tmp_path)
    with netCDF4.Dataset(tmp_path / "grid.nc", "r+") as file:
        file["pressure"][5, 40], file["pressure"][6, 3] = -3.0, -1.0
    messages = []
    for options in ({"workers": 2}, {"cluster": address}):
        with pytest.raises(InputError) as error:
            run(scenario, output=tmp_path / "r.nc", **options)
        messages.append(str(error.value))
    assert messages[0] == messages[1] and "step 5" in messages[0]
    assert not (tmp_path / "r.nc").exists()


def test_workers_of_another_version(tmp_path: Path, address: str,
                                    monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(cluster_module, "_versions", lambda: {"numpy": f"0.{os.getpid()}"})
    with pytest.raises(CannotDo, match=rf"worker tcp://\S+ has other versions: numpy 0\.\d+ there "
                                       rf"and 0\.{os.getpid()} here\. Install the same"):
        run(write_field(tmp_path), cluster=address)


@pytest.mark.parametrize("wrong", ["tcp://127.0.0.1:9", "nonsense://x", "no.such.host.invalid:1"])
def test_a_scheduler_that_is_not_there(tmp_path: Path, monkeypatch: pytest.MonkeyPatch,
                                       wrong: str) -> None:
    monkeypatch.setattr(cluster_module, "_TIMEOUT", "1s")
    begun = time.monotonic()
    with pytest.raises(CannotDo, match=f"--cluster {wrong}: the scheduler does not answer"):
        run(write_field(tmp_path), cluster=wrong)
    assert time.monotonic() - begun < 8.0


def test_nobody_waits_long_for_a_scheduler() -> None:
    assert int(cluster_module._TIMEOUT.removesuffix("s")) <= 15


def test_without_dask(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setitem(sys.modules, "distributed", None)
    with pytest.raises(CannotDo, match=r"pip install 'subside\[cluster\]'"):
        run(write_field(tmp_path), cluster="local", output=tmp_path / "r.nc")
    assert not (tmp_path / "r.nc").exists()


def test_a_part_done_twice_is_the_same_part(tmp_path: Path) -> None:
    """What came in is not changed: a lost part is made again from what there was before."""
    from subside.outlook import Outlook, look_ahead
    from subside.pipeline import prepare

    job = prepare(write_field(tmp_path, "bilinear"))
    outlook = Outlook.of(job, look_ahead(job, None, 1, Progress()), 0, None, 1, in_memory=True)
    first, second = outlook.legs[:2]
    before = cluster_module._treat(outlook.work, outlook.batches, first, (0,), None, None)
    once, again = (cluster_module._treat(outlook.work, outlook.batches, second, (0,), before, None)
                   for _ in range(2))
    assert once.tally.bowl.tolist() == again.tally.bowl.tolist() and once.tally.bowl.any()
    assert {memory.state.rows for memory in before.memories.values()} == {first.last}
    total = [cluster_module._add_up(outlook.work, [once.tally, again.tally]) for _ in range(2)]
    assert total[0].bowl.tolist() == total[1].bowl.tolist() == (2 * once.tally.bowl).tolist()
