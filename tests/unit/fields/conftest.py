"""A small flow that is solenoidal to round-off under a chosen scheme, and writers that lay it out in many ways."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any

import netCDF4
import numpy as np
import pytest
import zarr

from lespost.fields.open import OpenedFields, open_fields
from lespost.fields.settings import FieldsSettings


@dataclass(frozen=True)
class Flow:
    """float32 fields (time, z, y, x), z ascending; w on the nz + 1 faces (or on centres where made so)."""

    u: np.ndarray
    v: np.ndarray
    w: np.ndarray
    theta: np.ndarray
    x: np.ndarray
    y: np.ndarray
    z: np.ndarray
    z_face: np.ndarray
    time: np.ndarray

    def with_names(self) -> dict[str, np.ndarray]:
        return {"u": self.u, "v": self.v, "w": self.w, "theta": self.theta}


def derivative(a: np.ndarray, axis: int, spacing: float, scheme: str) -> np.ndarray:
    """The model's horizontal derivative of the potentials at the points of u or v."""
    if scheme == "spectral":
        n = a.shape[axis]
        k = 2 * np.pi * np.fft.fftfreq(n, spacing)
        k[n // 2] = 0.0
        shape = [1] * a.ndim
        shape[axis] = n
        return np.fft.ifft(1j * k.reshape(shape) * np.fft.fft(a, axis=axis), axis=axis).real
    if scheme == "central":
        return (np.roll(a, -1, axis) - np.roll(a, 1, axis)) / (2 * spacing)
    return (np.roll(a, -1, axis) - a) / spacing  # a on low-side faces, its difference at the centre


def make_flow(
    scheme: str = "spectral", nx: int = 16, ny: int = 12, nz: int = 10, nt: int = 3, stretched: bool = False,
    w_at: str = "faces", seed: int = 1, dtype: Any = np.float32,
) -> Flow:
    """u = da/dz, v = db/dz, w = -(Dx a + Dy b) with a, b zero at bottom and surface: D u + D v + dw/dz = 0 for any D.

    Derived here: the horizontal and vertical differences commute.
    """
    rng = np.random.default_rng(seed)
    dx, dy, depth = 2.5, 3.0, 20.0
    s = np.linspace(0.0, 1.0, nz + 1)
    z_face = -depth * (1 - s) ** 1.5 if stretched else -depth * (1 - s)
    z_face[-1] = 0.0
    z = 0.5 * (z_face[1:] + z_face[:-1])
    levels = z_face if w_at == "faces" else z
    envelope = np.sin(np.pi * levels / depth) ** 2 * np.exp(levels / 6.0)
    if w_at == "faces":
        envelope[[0, -1]] = 0.0

    def noise() -> np.ndarray:
        out = rng.normal(size=(nt, len(levels), ny, nx))
        for axis in (2, 3):  # a little smoother than white
            out = 0.5 * out + 0.25 * (np.roll(out, 1, axis) + np.roll(out, -1, axis))
        return out

    a, b = (noise() * envelope[:, None, None] for _ in range(2))
    w = -(derivative(a, 3, dx, scheme) + derivative(b, 2, dy, scheme))
    if w_at == "faces":
        dz = np.diff(z_face)[:, None, None]
        u, v = np.diff(a, axis=1) / dz, np.diff(b, axis=1) / dz
    else:
        u, v = np.zeros_like(a), np.zeros_like(b)
        apart = (z[2:] - z[:-2])[:, None, None]
        u[:, 1:-1], v[:, 1:-1] = (a[:, 2:] - a[:, :-2]) / apart, (b[:, 2:] - b[:, :-2]) / apart
    u = 0.1 * u + 0.05 * np.exp(z / 8.0)[:, None, None]
    v = 0.1 * v + 0.02 * (z / depth)[:, None, None]
    theta = 288.0 + 0.01 * z[:, None, None] + 1e-3 * rng.normal(size=u.shape)
    return Flow(
        *(q.astype(dtype) for q in (u, v, 0.1 * w, theta)),
        x=(np.arange(nx) + 0.5) * dx, y=(np.arange(ny) + 0.5) * dy, z=z, z_face=z_face, time=600.0 * np.arange(nt),
    )


Field = tuple[tuple[str, ...], np.ndarray, dict[str, Any]]


def standard(flow: Flow) -> dict[str, Field]:
    """The flow as variables of a plain file: (dims, values, attributes)."""
    velocity = {"units": "m s-1"}
    return {
        "u": (("time", "z", "y", "x"), flow.u, velocity),
        "v": (("time", "z", "y", "x"), flow.v, velocity),
        "w": (("time", "z_w" if flow.w.shape[1] != flow.u.shape[1] else "z", "y", "x"), flow.w, velocity),
        "theta": (("time", "z", "y", "x"), flow.theta, {"units": "K"}),
        "time": (("time",), flow.time, {"units": "s"}),
        "z": (("z",), flow.z, {"units": "m", "positive": "up"}),
        "z_w": (("z_w",), flow.z_face, {"units": "m", "positive": "up"}),
        "x": (("x",), flow.x, {"units": "m"}),
        "y": (("y",), flow.y, {"units": "m"}),
    }


def write_netcdf(
    path: Path, variables: dict[str, Field], attrs: dict[str, Any] | None = None, file_format: str = "NETCDF4",
    unlimited: str | None = "time", **kwargs: Any,
) -> Path:
    """A netCDF file of `variables`."""
    with netCDF4.Dataset(path, "w", format=file_format) as file:
        for dims, values, _ in variables.values():
            for dim, size in zip(dims, np.shape(values), strict=True):
                if dim not in file.dimensions:
                    file.createDimension(dim, None if dim == unlimited else size)
        for name, (dims, values, own) in variables.items():
            fill = own.get("_FillValue")
            made = file.createVariable(name, values.dtype, dims, fill_value=fill, **(kwargs if len(dims) > 1 else {}))
            made.set_auto_maskandscale(False)
            for key, value in own.items():
                if key != "_FillValue":
                    made.setncattr(key, value)
            made[...] = values
        for key, value in (attrs or {}).items():
            file.setncattr(key, value)
    return path


def write_zarr(
    path: Path, variables: dict[str, Field], attrs: dict[str, Any] | None = None, zarr_format: int = 3,
    chunks: tuple[int, ...] | None = None, shards: tuple[int, ...] | None = None, consolidated: bool = False, **kwargs: Any,
) -> Path:
    """A zarr store of `variables`."""
    import warnings

    group = zarr.open_group(path, mode="w", zarr_format=zarr_format)  # type: ignore[arg-type]
    for name, (dims, values, own) in variables.items():
        shape = np.shape(values)
        field = len(shape) == 4
        options: dict[str, Any] = {"dimension_names": dims} if zarr_format == 3 else {}
        if field:
            options |= kwargs
        if field and shards is not None:
            options["shards"] = shards
        chunk = tuple(min(c, n) for c, n in zip(chunks, shape, strict=True)) if field and chunks else shape
        made = group.create_array(name, shape=shape, dtype=values.dtype, chunks=chunk, **options)
        made[...] = values
        made.attrs.update(own if zarr_format == 3 else {**own, "_ARRAY_DIMENSIONS": list(dims)})
    group.attrs.update(attrs or {})
    if consolidated:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            zarr.consolidate_metadata(path)
    return path


def opened(path: Any, **keys: Any) -> OpenedFields:
    """open_fields with the given [fields] keys."""
    paths = [str(p) for p in path] if isinstance(path, list) else str(path)
    return open_fields(FieldsSettings(path=paths, **keys), Path("/"))


def same(found: OpenedFields, flow: Flow, names: tuple[str, ...] = ("u", "v", "w", "theta")) -> None:
    """Bitwise the same numbers, the same grid and the same times."""
    data = found.dataset
    for name in names:
        expected = getattr(flow, name)
        got = data[name].values
        assert got.dtype == expected.dtype, name
        assert got.shape == expected.shape, (name, got.shape, expected.shape)
        np.testing.assert_array_equal(got, expected, err_msg=name)
    np.testing.assert_allclose(data["z"].values, flow.z, atol=1e-6)
    np.testing.assert_allclose(data["z_face"].values, flow.z_face, atol=1e-6)
    np.testing.assert_allclose(data["time"].values, flow.time, atol=1e-6)
    assert data["z_face"].values[-1] == 0.0
    np.testing.assert_allclose(data.attrs["Lx"], 2.5 * len(flow.x), rtol=1e-6)
    np.testing.assert_allclose(data.attrs["Ly"], 3.0 * len(flow.y), rtol=1e-6)


class Kit:
    """The tools above for the tests of this folder."""

    make_flow = staticmethod(make_flow)
    standard = staticmethod(standard)
    write_netcdf = staticmethod(write_netcdf)
    write_zarr = staticmethod(write_zarr)
    opened = staticmethod(opened)
    same = staticmethod(same)


@pytest.fixture(scope="session")
def kit() -> type[Kit]:
    return Kit


@pytest.fixture(scope="session")
def flow() -> Flow:
    """The usual flow: collocated, spectral, w on faces."""
    return make_flow()


@pytest.fixture(autouse=True)
def _own_cache(tmp_path_factory: pytest.TempPathFactory, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("LESPOST_CACHE", str(tmp_path_factory.mktemp("cache")))
