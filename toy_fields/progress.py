"""Progress of a long run on stderr: a bar on a terminal, plain dated lines at a bounded rate elsewhere."""

from __future__ import annotations

import sys
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from datetime import datetime

#: Seconds between lines in a log.
LOG_INTERVAL = 60.0


@contextmanager
def progress(label: str, end: float) -> Iterator[Callable[[float, int], None]]:
    """A function report(done, steps) with `done` rising to `end` (both in seconds of run time)."""
    if sys.stderr.isatty():
        import click

        with click.progressbar(length=1000, label=label, file=sys.stderr) as bar:

            def on_terminal(done: float, steps: int) -> None:
                bar.update(max(0, int(1000 * done / end) - bar.pos))

            yield on_terminal
        return
    started = time.monotonic()
    last = [started]

    def in_log(done: float, steps: int) -> None:
        now = time.monotonic()
        if now - last[0] >= LOG_INTERVAL:
            last[0] = now
            remaining = (now - started) * (end - done) / max(done, 1e-9)
            stamp = datetime.now().isoformat(timespec="seconds")
            print(
                f"{stamp} {label}: {done:.0f} of {end:.0f} s, {steps} steps, about {remaining:.0f} s to go",
                file=sys.stderr, flush=True,
            )

    yield in_log
