"""One flow written in many ways must come out bitwise the same: formats, orders, staggers, signs, units, names."""

from __future__ import annotations

import struct
from pathlib import Path
from typing import Any

import numpy as np
import pytest

FIELDS = ("u", "v", "w", "theta")


def transposed(variables: dict[str, Any], order: tuple[int, ...]) -> dict[str, Any]:
    """Fields with their axes in another order, names going along."""
    out = {}
    for name, (dims, values, attrs) in variables.items():
        if np.ndim(values) == 4:
            dims, values = tuple(dims[i] for i in order), np.ascontiguousarray(np.transpose(values, order))
        out[name] = (dims, values, attrs)
    return out


def renamed(variables: dict[str, Any], names: dict[str, str]) -> dict[str, Any]:
    return {
        names.get(name, name): (tuple(names.get(d, d) for d in dims), values, attrs)
        for name, (dims, values, attrs) in variables.items()
    }


def fields_only(variables: dict[str, Any]) -> dict[str, Any]:
    return {name: variables[name] for name in FIELDS}


@pytest.mark.parametrize(
    "file_format", ["NETCDF3_CLASSIC", "NETCDF3_64BIT_OFFSET", "NETCDF3_64BIT_DATA", "NETCDF4", "NETCDF4_CLASSIC"]
)
def test_netcdf_formats(kit, flow, tmp_path: Path, file_format: str) -> None:
    found = kit.opened(kit.write_netcdf(tmp_path / "a.nc", kit.standard(flow), file_format=file_format))
    kit.same(found, flow)
    assert found.dataset.attrs["horizontal_scheme"] == "spectral"
    assert found.dataset["u"].attrs["units"] == "m s-1"


def test_compressed_and_chunked_netcdf(kit, flow, tmp_path: Path) -> None:
    kit.same(kit.opened(kit.write_netcdf(tmp_path / "a.nc", kit.standard(flow), zlib=True, shuffle=True)), flow)


@pytest.mark.parametrize("zarr_format", [2, 3])
@pytest.mark.parametrize("consolidated", [False, True])
@pytest.mark.parametrize("sharded", [False, True])
def test_zarr_formats(kit, flow, tmp_path: Path, zarr_format: int, consolidated: bool, sharded: bool) -> None:
    if sharded and zarr_format == 2:
        return  # format 2 has no shards
    shards = (1, 12, 12, 16) if sharded else None
    path = kit.write_zarr(
        tmp_path / "a.zarr", kit.standard(flow), zarr_format=zarr_format, chunks=(1, 4, 6, 8), shards=shards,
        consolidated=consolidated,
    )
    found = kit.opened(path)
    kit.same(found, flow)
    assert found.dataset["u"].encoding["preferred_chunks"] == {"time": 1, "z": 4, "y": 6, "x": 8}


def test_stale_consolidated_metadata_do_not_hide_what_was_appended(kit, flow, tmp_path: Path) -> None:
    import zarr

    path = kit.write_zarr(tmp_path / "a.zarr", kit.standard(flow), zarr_format=2, chunks=(1, 4, 6, 8), consolidated=True)
    for name in (*FIELDS, "time"):  # R06: the run goes on and appends, the consolidated copy stays behind
        array = zarr.open_array(path / name, mode="a")
        array.append(np.asarray([1800.0]) if name == "time" else getattr(flow, name)[-1:])
    assert kit.opened(path).dataset.sizes["time"] == 4


def test_several_netcdf_files(kit, flow, tmp_path: Path) -> None:
    variables = kit.standard(flow)
    for part, (a, b) in enumerate(((0, 2), (2, 3))):
        own = {n: (d, v[a:b] if "time" in d else v, at) for n, (d, v, at) in variables.items()}
        kit.write_netcdf(tmp_path / f"part_{part}.nc", own)
    kit.same(kit.opened(tmp_path / "part_*.nc"), flow)
    kit.same(kit.opened(tmp_path), flow)  # the folder
    kit.same(kit.opened([tmp_path / "part_1.nc", tmp_path / "part_0.nc"]), flow)  # order in time, not of names


