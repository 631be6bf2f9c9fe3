"""Files and folders that appear whole under their name or not at all, whatever kills the process.

Work is done beside the target under a name that says which process it belongs to, then renamed. A folder that replaces
another is exchanged with it in one step where the system can (Linux, renameat2), so that no moment lacks a whole one.
"""

from __future__ import annotations

import contextlib
import ctypes
import os
import shutil
import socket
from collections.abc import Iterator
from pathlib import Path

_EXCHANGE = 2
_AT_FDCWD = -100


def _part_name(path: Path) -> Path:
    return path.with_name(f".{path.name}.part-{socket.gethostname()}-{os.getpid()}")


def process_is_alive(pid: int) -> bool:
    """Whether a process of this machine with that number exists."""
    try:
        os.kill(pid, 0)
    except ProcessLookupError:
        return False
    except PermissionError:
        return True
    return True


def remove_leftovers(path: Path) -> None:
    """Remove what killed processes of this machine left beside `path` while they wrote it."""
    prefix = f".{path.name}.part-{socket.gethostname()}-"
    for left in path.parent.glob(f".{path.name}.part-*"):
        number = left.name.removeprefix(prefix)
        if number.isdigit() and (int(number) == os.getpid() or not process_is_alive(int(number))):
            _remove(left)


def _remove(path: Path) -> None:
    if path.is_dir() and not path.is_symlink():
        shutil.rmtree(path, ignore_errors=True)
    else:
        path.unlink(missing_ok=True)


def _sync(path: Path) -> None:
    """Ask the disk to hold what was written, where the file system can."""
    with contextlib.suppress(OSError):
        descriptor = os.open(path, os.O_RDONLY)
        try:
            os.fsync(descriptor)
        finally:
            os.close(descriptor)


@contextlib.contextmanager
def replace_file(path: Path) -> Iterator[Path]:
    """Give a path to write to; on leaving without an error that file replaces `path`, else it is removed."""
    path.parent.mkdir(parents=True, exist_ok=True)
    remove_leftovers(path)
    part = _part_name(path)
    try:
        yield part
        _sync(part)
        os.replace(part, path)
        _sync(path.parent)
    finally:
        _remove(part)


@contextlib.contextmanager
def replace_directory(path: Path) -> Iterator[Path]:
    """Give an empty folder to fill; on leaving without an error it takes the place of `path`, else it is removed."""
    path.parent.mkdir(parents=True, exist_ok=True)
    remove_leftovers(path)
    part = _part_name(path)
    part.mkdir()
    try:
        yield part
        _sync_tree(part)
        _swap(part, path)
        _sync(path.parent)
    finally:
        _remove(part)


def _sync_tree(folder: Path) -> None:
    for root, _, names in os.walk(folder):
        for name in names:
            _sync(Path(root) / name)
        _sync(Path(root))


def _swap(new: Path, old: Path) -> None:
    """Put `new` under the name `old`; what was there, if anything, ends up under the name `new`."""
    if not old.exists():
        os.rename(new, old)
        return
    if not old.is_dir() or old.is_symlink():
        raise NotADirectoryError(f"{old} exists and is not a folder: move it away")
    if _exchange(new, old):
        return
    aside = new.with_name(new.name + "-old")
    os.rename(old, aside)
    os.rename(new, old)
    os.rename(aside, new)


def _exchange(a: Path, b: Path) -> bool:
    """Exchange two names in one step; False where the system or the file system cannot."""
    rename = getattr(ctypes.CDLL(None, use_errno=True), "renameat2", None)
    if rename is None:
        return False
    return bool(rename(_AT_FDCWD, os.fsencode(a), _AT_FDCWD, os.fsencode(b), _EXCHANGE) == 0)
