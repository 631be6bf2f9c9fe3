"""Progress that suits its reader: a bar on a terminal, whole dated lines at a bounded rate in a batch log."""

from __future__ import annotations

import sys
import time
from collections.abc import Callable
from typing import Any, Literal, Protocol, TextIO

#: Seconds between two lines of a log, apart from the ten steps of 10 %.
LINE_INTERVAL = 60.0


class Progress(Protocol):
    """What the engine tells while it works."""

    def start(self, done: int, total: int, total_bytes: int) -> None:
        """Called once before the first task."""

    def advance(self, label: str, bytes_read: int) -> None:
        """Called after each task."""

    def finish(self) -> None:
        """Called once at the end, also after an error."""


class Silent:
    """Says nothing."""

    def start(self, done: int, total: int, total_bytes: int) -> None:
        """Nothing."""

    def advance(self, label: str, bytes_read: int) -> None:
        """Nothing."""

    def finish(self) -> None:
        """Nothing."""


def resident_bytes() -> int:
    """Memory of this process that is in use now, bytes."""
    import psutil

    return int(psutil.Process().memory_info().rss)


def duration(seconds: float) -> str:
    """A duration in the shortest of "12 s", "3 min 20 s", "2 h 5 min"."""
    whole = max(0, round(seconds))
    if whole < 60:
        return f"{whole} s"
    if whole < 3600:
        return f"{whole // 60} min {whole % 60} s"
    return f"{whole // 3600} h {whole % 3600 // 60} min"


class Lines:
    """One line at each 10 % of the work, and between them at most one a minute: time, share, rate, time left, memory."""

    def __init__(self, stream: TextIO, what: str = "blocks", clock: Callable[[], float] = time.monotonic) -> None:
        self._stream, self._what, self._clock = stream, what, clock
        self._done = self._total = self._bytes = self._new = 0

    def start(self, done: int, total: int, total_bytes: int) -> None:
        """Remember where the work begins."""
        self._done, self._total, self._bytes, self._new = done, total, 0, 0
        self._began = self._said = self._clock()
        self._step = 10 * done // max(total, 1)

    def advance(self, label: str, bytes_read: int) -> None:
        """Count a task and say so where a line is due."""
        self._done += 1
        self._new += 1
        self._bytes += bytes_read
        now = self._clock()
        step = 10 * self._done // max(self._total, 1)
        if step > self._step or now - self._said >= LINE_INTERVAL:
            self._step, self._said = step, now
            self._say(now)

    def _say(self, now: float) -> None:
        passed = max(now - self._began, 1e-9)
        left = (self._total - self._done) * passed / self._new
        self._stream.write(
            f"{time.strftime('%Y-%m-%d %H:%M:%S')}  {self._done}/{self._total} {self._what}  "
            f"{self._bytes / passed / 1e6:.0f} MB/s  {duration(left)} left  {resident_bytes() / 1e6:.0f} MB in use\n"
        )
        self._stream.flush()

    def finish(self) -> None:
        """Nothing more to say."""


class Bar:
    """A bar that is redrawn in place and disappears at the end."""

    def __init__(self, stream: TextIO, what: str = "blocks") -> None:
        self._stream, self._what = stream, what
        self._bar: Any = None

    def start(self, done: int, total: int, total_bytes: int) -> None:
        """Draw the empty bar."""
        from rich.console import Console
        from rich.progress import BarColumn, MofNCompleteColumn, TextColumn, TimeRemainingColumn
        from rich.progress import Progress as RichProgress

        self._bytes, self._began = 0, time.monotonic()
        self._bar = RichProgress(
            TextColumn("{task.description}"), BarColumn(), MofNCompleteColumn(), TextColumn("{task.fields[rate]}"),
            TimeRemainingColumn(), console=Console(file=self._stream), transient=True,
        )
        self._task = self._bar.add_task(self._what, total=total, completed=done, rate="")
        self._bar.start()

    def advance(self, label: str, bytes_read: int) -> None:
        """Move the bar on by one task."""
        self._bytes += bytes_read
        rate = self._bytes / max(time.monotonic() - self._began, 1e-9) / 1e6
        self._bar.update(self._task, advance=1, rate=f"{rate:.0f} MB/s")

    def finish(self) -> None:
        """Take the bar away."""
        if self._bar is not None:
            self._bar.stop()


def progress_for(kind: Literal["auto", "bar", "lines", "none"], stream: TextIO | None = None, what: str = "blocks") -> Progress:
    """The progress that `kind` names, writing to `stream` (default: standard error)."""
    out = sys.stderr if stream is None else stream
    if kind == "none":
        return Silent()
    if kind == "bar" or (kind == "auto" and out.isatty()):
        return Bar(out, what)
    return Lines(out, what)