def test_one_file_per_time_in_natural_order(kit, tmp_path: Path) -> None:
    flow = kit.make_flow(nt=12)
    variables = kit.standard(flow)
    for t in range(12):  # names without leading zeros: run_10 sorts before run_2 as text
        own = {n: (d[1:] if "time" in d else d, v[t] if "time" in d else v, at) for n, (d, v, at) in variables.items()}
        kit.write_netcdf(tmp_path / f"run_{t}.nc", own)
    kit.same(kit.opened(tmp_path / "run_*.nc"), flow)
    for t in range(12):
        without = {n: (d[1:], v[t], at) if "time" in d else (d, v, at) for n, (d, v, at) in variables.items() if n != "time"}
        kit.write_netcdf(tmp_path / f"step_{1200 * t}.nc", without)
    kit.same(kit.opened(tmp_path / "step_*.nc", time_from="step", time_step="0.5 s"), flow)
    kit.same(kit.opened(tmp_path / "step_*.nc", time_interval=600), flow)


def test_one_file_per_variable(kit, flow, tmp_path: Path) -> None:
    variables = kit.standard(flow)
    for name in FIELDS:
        own = {n: v for n, v in variables.items() if n == name or len(v[0]) == 1}
        kit.write_netcdf(tmp_path / f"{name}.nc", own)
    kit.same(kit.opened(tmp_path), flow)


RAW_CASES = [
    ("C", "little", "float32", 0, 0), ("C", "big", "float32", 128, 0), ("Fortran", "little", "float32", 0, 4),
    ("Fortran", "big", "float64", 16, 4), ("C", "little", "float64", 0, 0), ("Fortran", "little", "float32", 0, 8),
]  # fmt: skip


def raw_bytes(flow, order: str, byte_order: str, dtype: str, header: int, marker: int, record: str = "variable") -> bytes:
    """The flow as a program would write it; in Fortran order the array is declared (x, y, z), x fastest."""
    kind = np.dtype(dtype).newbyteorder("<" if byte_order == "little" else ">")
    code = ("<" if byte_order == "little" else ">") + {4: "i", 8: "q"}.get(marker, "i")
    out = [b"\7" * header]

    def put(data: bytes) -> None:
        mark = struct.pack(code, len(data)) if marker else b""
        out.extend([mark, data, mark])

    for t in range(len(flow.time)):
        # x fastest either way: C order of (z, y, x) and Fortran order of (x, y, z) are the same bytes
        arrays = [getattr(flow, name)[t].astype(kind) for name in FIELDS]
        if record == "time":
            put(b"".join(a.tobytes() for a in arrays))
        elif record == "level":
            for a in arrays:
                for level in a:
                    put(level.tobytes())
        else:
            for a in arrays:
                put(a.tobytes())
    assert order in ("C", "Fortran")
    return b"".join(out)


@pytest.mark.parametrize(("order", "byte_order", "dtype", "header", "marker"), RAW_CASES)
def test_raw_binary(kit, tmp_path: Path, order: str, byte_order: str, dtype: str, header: int, marker: int) -> None:
    flow = kit.make_flow(dtype=np.dtype(dtype).type)
    (tmp_path / "run.bin").write_bytes(raw_bytes(flow, order, byte_order, dtype, header, marker))
    nz, ny, nx = flow.u.shape[1:]
    shape, w_shape, axes = [nz, ny, nx], [nz + 1, ny, nx], ["z", "y", "x"]
    if order == "Fortran":
        shape, w_shape, axes = shape[::-1], w_shape[::-1], axes[::-1]
    raw = {
        "shape": shape, "shapes": {"w": w_shape}, "axes": axes, "order": order, "byte_order": byte_order, "dtype": dtype,
        "header_bytes": header, "record_markers": marker, "variables": list(FIELDS),
    }
    found = kit.opened(tmp_path / "run.bin", raw=raw, time_interval="600 s", dx=2.5, dy=3.0, dz=2.0, surface="last")
    kit.same(found, flow)
    np.testing.assert_allclose(found.dataset["x"].values, flow.x)


@pytest.mark.parametrize("record", ["time", "level"])
def test_raw_records_of_other_kinds(kit, flow, tmp_path: Path, record: str) -> None:
    (tmp_path / "run.bin").write_bytes(raw_bytes(flow, "Fortran", "little", "float32", 0, 4, record))
    nz, ny, nx = flow.u.shape[1:]
    raw = {
        "shape": [nx, ny, nz], "shapes": {"w": [nx, ny, nz + 1]}, "axes": ["x", "y", "z"], "order": "Fortran",
        "record_markers": 4, "record": record, "variables": list(FIELDS),
    }
    kit.same(kit.opened(tmp_path / "run.bin", raw=raw, time_interval=600, dx=2.5, dy=3, dz=2, surface="last"), flow)


