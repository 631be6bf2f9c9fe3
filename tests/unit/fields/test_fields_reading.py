"""What is read, and how: only the slab asked for, few handles, safe threads, thousands of files, no loss of speed."""

from __future__ import annotations

import os
import pickle
import subprocess
import sys
import textwrap
import time
from concurrent.futures import ThreadPoolExecutor
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from lespost.fields import netcdf
from lespost.fields.variable import counter


def bytes_of(read) -> int:
    before = counter.bytes
    read()
    return counter.bytes - before


@pytest.mark.parametrize("kind", ["netcdf", "zarr", "raw"])
def test_a_slab_reads_only_the_slab(kit, flow, tmp_path: Path, kind: str) -> None:
    keys = {}
    if kind == "netcdf":
        path = kit.write_netcdf(tmp_path / "a.nc", kit.standard(flow))
    elif kind == "zarr":
        path = kit.write_zarr(tmp_path / "a.zarr", kit.standard(flow), chunks=(1, 1, 12, 16))
    else:
        path = tmp_path / "a.bin"
        path.write_bytes(b"".join(a[t].tobytes() for t in range(3) for a in (flow.u, flow.v, flow.w)))
        keys = {
            "raw": {"shape": [10, 12, 16], "shapes": {"w": [11, 12, 16]}, "axes": ["z", "y", "x"], "variables": ["u", "v", "w"]},
            "time_interval": 600, "dx": 2.5, "dy": 3.0, "dz": 2.0, "surface": "last",
        }  # fmt: skip
    data = kit.opened(path, **keys).dataset
    plane = 12 * 16 * 4
    assert bytes_of(lambda: data["u"][1, 3:5].values) == 2 * plane
    assert bytes_of(lambda: data["w"][2, 10].values) == plane
    assert bytes_of(lambda: data["u"].isel(time=[0, 2], z=4).values) == 2 * plane
    assert bytes_of(lambda: data["u"][1, 3, 2, 1:4].values) == 12
    assert bytes_of(lambda: data["u"].isel(z=slice(0, 0)).values) == 0


def test_opening_a_known_layout_reads_a_small_part(kit, tmp_path: Path) -> None:
    flow = kit.make_flow(nx=32, ny=32, nz=64, nt=8)
    path = kit.write_netcdf(tmp_path / "a.nc", kit.standard(flow))
    whole = sum(a.nbytes for a in (flow.u, flow.v, flow.w, flow.theta))
    assert bytes_of(lambda: kit.opened(path)) < 0.2 * whole


def test_bytes_that_leave_the_disk_for_one_level_of_a_store(kit, tmp_path: Path) -> None:
    flow = kit.make_flow(nx=64, ny=64, nz=32, nt=2)
    path = kit.write_zarr(tmp_path / "a.zarr", kit.standard(flow), chunks=(1, 1, 64, 64))
    data = kit.opened(path).dataset

    def read_so_far() -> int:
        text = Path("/proc/self/io").read_text()
        return int(text.split("rchar:")[1].split()[0])

    before = read_so_far()
    data["u"][1, 7].values  # noqa: B018
    assert read_so_far() - before < 3 * 64 * 64 * 4


