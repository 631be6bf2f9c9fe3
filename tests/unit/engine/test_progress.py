"""A log gets few, whole, plain lines; a terminal gets a bar."""

from __future__ import annotations

import io
import re

from lespost.engine.progress import Bar, Lines, Silent, duration, progress_for


class Terminal(io.StringIO):
    def isatty(self) -> bool:
        return True


def logged(tasks: int, seconds_per_task: float, already: int = 0) -> str:
    """What a log holds after `tasks` tasks of equal length."""
    stream, now = io.StringIO(), [0.0]
    lines = Lines(stream, clock=lambda: now[0])
    lines.start(already, tasks, tasks * 10**6)
    for number in range(tasks - already):
        now[0] += seconds_per_task
        lines.advance(f"task {number}", 10**6)
    lines.finish()
    return stream.getvalue()


def test_a_quick_run_says_ten_lines() -> None:
    assert logged(1000, 0.001).count("\n") == 10
    assert logged(3, 0.1).count("\n") == 3


def test_a_long_run_says_one_line_a_minute_at_most_besides_the_ten() -> None:
    text = logged(100_000, 0.36)  # ten hours
    assert 590 <= text.count("\n") <= 10 * 60 + 10
    assert len(text.encode()) < 100_000


def test_lines_are_plain_dated_and_complete() -> None:
    for line in logged(20, 30.0).splitlines():
        assert re.fullmatch(
            r"\d{4}-\d\d-\d\d \d\d:\d\d:\d\d  \d+/20 blocks  \d+ MB/s  (\d+ h )?(\d+ min)? ?(\d+ s)? left  \d+ MB in use", line
        ), line
    assert "\r" not in logged(20, 30.0)
    assert "\x1b" not in logged(20, 30.0)


def test_a_resumed_run_counts_what_is_done_and_judges_by_what_it_does() -> None:
    first = logged(100, 60.0, already=50).splitlines()[0]
    assert "51/100" in first
    assert " 49 min 0 s left" in first


def test_durations() -> None:
    assert [duration(s) for s in (0.4, 59, 61, 3600, 7500)] == ["0 s", "59 s", "1 min 1 s", "1 h 0 min", "2 h 5 min"]


def test_the_kind_follows_the_stream() -> None:
    assert isinstance(progress_for("auto", io.StringIO()), Lines)
    assert isinstance(progress_for("auto", Terminal()), Bar)
    assert isinstance(progress_for("lines", Terminal()), Lines)
    assert isinstance(progress_for("none", Terminal()), Silent)


def test_the_bar_draws_and_goes_away() -> None:
    stream = Terminal()
    bar = Bar(stream)
    bar.start(1, 4, 100)
    bar.advance("one", 50)
    bar.finish()
    assert "2/4" in stream.getvalue()
