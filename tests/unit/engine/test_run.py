"""Tasks run once each, within the budget, in the order their readers need, and stop in good order."""

from __future__ import annotations

import os
import signal
import threading
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from pydantic import ValidationError

from lespost.engine.journal import Journal
from lespost.engine.run import run_tasks
from lespost.engine.settings import ComputeSettings, read_memory
from lespost.engine.tasks import Task
from lespost.errors import DataError, Interrupted, RequestError, Unfinished


def settings(**values: Any) -> ComputeSettings:
    return ComputeSettings(**{"threads": 2, "progress": "none", "memory": "100 MB", **values})


def task(number: int, read: Callable[[], Any] | None = None, compute: Callable[[Any], Any] | None = None, **values: Any) -> Task:
    """A task that reads its number and stores its square."""
    return Task(
        key=f"task-{number}", label=f"task {number}", read=read or (lambda: number),
        compute=compute or (lambda block: {"square": np.array([block**2])}), **{"memory": 10**6, "bytes": 100, **values},
    )  # fmt: skip


def test_every_task_is_done_once_and_resumed_never(tmp_path: Path) -> None:
    calls: list[int] = []
    tasks = [task(n, read=lambda n=n: calls.append(n) or n) for n in range(20)]
    with Journal(tmp_path / "j", {}) as journal:
        done = run_tasks(tasks[:7], journal, settings())
        assert (done.computed, done.reused, done.bytes) == (7, 0, 700)
        done = run_tasks(tasks, journal, settings())
        assert (done.computed, done.reused) == (13, 7)
        assert sorted(calls) == list(range(20))
        assert [int(journal.get(t.key)["square"][0]) for t in tasks] == [n**2 for n in range(20)]
        assert run_tasks(tasks, journal, settings()).computed == 0


