"""Bad fields: each fault is one paragraph that names the file and the remedy; no traceback, no third-party noise."""

from __future__ import annotations

import os
import re
import shutil
import warnings
from pathlib import Path
from typing import Any

import netCDF4
import numpy as np
import pytest
import zarr

from lespost.errors import DataError, LayoutError, LespostError, UnitError
from lespost.fields import netcdf
from lespost.fields.open import OpenedFields, open_fields
from lespost.fields.settings import FieldsSettings

NT, NZ, NY, NX = 4, 8, 8, 8


def plain_flow(zero_below: int = 0) -> dict[str, np.ndarray]:
    """A discretely solenoidal toy: u = da/dz, v = 0, w = -da/dx on faces, with a = 0 at both ends (derived here)."""
    rng = np.random.default_rng(5)
    a = rng.normal(size=(NT, NZ + 1, NY, NX))
    a[:, [0, -1]] = 0.0
    a[:, : zero_below + 1] = 0.0
    u = 0.1 * np.diff(a, axis=1)
    v = 0.0 * u
    w = -0.1 * (np.roll(a, -1, 3) - np.roll(a, 1, 3)) / 2
    b = rng.normal(size=(NT, NZ + 1, NY, NX))
    b[:, [0, -1]] = 0.0
    b[:, : zero_below + 1] = 0.0
    v = v + 0.1 * np.diff(b, axis=1)
    w -= 0.1 * (np.roll(b, -1, 2) - np.roll(b, 1, 2)) / 2
    theta = 15.0 + 0.1 * np.arange(NZ)[:, None, None] + 0.0 * u
    return {n: q.astype("f4") for n, q in (("u", u), ("v", v), ("w", w), ("theta", theta))}


def coordinates() -> dict[str, np.ndarray]:
    return {
        "time": 60.0 * np.arange(NT), "z": np.arange(NZ) - NZ + 0.5, "z_w": np.arange(NZ + 1.0) - NZ,
        "y": np.arange(NY) + 0.5, "x": np.arange(NX) + 0.5,
    }  # fmt: skip


UNITS = {"u": "m s-1", "v": "m s-1", "w": "m s-1", "theta": "degC", "time": "s", "z": "m", "z_w": "m", "x": "m", "y": "m"}


def write(path: Path, change: dict[str, Any] | None = None, units: dict[str, str] | None = None, file_format: str = "NETCDF4",
          times: slice = slice(None), **kwargs: Any) -> Path:  # fmt: skip
    """A netCDF file of the toy, with some arrays replaced (None: left out)."""
    arrays = {**plain_flow(), **coordinates(), **(change or {})}
    with netCDF4.Dataset(path, "w", format=file_format) as file:
        for name in ("time", "z", "z_w", "y", "x"):
            file.createDimension(name, None if name == "time" else len(coordinates()[name]))
        for name, values in arrays.items():
            if values is None:
                continue
            vertical = "z_w" if values.ndim == 4 and values.shape[1] == NZ + 1 else "z"
            dims = ("time", vertical, "y", "x") if values.ndim == 4 else (name,)
            stored = file.createVariable(name, values.dtype, dims, **(kwargs if values.ndim == 4 else {}))
            unit = {**UNITS, **(units or {})}.get(name)
            if unit is not None:
                stored.units = unit
            stored[...] = values[times] if dims[0] == "time" else values
    return path


def write_store(path: Path, arrays: dict[str, np.ndarray], zarr_format: int = 3, shards: Any = None, fill: Any = 0.0) -> Path:
    group = zarr.open_group(path, mode="w", zarr_format=zarr_format)  # type: ignore[arg-type]
    for name, values in {**arrays, **coordinates()}.items():
        vertical = "z_w" if values.ndim == 4 and values.shape[1] == NZ + 1 else "z"
        dims = ("time", vertical, "y", "x") if values.ndim == 4 else (name,)
        extra: dict[str, Any] = {"dimension_names": dims} if zarr_format == 3 else {}
        if values.ndim == 4:
            extra |= {"chunks": (1, 4, 4, 8), "fill_value": fill}
            if shards is not None:
                extra["shards"] = (1, 12, 8, 8) if name == "w" else (1, 8, 8, 8)
        made = group.create_array(name, shape=values.shape, dtype=values.dtype, **extra)
        made[...] = values
        made.attrs["units"] = UNITS[name]
        if zarr_format == 2:
            made.attrs["_ARRAY_DIMENSIONS"] = list(dims)
    return path


