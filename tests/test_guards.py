"""DEVELOPERS.md names, for each thing that bites users, the module that deals with it and the test that guards it: both exist."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

ROW = re.compile(r"^\| \d+ \| (?P<what>[^|]+) \| `(?P<where>[^`]+)` \| `(?P<file>[^`:]+)::(?P<test>[^`]+)` \|$", flags=re.MULTILINE)


def test_every_guard_is_there(repository: Path) -> None:
    rows = list(ROW.finditer((repository / "DEVELOPERS.md").read_text()))
    assert len(rows) >= 50
    missing = []
    for row in rows:
        module, file = repository / "lespost" / row["where"], repository / "tests" / row["file"]
        if not module.is_file() or not file.is_file() or f"def {row['test']}(" not in file.read_text():
            missing.append(row["what"])
    assert not missing


@pytest.mark.parametrize("section", ["Floors", "One pass", "Tests", "Bibliography", "Choices that are ours"])
def test_contributors_find_the_rules(repository: Path, section: str) -> None:
    assert re.search(rf"^## \d+\. .*{section}", (repository / "DEVELOPERS.md").read_text(), flags=re.MULTILINE)
