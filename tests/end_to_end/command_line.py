"""Runs the installed command as a user does, in a process of its own."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path


def lespost(*arguments: str | Path, folder: Path | None = None, expect: int | None = 0,
            environment: dict[str, str] | None = None) -> subprocess.CompletedProcess[str]:
    """`lespost arguments...` run in `folder`; asserts the exit code `expect` unless it is None."""
    done = subprocess.run(
        [sys.executable, "-m", "lespost", *map(str, arguments)], cwd=folder, capture_output=True, text=True, check=False,
        env={**os.environ, **(environment or {})}, timeout=280,
    )
    if expect is not None:
        assert done.returncode == expect, f"exit {done.returncode}\nstdout: {done.stdout}\nstderr: {done.stderr}"
    return done


def assert_one_paragraph(done: subprocess.CompletedProcess[str]) -> None:
    """An error is one short paragraph on stderr, without a traceback and without noise from libraries."""
    assert done.stderr.startswith("lespost: ") or done.stderr.startswith("Usage: "), done.stderr
    assert "Traceback" not in done.stderr
    assert "Warning" not in done.stderr
    assert "\n\n" not in done.stderr.strip() or done.stderr.startswith("Usage: ")
    assert len(done.stderr) < 2500