def test_raw_file_per_variable_with_the_layout_left_to_continuity(kit, flow, tmp_path: Path) -> None:
    for name in FIELDS:
        (tmp_path / f"{name}.dat").write_bytes(getattr(flow, name).tobytes())
    nz, ny, nx = flow.u.shape[1:]
    raw = {"shape": [nz, ny, nx], "shapes": {"w": [nz + 1, ny, nx]}, "files": {n: f"{n}.dat" for n in FIELDS}}
    found = kit.opened(tmp_path, raw=raw, time_interval=600, dx=2.5, dy=3, dz=2)
    kit.same(found, flow)
    order = next(d for d in found.decisions if d.subject == "order of axes")
    assert (order.choice, order.how) == ("z, y, x", "detected")


def test_raw_times_per_variable(kit, flow, tmp_path: Path) -> None:
    (tmp_path / "run.bin").write_bytes(b"".join(getattr(flow, n).tobytes() for n in FIELDS))
    nz, ny, nx = flow.u.shape[1:]
    raw = {
        "shape": [nz, ny, nx], "shapes": {"w": [nz + 1, ny, nx]}, "axes": ["z", "y", "x"], "variables": list(FIELDS),
        "arrangement": "variables",
    }
    kit.same(kit.opened(tmp_path / "run.bin", raw=raw, time_interval=600, dx=2.5, dy=3, dz=2, surface="last"), flow)


@pytest.mark.parametrize("labelled", [True, False])
@pytest.mark.parametrize(
    ("keep", "position"),
    [(slice(0, -1), "faces_without_surface"), (slice(1, None), "faces_without_bottom"), (slice(1, -1), "interior_faces")],
)
def test_w_without_boundary_faces(kit, tmp_path: Path, keep: slice, position: str, labelled: bool) -> None:
    flow = kit.make_flow()
    variables = kit.standard(flow)
    dims = ("time", "z_w" if labelled or position == "interior_faces" else "z", "y", "x")
    variables["w"] = (dims, flow.w[:, keep], {"units": "m s-1"})
    if labelled:
        variables["z_w"] = (("z_w",), flow.z_face[keep], {"units": "m"})
    else:
        del variables["z_w"]
    found = kit.opened(kit.write_netcdf(tmp_path / "a.nc", variables))
    kit.same(found, flow)
    decision = next(d for d in found.decisions if d.subject == "w position")
    assert decision.choice == position
    assert any(d.choice == "filled with 0" for d in found.decisions)


@pytest.mark.parametrize("side", ["low_face", "high_face"])
@pytest.mark.parametrize("labelled", [True, False])
def test_staggered_u_and_v(kit, tmp_path: Path, side: str, labelled: bool) -> None:
    flow = kit.make_flow("staggered")  # u[i] on the low side of cell i
    variables = kit.standard(flow)
    shift = {"low_face": 0, "high_face": -1}[side]
    offset = {"low_face": -0.5, "high_face": 0.5}[side]
    x_dim, y_dim = ("x_u", "y_v") if labelled else ("x", "y")
    variables["u"] = (("time", "z", "y", x_dim), np.roll(flow.u, shift, 3), {"units": "m s-1"})
    variables["v"] = (("time", "z", y_dim, "x"), np.roll(flow.v, shift, 2), {"units": "m s-1"})
    if labelled:
        variables["x_u"] = (("x_u",), flow.x + offset * 2.5, {"units": "m"})
        variables["y_v"] = (("y_v",), flow.y + offset * 3.0, {"units": "m"})
    found = kit.opened(kit.write_netcdf(tmp_path / "a.nc", variables))
    kit.same(found, flow)
    data = found.dataset
    assert data["u"].dims == ("time", "z", "y", "x_face") and data["v"].dims == ("time", "z", "y_face", "x")
    np.testing.assert_allclose(data["x_face"].values, flow.x - 1.25)
    assert data.attrs["horizontal_scheme"] == "staggered"
    if side == "high_face":  # a box across the seam where the roll wraps
        np.testing.assert_array_equal(data["u"][1, 2:4, 3:5, 0:3].values, flow.u[1, 2:4, 3:5, 0:3])