@pytest.mark.parametrize("key", [
    (slice(None), slice(None), slice(None), slice(None)), (1, slice(2, 9, 3), slice(None, None, -1), 5),
    (slice(None, None, 2), -1, slice(3, 4), slice(None)), ([2, 0], slice(None), [1, 5, 3], slice(2, 8)),
    (0, [9, 0], slice(None), [15, -2, 0]), (slice(2, 0, -1), 0, 0, 0),
])  # fmt: skip
@pytest.mark.parametrize("layout", ["plain", "flipped", "rolled"])
def test_every_kind_of_index_agrees_with_numpy(kit, tmp_path: Path, layout: str, key) -> None:
    flow = kit.make_flow("staggered" if layout == "rolled" else "spectral")
    variables = kit.standard(flow)
    if layout == "flipped":
        for name in ("u", "v", "w", "theta"):
            dims, values, attrs = variables[name]
            variables[name] = (("x", "time", "y", dims[1]), np.ascontiguousarray(values[:, ::-1].transpose(3, 0, 2, 1)), attrs)
        variables["z"] = (("z",), -flow.z[::-1], {"units": "m", "positive": "down"})
        variables["z_w"] = (("z_w",), -flow.z_face[::-1], {"units": "m", "positive": "down"})
    if layout == "rolled":
        variables["u"] = (variables["u"][0], np.roll(flow.u, -1, 3), variables["u"][2])
        variables["v"] = (variables["v"][0], np.roll(flow.v, -1, 2), variables["v"][2])
        variables["w"] = (variables["w"][0], flow.w[:, :-1], variables["w"][2])
        variables["z_w"] = (("z_w",), flow.z_face[:-1], {"units": "m"})
    data = kit.opened(kit.write_netcdf(tmp_path / "a.nc", variables, unlimited=None)).dataset
    for name in ("u", "v", "w"):
        expected = getattr(flow, name)
        own = [np.asarray(k) if isinstance(k, list) else k for k in key]
        for axis, k in reversed(list(enumerate(own))):
            expected = np.take(expected, k, axis) if isinstance(k, np.ndarray | int) else expected[(slice(None),) * axis + (k,)]
        np.testing.assert_array_equal(data[name][tuple(key)].values, expected)


def test_arrays_survive_pickling(kit, flow, tmp_path: Path) -> None:
    data = kit.opened(kit.write_netcdf(tmp_path / "a.nc", kit.standard(flow))).dataset
    again = pickle.loads(pickle.dumps(data))
    np.testing.assert_array_equal(again["w"].values, flow.w)


def test_eight_threads_read_the_same_numbers(kit, tmp_path: Path) -> None:
    flow = kit.make_flow(nt=8)  # R07
    variables = kit.standard(flow)
    for t in range(8):
        own = {n: (d, v[t : t + 1] if "time" in d else v, at) for n, (d, v, at) in variables.items()}
        kit.write_netcdf(tmp_path / f"t{t}.nc", own, zlib=True)
    data = kit.opened(tmp_path / "t*.nc").dataset

    def work(worker: int) -> bool:
        good = True
        for i in range(200):
            t, k = (worker + i) % 8, i % 10
            good &= bool(np.array_equal(data["u"][t, k].values, flow.u[t, k]))
        return good

    with ThreadPoolExecutor(8) as pool:
        assert all(pool.map(work, range(8)))


