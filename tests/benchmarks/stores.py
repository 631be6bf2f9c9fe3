"""Stores for the benchmarks: smooth random fields in float32, zarr with zstd, as a model would write them."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import xarray as xr
import zarr
from zarr.codecs import ZstdCodec

NAMES = ("u", "v", "w", "theta")


def snapshot(shape: tuple[int, int, int], rng: np.random.Generator) -> dict[str, np.ndarray]:
    """Four fields with a decaying spectrum (so that they compress as turbulence does, little) and a warm offset in theta."""
    nz, ny, nx = shape
    k = np.sqrt(np.fft.fftfreq(ny)[:, None] ** 2 + np.fft.rfftfreq(nx)[None, :] ** 2)
    slope = np.where(k > 0, np.maximum(k, 1.0 / nx), np.inf) ** (-4.0 / 3.0)
    fields = {}
    for name in NAMES:
        levels = nz + (name == "w")
        phase = rng.standard_normal((8, *slope.shape)) + 1j * rng.standard_normal((8, *slope.shape))
        planes = np.fft.irfft2(slope * phase, s=(ny, nx))
        planes *= 0.02 / planes.std()
        # levels are mixtures of eight planes, which is cheap and leaves no level a copy of another
        mixture = rng.standard_normal((levels, 8)) / np.sqrt(8.0)
        field = np.einsum("lp,pyx->lyx", mixture, planes).astype(np.float32)
        field += 1e-4 * rng.standard_normal(field.shape, dtype=np.float32)
        fields[name] = field + np.float32(288.0 if name == "theta" else 0.0)
    fields["w"][0] = fields["w"][-1] = 0.0
    return fields


def make_store(path: Path, shape: tuple[int, int, int], times: int, chunk_levels: int = 32, seed: int = 1) -> xr.Dataset:
    """Write a store of `times` snapshots of shape (nz, ny, nx) and return it as a canonical dataset."""
    rng = np.random.default_rng(seed)
    nz, ny, nx = shape
    root = zarr.open_group(path, mode="w")
    arrays = {}
    for name in NAMES:
        levels = nz + (name == "w")
        arrays[name] = root.create_array(
            name, shape=(times, levels, ny, nx), chunks=(1, min(chunk_levels, levels), ny, nx), dtype="float32",
            compressors=[ZstdCodec(level=1)],
        )
    for t in range(times):
        for name, values in snapshot(shape, rng).items():
            arrays[name][t] = values
    return canonical(path)


def canonical(path: Path) -> xr.Dataset:
    """The store as a canonical dataset, lazily read through xarray's own indexing of zarr arrays."""
    from xarray.backends.zarr import ZarrArrayWrapper
    from xarray.core import indexing

    root = zarr.open_group(path, mode="r")
    variables = {}
    for name in NAMES:
        array = root[name]
        dims = ("time", "z_face" if name == "w" else "z", "y", "x")
        lazy = indexing.LazilyIndexedArray(ZarrArrayWrapper(array))
        variables[name] = xr.Variable(dims, lazy, {}, {"preferred_chunks": dict(zip(dims, array.chunks, strict=True))})
    times, nz, ny, nx = root["u"].shape
    faces = np.linspace(-64.0, 0.0, nz + 1)
    out = xr.Dataset(variables)
    return out.assign_coords(
        time=600.0 * np.arange(times), z=0.5 * (faces[1:] + faces[:-1]), z_face=faces,
        y=np.arange(ny) * 1.0, x=np.arange(nx) * 1.0,
    ).assign_attrs(Lx=float(nx), Ly=float(ny), velocity_kind="eulerian", horizontal_scheme="central")
