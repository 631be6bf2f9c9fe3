"""How kernels are compiled, and where the compiled code is kept between runs.

`kernel` compiles a function exactly as written; `reordering_kernel` also lets the compiler reorder sums so that they run on
several numbers at once (still the same result for the same input on the same machine). Both release the interpreter lock
and keep the machine code on disk, in the first place that can be written: NUMBA_CACHE_DIR, beside the source, the user's
cache folder, $TMPDIR. Where none can be written the kernels are compiled anew in each process.

The stored code is bound to the text of every kernel beside it (a changed helper must not be missed) and carries a checksum:
an entry that was cut short or damaged is compiled again instead of being run.
"""

from __future__ import annotations

import contextlib
import functools
import hashlib
import os
import stat
import tempfile
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numba
from numba.core import caching

#: Freedom to reorder and fuse additions; NaN and infinity keep their meaning.
REORDERING = {"reassoc", "contract", "nsz", "arcp"}


class CorruptEntry(OSError):
    """Stored machine code that does not match its checksum; OSError, which the cache takes as "not there"."""


@functools.cache
def source_stamp(folder: Path) -> str:
    """Digest of the text of all modules in `folder` and of this package: what compiled code depends on."""
    digest = hashlib.sha256()
    for place in sorted({folder, Path(__file__).parent}):
        for path in sorted(place.glob("*.py")):
            digest.update(path.name.encode() + b"\0" + path.read_bytes() + b"\0")
    return digest.hexdigest()


def temporary_cache_folder() -> Path:
    """Folder below $TMPDIR that belongs to this user alone. Raises OSError if it cannot be made or belongs to someone else."""
    folder = Path(tempfile.gettempdir()) / f"lespost-kernels-{os.getuid()}"
    folder.mkdir(mode=0o700, exist_ok=True)
    status = folder.lstat()
    # The folder holds code that will be run: another user must not be able to put it there.
    if not stat.S_ISDIR(status.st_mode) or status.st_uid != os.getuid() or status.st_mode & 0o022:
        raise OSError(f"{folder} is not a folder of this user alone")
    return folder


class TemporaryCacheLocator(caching.UserWideCacheLocator):
    """The place of last resort: the user's own folder below $TMPDIR."""

    def __init__(self, py_func: Any, py_file: str) -> None:
        self._py_file = py_file
        self._lineno = py_func.__code__.co_firstlineno
        self._cache_path = str(temporary_cache_folder() / self.get_suitable_cache_subpath(py_file))

    @classmethod
    def from_function(cls, py_func: Any, py_file: str) -> TemporaryCacheLocator | None:
        """The locator, or None where the folder cannot be used."""
        try:
            found = cls(py_func, py_file)
            found.ensure_cache_path()
        except OSError:
            return None
        return found


class KernelCacheImplementation(caching.CompileResultCacheImpl):
    """Where to look, in order."""

    _locator_classes = [  # noqa: RUF012 - the library's own way of stating it
        caching.UserProvidedCacheLocator,
        caching.InTreeCacheLocator,
        caching.UserWideCacheLocator,
        TemporaryCacheLocator,
    ]


class ChecksummedFiles(caching.IndexDataCacheFile):
    """Index and data files, each data file headed by the checksum of the rest; a damaged file counts as absent."""

    def _save_data(self, name: str, data: Any) -> None:
        body = self._dump(data)
        with self._open_for_write(self._data_path(name)) as file:
            file.write(hashlib.sha256(body).digest() + body)

    def _load_data(self, name: str) -> Any:
        stored = Path(self._data_path(name)).read_bytes()
        if hashlib.sha256(stored[32:]).digest() != stored[:32]:
            raise CorruptEntry(f"{name} does not match its checksum")
        return caching.pickle.loads(stored[32:])

    def _load_index(self) -> dict[Any, str]:
        try:
            overloads = super()._load_index()
        except Exception:  # a damaged index can fail in any way while it is read; its kernels are compiled again
            return {}
        return overloads if isinstance(overloads, dict) else {}


class KernelCache(caching.FunctionCache):
    """The store of one kernel's compiled versions; never the reason why a run fails."""

    _impl_class = KernelCacheImplementation

    def __init__(self, function: Callable[..., Any]) -> None:
        super().__init__(function)
        folder = Path(function.__code__.co_filename).parent
        self._cache_file = ChecksummedFiles(self._cache_path, self._impl.filename_base, source_stamp(folder))

    def load_overload(self, sig: Any, target_context: Any) -> Any:
        """The stored version for a signature, or None where there is none that can be used."""
        try:
            return super().load_overload(sig, target_context)
        except Exception:  # stored by another version of the libraries, or damaged: compiling again is always right
            return None

    def save_overload(self, sig: Any, data: Any) -> None:
        """Store a compiled version; a full or read-only disk only costs the next process a compilation."""
        try:
            super().save_overload(sig, data)
        except OSError:
            return


def _compiled(function: Callable[..., Any], **options: Any) -> Any:
    dispatcher = numba.njit(nogil=True, error_model="numpy", **options)(function)
    with contextlib.suppress(RuntimeError, OSError):  # no folder can be written: compile in this process only
        dispatcher._cache = KernelCache(function)
    return dispatcher


def kernel(function: Callable[..., Any]) -> Any:
    """Compile `function` exactly as written: every rounding where the text puts it."""
    return _compiled(function)


def reordering_kernel(function: Callable[..., Any]) -> Any:
    """Compile `function` with sums reordered for speed (partial sums side by side); for sums of float64 products."""
    return _compiled(function, fastmath=REORDERING)


def finite_kernel(function: Callable[..., Any]) -> Any:
    """As `reordering_kernel`, with the promise that no NaN or infinity comes in: the caller has made sure."""
    return _compiled(function, fastmath=REORDERING | {"nnan", "ninf"})
