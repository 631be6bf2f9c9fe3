"""The rules of the house that a machine can check: floors, style, types, top level, quick help, README commands."""

from __future__ import annotations

import re
import subprocess
import sys
import time
from pathlib import Path

import pytest

TOP_LEVEL = {"README.md", "DEVELOPERS.md", "pyproject.toml", "lespost", "recipes", "tests", "toy_fields"}


def tracked(repository: Path) -> list[str]:
    """Paths that git tracks."""
    done = subprocess.run(["git", "ls-files"], cwd=repository, capture_output=True, text=True, check=False)
    if done.returncode != 0:
        pytest.skip("not a git checkout")
    return done.stdout.split("\n")[:-1]


def run(repository: Path, *command: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run([sys.executable, "-m", *command], cwd=repository, capture_output=True, text=True, check=False)


def test_floors_are_respected(repository: Path) -> None:
    done = subprocess.run(
        [sys.executable, "-c", "from importlinter.cli import lint_imports_command as lint; lint()", "--no-cache"],
        cwd=repository, capture_output=True, text=True, check=False,
    )
    assert done.returncode == 0, done.stdout + done.stderr
    assert "Contracts: 2 kept, 0 broken" in done.stdout


def test_style_is_clean(repository: Path) -> None:
    done = run(repository, "ruff", "check", "--no-cache", "lespost", "tests", "toy_fields")
    assert done.returncode == 0, done.stdout


def test_types_are_clean(repository: Path) -> None:
    done = run(repository, "mypy")
    assert done.returncode == 0, done.stdout


def test_top_level_holds_only_what_is_agreed(repository: Path) -> None:
    names = {path.split("/")[0] for path in tracked(repository)}
    assert {name for name in names if not name.startswith(".")} == TOP_LEVEL


def test_modules_stay_short_enough_to_hold_one_idea(repository: Path) -> None:
    long = {
        path: lines
        for path in tracked(repository)
        if path.endswith(".py") and path.startswith(("lespost/", "toy_fields/")) and (repository / path).exists()
        and (lines := len((repository / path).read_text().splitlines())) > 450
    }
    assert not long


def test_every_module_says_what_it_is_for(repository: Path) -> None:
    silent = [
        path
        for path in tracked(repository)
        if path.endswith(".py") and path.startswith(("lespost/", "toy_fields/")) and (repository / path).exists()
        and not (repository / path).read_text().lstrip().startswith(('"""', "#!"))
    ]
    assert not silent


def test_help_answers_in_half_a_second(repository: Path) -> None:
    durations = []
    for _ in range(4):  # the first call may compile byte code
        start = time.perf_counter()
        done = run(repository, "lespost", "--help")
        durations.append(time.perf_counter() - start)
        assert done.returncode == 0
    assert min(durations) < 0.5
    for command in ("inspect", "run", "scales", "waves", "record", "page"):
        assert command in done.stdout


def test_help_imports_nothing_heavy(repository: Path) -> None:
    code = (
        "import sys; from lespost.cli import run; run(['--help']);"
        "print(sorted({m.split('.')[0] for m in sys.modules} & {'numpy','numba','xarray','matplotlib','dask','zarr'}))"
    )
    done = subprocess.run([sys.executable, "-c", code], cwd=repository, capture_output=True, text=True, check=True)
    assert done.stdout.strip().endswith("[]")


def test_readme_states_the_job_then_the_two_commands(repository: Path) -> None:
    text = (repository / "README.md").read_text()
    commands = re.findall(r"^    (sh \.setup .*)$", text, flags=re.MULTILINE)
    assert commands[0].startswith("sh .setup lespost run recipes/first_look.toml")
    assert commands[1].startswith("sh .setup pytest")