def test_staggered_faces_with_the_closing_face(kit, tmp_path: Path) -> None:
    flow = kit.make_flow("staggered")
    variables = kit.standard(flow)
    variables["u"] = (("time", "z", "y", "xf"), np.concatenate([flow.u, flow.u[..., :1]], 3), {"units": "m s-1"})
    variables["v"] = (("time", "z", "yf", "x"), np.concatenate([flow.v, flow.v[:, :, :1]], 2), {"units": "m s-1"})
    variables["xf"] = (("xf",), 2.5 * np.arange(17), {"units": "m"})
    variables["yf"] = (("yf",), 3.0 * np.arange(13), {"units": "m"})
    kit.same(kit.opened(kit.write_netcdf(tmp_path / "a.nc", variables)), flow)


@pytest.mark.parametrize("axes", ["x", "y", "xy"])
def test_repeated_periodic_column(kit, flow, tmp_path: Path, axes: str) -> None:
    variables = kit.standard(flow)
    for name in FIELDS:
        dims, values, attrs = variables[name]
        values = np.concatenate([values, values[..., :1]], 3) if "x" in axes else values
        values = np.concatenate([values, values[:, :, :1]], 2) if "y" in axes else values
        variables[name] = (dims, values, attrs)
    if "x" in axes:
        variables["x"] = (("x",), 1.25 + 2.5 * np.arange(17), {"units": "m"})
    if "y" in axes:
        variables["y"] = (("y",), 1.5 + 3.0 * np.arange(13), {"units": "m"})
    found = kit.opened(kit.write_netcdf(tmp_path / "a.nc", variables))
    kit.same(found, flow)
    assert sum(d.subject.startswith("repeated") for d in found.decisions) == len(axes)


def test_stretched_levels_without_faces(kit, tmp_path: Path) -> None:
    flow = kit.make_flow(stretched=True)
    variables = kit.standard(flow)
    variables["w"] = (("time", "z", "y", "x"), flow.w[:, :-1], {"units": "m s-1"})
    del variables["z_w"]
    kit.same(kit.opened(kit.write_netcdf(tmp_path / "a.nc", variables)), flow)


@pytest.mark.parametrize("labels", ["positive", "names", "none"])
def test_depth_positive_down_surface_first(kit, flow, tmp_path: Path, labels: str) -> None:
    variables = kit.standard(flow)
    for name in FIELDS:
        dims, values, attrs = variables[name]
        variables[name] = (dims, np.ascontiguousarray(values[:, ::-1]), attrs)
    attrs = {"units": "m", "positive": "down"} if labels == "positive" else {"units": "m"}
    variables["z"] = (("z",), -flow.z[::-1], attrs)
    variables["z_w"] = (("z_w",), -flow.z_face[::-1], attrs)
    if labels == "names":
        variables = renamed(variables, {"z": "depth", "z_w": "depth_w"})
    found = kit.opened(kit.write_netcdf(tmp_path / "a.nc", variables))
    kit.same(found, flow)
    decision = next(d for d in found.decisions if d.subject == "surface")
    assert decision.choice == "first level" and decision.how == ("detected" if labels == "none" else "metadata")


def test_heights_above_the_bottom(kit, flow, tmp_path: Path) -> None:
    variables = kit.standard(flow)
    variables["z"] = (("z",), flow.z + 20.0, {"units": "m"})
    variables["z_w"] = (("z_w",), flow.z_face + 20.0, {"units": "m"})
    kit.same(kit.opened(kit.write_netcdf(tmp_path / "a.nc", variables)), flow)


@pytest.mark.parametrize("order", [(0, 1, 3, 2), (0, 3, 2, 1), (3, 2, 1, 0), (1, 2, 3, 0), (2, 0, 1, 3)])
def test_axes_in_any_order_by_name(kit, flow, tmp_path: Path, order: tuple[int, ...]) -> None:
    path = kit.write_netcdf(tmp_path / "a.nc", transposed(kit.standard(flow), order), unlimited=None)
    kit.same(kit.opened(path), flow)


