"""Every variable of the profiles carries units, long name and cell methods, and the units are those of its dimensions."""

from __future__ import annotations

import cf_units
import numpy as np
import pytest

from lespost.profiles.attributes import description
from lespost.profiles.one_pass import profile_statistics
from lespost.profiles.settings import ProfilesSettings
from tests.unit.profiles.synthetic import dataset, random_arrays

SCALARS = {"theta": "degC", "salinity": "g kg-1", "tracer_dye": "1", "tracer_x2": "mol m-3"}

#: Unit of each variable, worked out by hand from its definition.
UNITS = {
    "u": "m s-1", "v_face": "m s-1", "uu": "m2 s-2", "uw_sgs": "m2 s-2", "ww_face": "m2 s-2", "uw_total_face": "m2 s-2",
    "uuw": "m3 s-3", "www": "m3 s-3", "wwww": "m4 s-4", "theta": "degC", "thetatheta": "K2", "thetathetatheta": "K3",
    "wtheta": "K m s-1", "wwtheta": "K m2 s-2", "thetathetaw": "K2 m s-1", "wtheta_sgs_face": "K m s-1", "uu_tile": "m2 s-2",
    "wtheta_tile": "K m s-1", "salinity": "g kg-1", "wsalinity": "g kg-1 m s-1", "salinitysalinity": "(g kg-1)2",
    "tracer_dye": "1", "tracer_dye_variance": "1", "w_tracer_dye": "m s-1", "w_tracer_x2": "mol m-3 m s-1",
    "dwdx_dwdy": "s-2", "divergence_rms": "s-1", "theta_min": "degC", "w_max": "m s-1", "nan_count": "1", "tke_sgs": "m2 s-2",
    "tke_sgs_face": "m2 s-2", "w_grid_scale_share": "1", "uu_native": "m2 s-2",
}  # fmt: skip


@pytest.mark.parametrize(("name", "unit"), UNITS.items())
def test_units(name: str, unit: str) -> None:
    assert cf_units.Unit(description(name, SCALARS).units) == cf_units.Unit(unit.replace("(g kg-1)2", "g2 kg-2"))


def test_words() -> None:
    assert description("ww_face", SCALARS).long_name == "variance of upward velocity on faces"
    assert description("wtheta", SCALARS).long_name == "upward flux of potential temperature"
    assert description("uw_total", SCALARS).long_name == "resolved plus subgrid upward flux of x velocity"
    assert description("u", SCALARS).cell_methods == "time: point area: mean"
    assert description("theta_max", SCALARS).cell_methods == "time: point area: maximum"
    with pytest.raises(KeyError):
        description("banana", SCALARS)


def test_every_variable_is_described() -> None:
    names = ("u", "v", "w", "theta", "salinity", "tracer_dye", "nu_sgs", "tke_sgs")
    arrays = random_arrays(np.random.default_rng(0), (4, 8, 8), names=names)
    fields = dataset(arrays, staggered=True, vertical=True, prandtl_number=1.0)
    profiles = profile_statistics(fields, ProfilesSettings())
    assert len(profiles.data_vars) > 80
    for name, variable in profiles.variables.items():
        assert variable.attrs["units"], name
        assert variable.attrs["long_name"], name
        if name in profiles.data_vars:
            assert variable.attrs["cell_methods"].startswith("time: point"), name
            cf_units.Unit(variable.attrs["units"])
    assert profiles["uw_total_face"].attrs["comment"].startswith("empty on the lowest and highest face")
