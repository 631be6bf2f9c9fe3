"""Runs tasks: reading overlaps computing, memory stays within the budget, a signal or the clock stops it in good order.

Reading threads take the tasks group by group, in order, and hand blocks to computing threads; a block enters only when the
budget has room for it. Each result goes into the journal as it comes. On SIGTERM, SIGUSR1, SIGINT or when the time is up no
new block is read, blocks being computed are finished, and `Unfinished` (or `Interrupted`) says how to go on. What a task
computes is none of this module's business, and its result cannot depend on the number of threads.
"""

from __future__ import annotations

import collections
import contextlib
import signal
import threading
import time
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from typing import Any

from lespost.engine.journal import Journal
from lespost.engine.progress import Progress, Silent
from lespost.engine.settings import ComputeSettings
from lespost.engine.tasks import Task
from lespost.errors import Interrupted, LespostError, RequestError, Unfinished

#: Seconds that tasks at work are waited for after a signal.
GRACE = 8.0


@dataclass(frozen=True)
class Summary:
    """What a run of tasks did. computed, reused: numbers of tasks; seconds: time taken; bytes: of fields read."""

    computed: int
    reused: int
    seconds: float
    bytes: int


class _Work:
    """The state that the threads of one run share, behind one condition variable."""

    def __init__(self, groups: collections.deque[list[Task]], budget: int, most: int) -> None:
        self.condition = threading.Condition()
        self.groups = groups
        self.budget, self.most = budget, most
        self.in_use = self.blocks = self.readers = 0
        self.ready: collections.deque[tuple[Task, Any]] = collections.deque()
        self.done: collections.deque[Task] = collections.deque()
        self.entered: dict[str, float] = {}
        self.longest = 0.0
        self.reason: str = ""
        self.interrupted = False
        self.failure: BaseException | None = None

    @property
    def stopping(self) -> bool:
        return bool(self.reason) or self.failure is not None

    def stop(self, reason: str, interrupted: bool = False) -> None:
        """Take no more tasks. Takes no lock: it is called from a signal handler, which may interrupt one that holds it."""
        self.interrupted = self.interrupted or interrupted
        self.reason = self.reason or reason

    def fail(self, task: Task, error: BaseException) -> None:
        with self.condition:
            if self.failure is None:
                if not isinstance(error, LespostError | MemoryError):
                    error.add_note(f"while working on {task.label}")
                self.failure = error
            self.condition.notify_all()

    def enter(self, task: Task) -> bool:
        """Wait until the budget has room for a task's block; False when the run is stopping."""
        with self.condition:
            self.condition.wait_for(
                lambda: self.stopping or self.blocks == 0
                or (self.in_use + task.memory <= self.budget and self.blocks < self.most)
            )
            if self.stopping:
                return False
            self.in_use += task.memory
            self.blocks += 1
            self.entered[task.key] = time.monotonic()
            return True

    def leave(self, task: Task) -> None:
        with self.condition:
            self.in_use -= task.memory
            self.blocks -= 1
            self.longest = max(self.longest, time.monotonic() - self.entered.pop(task.key))
            self.condition.notify_all()


def _read(work: _Work) -> None:
    """Body of a reading thread."""
    try:
        while True:
            with work.condition:
                if work.stopping or not work.groups:
                    return
                group = work.groups.popleft()
            for task in group:
                if not work.enter(task):
                    return
                try:
                    block = task.read()
                except BaseException as error:
                    work.leave(task)
                    work.fail(task, error)
                    return
                with work.condition:
                    work.ready.append((task, block))
                    del block  # this thread must not keep it alive while it waits for room for the next one
                    work.condition.notify_all()
    finally:
        with work.condition:
            work.readers -= 1
            work.condition.notify_all()


def _compute(work: _Work, journal: Journal) -> None:
    """Body of a computing thread."""
    while True:
        with work.condition:
            work.condition.wait_for(lambda: work.ready or work.stopping or work.readers == 0)
            if work.stopping or not work.ready:
                return
            task, block = work.ready.popleft()
        try:
            result = task.compute(block)
            del block
            journal.append(task.key, result)
            work.done.append(task)
        except BaseException as error:
            work.fail(task, error)
        finally:
            work.leave(task)