@pytest.mark.parametrize("order", [(0, 1, 2, 3), (0, 1, 3, 2), (0, 3, 2, 1), (0, 2, 3, 1)])
def test_axes_without_any_metadata_by_continuity(kit, tmp_path: Path, order: tuple[int, ...]) -> None:
    flow = kit.make_flow(nx=12, ny=12, nz=12)  # sizes do not help either
    variables = fields_only(transposed(kit.standard(flow), order))
    plain = {f"var{i}": (("n0", "n1", "n2", "n3"), values, {}) for i, (_, values, _) in enumerate(variables.values())}
    # w has 13 levels: its long axis has a name of its own
    w_axis = order.index(1)
    plain["var2"] = (tuple("n_w" if i == w_axis else f"n{i}" for i in range(4)), plain["var2"][1], {})
    path = kit.write_netcdf(tmp_path / "a.nc", plain, unlimited=None)
    names = {"u": "var0", "v": "var1", "w": "var2", "theta": "var3"}
    found = kit.opened(path, names=names, time_interval=600, dx=2.5, dy=3, dz=20 / 12)
    kit.same(found, flow)


@pytest.mark.parametrize("swapped", [False, True])
@pytest.mark.parametrize("position", ["faces_without_surface", "faces_without_bottom"])
def test_three_equal_axes_without_metadata(kit, tmp_path: Path, swapped: bool, position: str) -> None:
    flow = kit.make_flow(nx=12, ny=12, nz=12)
    w = flow.w[:, :-1] if position == "faces_without_surface" else flow.w[:, 1:]
    arrays = [flow.u, flow.v, w, flow.theta]
    if swapped:
        arrays = [a.swapaxes(2, 3) for a in arrays]
    plain = {n: (("time", "a", "b", "c"), np.ascontiguousarray(a), {}) for n, a in zip(FIELDS, arrays, strict=True)}
    plain["time"] = (("time",), flow.time, {"units": "s"})
    found = kit.opened(kit.write_netcdf(tmp_path / "a.nc", plain), dx=2.5, dy=3, dz=20 / 12)
    kit.same(found, flow)
    order = next(d for d in found.decisions if d.subject == "order of axes")
    assert order.choice == ("z, x, y" if swapped else "z, y, x")
    assert next(d for d in found.decisions if d.subject == "w position").choice == position


def test_descending_horizontal_axes(kit, flow, tmp_path: Path) -> None:
    variables = kit.standard(flow)
    for name in FIELDS:
        dims, values, attrs = variables[name]
        variables[name] = (dims, np.ascontiguousarray(values[:, :, ::-1, ::-1]), attrs)
    variables["x"] = (("x",), flow.x[::-1], {"units": "m"})
    variables["y"] = (("y",), flow.y[::-1], {"units": "m"})
    found = kit.opened(kit.write_netcdf(tmp_path / "a.nc", variables))
    kit.same(found, flow)
    np.testing.assert_allclose(found.dataset["x"].values, flow.x)


def test_w_positive_down(kit, flow, tmp_path: Path) -> None:
    variables = kit.standard(flow)
    variables["w"] = (variables["w"][0], -flow.w, {"units": "m s-1"})
    kit.same(kit.opened(kit.write_netcdf(tmp_path / "a.nc", variables), w_positive="down"), flow)


def test_w_at_cell_centres(kit, tmp_path: Path) -> None:
    flow = kit.make_flow("central", w_at="centre")
    variables = kit.standard(flow)
    del variables["z_w"]
    found = kit.opened(kit.write_netcdf(tmp_path / "a.nc", variables))
    kit.same(found, flow)
    assert found.dataset["w"].dims == ("time", "z", "y", "x")
    assert found.dataset.attrs["horizontal_scheme"] == "central"


@pytest.mark.parametrize("scheme", ["spectral", "central", "staggered"])
def test_horizontal_scheme_is_found(kit, tmp_path: Path, scheme: str) -> None:
    flow = kit.make_flow(scheme)
    found = kit.opened(kit.write_netcdf(tmp_path / "a.nc", kit.standard(flow)))
    assert found.dataset.attrs["horizontal_scheme"] == scheme
    assert found.dataset.attrs["divergence_residual"] < 1e-5
    decision = next(d for d in found.decisions if d.subject == "horizontal scheme")
    assert "times more" in decision.evidence  # the margin is said


def test_nondimensional_with_scales(kit, flow, tmp_path: Path) -> None:
    length, velocity = 4.0, 0.0625  # powers of two: exact in any precision
    variables = kit.standard(flow)
    for name in ("u", "v", "w"):
        dims, values, _ = variables[name]
        variables[name] = (dims, values / np.float32(velocity), {})
    for name in ("x", "y", "z", "z_w"):
        dims, values, _ = variables[name]
        variables[name] = (dims, values / length, {})
    variables["time"] = (("time",), flow.time * velocity / length, {})
    variables["theta"] = (variables["theta"][0], flow.theta / np.float32(0.5), {})
    path = kit.write_netcdf(tmp_path / "a.nc", variables)
    found = kit.opened(path, scales={"length": "4 m", "velocity": "6.25 cm s-1", "temperature": 0.5})
    kit.same(found, flow)