def test_groups_are_read_in_order_by_one_reader_each(tmp_path: Path) -> None:
    order: list[tuple[str, int]] = []
    tasks = [
        task(10 * g + n, read=lambda g=g, n=n: order.append((threading.current_thread().name, 10 * g + n)) or 1, group=f"g{g}")
        for g in range(6) for n in range(4)
    ]  # fmt: skip
    with Journal(tmp_path / "j", {}) as journal:
        run_tasks(tasks, journal, settings(readers=3))
    for g in range(6):
        mine = [(thread, n) for thread, n in order if n // 10 == g]
        assert [n for _, n in mine] == [10 * g + n for n in range(4)]
        assert len({thread for thread, _ in mine}) == 1


@pytest.mark.parametrize(("threads", "readers", "budget"), [(1, 1, 100), (4, 1, 30), (4, 3, 45), (2, 2, 20)])
def test_memory_in_use_stays_within_the_budget(tmp_path: Path, threads: int, readers: int, budget: int) -> None:
    lock, held, most = threading.Lock(), [0], [0]
    sizes = [5, 20, 10, 3, 18, 7, 20, 1, 12, 9] * 3

    def read(size: int) -> int:
        with lock:
            held[0] += size
            most[0] = max(most[0], held[0])
        time.sleep(0.002)
        return size

    def compute(size: int) -> dict[str, np.ndarray]:
        time.sleep(0.001)
        with lock:
            held[0] -= size
        return {"x": np.array([size])}

    tasks = [task(n, read=lambda s=s: read(s), compute=compute, memory=s * 10**6) for n, s in enumerate(sizes)]
    with Journal(tmp_path / "j", {}) as journal:
        run_tasks(tasks, journal, settings(threads=threads, readers=readers, memory=f"{budget} MB"))
        assert len(journal) == len(tasks)
    assert most[0] <= budget
    assert held[0] == 0


def test_reading_overlaps_computing(tmp_path: Path) -> None:
    tasks = [task(n, read=lambda: time.sleep(0.02) or 1, compute=lambda b: time.sleep(0.02) or {}) for n in range(12)]
    with Journal(tmp_path / "j", {}) as journal:
        took = run_tasks(tasks, journal, settings(threads=1)).seconds
    assert took < 12 * 0.04 * 0.8  # one after the other would take 0.48 s, overlapped 0.26 s


def test_a_task_beyond_the_budget_is_refused_with_the_number(tmp_path: Path) -> None:
    with Journal(tmp_path / "j", {}) as journal, pytest.raises(RequestError, match=r"task 3, which needs 200 MB"):
        run_tasks([task(1), task(3, memory=200 * 10**6)], journal, settings())


def test_an_error_stops_the_run_and_keeps_what_is_done(tmp_path: Path) -> None:
    def bad() -> int:
        raise DataError("file ends early")

    tasks = [task(n) for n in range(5)] + [task(5, read=bad)] + [task(n) for n in range(6, 200)]
    with Journal(tmp_path / "j", {}) as journal:
        with pytest.raises(DataError, match="file ends early"):
            run_tasks(tasks, journal, settings(threads=1))
        assert 0 < len(journal) < 100


def test_an_unexpected_error_names_its_task(tmp_path: Path) -> None:
    with Journal(tmp_path / "j", {}) as journal, pytest.raises(ZeroDivisionError) as caught:
        run_tasks([task(7, compute=lambda b: 1 // 0)], journal, settings())
    assert caught.value.__notes__ == ["while working on task 7"]


@pytest.mark.parametrize(
    ("number", "error", "code"),
    [(signal.SIGTERM, Unfinished, 4), (signal.SIGUSR1, Unfinished, 4), (signal.SIGINT, Interrupted, 130)],
)
def test_signals_stop_the_run_in_good_order(tmp_path: Path, number: int, error: type[Unfinished], code: int) -> None:
    def compute(block: int) -> dict[str, np.ndarray]:
        if block == 4:
            os.kill(os.getpid(), number)
        time.sleep(0.005)
        return {"x": np.array([block])}

    tasks = [task(n, compute=compute) for n in range(200)]
    before = signal.getsignal(number)
    start = time.monotonic()
    with Journal(tmp_path / "j", {}) as journal:
        words = f"stopped by {signal.Signals(number).name} with .* run the same command again"
        with pytest.raises(Unfinished, match=words) as caught:
            run_tasks(tasks, journal, settings())
        assert type(caught.value) is error
        assert caught.value.exit_code == code
        assert 4 <= len(journal) < 200
        assert time.monotonic() - start < 10
        assert signal.getsignal(number) == before
        stored = len(journal)
        assert run_tasks(tasks, journal, settings()).computed == 200 - stored


def test_the_time_limit_stops_early_enough(tmp_path: Path) -> None:
    tasks = [task(n, compute=lambda b: time.sleep(0.02) or {}) for n in range(500)]
    start = time.time()
    with Journal(tmp_path / "j", {}) as journal:
        with pytest.raises(Unfinished, match="the time is up with"):
            run_tasks(tasks, journal, settings(walltime=2, margin=1.5), started=start)
        assert 0 < len(journal) < 100
    assert time.time() - start < 1.5


def test_the_batch_queue_sets_the_limit(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.delenv("SLURM_JOB_END_TIME", raising=False)
    assert settings().deadline(0.0) is None
    assert settings(walltime="1 h").deadline(1000.0) == 1000.0 + 3600 - 60
    monkeypatch.setenv("SLURM_JOB_END_TIME", "2000")
    assert settings(walltime="1 h", margin=10).deadline(1000.0) == 1990.0
    monkeypatch.setenv("SLURM_JOB_END_TIME", "nonsense")
    assert settings().deadline(0.0) is None


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("2 GB", 2 * 10**9), ("500MB", 5 * 10**8), ("1.5 GiB", 3 * 2**29), (10**8, 10**8), ("1e3", None), ("2 G", None),
        ("two GB", None), (2.5, None), (True, None),
    ],
)  # fmt: skip
def test_amounts_of_memory(text: Any, expected: int | None) -> None:
    if expected is None:
        with pytest.raises(ValueError, match="amount of memory"):
            read_memory(text)
        with pytest.raises(ValidationError):
            ComputeSettings(memory=text)
    else:
        assert read_memory(text) == expected
        assert ComputeSettings(memory=text).memory == expected


def test_settings() -> None:
    default = ComputeSettings()
    assert default.memory == 2 * 10**9
    assert default.thread_count == len(os.sched_getaffinity(0))
    assert ComputeSettings(threads=64, memory="500 MB").block_memory == 5 * 10**8  # many threads must not make a run impossible
    with pytest.raises(ValidationError):
        ComputeSettings(memory="1 MB")
    with pytest.raises(ValidationError):
        ComputeSettings(threads=-1)
