"""Files and folders are there whole or not at all."""

from __future__ import annotations

import socket
from pathlib import Path

import pytest

from lespost.engine import atomic
from lespost.engine.atomic import replace_directory, replace_file


def names(folder: Path) -> list[str]:
    return sorted(path.name for path in folder.iterdir())


def test_a_file_appears_only_when_whole(tmp_path: Path) -> None:
    target = tmp_path / "deep" / "table.csv"
    with replace_file(target) as part:
        part.write_text("new")
        assert not target.exists()
    assert target.read_text() == "new"
    assert names(target.parent) == ["table.csv"]


def test_an_error_leaves_the_old_file(tmp_path: Path) -> None:
    target = tmp_path / "table.csv"
    target.write_text("old")
    with pytest.raises(RuntimeError), replace_file(target) as part:
        part.write_text("half")
        raise RuntimeError
    assert target.read_text() == "old"
    assert names(tmp_path) == ["table.csv"]


@pytest.mark.parametrize("exchange", [True, False])
def test_a_folder_is_swapped_whole(tmp_path: Path, exchange: bool, monkeypatch: pytest.MonkeyPatch) -> None:
    if not exchange:
        monkeypatch.setattr(atomic, "_exchange", lambda a, b: False)
    target = tmp_path / "profiles.zarr"
    for text in ("one", "two", "three"):
        with replace_directory(target) as part:
            (part / "c").mkdir()
            (part / "c" / text).write_text(text)
            if text != "one":
                assert names(target / "c") != [text]
        assert names(target / "c") == [text]
        assert names(tmp_path) == ["profiles.zarr"]


def test_an_error_leaves_the_old_folder(tmp_path: Path) -> None:
    target = tmp_path / "profiles.zarr"
    with replace_directory(target) as part:
        (part / "old").write_text("old")
    with pytest.raises(RuntimeError), replace_directory(target) as part:
        (part / "half").write_text("half")
        raise RuntimeError
    assert names(target) == ["old"]
    assert names(tmp_path) == ["profiles.zarr"]


def test_a_folder_never_replaces_a_file(tmp_path: Path) -> None:
    target = tmp_path / "profiles.zarr"
    target.write_text("a file")
    with pytest.raises(NotADirectoryError), replace_directory(target):
        pass
    assert target.read_text() == "a file"


def test_what_killed_processes_left_is_removed_and_what_others_write_is_not(tmp_path: Path) -> None:
    target = tmp_path / "table.csv"
    dead = tmp_path / f".table.csv.part-{socket.gethostname()}-999999999"
    elsewhere = tmp_path / ".table.csv.part-another-host-1"
    alive = tmp_path / f".table.csv.part-{socket.gethostname()}-1"
    for path in (dead, elsewhere, alive):
        path.write_text("half")
    with replace_file(target) as part:
        part.write_text("new")
    assert names(tmp_path) == sorted(["table.csv", elsewhere.name, alive.name])