def test_three_hundred_files_under_a_limit_of_128_handles(kit, flow, tmp_path: Path) -> None:
    variables = {n: v for n, v in kit.standard(flow).items() if n != "theta"}
    for t in range(300):  # R13
        own = {n: (d, v[:1] if "time" in d else v, at) for n, (d, v, at) in variables.items()}
        own["time"] = (("time",), np.array([600.0 * t]), {"units": "s"})
        kit.write_netcdf(tmp_path / f"r{t:03d}.nc", own, file_format="NETCDF3_CLASSIC")
    script = f"""
        import resource
        resource.setrlimit(resource.RLIMIT_NOFILE, (128, 128))
        from pathlib import Path
        from lespost.fields.netcdf import handles
        from lespost.fields.open import open_fields
        from lespost.fields.settings import FieldsSettings
        data = open_fields(FieldsSettings(path="{tmp_path}/r*.nc"), Path("/")).dataset
        assert data.sizes["time"] == 300
        total = sum(float(data["u"][t, 9].values.sum(dtype="f8")) for t in range(300))
        print(total, len(handles))
    """
    done = subprocess.run([sys.executable, "-c", textwrap.dedent(script)], capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr
    total, held = done.stdout.split()
    assert float(total) == pytest.approx(300 * float(flow.u[0, 9].sum(dtype="f8")), rel=1e-12)
    assert int(held) <= 64
    assert done.stderr == ""


def test_two_thousand_files_are_indexed_in_time_and_remembered(kit, flow, tmp_path: Path) -> None:
    variables = kit.standard(kit.make_flow(nx=4, ny=4, nz=4, nt=1))
    first = kit.write_netcdf(tmp_path / "r0000.nc", variables)
    content = first.read_bytes()
    value = np.array([12345.678])
    marked = {**variables, "time": (("time",), value, variables["time"][2])}
    template = kit.write_netcdf(tmp_path / "template", marked).read_bytes()
    place = template.index(value.tobytes())
    assert template.count(value.tobytes()) == 1
    (tmp_path / "template").unlink()
    for t in range(1, 2000):  # R12: the time of each is patched into a copy, which is quicker than writing files
        body = template[:place] + np.array([60.0 * t]).tobytes() + template[place + 8 :]
        (tmp_path / f"r{t:04d}.nc").write_bytes(body)
    assert len(content) == len(template)
    start = time.perf_counter()
    data = kit.opened(tmp_path / "r*.nc").dataset
    first_time = time.perf_counter() - start
    np.testing.assert_array_equal(data["time"].values, 60.0 * np.arange(2000))
    start = time.perf_counter()
    again = kit.opened(tmp_path / "r*.nc").dataset
    second_time = time.perf_counter() - start
    np.testing.assert_array_equal(again["time"].values, data["time"].values)
    assert first_time < 20.0
    assert second_time < max(1.0, 0.25 * first_time)
    # a changed file is noticed
    body = template[:place] + np.array([1e6]).tobytes() + template[place + 8 :]
    (tmp_path / "r1999.nc").write_bytes(body)
    os.utime(tmp_path / "r1999.nc", (1, 1))
    assert kit.opened(tmp_path / "r*.nc").dataset["time"].values[-1] == 1e6


def test_handles_are_given_back_and_rewritten_files_noticed(kit, flow, tmp_path: Path) -> None:
    path = kit.write_netcdf(tmp_path / "a.nc", kit.standard(flow))
    kit.same(kit.opened(path), flow)
    other = kit.make_flow(seed=7)
    path.unlink()
    kit.same(kit.opened(kit.write_netcdf(path, kit.standard(other))), other)
    netcdf.handles.close_all()
    assert len(netcdf.handles) == 0


def test_the_canonical_layer_costs_next_to_nothing(kit, tmp_path: Path) -> None:
    import zarr

    tile = kit.make_flow(nx=16, ny=16, nz=128, nt=1)
    tiled = {n: np.tile(a, (1, 1, 14, 14)) for n, a in tile.with_names().items()}
    noise = np.random.default_rng(3).normal(size=tiled["theta"].shape).astype("f4")
    tiled["theta"] += noise  # a tile alone compresses a hundredfold, which no flow does
    base = replace(tile, **tiled, x=2.5 * np.arange(224), y=3.0 * np.arange(224))
    path = kit.write_zarr(tmp_path / "a.zarr", kit.standard(base), chunks=(1, 16, 224, 224))
    data = kit.opened(path).dataset
    stored, field = zarr.open_array(path / "theta", mode="r"), data["theta"]

    def seconds(read) -> float:
        start = time.perf_counter()
        read()
        return time.perf_counter() - start

    # the machine may be shared: the best of many turns of each, taken in turn, in a few rounds
    ratios = []
    for _ in range(6):
        raw, ours = np.array([(seconds(lambda: stored[0]), seconds(lambda: field[0].values)) for _ in range(20)]).T
        ratios.append(ours.min() / raw.min())
        if ratios[-1] < 1.05:
            break
    # 5 % is the aim (0.99 to 1.06 measured on a quiet machine)
    assert min(ratios) < 1.05, ratios
