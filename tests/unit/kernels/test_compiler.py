"""The store of compiled kernels: found again, never trusted when damaged or stale, never needed."""

from __future__ import annotations

import os
import stat
import subprocess
import sys
from pathlib import Path

import pytest

from lespost.kernels.compiler import ChecksummedFiles

KERNEL = """
from lespost.kernels.compiler import kernel, reordering_kernel
from helper import twice

@kernel
def add(a, b):
    return twice(a) + b
"""
HELPER = """
from lespost.kernels.compiler import kernel

@kernel
def twice(a):
    return {factor} * a
"""
ASK = "import kernels_here as k; print(k.add(3, 4), sum(k.add.stats.cache_hits.values()), k.add.stats.cache_path)"


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    """A folder with two small kernel modules."""
    (tmp_path / "src").mkdir()
    (tmp_path / "tmp").mkdir()
    (tmp_path / "src" / "kernels_here.py").write_text(KERNEL)
    (tmp_path / "src" / "helper.py").write_text(HELPER.format(factor=2))
    return tmp_path


def ask(folder: Path, **environment: str) -> tuple[int, int, Path]:
    """(add(3, 4), times it came from the store, the store) in a process of its own."""
    clean = {key: value for key, value in os.environ.items() if not key.startswith(("NUMBA", "XDG"))}
    repository = str(Path(__file__).resolve().parents[3])
    env = {**clean, "TMPDIR": str(folder / "tmp"), "PYTHONPATH": f"{folder / 'src'}:{repository}", "PYTHONDONTWRITEBYTECODE": "1",
           **environment}  # fmt: skip
    done = subprocess.run([sys.executable, "-c", ASK], env=env, capture_output=True, text=True, check=False, timeout=120)
    assert done.returncode == 0, done.stderr
    value, hits, *path = done.stdout.split()
    return int(value), int(hits), Path(path[0] if path else "")


def test_kept_beside_the_source_and_found_again(folder: Path) -> None:
    assert ask(folder)[:2] == (10, 0)
    value, hits, place = ask(folder)
    assert (value, hits) == (10, 1)
    assert place == folder / "src" / "__pycache__"


def test_damage_of_any_kind_costs_a_compilation_only(folder: Path) -> None:
    ask(folder)
    store = folder / "src" / "__pycache__"
    data = next(store.glob("kernels_here.add*.nbc"))
    index = next(store.glob("kernels_here.add*.nbi"))
    def flip(content: bytes) -> bytes:
        middle = len(content) // 2
        return content[:middle] + bytes([content[middle] ^ 1]) + content[middle + 1 :]

    for path, damage in (
        (data, flip), (data, lambda b: b[: len(b) // 2]), (data, lambda b: b[:-200] + bytes(200)), (data, lambda b: b""),
        (index, lambda b: b[:-7]), (index, lambda b: b"\x80\x05garbage"),
    ):  # fmt: skip
        path.write_bytes(damage(path.read_bytes()))
        assert ask(folder)[:2] == (10, 0)
    assert ask(folder)[:2] == (10, 1)  # repaired by the compilation


def test_a_single_flipped_bit_anywhere_makes_an_entry_absent(tmp_path: Path) -> None:
    """Most of an entry is machine code, in which a flipped bit is still a readable entry: the checksum must catch it."""
    files = ChecksummedFiles(str(tmp_path), "kernel", "stamp")
    code = bytes(range(256)) * 4
    files.save("signature", code)
    assert files.load("signature") == code
    path = next(tmp_path.glob("*.nbc"))
    whole = path.read_bytes()
    for place in range(0, len(whole), 97):
        path.write_bytes(whole[:place] + bytes([whole[place] ^ 1]) + whole[place + 1 :])
        assert files.load("signature") is None, place


def test_a_changed_helper_is_noticed(folder: Path) -> None:
    assert ask(folder)[0] == 10
    (folder / "src" / "helper.py").write_text(HELPER.format(factor=5))
    assert ask(folder)[:2] == (19, 0)


def unwritable(folder: Path) -> dict[str, str]:
    """Neither beside the source nor at home can anything be written, even by root."""
    (folder / "src" / "__pycache__").write_text("in the way")
    return {"HOME": "/dev/null"}


def test_without_a_home_it_is_kept_in_tmpdir(folder: Path) -> None:
    environment = unwritable(folder)
    assert ask(folder, **environment)[:2] == (10, 0)
    value, hits, place = ask(folder, **environment)
    assert (value, hits) == (10, 1)
    own = folder / "tmp" / f"lespost-kernels-{os.getuid()}"
    assert own in place.parents
    assert stat.S_IMODE(own.stat().st_mode) == 0o700


def test_a_folder_that_others_can_write_is_not_trusted(folder: Path) -> None:
    environment = unwritable(folder)
    own = folder / "tmp" / f"lespost-kernels-{os.getuid()}"
    own.mkdir()
    own.chmod(0o777)
    for _ in range(2):
        assert ask(folder, **environment)[:2] == (10, 0)
    assert not list(own.iterdir())