def test_units_are_converted(kit, flow, tmp_path: Path) -> None:
    variables = kit.standard(flow)
    for name in ("u", "v", "w"):
        dims, values, _ = variables[name]
        variables[name] = (dims, values * np.float32(100), {"units": "cm/s"})
    variables["theta"] = (variables["theta"][0], flow.theta - np.float32(273.15), {"units": "degrees_C"})
    variables["z"] = (("z",), 100 * flow.z, {"units": "cm"})
    variables["z_w"] = (("z_w",), 100 * flow.z_face, {"units": "cm"})
    found = kit.opened(kit.write_netcdf(tmp_path / "a.nc", variables))
    for name in ("u", "v", "w"):
        np.testing.assert_allclose(found.dataset[name].values, getattr(flow, name), rtol=3e-7)
    assert found.dataset["theta"].attrs["units"] == "degC"
    np.testing.assert_allclose(found.dataset["z"].values, flow.z)


@pytest.mark.parametrize(
    ("unit", "scale"),
    [("seconds", 1.0), ("min", 60.0), ("hours since 2026-02-03 04:00:00", 3600.0), ("days since 2026-02-03", 86400.0)],
)
def test_times_in_any_unit(kit, flow, tmp_path: Path, unit: str, scale: float) -> None:
    variables = kit.standard(flow)
    variables["time"] = (("time",), flow.time / scale, {"units": unit})
    found = kit.opened(kit.write_netcdf(tmp_path / "a.nc", variables))
    kit.same(found, flow)
    assert found.dataset.attrs.get("time_origin", "") == (
        "" if "since" not in unit else "2026-02-03T04:00:00" if "hours" in unit else "2026-02-03T00:00:00"
    )


def test_times_far_from_their_reference_date_count_from_the_first(kit, flow, tmp_path: Path) -> None:
    variables = kit.standard(flow)
    variables["time"] = (("time",), 46000.0 + flow.time / 86400.0, {"units": "days since 1900-01-01", "calendar": "noleap"})
    found = kit.opened(kit.write_netcdf(tmp_path / "a.nc", variables))
    np.testing.assert_allclose(found.dataset["time"].values, flow.time, atol=1e-5)
    # 46000 days of a 365-day calendar = 126 years and 10 days
    assert found.dataset.attrs["time_origin"] == "2026-01-11T00:00:00"


def test_step_numbers(kit, flow, tmp_path: Path) -> None:
    variables = kit.standard(flow)
    variables["time"] = (("time",), np.array([0, 1200, 2400], np.int32), {})
    kit.same(kit.opened(kit.write_netcdf(tmp_path / "a.nc", variables), time_step=0.5), flow)


def test_times_in_inertial_periods(kit, flow, tmp_path: Path) -> None:
    variables = kit.standard(flow)
    period = 2 * np.pi / 1e-4
    variables["time"] = (("time",), flow.time / period, {"units": "inertial periods"})
    kit.same(kit.opened(kit.write_netcdf(tmp_path / "a.nc", variables, {"f": 1e-4})), flow)


@pytest.mark.parametrize("names", [
    {"u": "U", "v": "V", "w": "W", "theta": "T"},
    {"u": "ua", "v": "va", "w": "wa", "theta": "temp"},
    {"u": "velocity_x", "v": "velocity_y", "w": "velocity_z", "theta": "potential_temperature"},
    {"u": "u1", "v": "u2", "w": "u3", "theta": "Temperature"},
    {"u": "x-velocity", "v": "y-velocity", "w": "z-velocity", "theta": "pot_temp"},
])  # fmt: skip
def test_common_spellings(kit, flow, tmp_path: Path, names: dict[str, str]) -> None:
    kit.same(kit.opened(kit.write_netcdf(tmp_path / "a.nc", renamed(kit.standard(flow), names))), flow)


