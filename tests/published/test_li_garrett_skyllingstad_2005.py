"""The shipped stores show the published signatures of the three regimes.

Li, Garrett & Skyllingstad (2005), abstract: convective: vertical > downwind, crosswind; shear: downwind > crosswind >
vertical; Langmuir: crosswind ≈ vertical > downwind. Levels: Lenschow, Wyngaard & Pennell (1980); Harcourt & D'Asaro (2008)
(constants seen in a public script, exponent from memory).
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
import xarray as xr


def variances(repository: Path, name: str) -> xr.Dataset:
    """Mean over snapshots of uu, vv, ww (centred) and the subgrid's 2/3 e on z, with h (depth of the largest gradient)."""
    with xr.open_zarr(repository / "toy_fields" / "data" / f"{name}.zarr", consolidated=False) as fields:
        loaded = fields.load().astype(np.float64)
    w = 0.5 * (loaded["w"].values[:, 1:] + loaded["w"].values[:, :-1])
    parts = {"uu": loaded["u"].values, "vv": loaded["v"].values, "ww": w}
    out = {key: ("z", values.var(axis=(2, 3)).mean(axis=0)) for key, values in parts.items()}
    # Deardorff (1980): nu = 0.1 l sqrt(e), l the filter width of the kept modes.
    width = (1.5 * 2.5 * 1.5 * 2.5 * 1.5) ** (1 / 3)
    out["sgs"] = ("z", (2 / 3) * ((loaded["nu_sgs"].values / (0.1 * width)) ** 2).mean(axis=(0, 2, 3)))
    temperature = loaded["theta"].values.mean(axis=(0, 2, 3))
    depth = -float(loaded["z_face"].values[1:-1][np.argmax(np.diff(temperature))])
    return xr.Dataset(out, coords={"z": loaded["z"].values}, attrs=dict(loaded.attrs) | {"h": depth})


def band(profiles: xr.Dataset, bottom: float, top: float) -> xr.Dataset:
    """Mean over bottom < z / h < top."""
    scaled = profiles["z"] / profiles.attrs["h"]
    return profiles.where((scaled > bottom) & (scaled < top), drop=True).mean("z")


def test_langmuir_crosswind_and_vertical_beat_downwind(repository: Path) -> None:
    profiles = variances(repository, "langmuir")
    upper = band(profiles, -0.7, -0.1)
    assert float(upper["vv"]) > 1.25 * float(upper["uu"])
    assert float(upper["ww"]) > 1.25 * float(upper["uu"])
    # crosswind ≈ vertical near the cells' centres
    near = band(profiles, -0.25, -0.1)
    assert float(near["vv"] / near["ww"]) == pytest.approx(1.0, abs=0.3)


def test_shear_downwind_beats_crosswind_beats_vertical(repository: Path) -> None:
    profiles = variances(repository, "shear")
    for bottom, top in ((-0.7, -0.1), (-0.3, 0.0), (-0.6, -0.3)):
        part = band(profiles, bottom, top)
        assert float(part["uu"]) > 1.15 * float(part["vv"]) > 1.15**2 * float(part["ww"])


def test_convective_vertical_beats_horizontal(repository: Path) -> None:
    part = band(variances(repository, "convective"), -0.7, -0.1)
    assert float(part["ww"]) > 1.5 * float(part["uu"])
    assert float(part["ww"]) > 1.5 * float(part["vv"])
    assert float(part["uu"] / part["vv"]) == pytest.approx(1.0, abs=0.25)


def test_convective_level(repository: Path) -> None:
    profiles = variances(repository, "convective")
    attrs = profiles.attrs
    flux = 200.0 / (attrs["reference_density"] * attrs["specific_heat"])
    scale = (attrs["gravity"] * attrs["thermal_expansion"] * flux * attrs["h"]) ** (2 / 3)
    total = (profiles["ww"] + profiles["sgs"]) / scale
    # Lenschow et al. 1980: 1.8 zeta^(2/3) (1 - 0.8 zeta)², largest 0.4663 at 0.3125, mean over the layer 0.3142
    assert float(total.max()) == pytest.approx(0.4663, rel=0.25)
    assert float(-total["z"][int(np.argmax(total.values))] / attrs["h"]) == pytest.approx(0.3125, abs=0.1)
    layer = total.where(total["z"] > -attrs["h"]).mean()
    assert float(layer) == pytest.approx(0.3142, rel=0.25)


def test_langmuir_level(repository: Path) -> None:
    profiles = variances(repository, "langmuir")
    attrs = profiles.attrs
    k, h = attrs["stokes_wavenumber"], attrs["h"]
    surface_layer = attrs["surface_stokes_drift"] * (1 - np.exp(-0.4 * k * h)) / (0.4 * k * h)
    langmuir_number = np.sqrt(attrs["friction_velocity"] / surface_layer)
    # Harcourt & D'Asaro 2008: layer mean of w² / u*² = 0.398 + 0.480 La_SL^(-4/3)
    expected = 0.398 + 0.480 * langmuir_number ** (-4 / 3)
    total = (profiles["ww"] + profiles["sgs"]) / attrs["friction_velocity"] ** 2
    found = float(total.where(total["z"] > -h).mean())
    assert found == pytest.approx(expected, rel=0.25)
    # vertical intensity about twice that of shear turbulence (abstract)
    shear = variances(repository, "shear")
    ratio = band(profiles, -0.7, -0.1)["ww"] / band(shear, -0.7, -0.1)["ww"]
    assert 1.5 < float(ratio) < 3.5