def attempt(path: Any, **keys: Any) -> OpenedFields:
    paths = [str(p) for p in path] if isinstance(path, list) else str(path)
    return open_fields(FieldsSettings(path=paths, **keys), Path("/"))


def refused(capfd: pytest.CaptureFixture[str], kind: type[LespostError], words: str, path: Any, **keys: Any) -> str:
    """The fault is of `kind`, says `words`, is one paragraph that names a file, and nothing else is printed."""
    with warnings.catch_warnings():
        warnings.simplefilter("error")  # R06: no warning of a library either
        with pytest.raises(kind) as caught:
            attempt(path, **keys)
    message = str(caught.value)
    assert re.search(words, message), message
    assert "\n" not in message and len(message) < 900, message
    assert caught.value.__cause__ is None
    assert caught.value.__suppress_context__ or caught.value.__context__ is None
    printed = capfd.readouterr()
    assert printed.out == "" and printed.err == ""
    return message


@pytest.fixture(autouse=True)
def _own_cache(tmp_path_factory: pytest.TempPathFactory, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("LESPOST_CACHE", str(tmp_path_factory.mktemp("cache")))


def test_the_toy_itself_opens_silently(tmp_path: Path, capfd: pytest.CaptureFixture[str]) -> None:
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        found = attempt(write(tmp_path / "a.nc"))
        np.testing.assert_array_equal(found.dataset["w"].values, plain_flow()["w"])
        attempt(write_store(tmp_path / "b.zarr", plain_flow()))
    printed = capfd.readouterr()
    assert printed.out == "" and printed.err == ""


@pytest.mark.parametrize("file_format", ["NETCDF4", "NETCDF3_CLASSIC", "NETCDF3_64BIT_OFFSET", "NETCDF3_64BIT_DATA"])
@pytest.mark.parametrize("keep", [0.97, 0.5, 0.01])
def test_truncated_netcdf(tmp_path: Path, capfd: pytest.CaptureFixture[str], file_format: str, keep: float) -> None:
    whole = write(tmp_path / "a.nc", file_format=file_format).read_bytes()
    (tmp_path / "a.nc").write_bytes(whole[: int(keep * len(whole))])
    message = refused(capfd, DataError, "ends early", tmp_path / "a.nc")  # R11
    assert str(int(keep * len(whole))) in message and "a.nc" in message
    if file_format != "NETCDF4" and keep > 0.1:
        complete = {0.97: 3, 0.5: 1}[keep]
        assert f"{complete} complete of 4 records" in message


def test_truncated_file_among_good_ones(tmp_path: Path, capfd: pytest.CaptureFixture[str]) -> None:
    for t in range(NT):
        write(tmp_path / f"r{t}.nc", times=slice(t, t + 1))
    body = (tmp_path / "r2.nc").read_bytes()
    (tmp_path / "r2.nc").write_bytes(body[: len(body) // 2])
    message = refused(capfd, DataError, "r2.nc.*ends early", tmp_path)
    assert "last good snapshot before it is in r1.nc (time 60" in message
    found = attempt(tmp_path, allow_gaps=True)
    np.testing.assert_array_equal(found.dataset["time"].values, [0.0, 60.0, 180.0])
    assert any(f.code == "file-left-out" and "r2.nc" in f.message for f in found.findings)


def test_truncated_raw(tmp_path: Path, capfd: pytest.CaptureFixture[str]) -> None:
    flow = plain_flow()
    body = b"".join(flow[n][t].tobytes() for t in range(NT) for n in ("u", "v", "w"))
    (tmp_path / "a.bin").write_bytes(body[:-1000])
    raw = {"shape": [NZ, NY, NX], "shapes": {"w": [NZ + 1, NY, NX]}, "axes": ["z", "y", "x"], "variables": ["u", "v", "w"]}
    message = refused(capfd, DataError, "ends early", tmp_path / "a.bin", raw=raw, time_interval=60, dx=1, dy=1, dz=1)
    assert "whole snapshot is number 3" in message


def test_wrong_record_markers(tmp_path: Path, capfd: pytest.CaptureFixture[str]) -> None:
    flow = plain_flow()
    parts = []
    for t in range(NT):
        for name in ("u", "v", "w"):
            data = flow[name][t].tobytes()
            parts += [np.array([len(data)], ">i4").tobytes(), data, np.array([len(data)], ">i4").tobytes()]
    (tmp_path / "a.bin").write_bytes(b"".join(parts))
    raw = {
        "shape": [NZ, NY, NX], "shapes": {"w": [NZ + 1, NY, NX]}, "axes": ["z", "y", "x"], "variables": ["u", "v", "w"],
        "record_markers": 4,
    }
    refused(capfd, LayoutError, 'byte_order = "big"', tmp_path / "a.bin", raw=raw, time_interval=60)


@pytest.mark.parametrize(
    ("name", "content", "words"),
    [
        ("picture.png", b"\x89PNG\r\n\x1a\n" + bytes(100), "neither netCDF nor zarr"),
        ("notes.txt", b"run 7 was good\n", "neither netCDF nor zarr"),
        ("named.nc", b"run 7 was good\n", "neither netCDF nor zarr"),
        ("nothing.nc", b"", "empty"),
        ("half.nc", b"CDF\x01\0\0", "ends early"),
        ("half4.nc", b"\x89HDF\r\n\x1a\n\x02\x08", "ends early"),
    ],
)
def test_foreign_files(tmp_path: Path, capfd: pytest.CaptureFixture[str], name: str, content: bytes, words: str) -> None:
    (tmp_path / name).write_bytes(content)
    assert name in refused(capfd, DataError, words, tmp_path / name)


def test_another_hdf5_file(tmp_path: Path, capfd: pytest.CaptureFixture[str]) -> None:
    with netCDF4.Dataset(tmp_path / "a.nc", "w") as file:
        file.createDimension("station", 5)
        file.createVariable("salt", "f4", ("station",))
    refused(capfd, DataError, "recognised as u or v or w.*no other field", tmp_path / "a.nc")


@pytest.mark.parametrize("name", ["u", "v", "w"])
def test_missing_variable(tmp_path: Path, capfd: pytest.CaptureFixture[str], name: str) -> None:
    message = refused(capfd, DataError, f"recognised as {name};", write(tmp_path / "a.nc", {name: None}))
    assert "[fields].names" in message


def test_name_in_the_recipe_that_is_not_there(tmp_path: Path, capfd: pytest.CaptureFixture[str]) -> None:
    message = refused(capfd, DataError, "no field has that name", write(tmp_path / "a.nc"), names={"u": "uvel"})
    assert "theta, u, v, w" in message


def test_name_clash(tmp_path: Path, capfd: pytest.CaptureFixture[str]) -> None:
    path = write(tmp_path / "a.nc", {"U": plain_flow()["u"]})
    message = refused(capfd, LayoutError, "(u and U|U and u) both look like u", path)
    assert '[fields].names = {u = "' in message


@pytest.mark.parametrize(
    ("name", "unit", "kind", "words"),
    [
        ("u", "kg", UnitError, "does not convert to m s-1"), ("theta", "m", UnitError, "does not convert to degC"),
        ("u", "wobbles", UnitError, "does not convert"), ("z", "K", UnitError, 'does not convert to "m"'),
        ("time", "m", UnitError, "not a unit of time"), ("time", "months since 2026-01-01", UnitError, "no fixed length"),
        ("time", "days since yesterday", DataError, "cannot be read as a date"),
        ("x", "degrees_east", LayoutError, "angle"),
    ],
)  # fmt: skip
def test_units_that_cannot_be_used(
    tmp_path: Path, capfd: pytest.CaptureFixture[str], name: str, unit: str, kind: type[LespostError], words: str
) -> None:
    message = refused(capfd, kind, words, write(tmp_path / "a.nc", units={name: unit}))
    assert "[fields]" in message


@pytest.mark.parametrize(
    ("times", "words"),
    [
        ([0.0, 60.0, 60.0, 120.0], "repeated"), ([0.0, 120.0, 60.0, 180.0], "out of order"),
        ([0.0, 60.0, np.nan, 180.0], "not a number"),
    ],
)
def test_times_that_cannot_be_used(tmp_path: Path, capfd: pytest.CaptureFixture[str], times: list[float], words: str) -> None:
    refused(capfd, DataError, words, write(tmp_path / "a.nc", {"time": np.array(times)}))


def test_restart_overlap(tmp_path: Path, capfd: pytest.CaptureFixture[str]) -> None:
    write(tmp_path / "r0.nc", times=slice(0, 3))
    changed = {n: a + np.float32(0.5) if n == "theta" else a for n, a in plain_flow().items()}
    write(tmp_path / "r1.nc", changed, times=slice(1, 4))
    message = refused(capfd, DataError, "repeats 2 snapshots", tmp_path)  # R14
    assert 'overlap = "later"' in message
    for rule, since in (("later", 1), ("earlier", 3)):
        found = attempt(tmp_path, overlap=rule)
        np.testing.assert_array_equal(found.dataset["time"].values, coordinates()["time"])
        warm = found.dataset["theta"].values - plain_flow()["theta"] > 0.25
        assert [bool(warm[t].all()) for t in range(NT)] == [t >= since for t in range(NT)]
        assert any(f.code == "overlap" and f.value == 2 for f in found.findings)


def test_restart_within_one_file(tmp_path: Path) -> None:
    path = write(tmp_path / "a.nc", {"time": np.array([0.0, 60.0, 60.0, 120.0])})
    later = attempt(path, overlap="later")
    np.testing.assert_array_equal(later.dataset["time"].values, [0.0, 60.0, 120.0])
    np.testing.assert_array_equal(later.dataset["u"].values, plain_flow()["u"][[0, 2, 3]])
    np.testing.assert_array_equal(attempt(path, overlap="earlier").dataset["u"].values, plain_flow()["u"][[0, 1, 3]])


def test_gap_in_time_is_said(tmp_path: Path) -> None:
    found = attempt(write(tmp_path / "a.nc", {"time": np.array([0.0, 60.0, 120.0, 300.0])}))
    assert any(f.code == "time-gap" and f.value == 180.0 for f in found.findings)


def test_single_precision_times(tmp_path: Path, capfd: pytest.CaptureFixture[str]) -> None:
    times = (3.0e7 + 0.5 * np.arange(NT)).astype("f4")  # R16: float32 resolves 2 s there
    message = refused(capfd, DataError, "single precision", write(tmp_path / "a.nc", {"time": times}))
    assert 'time_from = "index"' in message
    found = attempt(tmp_path / "a.nc", time_from="index", time_interval=0.5, time_start=3e7)
    np.testing.assert_array_equal(np.diff(found.dataset["time"].values), 0.5)
    fine = write(tmp_path / "b.nc", {"time": coordinates()["time"].astype("f4")})
    assert attempt(fine).dataset.sizes["time"] == NT


def test_unwritten_records(tmp_path: Path, capfd: pytest.CaptureFixture[str]) -> None:
    flow = plain_flow()
    path = write(tmp_path / "a.nc", {n: a[:2] for n, a in flow.items()})  # R01: 2 of 4 records written
    message = refused(capfd, DataError, "fill values", path)
    assert "u " in message and "120 s" in message and "1 more snapshot" in message
    found = attempt(path, allow_gaps=True)
    np.testing.assert_array_equal(found.dataset["u"].values, flow["u"][:2])
    assert any(f.code == "gaps" and f.value == 2 for f in found.findings)


def test_an_unwritten_record_that_only_shows_when_read(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    from lespost.fields import gaps

    flow = plain_flow()
    flow["theta"][1] = 9.96921e36
    monkeypatch.setattr(gaps, "_unwritten_records", lambda *_: None)  # as if the run were too long to look everywhere
    data = attempt(write(tmp_path / "a.nc", flow)).dataset
    assert np.isfinite(data["theta"][0].values).all()
    with pytest.raises(DataError, match=r"theta.*60 s.*never written"):
        data["theta"][1, 2:4].values  # noqa: B018


@pytest.mark.parametrize("name", ["u", "v", "w", "theta"])
def test_blocks_that_are_not_numbers(tmp_path: Path, capfd: pytest.CaptureFixture[str], name: str) -> None:
    flow = plain_flow()
    flow[name][-1, 2:6, 2:6, 2:6] = np.nan
    message = refused(capfd, DataError, "not (a )?number", write(tmp_path / "a.nc", flow))
    assert name in message


def test_fill_value_sentinels_are_not_data_but_true_zeros_are(tmp_path: Path, capfd: pytest.CaptureFixture[str]) -> None:
    flow = plain_flow()
    flow["u"][1] = -9999.0
    refused(capfd, DataError, "not a number", write(tmp_path / "a.nc", flow, fill_value=np.float32(-9999.0)))
    still = plain_flow(zero_below=4)
    found = attempt(write(tmp_path / "b.nc", still, fill_value=np.float32(0.0)))  # R03
    np.testing.assert_array_equal(found.dataset["u"].values, still["u"])


STORES = [(2, None), (3, None), (3, "sharded")]


@pytest.mark.parametrize(("zarr_format", "shards"), STORES)
@pytest.mark.parametrize("fill", [0.0, np.nan])
def test_missing_chunk(tmp_path: Path, capfd: pytest.CaptureFixture[str], zarr_format: int, shards: Any, fill: float) -> None:
    flow = plain_flow()
    if shards is None:
        path = write_store(tmp_path / "a.zarr", flow, zarr_format, fill=fill)
        (path / "u" / ("1.1.0.0" if zarr_format == 2 else "c/1/1/0/0")).unlink()
    else:  # an inner chunk of a shard that was never written
        holed = {**flow, "u": flow["u"].copy()}
        holed["u"][1, 4:8, 0:4] = fill
        path = write_store(tmp_path / "a.zarr", holed, zarr_format, shards, fill)
    message = refused(capfd, DataError, r"not in the store.*chunk \(1, 1, 0, 0\)", path)  # R02
    assert "60 s" in message and "allow_gaps" in message
    found = attempt(path, allow_gaps=True)
    np.testing.assert_array_equal(found.dataset["time"].values, [0.0, 120.0, 180.0])
    np.testing.assert_array_equal(found.dataset["u"].values, flow["u"][[0, 2, 3]])
    assert any(f.code == "gaps" and f.value == 1 for f in found.findings)


@pytest.mark.parametrize(("zarr_format", "shards"), STORES)
def test_missing_snapshot(tmp_path: Path, capfd: pytest.CaptureFixture[str], zarr_format: int, shards: Any) -> None:
    path = write_store(tmp_path / "a.zarr", plain_flow(), zarr_format, shards)
    if zarr_format == 2:
        for chunk in path.glob("w/3.*"):
            chunk.unlink()
    else:
        shutil.rmtree(path / "w" / "c" / "3")
    refused(capfd, DataError, "w .*180 s.*not in the store", path)


@pytest.mark.parametrize(("zarr_format", "shards"), STORES)
def test_chunks_of_true_zeros_are_data(tmp_path: Path, zarr_format: int, shards: Any) -> None:
    still = plain_flow(zero_below=4)  # R03: still water below, whole chunks of zeros, which writers do not store
    path = write_store(tmp_path / "a.zarr", still, zarr_format, shards)
    from lespost.fields.zarr_chunks import absent
    from lespost.fields.zarr_store import ZarrVariable, read_header

    variable = read_header(path).variables["u"]
    assert isinstance(variable, ZarrVariable) and absent(variable).sum() == NT * 2
    found = attempt(path)
    np.testing.assert_array_equal(found.dataset["u"].values, still["u"])
    assert any(f.code == "absent-chunks" for f in found.findings)


def test_one_snapshot_with_a_smooth_end_is_data_and_with_a_hole_is_not(tmp_path: Path) -> None:
    flow = plain_flow()
    smooth = {n: a.copy() for n, a in flow.items()}
    smooth["u"][2, 4:8, 0:4] = 0.0  # only at one time, but nothing moves around it either
    smooth["u"][2, :4, :] *= 1e-6
    smooth["u"][2, 4:8, 4] = 0.0
    found = attempt(write_store(tmp_path / "a.zarr", smooth, 3))
    assert found.dataset.sizes["time"] == NT
    holed = {n: a.copy() for n, a in flow.items()}
    holed["u"][2, 4:8, 0:4] = 0.0
    with pytest.raises(DataError, match="not in the store"):
        attempt(write_store(tmp_path / "b.zarr", holed, 3))
    data = attempt(tmp_path / "b.zarr", absent_chunks="zero").dataset
    np.testing.assert_array_equal(data["u"].values, holed["u"])


def test_damaged_chunk_and_damaged_metadata(tmp_path: Path, capfd: pytest.CaptureFixture[str]) -> None:
    path = write_store(tmp_path / "a.zarr", plain_flow(), 3)
    chunk = path / "u" / "c" / "3" / "1" / "0" / "0"
    chunk.write_bytes(chunk.read_bytes()[:10])
    refused(capfd, DataError, "damaged or cut off", path)
    (path / "v" / "zarr.json").write_text('{"zarr_format": 3, "node_type":')
    refused(capfd, DataError, "damaged", path)


def test_paths_that_lead_nowhere(tmp_path: Path, capfd: pytest.CaptureFixture[str]) -> None:
    refused(capfd, DataError, "no such file or folder", tmp_path / "none.nc")
    refused(capfd, DataError, "no file matches", tmp_path / "none*.nc")
    (tmp_path / "folder").mkdir()
    refused(capfd, DataError, "holds no netCDF file", tmp_path / "folder")


def test_permission_denied(tmp_path: Path, capfd: pytest.CaptureFixture[str]) -> None:
    path = write(tmp_path / "a.nc")
    path.chmod(0)
    root = os.geteuid() == 0
    if root:  # root may read everything: become nobody for a moment
        for folder in (tmp_path, tmp_path.parent, tmp_path.parent.parent):
            folder.chmod(0o755)
        os.seteuid(65534)
    try:
        refused(capfd, DataError, "permission denied", path)
    finally:
        if root:
            os.seteuid(0)
            tmp_path.parent.parent.chmod(0o700)
        path.chmod(0o644)


@pytest.mark.parametrize("number", [11, 37, 524])
def test_file_systems_without_locks(
    tmp_path: Path, capfd: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch, number: int
) -> None:
    path = write(tmp_path / "a.nc")

    def no_locks(*_: Any, **__: Any) -> None:
        raise OSError(number, "Resource temporarily unavailable")

    monkeypatch.setattr(netcdf.netCDF4, "Dataset", no_locks)  # R08
    refused(capfd, DataError, "HDF5_USE_FILE_LOCKING=FALSE lespost", path)


def test_files_that_do_not_belong_together(tmp_path: Path, capfd: pytest.CaptureFixture[str]) -> None:
    write(tmp_path / "r0.nc", times=slice(0, 2))
    write(tmp_path / "r1.nc", times=slice(2, 4), units={"v": "cm s-1"})
    refused(capfd, DataError, 'v is in "cm s-1"', tmp_path)
    write_store(tmp_path / "c.zarr", plain_flow())
    refused(capfd, DataError, "netCDF files and zarr stores together", [tmp_path / "r0.nc", tmp_path / "c.zarr"])
    half = {n: a[..., :4] for n, a in plain_flow().items()}
    with netCDF4.Dataset(tmp_path / "r1.nc", "w") as file:
        for name, size in (("time", None), ("z", NZ), ("z_w", NZ + 1), ("y", NY), ("x", 4)):
            file.createDimension(name, size)
        for name, values in half.items():
            stored = file.createVariable(name, "f4", ("time", "z_w" if name == "w" else "z", "y", "x"))
            stored.units = UNITS[name]
            stored[...] = values[2:]
        stored = file.createVariable("time", "f8", ("time",))
        stored.units = "s"
        stored[...] = [120.0, 180.0]
    refused(capfd, DataError, "one grid", [tmp_path / "r0.nc", tmp_path / "r1.nc"])


def test_components_on_unequal_times(tmp_path: Path, capfd: pytest.CaptureFixture[str]) -> None:
    flow = plain_flow()
    write(tmp_path / "uv.nc", {"w": None, "theta": None})
    write(tmp_path / "w.nc", {"u": None, "v": None, "theta": None}, times=slice(0, 3))
    refused(capfd, DataError, "u has 4 snapshots.*w has 3", [tmp_path / "uv.nc", tmp_path / "w.nc"])
    found = attempt([tmp_path / "uv.nc", tmp_path / "w.nc"], allow_gaps=True)
    np.testing.assert_array_equal(found.dataset["u"].values, flow["u"][:3])


def test_levels_that_do_not_fit(tmp_path: Path, capfd: pytest.CaptureFixture[str]) -> None:
    path = tmp_path / "a.nc"
    with netCDF4.Dataset(path, "w") as file:
        for name, size in (("time", 1), ("z", NZ), ("zz", NZ + 3), ("y", NY), ("x", NX)):
            file.createDimension(name, size)
        for name in ("u", "v", "w"):
            file.createVariable(name, "f4", ("time", "zz" if name == "w" else "z", "y", "x"))[...] = 0.1
    refused(capfd, LayoutError, "u has 8 levels, v 8, w 11", path, dx=1, dy=1, dz=1)


def test_grid_that_is_not_stated(tmp_path: Path, capfd: pytest.CaptureFixture[str]) -> None:
    for missing, key in (("x", "dx"), ("z", "dz")):
        change: dict[str, Any] = {missing: None, **({"z_w": None} if missing == "z" else {})}
        refused(capfd, LayoutError, rf"write \[fields\].{key}", write(tmp_path / "a.nc", change))


def test_times_that_are_not_stated(tmp_path: Path, capfd: pytest.CaptureFixture[str]) -> None:
    refused(capfd, LayoutError, "time_interval", write(tmp_path / "a.nc", {"time": None}))
