"""Wrong labels and open questions: caught by the flow itself, refused with the lines that would settle them."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from lespost.errors import LayoutError, RecipeError
from lespost.fields.continuity import significant_bits
from lespost.fields.describe import describe_path, propose_settings
from lespost.fields.fingerprint import fingerprint
from lespost.fields.geometry import face_distance, faces_to_centres, level_thickness, spacing
from lespost.fields.settings import FieldsSettings


def relabelled(flow, kit, **changes):
    return {**kit.standard(flow), **changes}


def codes(found) -> set[str]:
    return {f.code for f in found.findings}


def test_exchanged_horizontal_labels_are_refused(kit, flow, tmp_path: Path) -> None:
    variables = kit.standard(kit.make_flow(nx=12, ny=12))
    names = {"x": "y", "y": "x"}
    wrong = {
        names.get(n, n): (tuple(names.get(d, d) for d in dims), values, attrs) for n, (dims, values, attrs) in variables.items()
    }
    with pytest.raises(LayoutError, match=r"not solenoidal as recipe and metadata.*but it is as") as caught:
        kit.opened(kit.write_netcdf(tmp_path / "a.nc", wrong))
    assert '"z", "x", "y"' in str(caught.value)


def test_exchanged_u_and_v_are_refused(kit, flow, tmp_path: Path) -> None:
    variables = kit.standard(kit.make_flow(nx=12, ny=12))
    variables["u"], variables["v"] = variables["v"], variables["u"]
    with pytest.raises(LayoutError, match="u and v exchanged"):
        kit.opened(kit.write_netcdf(tmp_path / "a.nc", variables))


@pytest.mark.parametrize("wrong", ["labels", "recipe"])
def test_upside_down_labels_are_refused(kit, flow, tmp_path: Path, wrong: str) -> None:
    variables = kit.standard(flow)
    for name in ("u", "v", "w", "theta"):  # the data run downward, the labels upward
        dims, values, attrs = variables[name]
        variables[name] = (dims, np.ascontiguousarray(values[:, ::-1]), attrs)
    if wrong == "labels":
        with pytest.raises(LayoutError, match="direction of z"):
            kit.opened(kit.write_netcdf(tmp_path / "a.nc", variables))
    else:
        del variables["z"], variables["z_w"]
        path = kit.write_netcdf(tmp_path / "a.nc", variables)
        with pytest.raises(LayoutError, match="direction of z"):
            kit.opened(path, dz=2.0, surface="last")
        kit.same(kit.opened(path, dz=2.0), flow)  # left open, continuity finds it


def test_a_file_upside_down_with_its_w_is_caught_by_two_of_three_signs(kit, flow, tmp_path: Path) -> None:
    variables = kit.standard(flow)
    for name, sign in (("u", 1), ("v", 1), ("w", -1), ("theta", 1)):  # continuity alone cannot see this
        dims, values, attrs = variables[name]
        variables[name] = (dims, np.ascontiguousarray(sign * values[:, ::-1]), attrs)
    with pytest.raises(LayoutError, match=r"upside down: temperature changes by .*; w has an rms"):
        kit.opened(kit.write_netcdf(tmp_path / "a.nc", variables))


@pytest.mark.parametrize("position", ["faces_without_bottom", "centre"])
def test_wrong_place_of_w_in_the_recipe_is_refused(kit, flow, tmp_path: Path, position: str) -> None:
    variables = kit.standard(flow)
    variables["w"] = (("time", "z", "y", "x"), flow.w[:, :-1], {"units": "m s-1"})
    del variables["z_w"]
    path = kit.write_netcdf(tmp_path / "a.nc", variables)
    with pytest.raises(LayoutError, match='w_position = "faces_without_surface"'):
        kit.opened(path, w_position=position)
    kit.same(kit.opened(path), flow)  # R29: the offset with the smallest residual, said with its margin


def test_w_that_moves_at_the_lid_is_refused(kit, tmp_path: Path) -> None:
    flow = kit.make_flow()
    w = flow.w.copy()
    w[:, -1] = 0.3 * w[:, -2]
    path = kit.write_netcdf(tmp_path / "a.nc", relabelled(flow, kit, w=(("time", "z_w", "y", "x"), w, {"units": "m s-1"})))
    with pytest.raises(LayoutError, match="surface face z = 0 where it must vanish"):
        kit.opened(path)
    assert kit.opened(path, rigid_lid=False).dataset.sizes["time"] == 3


def test_a_flow_at_rest_decides_nothing(kit, tmp_path: Path) -> None:
    flow = kit.make_flow(nx=12, ny=12, nz=12)
    still = {n: (("time", "a", "b", "c"), np.zeros((3, 12, 12, 12), "f4"), {}) for n in ("u", "v", "w")}
    still["time"] = (("time",), flow.time, {"units": "s"})
    with pytest.raises(LayoutError, match=r"at rest.*cannot decide axes and surface and w_position.*axes = \["):
        kit.opened(kit.write_netcdf(tmp_path / "a.nc", still), dx=1, dy=1, dz=1)


def test_noise_without_labels_decides_nothing(kit, tmp_path: Path) -> None:
    rng = np.random.default_rng(0)
    noise = {n: (("time", "a", "b", "c"), rng.normal(size=(2, 12, 12, 12)).astype("f4"), {}) for n in ("u", "v", "w")}
    noise["time"] = (("time",), np.array([0.0, 600.0]), {"units": "s"})
    with pytest.raises(LayoutError, match=r"cannot be decided.* or .*Write the right one"):
        kit.opened(kit.write_netcdf(tmp_path / "a.nc", noise), dx=1, dy=1, dz=1)


def test_labelled_noise_opens_with_a_warning(kit, flow, tmp_path: Path) -> None:
    rng = np.random.default_rng(0)
    u = (flow.u + 0.1 * rng.normal(size=flow.u.shape)).astype("f4")
    noisy = relabelled(flow, kit, u=(("time", "z", "y", "x"), u, {"units": "m/s"}))
    found = kit.opened(kit.write_netcdf(tmp_path / "a.nc", noisy))
    finding = next(f for f in found.findings if f.code == "divergence")
    assert finding.severity == "warning" and finding.value > 0.1


def test_contradicting_sense_of_z(kit, flow, tmp_path: Path) -> None:
    path = kit.write_netcdf(tmp_path / "a.nc", kit.standard(flow))
    with pytest.raises(LayoutError, match="depths are positive"):
        kit.opened(path, z_sense="depth")
    with pytest.raises(LayoutError, match="puts the surface last"):
        kit.opened(path, surface="first")
    with pytest.raises(RecipeError, match='format = "zarr"'):
        kit.opened(path, format="zarr")
    with pytest.raises(LayoutError, match=r"2.5 m apart"):
        kit.opened(path, dx=5.0)


def test_heights_about_the_middle_need_the_surface(kit, flow, tmp_path: Path) -> None:
    z = (("z",), flow.z + 7.0, {"units": "m"})
    z_w = (("z_w",), flow.z_face + 7.0, {"units": "m"})
    path = kit.write_netcdf(tmp_path / "a.nc", relabelled(flow, kit, z=z, z_w=z_w))
    with pytest.raises(LayoutError, match=r"\[fields\].surface_height"):
        kit.opened(path)
    kit.same(kit.opened(path, surface_height="7 m"), flow)


def test_single_snapshot_mean_w_and_constant_levels_are_said(kit, tmp_path: Path) -> None:
    flow = kit.make_flow(nt=1)
    assert "single-snapshot" in codes(kit.opened(kit.write_netcdf(tmp_path / "a.nc", kit.standard(flow))))
    w = flow.w.copy()
    w[:, 1:-1] += np.float32(1e-3)
    drifting = relabelled(flow, kit, w=(("time", "z_w", "y", "x"), w, {"units": "m s-1"}))
    finding = next(f for f in kit.opened(kit.write_netcdf(tmp_path / "b.nc", drifting)).findings if f.code == "mean-w")
    assert finding.value == pytest.approx(1e-3 / np.sqrt(np.mean(w[0, [0, 1, 3, 4, 6, 7, 9, 10]] ** 2)), rel=0.3)
    v = flow.v.copy()
    v[:, :3] = 0.25
    level = relabelled(flow, kit, v=(("time", "z", "y", "x"), v, {"units": "m s-1"}))
    assert "constant-levels" in codes(kit.opened(kit.write_netcdf(tmp_path / "c.nc", level)))


def test_noise_at_the_grid_is_said(kit, tmp_path: Path) -> None:
    flow = kit.make_flow(nx=48, ny=48)
    x, y = np.meshgrid(np.arange(48), np.arange(48))
    smooth = np.sin(2 * np.pi * x / 48) * np.cos(2 * np.pi * y / 24)
    w = (flow.w * 0 + np.sin(np.pi * flow.z_face / 20)[:, None, None] * smooth * 0.01).astype("f4")
    quiet = relabelled(flow, kit, w=(("time", "z_w", "y", "x"), w, {"units": "m s-1"}))
    assert "grid-scale-energy" not in codes(kit.opened(kit.write_netcdf(tmp_path / "a.nc", quiet), rigid_lid=False))
    w = w + ((-1.0) ** x * 0.005).astype("f4") * (np.abs(w).max(axis=(2, 3), keepdims=True) > 1e-6)
    rough = relabelled(flow, kit, w=(("time", "z_w", "y", "x"), w.astype("f4"), {"units": "m s-1"}))
    findings = kit.opened(kit.write_netcdf(tmp_path / "b.nc", rough), rigid_lid=False).findings
    finding = next(f for f in findings if f.code == "grid-scale-energy")
    # smooth part: variance (0.01 sin)^2 / 4 on average over sampled levels, two-grid-length wave: 0.005^2
    assert 0.3 < finding.value < 1.0


def test_scaled_files_are_recognised(kit, flow, tmp_path: Path) -> None:
    variables = kit.standard(flow)
    for name in ("u", "v", "w"):
        variables[name] = (variables[name][0], variables[name][1] * np.float32(200), {})
    for name in ("x", "y", "z", "z_w"):
        variables[name] = ((name,), variables[name][1] / 20.0, {})
    variables["time"] = (("time",), 0.1 * np.arange(3), {})
    found = kit.opened(kit.write_netcdf(tmp_path / "a.nc", variables, {"ustar": 1.0}))
    finding = next(f for f in found.findings if f.code == "looks-scaled")
    assert "[fields.scales]" in finding.message and "friction velocity is 1" in finding.message
    assert "velocity-magnitude" in codes(found)


@pytest.mark.parametrize("kind", ["eulerian", "lagrangian"])
def test_velocity_that_includes_the_drift_is_suspected(kit, tmp_path: Path, kind: str) -> None:
    flow = kit.make_flow(nx=32, ny=32, nz=40)
    shape = np.exp(2 * 0.25 * flow.z)
    u = flow.u - flow.u.mean(axis=(2, 3), keepdims=True) + 0.02 * np.exp(flow.z / 10)[:, None, None]
    u = u + (0.07 * shape[:, None, None] if kind == "lagrangian" else 0.0)
    variables = relabelled(flow, kit, u=(("time", "z", "y", "x"), u.astype("f4"), {"units": "m s-1"}))
    variables["stokes_profile_shape"] = (("z",), shape, {})
    found = kit.opened(kit.write_netcdf(tmp_path / "a.nc", variables, {"us0": 0.07, "us_dir": 0.0}))
    assert ("lagrangian-velocity" in codes(found)) == (kind == "lagrangian")
    declared = kit.opened(tmp_path / "a.nc", velocity_kind="lagrangian")
    assert declared.dataset.attrs["velocity_kind"] == "lagrangian" and "lagrangian-velocity" not in codes(declared)


def test_two_runs_in_one_folder_are_suspected(kit, flow, tmp_path: Path) -> None:
    variables = kit.standard(flow)
    kit.write_netcdf(tmp_path / "one.nc", variables, {"us0": 0.068, "ustar": 0.0061})
    variables["time"] = (("time",), flow.time + 1800.0, {"units": "s"})
    kit.write_netcdf(tmp_path / "two.nc", variables, {"us0": 0.0, "ustar": 0.0061})
    finding = next(f for f in kit.opened(tmp_path).findings if f.code == "files-differ")
    assert "us0 = 0.068 in one.nc and 0 in two.nc" in finding.message and "ustar" not in finding.message


def test_chunks_across_levels_are_said(kit, flow, tmp_path: Path) -> None:
    found = kit.opened(kit.write_zarr(tmp_path / "a.zarr", kit.standard(flow), chunks=(1, 10, 12, 16)))  # R18
    assert next(f for f in found.findings if f.code == "chunk-shape").value == 10.0
    report = describe_path([tmp_path / "a.zarr"])
    costs = {c.product: c.ratio for c in report.costs}
    assert costs["one level of one snapshot"] == 10.0 and costs["statistics of a whole snapshot"] == 1.0
    good = kit.opened(kit.write_zarr(tmp_path / "b.zarr", kit.standard(flow), chunks=(1, 2, 12, 16)))
    assert "chunk-shape" not in codes(good)


def test_report_and_proposal(kit, flow, tmp_path: Path) -> None:
    path = kit.write_netcdf(tmp_path / "a.nc", kit.standard(flow), {"ustar": 0.0061})
    report = describe_path([path])
    assert report.usable and report.snapshots == 3 and report.interval == 600.0
    assert report.sizes == {"nx": 16, "ny": 12, "nz": 10}
    assert report.lengths == {"Lx": 40.0, "Ly": 36.0, "depth": 20.0}
    assert report.hints["friction_velocity"].value == 0.0061
    assert {v.ours for v in report.variables} == {"u", "v", "w", "theta"}
    assert all(v.why for v in report.variables)
    proposal = propose_settings(report)
    assert proposal["w_position"] == "faces" and proposal["names"]["u"] == "u"
    kit.same(kit.opened(path, **{k: v for k, v in proposal.items() if k != "path"}), flow)


@pytest.mark.parametrize("time_last", [False, True])
@pytest.mark.parametrize("turned", [False, True])
def test_a_proposal_makes_detection_unnecessary(kit, tmp_path: Path, turned: bool, time_last: bool) -> None:
    flow = kit.make_flow(nx=12, ny=12, nz=12)
    arrays = {"u": flow.u, "v": flow.v, "w": flow.w[:, :-1]}
    if turned:
        arrays = {n: np.ascontiguousarray(a.swapaxes(2, 3)) for n, a in arrays.items()}
    dims = ("a", "b", "c", "time") if time_last else ("time", "a", "b", "c")
    plain = {n: (dims, np.ascontiguousarray(np.moveaxis(a, 0, 3 if time_last else 0)), {}) for n, a in arrays.items()}
    plain["time"] = (("time",), flow.time, {"units": "s"})
    path = kit.write_netcdf(tmp_path / "a.nc", plain, unlimited=None)
    settings = FieldsSettings(path=str(path), dx=2.5, dy=3.0, dz=20 / 12)
    report = describe_path([path], settings)
    proposal = propose_settings(report)
    space = ["z", "x", "y"] if turned else ["z", "y", "x"]
    assert proposal["axes"] == ([*space, "time"] if time_last else ["time", *space])
    assert proposal["surface"] == "last" and proposal["w_position"] == "faces_without_surface"
    found = kit.opened(path, **{k: v for k, v in proposal.items() if k != "path"})
    kit.same(found, flow, ("u", "v", "w"))
    assert next(d for d in found.decisions if d.subject == "order of axes").how != "detected"


def test_report_of_what_cannot_be_used_says_what_is_missing(kit, flow, tmp_path: Path) -> None:
    variables = kit.standard(flow)
    variables["odd"] = variables.pop("w")
    report = describe_path([kit.write_netcdf(tmp_path / "a.nc", variables)])
    assert not report.usable and "recognised as w" in report.missing[0] and "odd" in report.missing[0]
    assert {v.name for v in report.variables} == {"u", "v", "odd", "theta"}
    del variables["x"]
    variables["w"] = variables.pop("odd")
    report = describe_path([kit.write_netcdf(tmp_path / "b.nc", variables)])
    assert "[fields].dx" in report.missing[0]
    assert propose_settings(report)["names"]["w"] == "w"


def test_fingerprint_notices_changes(kit, flow, tmp_path: Path) -> None:
    one = kit.write_netcdf(tmp_path / "a.nc", kit.standard(flow))
    before = fingerprint([one])
    assert fingerprint([one]) == before == kit.opened(one).fingerprint
    with one.open("r+b") as stream:
        stream.seek(-1, 2)
        stream.write(b"x")
    assert fingerprint([one]) != before
    store = kit.write_zarr(tmp_path / "a.zarr", kit.standard(flow), chunks=(1, 4, 12, 16))
    before = fingerprint([store])
    next(store.glob("u/c/1/*/0/0")).unlink()
    assert fingerprint([store]) != before


def test_geometry_of_a_stretched_grid(kit, tmp_path: Path) -> None:
    flow = kit.make_flow(stretched=True)
    data = kit.opened(kit.write_netcdf(tmp_path / "a.nc", kit.standard(flow))).dataset
    assert spacing(data) == (2.5, 3.0)
    np.testing.assert_allclose(level_thickness(data), np.diff(flow.z_face))
    assert face_distance(data).shape == (11,)
    np.testing.assert_allclose(face_distance(data)[1:-1], np.diff(flow.z))
    # a wave of four spacings keeps half of its variance in the two-point average (R28): cos^2(pi / 4)
    wave = np.sin(2 * np.pi * np.arange(41) / 4)
    assert np.var(faces_to_centres(wave, 0)) / np.var(wave[:-1]) == pytest.approx(0.5, rel=1e-12)


def test_significant_bits_see_rounding() -> None:
    rng = np.random.default_rng(2)
    values = rng.normal(size=1000).astype("f4")
    assert significant_bits(values) == 24
    bits = values.view("u4") & np.uint32(0xFFFFFC00)  # ten mantissa bits cleared
    assert significant_bits(bits.view("f4")) == 14
    assert significant_bits(values.astype("f8")) == 24


def test_settings_refuse_nonsense() -> None:
    for keys, words in (
        ({"names": {"speed": "u"}}, "names.speed is not known"), ({"axes": ["z", "y"]}, "must hold"),
        ({"time_from": "step"}, "needs time_step"), ({"time_from": "index"}, "needs time_interval"),
        ({"format": "raw"}, "needs a"), ({"dx": "3 kg"}, "does not convert"), ({"z_sens": "up"}, "z_sens"),
        ({"raw": {"shape": [4, 4, 4]}}, "either `variables`"),
    ):  # fmt: skip
        with pytest.raises(ValueError, match=words):
            FieldsSettings(path="a.nc", **keys)
