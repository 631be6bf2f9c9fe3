"""A short identity of the input: path, size, time of change and a hash of the header of every file.

The engine keys its saved results with it, so that a changed file is noticed and a copied recipe is not confused.
"""

from __future__ import annotations

import hashlib
import os
from collections.abc import Sequence
from pathlib import Path

#: Bytes at the start of a file that are hashed.
HEADER_BYTES = 1 << 16
#: Most files whose headers are read; of longer runs, size and time of change speak for the others.
HASHED_FILES = 64


def fingerprint(paths: Sequence[Path]) -> str:
    """Hexadecimal digest (SHA-256) over all files and stores."""
    digest = hashlib.sha256()
    step = max(1, len(paths) // HASHED_FILES)
    for number, path in enumerate(paths):
        status = path.stat()
        digest.update(f"{path}\0{status.st_size}\0{status.st_mtime_ns}\0".encode())
        if path.is_dir():
            _store(path, digest)
        elif number % step == 0 or number == len(paths) - 1:
            with path.open("rb") as stream:
                digest.update(stream.read(HEADER_BYTES))
    return digest.hexdigest()


def _store(path: Path, digest: "hashlib._Hash") -> None:  # noqa: UP037
    """Metadata documents in full; of the chunks, how many, how large, and the latest change."""
    count, size, latest = 0, 0, 0
    for folder, folders, files in os.walk(path):
        folders.sort()
        for name in sorted(files):
            full = Path(folder) / name
            if name in ("zarr.json", ".zarray", ".zgroup", ".zattrs"):
                digest.update(str(full.relative_to(path)).encode() + b"\0" + full.read_bytes())
                continue
            status = full.stat()
            count, size, latest = count + 1, size + status.st_size, max(latest, status.st_mtime_ns)
    digest.update(f"{count} {size} {latest}".encode())
