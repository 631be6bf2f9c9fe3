"""Small zarr stores: values rounded to the digits that mean something, one shard per snapshot, and their checksums.

Rounding keeps a number of mantissa bits (round to nearest) and drops what is below an absolute step; the zeroed bits
compress to nothing. Written twice from the same fields a store has the same bytes.
"""

from __future__ import annotations

import hashlib
import os
import shutil
import tempfile
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr

from toy_fields.errors import FieldsNotFinite, ToyRequestError

#: Bits of mantissa kept (23 = all), and the absolute step below which nothing is kept, by variable; others keep 12 bits.
#: A step keeps the error even over the column, which discrete continuity likes better than a relative error does.
PRECISION: dict[str, tuple[int, float]] = {
    "u": (23, 2.0**-14),
    "v": (23, 2.0**-14),
    "w": (23, 2.0**-14),
    "theta": (23, 2.0**-15),
    "nu_sgs": (3, 2.0**-17),
    "tracer_dye": (8, 2.0**-14),
}

#: Levels per chunk inside a shard.
LEVELS_PER_CHUNK = 4


def round_values(values: np.ndarray, mantissa_bits: int, step: float = 0.0) -> np.ndarray:
    """float32 copy of `values` rounded to multiples of `step` (0: no step), then to `mantissa_bits` bits of mantissa."""
    result = np.array(values, dtype=np.float32)
    if step > 0:
        result = (np.rint(result / np.float32(step)) * np.float32(step)).astype(np.float32)
    dropped = 23 - mantissa_bits
    if dropped > 0:
        bits = result.view(np.uint32)
        half = np.uint32((1 << (dropped - 1)) - 1)
        odd = (bits >> np.uint32(dropped)) & np.uint32(1)
        bits += half + odd
        bits &= np.uint32(0xFFFFFFFF ^ ((1 << dropped) - 1))
    # No negative zero: it would carry a bit of noise into the compressed bytes.
    result += np.float32(0.0)
    return result


def rounded(fields: xr.Dataset) -> xr.Dataset:
    """The dataset with every float32 variable rounded as PRECISION says; attributes say how."""
    result = fields.copy()
    for name, variable in fields.data_vars.items():
        if variable.dtype != np.float32:
            continue
        bits, step = PRECISION.get(str(name), (12, 0.0))
        parts = ([f"{bits} mantissa bits"] if bits < 23 else []) + ([f"multiples of {step:.3g}"] if step else [])
        note = "rounded to " + " and ".join(parts)
        result[name] = variable.copy(data=round_values(variable.values, bits, step)).assign_attrs(precision=note)
    return result


def write_store(fields: xr.Dataset, path: Path, replace: bool = False) -> None:
    """Writes `fields` as a zarr store (format 3, zstd, one shard per snapshot, no consolidated metadata) at `path`.

    The store appears whole or not at all. Raises ToyRequestError where `path` exists and `replace` is false,
    FieldsNotFinite where a value is not finite.
    """
    from zarr.codecs import BloscCodec

    check_target(path, replace)
    for name, variable in fields.data_vars.items():
        if not np.all(np.isfinite(variable.values)):
            raise FieldsNotFinite(f"{name} holds values that are not finite: {path} is not written.")
    encoding: dict[Any, dict[str, Any]] = {}
    for name, variable in fields.data_vars.items():
        if variable.ndim != 4:
            continue
        levels = -(-variable.shape[1] // LEVELS_PER_CHUNK) * LEVELS_PER_CHUNK
        encoding[name] = {
            "chunks": (1, LEVELS_PER_CHUNK, *variable.shape[2:]),
            "shards": (1, levels, *variable.shape[2:]),
            # zstd inside blosc, for its bit shuffle: half the size of plain zstd on rounded floats.
            "compressors": (BloscCodec(cname="zstd", clevel=9, shuffle="bitshuffle", typesize=4),),
            "_FillValue": None,
        }
    for name in fields.coords:
        encoding[name] = {"_FillValue": None}
    path.parent.mkdir(parents=True, exist_ok=True)
    with tempfile.TemporaryDirectory(dir=path.parent, prefix=".toy_store_") as folder:
        partial = Path(folder) / path.name
        rounded(fields).to_zarr(partial, mode="w", zarr_format=3, consolidated=False, encoding=encoding)
        if path.exists():
            shutil.rmtree(path)
        os.replace(partial, path)


def write_plain(fields: xr.Dataset, path: Path, replace: bool = False) -> None:
    """Writes `fields` as they are, a netCDF-4 file for .nc, else a zarr store (format 3); whole or not at all.

    Raises ToyRequestError where `path` exists and `replace` is false, or ends in neither .nc nor .zarr.
    """
    check_target(path, replace)
    if path.suffix not in (".nc", ".zarr"):
        raise ToyRequestError(f"{path}: let the name end in .nc or .zarr, so that the format is plain.")
    path.parent.mkdir(parents=True, exist_ok=True)
    encoding: dict[Any, dict[str, Any]] = {name: {"_FillValue": None} for name in fields.variables}
    with tempfile.TemporaryDirectory(dir=path.parent, prefix=".toy_store_") as folder:
        partial = Path(folder) / path.name
        if path.suffix == ".nc":
            fields.to_netcdf(partial, encoding=encoding)
        else:
            fields.to_zarr(partial, mode="w", zarr_format=3, consolidated=False, encoding=encoding)
        if path.is_dir():
            shutil.rmtree(path)
        os.replace(partial, path)


def check_target(path: Path, replace: bool) -> None:
    """Raises ToyRequestError where something stands at `path` that is not to be replaced: anything if `replace` is
    false, else a folder that is no zarr store, for replacing removes it whole."""
    if path.exists() and not replace:
        raise ToyRequestError(f"{path} exists: choose another name with --out, or add --replace to write over it.")
    if path.is_dir() and not (path / "zarr.json").is_file():
        raise ToyRequestError(f"{path} is a folder but no zarr store: it is not replaced; choose another name with --out.")


def checksum_lines(folder: Path, names: list[str]) -> list[str]:
    """One line "sha256  path" per file under `folder`/name, sorted, as `sha256sum -c` reads it."""
    lines = []
    for name in sorted(names):
        target = folder / name
        files = [target] if target.is_file() else sorted(file for file in target.rglob("*") if file.is_file())
        for file in files:
            digest = hashlib.sha256(file.read_bytes()).hexdigest()
            lines.append(f"{digest}  {file.relative_to(folder).as_posix()}")
    return lines