@contextlib.contextmanager
def _signals(handler: Callable[[int, Any], None]) -> Iterator[None]:
    """Handle the signals by which users and queues end a program; elsewhere than in the main thread nothing is changed."""
    if threading.current_thread() is not threading.main_thread():
        yield
        return
    old = {number: signal.signal(number, handler) for number in (signal.SIGTERM, signal.SIGINT, signal.SIGUSR1)}
    try:
        yield
    finally:
        for number, previous in old.items():
            signal.signal(number, previous)


def run_tasks(
    tasks: Sequence[Task], journal: Journal, settings: ComputeSettings, progress: Progress | None = None,
    started: float | None = None,
) -> Summary:
    """Run all tasks that the journal does not hold yet.

    started: when the process began [s since the epoch], for the time limit; default: now.
    Raises RequestError if one task alone needs more than the budget, Unfinished (exit code 4) or Interrupted (130) when
    stopped early, and whatever a task raises. Results are in the journal in every case.
    """
    began = time.monotonic()
    deadline = settings.deadline(time.time() if started is None else started)
    progress = Silent() if progress is None else progress
    open_tasks = [task for task in tasks if task.key not in journal]
    largest = max(open_tasks, key=lambda task: task.memory, default=None)
    if largest is not None and largest.memory > settings.memory:
        raise RequestError(
            f"[compute].memory = {settings.memory / 1e6:.3g} MB is not enough for {largest.label}, which needs "
            f"{largest.memory / 1e6:.3g} MB: raise it to at least that."
        )
    groups: collections.deque[list[Task]] = collections.deque()
    for task in open_tasks:
        if groups and task.group and groups[-1][-1].group == task.group:
            groups[-1].append(task)
        else:
            groups.append([task])
    reused = len(tasks) - len(open_tasks)
    # A block being read for each reader and one being computed for each thread: more in memory would gain nothing.
    work = _Work(groups, settings.memory, settings.thread_count + settings.readers)
    work.readers = min(settings.readers, len(groups))
    threads = [threading.Thread(target=_read, args=(work,), name=f"read-{i}", daemon=True) for i in range(work.readers)]
    threads += [
        threading.Thread(target=_compute, args=(work, journal), name=f"compute-{i}", daemon=True)
        for i in range(min(settings.thread_count, len(open_tasks)))
    ]

    def handle(number: int, _frame: Any) -> None:
        if work.reason:  # asked twice: do not wait for the tasks at work
            raise KeyboardInterrupt
        work.stop(f"stopped by {signal.Signals(number).name}", interrupted=number == signal.SIGINT)

    computed = bytes_read = 0
    progress.start(reused, len(tasks), sum(task.bytes for task in open_tasks))
    try:
        with _signals(handle):
            for thread in threads:
                thread.start()
            while computed < len(open_tasks) and not work.stopping:
                with work.condition:
                    # Wakes now and then by itself: a signal handler takes no lock and so wakes nobody.
                    work.condition.wait_for(lambda: work.done or work.stopping, timeout=0.2)
                    finished = [work.done.popleft() for _ in range(len(work.done))]
                for task in finished:
                    computed += 1
                    bytes_read += task.bytes
                    progress.advance(task.label, task.bytes)
                if deadline is not None and time.time() + 1.5 * work.longest > deadline:
                    work.stop("the time is up")
            _wind_up(work, threads)
    finally:
        progress.finish()
    if work.failure is not None:
        raise work.failure
    stored = sum(task.key in journal for task in open_tasks)
    if work.reason and stored < len(open_tasks):
        message = (
            f"{work.reason} with {reused + stored} of {len(tasks)} blocks done and saved; "
            "run the same command again to go on from here."
        )
        raise Interrupted(message) if work.interrupted else Unfinished(message)
    return Summary(stored, reused, time.monotonic() - began, bytes_read)


def _wind_up(work: _Work, threads: Sequence[threading.Thread]) -> None:
    """Wait for the threads; after a stop no longer than the grace for those in the middle of a task."""
    with work.condition:
        work.condition.notify_all()
    end = time.monotonic() + GRACE
    for thread in threads:
        thread.join(max(0.0, end - time.monotonic()) if work.stopping else None)
