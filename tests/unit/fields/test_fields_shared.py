"""The real fields beside the checkout, opened and rewritten: identical canonical arrays in every layout."""

from __future__ import annotations

from pathlib import Path

import netCDF4
import numpy as np
import pytest
import zarr

pytestmark = pytest.mark.shared
FIELDS = ("u", "v", "w", "theta")


@pytest.fixture(scope="module", params=["langmuir", "shear"])
def real(request, shared: Path):
    """Two snapshots of a real file: path, arrays as stored, coordinates."""
    path = shared / "fields" / f"{request.param}.nc"
    with netCDF4.Dataset(path) as file:
        file.set_auto_mask(False)
        arrays = {n: file[n][-2:] for n in FIELDS}
        coords = {n: file[n][...] for n in ("z", "z_w", "x", "y")}
        coords["time"] = file["time"][-2:]
        attrs = {k: file.getncattr(k) for k in file.ncattrs()}
    return path, arrays, coords, attrs


def variables(arrays, coords, dims=("time", "z", "y", "x")):
    out = {}
    for name, values in arrays.items():
        own = tuple("z_w" if d == "z" and name == "w" else d for d in dims)
        out[name] = (own, values, {"units": "K" if name == "theta" else "m s-1"})
    for name, values in coords.items():
        out[name] = ((name,), np.asarray(values), {"units": "s" if name == "time" else "m"})
    return out


def agree(found, arrays) -> None:
    for name in FIELDS:
        np.testing.assert_array_equal(found.dataset[name].values[-2:], arrays[name])
    assert found.dataset.attrs["horizontal_scheme"] == "spectral"
    # rounded to 14 bits when written: 3e-4 measured on these files
    assert found.dataset.attrs["divergence_residual"] < 4e-4


def test_as_they_are(kit, real) -> None:
    path, arrays, coords, _ = real
    found = kit.opened(path)
    agree(found, arrays)
    assert found.dataset["w"].dims == ("time", "z_face", "y", "x")
    np.testing.assert_array_equal(found.dataset["z_face"].values, coords["z_w"])
    assert found.dataset.attrs["Lx"] == 200.0
    assert not [f for f in found.findings if f.severity == "error"]
    assert {f.code for f in found.findings} <= {"chunk-shape"}  # nothing else is wrong with them
    scheme = next(d for d in found.decisions if d.subject == "horizontal scheme")
    arrangement = next(d for d in found.decisions if d.subject == "order of axes")
    # measured on these files: 0.8 for the next arrangement, 0.2 for central differences, against 2.5e-3 = 5 x rounding
    for decision, least in ((scheme, 50), (arrangement, 200)):
        assert float(decision.evidence.split(" times more")[0].split()[-1]) > least, decision
    assert "next best scheme" in scheme.evidence


def test_hints_of_the_real_files(kit, real) -> None:
    path, _, _, attrs = real
    hints = kit.opened(path).hints
    stated = {
        "stress_direction": "tau_dir", "stokes_direction": "us_dir", "stokes_wavenumber": "kwave", "surface_heat_flux": "Q",
        "coriolis_parameter": "f", "initial_mixed_layer_depth": "h0", "prandtl_number": "pr", "thermal_expansion": "alpha",
        "gravity": "g", "reference_density": "rho0", "specific_heat": "cp",
    }  # fmt: skip
    for ours, theirs in stated.items():
        assert hints[ours].value == pytest.approx(float(attrs[theirs])), ours
        assert theirs in hints[ours].evidence
    assert hints["friction_velocity"].dims == ("time",) and hints["friction_velocity"].value.shape == (6,)
    np.testing.assert_allclose(hints["stokes_surface_speed"].value, attrs["us0"])
    shape = hints["stokes_profile_shape"]
    assert shape.dims == ("z",) and shape.value[-1] > shape.value[0]


def test_rewritten_as_zarr(kit, real, tmp_path: Path) -> None:
    _, arrays, coords, _ = real
    agree(kit.opened(kit.write_zarr(tmp_path / "a.zarr", variables(arrays, coords), chunks=(1, 16, 80, 80))), arrays)
    assert zarr.open_array(tmp_path / "a.zarr" / "u", mode="r").metadata.zarr_format == 3


def test_rewritten_as_fortran_binary(kit, real, tmp_path: Path) -> None:
    _, arrays, _, _ = real
    parts = []
    for t in range(2):
        for name in FIELDS:
            data = arrays[name][t].astype(">f4").tobytes()
            mark = np.array([len(data)], ">i4").tobytes()
            parts += [mark, data, mark]
    (tmp_path / "run.dat").write_bytes(b"".join(parts))
    raw = {
        "shape": [80, 80, 64], "shapes": {"w": [80, 80, 65]}, "order": "Fortran", "byte_order": "big", "record_markers": 4,
        "variables": list(FIELDS),
    }
    found = kit.opened(tmp_path / "run.dat", raw=raw, dx=2.5, dy=2.5, dz=1.25, time_interval=600)  # axes by continuity
    agree(found, arrays)


def test_rewritten_transposed_with_and_without_names(kit, real, tmp_path: Path) -> None:
    _, arrays, coords, _ = real
    turned = {n: np.ascontiguousarray(a.swapaxes(2, 3)) for n, a in arrays.items()}
    named = kit.write_netcdf(tmp_path / "named.nc", variables(turned, coords, ("time", "z", "x", "y")))
    agree(kit.opened(named), arrays)
    plain = variables(turned, {n: coords[n] for n in ("time", "z", "z_w")}, ("time", "z", "a", "b"))
    found = kit.opened(kit.write_netcdf(tmp_path / "plain.nc", plain), dx=2.5, dy=2.5)
    agree(found, arrays)
    order = next(d for d in found.decisions if d.subject == "order of axes")
    assert order.choice == "z, x, y" and order.how == "detected" and "times more" in order.evidence


def test_rewritten_downward(kit, real, tmp_path: Path) -> None:
    _, arrays, coords, _ = real
    down = {n: np.ascontiguousarray(a[:, ::-1]) for n, a in arrays.items()}
    below = {**coords, "z": -coords["z"][::-1], "z_w": -coords["z_w"][::-1]}
    agree(kit.opened(kit.write_netcdf(tmp_path / "a.nc", variables(down, below))), arrays)
