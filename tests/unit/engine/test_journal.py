"""The journal keeps what it was given, bit for bit, through cuts and damage, for one writer at a time."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from lespost.engine.journal import Journal, decode, encode
from lespost.errors import DataError, RequestError

RESULT = {
    "moments": np.arange(12.0).reshape(3, 4) / 7.0, "counts": np.array([1, 2], np.int64), "single": np.float32([[0.1]]),
    "empty": np.zeros((0, 3)), "scalar": np.array(2.5), "flags": np.array([True, False]), "missing": np.array([np.nan, -0.0]),
}  # fmt: skip


def assert_equal_bits(a: dict[str, np.ndarray], b: dict[str, np.ndarray]) -> None:
    assert list(a) == list(b)
    for name in a:
        assert a[name].dtype == b[name].dtype
        assert a[name].shape == b[name].shape
        assert a[name].tobytes() == b[name].tobytes(), name


def test_arrays_come_back_as_they_were() -> None:
    key, arrays = decode(encode("snapshot 3 · levels", RESULT))
    assert key == "snapshot 3 · levels"
    assert_equal_bits(arrays, {name: np.asarray(value) for name, value in RESULT.items()})


def test_big_endian_numbers_keep_their_value() -> None:
    _, arrays = decode(encode("k", {"a": np.array([1.5, 2.5], ">f8")}))
    np.testing.assert_array_equal(arrays["a"], [1.5, 2.5])


def test_only_numbers_are_stored() -> None:
    with pytest.raises(TypeError, match="numbers"):
        encode("k", {"a": np.array(["text"])})
    with pytest.raises(TypeError, match="numbers"):
        encode("k", {"a": np.array([object()])})


def test_results_survive_closing(tmp_path: Path) -> None:
    path = tmp_path / "journal"
    with Journal(path, {"version": 1}) as journal:
        assert journal.opened == "nothing to resume"
        journal.append("a", RESULT)
        journal.append("b", {"x": np.zeros(2)})
    with Journal(path, {"version": 1}) as journal:
        assert journal.opened == "resumed: 2 results of an earlier run"
        assert "a" in journal
        assert "c" not in journal
        assert len(journal) == 2
        assert_equal_bits(journal.get("a"), {name: np.asarray(value) for name, value in RESULT.items()})
        with pytest.raises(KeyError):
            journal.get("c")


def test_another_identity_starts_anew_and_says_why(tmp_path: Path) -> None:
    path = tmp_path / "journal"
    with Journal(path, {"input": "aa", "recipe": "r", "version": "1"}) as journal:
        journal.append("a", RESULT)
    with Journal(path, {"input": "ab", "recipe": "r", "version": "2"}) as journal:
        assert journal.opened == "started anew: input, version changed since the earlier run"
        assert "a" not in journal
    with Journal(path, {"input": "ab", "recipe": "r", "version": "2"}, fresh=True) as journal:
        assert journal.opened == "started anew as asked"


def test_every_possible_cut_keeps_the_whole_records_before_it(tmp_path: Path) -> None:
    path = tmp_path / "journal"
    sizes = []
    with Journal(path, {}) as journal:
        for key in "abc":
            journal.append(key, {"x": np.full(3, ord(key))})
            sizes.append(path.stat().st_size)
    whole = path.read_bytes()
    for cut in range(len(whole)):
        path.write_bytes(whole[:cut])
        with Journal(path, {}) as journal:
            kept = sum(size <= cut for size in sizes)
            assert len(journal) == kept
            assert "dropped" in journal.opened if cut not in sizes and kept else True
            journal.append("d", {"x": np.ones(1)})
        with Journal(path, {}) as journal:
            assert len(journal) == kept + 1
            np.testing.assert_array_equal(journal.get("d")["x"], [1.0])


def test_a_flipped_bit_ends_the_journal_there(tmp_path: Path) -> None:
    path = tmp_path / "journal"
    with Journal(path, {}) as journal:
        journal.append("a", {"x": np.ones(4)})
        middle = path.stat().st_size
        journal.append("b", {"x": np.ones(4)})
        journal.append("c", {"x": np.ones(4)})
    content = bytearray(path.read_bytes())
    content[middle + 30] ^= 1
    path.write_bytes(bytes(content))
    with Journal(path, {}) as journal:
        assert "a" in journal
        assert "b" not in journal
        assert "c" not in journal
        assert journal.dropped_bytes == len(content) - middle


def test_a_file_of_another_kind_is_left_alone(tmp_path: Path) -> None:
    path = tmp_path / "journal"
    path.write_text("my precious notes")
    with pytest.raises(DataError, match="not a journal"):
        Journal(path, {})
    assert path.read_text() == "my precious notes"
    path.unlink()
    Journal(path, {}).close()  # the lock was given back


def test_a_second_writer_is_told_who_holds_it(tmp_path: Path) -> None:
    path = tmp_path / "journal"
    code = f"from pathlib import Path; from lespost.engine.journal import Journal; Journal(Path({str(path)!r}), {{}})"
    with Journal(path, {}) as journal:
        journal.append("a", {"x": np.ones(1)})
        done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False)
        assert done.returncode != 0
        assert "RequestError" in done.stderr
        assert f"process {os.getpid()} on " in done.stderr
        with pytest.raises(RequestError, match=f"process {os.getpid()} on"):
            Journal(path, {})
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr
