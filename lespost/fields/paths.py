"""From [fields].path to files and stores: patterns, folders, natural order, and what each file is."""

from __future__ import annotations

import glob
import os
import re
from collections.abc import Sequence
from pathlib import Path
from typing import Literal

from lespost.errors import DataError
from lespost.fields.integrity import file_kind

Kind = Literal["netcdf", "zarr", "raw"]

#: Endings by which files of a folder are taken to be netCDF without opening them.
NETCDF_ENDINGS = {".nc", ".nc4", ".cdf", ".netcdf"}
#: Documents at the top of a folder that make it a zarr store.
STORE_MARKERS = ("zarr.json", ".zgroup", ".zmetadata", ".zarray")


def natural_key(path: Path) -> tuple[object, ...]:
    """Sort key under which run_2 comes before run_10."""
    return tuple(int(part) if part.isdigit() else part for part in re.split(r"(\d+)", str(path)))


def is_zarr(path: Path) -> bool:
    """Whether a directory holds a zarr store's metadata."""
    return path.is_dir() and any((path / name).exists() for name in STORE_MARKERS)


def expand(paths: Sequence[str], base: Path, raw: bool = False) -> list[Path]:
    """Every file and store that `paths` name, in natural order; folders are searched one level deep.

    raw: folders may hold files of any ending. Raises DataError for a path that does not exist, may not be read, or
    holds nothing usable.
    """
    found: list[Path] = []
    for text in paths:
        path = Path(text).expanduser()
        path = path if path.is_absolute() else base / path
        if glob.has_magic(str(path)) and not path.exists():
            matches = sorted((Path(p) for p in glob.glob(str(path), recursive=True)), key=natural_key)
            if not matches:
                raise DataError(f'{path}: no file matches this pattern; check [fields].path and the folder it starts from.')
        else:
            matches = [path]
        for match in matches:
            found += _usable(match, raw)
    unique = list(dict.fromkeys(Path(os.path.abspath(p)) for p in found))
    return sorted(unique, key=natural_key)


def _usable(path: Path, raw: bool) -> list[Path]:
    try:
        os.stat(path)
        if path.is_file() or is_zarr(path):
            return [path]
        inside = sorted(path.iterdir(), key=natural_key)
    except FileNotFoundError:
        raise DataError(
            f"{path}: no such file or folder; paths are relative to the recipe. Check [fields].path."
        ) from None
    except PermissionError:
        raise DataError(f"{path}: permission denied; ask its owner for read access (chmod a+rX).") from None
    usable = [
        item
        for item in inside
        if (item.is_dir() and is_zarr(item))
        or (item.is_file() and (item.suffix.lower() in NETCDF_ENDINGS or (raw and not item.name.startswith("."))))
    ]
    if not usable:
        raise DataError(
            f"{path}: the folder holds no netCDF file (*.nc) and no zarr store; for raw binary files write "
            'format = "raw" and a [fields.raw] table.'
        )
    return usable


def sniff(path: Path) -> Kind:
    """What a file or store is. Raises DataError if it is empty, unreadable or foreign."""
    if path.is_dir():
        return "zarr"
    try:
        kind = file_kind(path)
    except PermissionError:
        raise DataError(f"{path}: permission denied; ask its owner for read access (chmod a+r).") from None
    except OSError as error:
        raise DataError(f"{path}: cannot be read ({error.strerror}).") from None
    if kind == "empty":
        raise DataError(f"{path}: the file is empty (0 bytes); write it again or leave it out of [fields].path.")
    if kind == "other":
        raise DataError(
            f"{path}: neither netCDF nor zarr. Give the simulation's own output, or, for raw binary files, format = "
            '"raw" and a [fields.raw] table with shape, dtype and variables.'
        )
    return "netcdf"