def test_standard_names_win_over_spelling(kit, flow, tmp_path: Path) -> None:
    variables = renamed(kit.standard(flow), {"u": "f1", "v": "f2", "w": "f3"})
    for name, standard in (("f1", "sea_water_x_velocity"), ("f2", "sea_water_y_velocity"), ("f3", "upward_sea_water_velocity")):
        dims, values, attrs = variables[name]
        variables[name] = (dims, values, {**attrs, "standard_name": standard})
    variables["u"] = (variables["f1"][0], 0 * flow.u, {})  # spelled right, but something else
    found = kit.opened(kit.write_netcdf(tmp_path / "a.nc", variables))
    kit.same(found, flow)
    assert found.dataset["u"].attrs["source_name"] == "f1"


def test_tracers_and_subgrid_fields_follow(kit, flow, tmp_path: Path) -> None:
    variables = kit.standard(flow)
    variables["dye_a"] = (variables["u"][0], flow.theta * 2, {"units": "1"})
    variables["e"] = (variables["u"][0], np.abs(flow.u), {"units": "m2 s-2"})
    variables["nu_sgs"] = (variables["w"][0], np.abs(flow.w), {"units": "m2 s-1"})
    data = kit.opened(kit.write_netcdf(tmp_path / "a.nc", variables)).dataset
    np.testing.assert_array_equal(data["tracer_a"].values, flow.theta * 2)
    assert data["nu_sgs"].dims == ("time", "z_face", "y", "x") and data["tke_sgs"].dims == ("time", "z", "y", "x")


def test_groups_are_searched(kit, flow, tmp_path: Path) -> None:
    import netCDF4

    path = tmp_path / "a.nc"
    with netCDF4.Dataset(path, "w") as file:
        group = file.createGroup("flow")
        for dims, values, _ in kit.standard(flow).values():
            for dim, size in zip(dims, values.shape, strict=True):
                if dim not in file.dimensions:
                    file.createDimension(dim, size)
        for name, (dims, values, attrs) in kit.standard(flow).items():
            target = group if values.ndim == 4 else file
            target.createVariable(name, values.dtype, dims)[...] = values
            for key, value in attrs.items():
                target[name].setncattr(key, value)
    kit.same(kit.opened(path), flow)


def test_packed_integers_are_decoded_with_each_files_own_scale(kit, flow, tmp_path: Path) -> None:
    for part, (t, scale) in enumerate(((0, 1e-5), (1, 2e-5))):  # R17
        own = {}
        for name, (dims, values, attrs) in kit.standard(flow).items():
            values = values[t : t + 1] if "time" in dims else values
            if name in ("u", "v", "w"):
                packed = np.round(values / scale).astype(np.int16)
                own[name] = (dims, packed, {**attrs, "scale_factor": scale, "add_offset": 0.0, "_FillValue": np.int16(-32768)})
            else:
                own[name] = (dims, values, attrs)
        kit.write_netcdf(tmp_path / f"p{part}.nc", own)
    found = kit.opened(tmp_path / "p*.nc")
    for t, scale in ((0, 1e-5), (1, 2e-5)):
        got = found.dataset["u"][t].values
        assert got.dtype == np.float32
        assert np.max(np.abs(got - flow.u[t])) <= 0.51 * scale
    assert any(f.code == "packed-integers" for f in found.findings)


@pytest.mark.parametrize("kind", ["netcdf", "zarr2", "zarr3"])
@pytest.mark.parametrize("scheme", ["spectral", "staggered"])
def test_what_general_tools_write_of_the_canonical_dataset_is_read_back(kit, tmp_path: Path, kind: str, scheme: str) -> None:
    import warnings

    flow = kit.make_flow(scheme)
    data = kit.opened(kit.write_netcdf(tmp_path / "a.nc", kit.standard(flow))).dataset
    moments = np.datetime64("2026-01-01", "ns") + data["time"].values.astype("timedelta64[s]")
    plain = data.drop_encoding().assign_coords(time=("time", moments))
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        if kind == "netcdf":
            plain.to_netcdf(tmp_path / "b.nc")
        else:
            plain.to_zarr(tmp_path / "b.zarr", zarr_format=int(kind[-1]))
    found = kit.opened(tmp_path / ("b.nc" if kind == "netcdf" else "b.zarr"))
    kit.same(found, flow)
    assert found.dataset.attrs["time_origin"] == "2026-01-01T00:00:00"
    assert found.dataset["u"].dims == data["u"].dims
    chunked = found.dataset.chunk({"time": 1})
    np.testing.assert_allclose(chunked["w"].mean("x").values, flow.w.mean(axis=3), atol=1e-7)
