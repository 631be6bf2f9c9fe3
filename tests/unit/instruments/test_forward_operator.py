"""The forward operator against flows it must reproduce exactly, and against general-purpose interpolators."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
import xarray as xr
from scipy.interpolate import RegularGridInterpolator
from scipy.ndimage import map_coordinates

from lespost.instruments.doppler_profiler import DopplerProfiler
from lespost.instruments.operator import PolynomialSampler, Streak, Volumes, make_sampler
from lespost.instruments.settings import InstrumentSettings
from tests.unit.instruments.water import constant, still, water

EVERY = ("linear", "cubic", "quintic", "spectral")


def profiler(**changes: object) -> InstrumentSettings:
    asked = {"name": "p", "depth": 30.0, "cell_length": 2.0, "blank": 2.0, "noise": 0.0, "quantisation": 0.0, "deployments": 5}
    return InstrumentSettings.model_validate(asked | changes)


def points(x: np.ndarray, y: np.ndarray, z: np.ndarray, component: int) -> Volumes:
    """One volume for each point, projected onto one component."""
    return Volumes(x, y, z, np.ones(x.size), np.arange(x.size), np.tile(np.eye(3)[component], (x.size, 1)))


def rough(staggered: bool = False, seed: int = 1, size: tuple[int, int, int] = (12, 10, 8)) -> xr.Dataset:
    """White noise at every grid point: the hardest field to interpolate."""
    rng = np.random.default_rng(seed)
    fields = water(size=size, lengths=(24.0, 15.0), depth=8.0, staggered=staggered)
    for name in ("u", "v", "w"):
        fields[name] = fields[name].copy(data=rng.normal(size=fields[name].shape))
    return fields


@pytest.mark.parametrize("interpolation", EVERY)
@pytest.mark.parametrize("staggered", [False, True])
def test_uniform_flow_and_linear_shear_are_exact(interpolation: str, staggered: bool) -> None:
    fields = water(lambda x, y, z, t: 0.3 + 0.01 * z + 0.0 * x + 0.0 * y, constant(-0.2), constant(0.05), staggered=staggered)
    instrument = DopplerProfiler.place(profiler(beam_width=2.0, heading=33.0, interpolation=interpolation), fields)
    sampler = make_sampler(fields, instrument.volumes, interpolation)  # type: ignore[arg-type]
    rng = np.random.default_rng(0)
    beams = sampler.velocities(sampler.read(0), rng.random(5) * 80.0, rng.random(5) * 80.0, Streak(11.0, -4.0, 7))
    series = instrument.series(beams[:, None], np.zeros(1))
    np.testing.assert_allclose(series["u"].values[:, 0], np.broadcast_to(0.3 - 0.01 * series["depth"].values, (5, series.sizes["depth"])),
                               atol=1e-12)
    np.testing.assert_allclose(series["v"], -0.2, atol=1e-12)
    np.testing.assert_allclose(series["w"], 0.05, atol=1e-12)
    np.testing.assert_allclose(series["error_velocity"], 0.0, atol=1e-12)


@pytest.mark.parametrize("interpolation", EVERY)
@pytest.mark.parametrize("staggered", [False, True])
@pytest.mark.parametrize("component", [0, 1, 2])
def test_grid_points_come_back_as_they_are(interpolation: str, staggered: bool, component: int) -> None:
    """Each component at its own, staggered, points."""
    fields = rough(staggered)
    name = "uvw"[component]
    variable = fields[name]
    heights, ys, xs = (fields[d].values for d in variable.dims[1:])
    grid = np.stack(np.meshgrid(heights, ys, xs, indexing="ij"), axis=-1).reshape(-1, 3)
    sampler = make_sampler(fields, points(grid[:, 2], grid[:, 1], grid[:, 0], component), interpolation)  # type: ignore[arg-type]
    got = sampler.velocities(sampler.read(0), np.zeros(1), np.zeros(1), Streak())[0]
    np.testing.assert_allclose(got, variable.values.ravel(), atol=1e-12)


def random_places(count: int = 200) -> np.ndarray:
    """Places (x, y, z), far outside the domain in the horizontal as well, within the centres in the vertical."""
    rng = np.random.default_rng(7)
    return np.column_stack([rng.uniform(-100, 100, count), rng.uniform(-70, 70, count), rng.uniform(-7.5, -0.5, count)])


def test_linear_interpolation_equals_general_interpolators() -> None:
    fields, at = rough(), random_places()
    sampler = make_sampler(fields, points(*at.T, 0), "linear")
    got = sampler.velocities(sampler.read(0), np.zeros(1), np.zeros(1), Streak())[0]
    u = fields["u"].values[0]
    wrapped = np.pad(u, ((0, 0), (1, 1), (1, 1)), mode="wrap")
    axes = (fields["z"].values, 1.5 * (np.arange(12) - 0.5), 2.0 * (np.arange(14) - 0.5))
    general = RegularGridInterpolator(axes, wrapped)(np.column_stack([at[:, 2], at[:, 1] % 15.0, at[:, 0] % 24.0]))
    np.testing.assert_allclose(got, general, atol=1e-12)
    index = np.array([(at[:, 2] + 7.5), at[:, 1] / 1.5 - 0.5, at[:, 0] / 2.0 - 0.5])
    np.testing.assert_allclose(got, map_coordinates(u, index, order=1, mode="grid-wrap"), atol=1e-12)


@pytest.mark.parametrize(("interpolation", "tolerance"), [("cubic", 0.03), ("quintic", 0.006), ("spectral", 0.003)])
def test_higher_orders_agree_with_periodic_splines(interpolation: str, tolerance: float) -> None:
    """A quintic spline is another way to the same smooth field: eight cells a wavelength, within the orders' known errors."""
    fields = water(lambda x, y, z, t: np.sin(2 * np.pi * (x / 16.0 + y / 12.0)) * (1 + 0.1 * z), size=(16, 16, 8),
                   lengths=(32.0, 24.0), depth=8.0)
    at = random_places()
    sampler = make_sampler(fields, points(*at.T, 0), interpolation)  # type: ignore[arg-type]
    got = sampler.velocities(sampler.read(0), np.zeros(1), np.zeros(1), Streak())[0]
    levels = [map_coordinates(level, np.array([at[:, 1] / 1.5 - 0.5, at[:, 0] / 2.0 - 0.5]), order=5, mode="grid-wrap")
              for level in fields["u"].values[0]]
    spline = map_coordinates(np.array(levels), np.array([at[:, 2] + 7.5, np.arange(at.shape[0])]), order=1)
    np.testing.assert_allclose(got, spline, atol=tolerance)
    truth = np.sin(2 * np.pi * (at[:, 0] / 16.0 + at[:, 1] / 12.0)) * (1 + 0.1 * at[:, 2])
    if interpolation == "spectral":
        np.testing.assert_allclose(got, truth, atol=1e-12)


@pytest.mark.parametrize("interpolation", EVERY)
@pytest.mark.parametrize("size", [(12, 10, 8), (13, 9, 8)])
def test_translation_and_periodicity(interpolation: str, size: tuple[int, int, int]) -> None:
    """Moving the water by whole cells, or the platform by a period, changes nothing."""
    fields = rough(size=size)
    at = random_places(30)
    sampler = make_sampler(fields, points(*at.T, 1), interpolation)  # type: ignore[arg-type]
    here = sampler.velocities(sampler.read(0), np.array([3.3]), np.array([-2.0]), Streak())
    there = sampler.velocities(sampler.read(0), np.array([3.3 - 24.0]), np.array([-2.0 + 30.0]), Streak())
    np.testing.assert_allclose(there, here, atol=1e-11)
    moved = fields.copy()
    moved["v"] = fields["v"].roll(x=2, y=3, roll_coords=False)
    other = make_sampler(moved, sampler.volumes, interpolation)  # type: ignore[arg-type]
    again = other.velocities(other.read(0), np.array([3.3 + 2 * 24.0 / size[0]]), np.array([-2.0 + 3 * 15.0 / size[1]]), Streak())
    np.testing.assert_allclose(again, here, atol=1e-11)


@pytest.mark.parametrize("interpolation", EVERY)
def test_a_volume_is_the_weighted_mean_of_its_points(interpolation: str) -> None:
    fields = rough(staggered=True)
    rng = np.random.default_rng(3)
    at, weights = random_places(12), rng.dirichlet(np.ones(12))
    directions = rng.normal(size=(1, 3))
    whole = make_sampler(fields, Volumes(*at.T, weights, np.zeros(12, np.int64), directions), interpolation)  # type: ignore[arg-type]
    platforms = rng.random((4, 2)) * 30
    got = whole.velocities(whole.read(0), *platforms.T, Streak())[:, 0]
    expected = np.zeros(4)
    for component in range(3):
        single = make_sampler(fields, points(*at.T, component), interpolation)  # type: ignore[arg-type]
        expected += directions[0, component] * single.velocities(single.read(0), *platforms.T, Streak()) @ weights
    np.testing.assert_allclose(got, expected, atol=1e-12)


@pytest.mark.parametrize(("interpolation", "tolerance"), [("quintic", 1e-4), ("spectral", 1e-12)])
def test_a_streak_is_the_mean_of_its_pings(interpolation: str, tolerance: float) -> None:
    fields = water(lambda x, y, z, t: np.cos(2 * np.pi * x / 40.0 + 1.0) + 0.0 * y + 0.0 * z, size=(64, 4, 8), lengths=(80.0, 8.0))
    sampler = make_sampler(fields, points(np.zeros(1), np.zeros(1), np.full(1, -10.0), 0), interpolation)  # type: ignore[arg-type]
    streak = Streak(30.0, 0.0, 40)
    got = sampler.velocities(sampler.read(0), np.array([5.0]), np.array([0.0]), streak)[0, 0]
    pings = 5.0 + 30.0 * ((np.arange(40) + 0.5) / 40 - 0.5)
    assert got == pytest.approx(np.cos(2 * np.pi * pings / 40.0 + 1.0).mean(), abs=tolerance)


class Counting:
    """A dataset-like wrapper that notes which slices are read."""

    def __init__(self, fields: xr.Dataset) -> None:
        self._fields, self.asked = fields, []  # type: ignore[var-annotated]

    def __getitem__(self, name: str) -> Any:
        variable, asked = self._fields[name], self.asked
        if "time" not in variable.dims or name == "time":
            return variable

        class Watched:
            dims = variable.dims

            def __getitem__(self, key: tuple[Any, ...]) -> xr.DataArray:
                asked.append((name, key))
                return variable[key]

        return Watched()

    def __getattr__(self, name: str) -> Any:
        return getattr(self._fields, name)


def test_only_the_levels_in_reach_are_read_and_one_snapshot_at_a_time() -> None:
    fields = water(still, times=(0.0, 100.0))
    instrument = DopplerProfiler.place(profiler(depth=20.0, cells=3), fields)
    watched = Counting(fields)
    sampler = PolynomialSampler(watched, instrument.volumes)  # type: ignore[arg-type]
    assert watched.asked == []
    sampler.read(1)
    top, bottom = instrument.volumes.z.max(), instrument.volumes.z.min()
    assert [name for name, _ in watched.asked] == ["u", "v", "w"]
    for name, (snapshot, levels) in watched.asked:
        heights = fields["z_face" if name == "w" else "z"].values[levels]
        assert snapshot == 1
        assert heights[0] <= bottom < heights[1]
        assert heights[-2] < top <= heights[-1]


@pytest.mark.parametrize("dtype", [np.float32, np.float64])
def test_single_precision_fields_give_double_precision_results(dtype: type) -> None:
    fields = water(lambda x, y, z, t: np.cos(2 * np.pi * x / 40.0) + 0.0 * y + 0.0 * z, dtype=dtype)
    instrument = DopplerProfiler.place(profiler(), fields)
    sampler = make_sampler(fields, instrument.volumes, "cubic")
    got = sampler.velocities(sampler.read(0), np.array([3.0]), np.array([4.0]), Streak())
    assert got.dtype == np.float64
    exact = make_sampler(fields.astype(np.float64), instrument.volumes, "cubic")
    np.testing.assert_allclose(got, exact.velocities(exact.read(0), np.array([3.0]), np.array([4.0]), Streak()), atol=1e-12)


def test_every_platform_of_the_grid_gives_the_plane_mean() -> None:
    """Beams from all grid points: their mean is the mean of the level, their second moments those of the tensor."""
    rng = np.random.default_rng(6)
    a, b = rng.normal(size=(2, 1, 16, 16))
    fields = water(size=(16, 16, 8), lengths=(80.0, 80.0), depth=31.0)
    u = a - a.mean()
    w = -0.4 * u + 0.5 * (b - b.mean())
    fields["u"] = fields["u"].copy(data=np.broadcast_to(u + 0.1, (1, 8, 16, 16)))
    fields["w"] = fields["w"].copy(data=np.broadcast_to(w, (1, 9, 16, 16)))
    instrument = DopplerProfiler.place(profiler(depth=30.0, cell_length=1e-3, blank=15.0, cells=1, side_lobes=False), fields)
    x, y = (c.ravel() for c in np.meshgrid(np.arange(16) * 5.0 + 0.7, np.arange(16) * 5.0))
    # modes of the shortest wave are left out: between grid points their variance is not defined
    for name in ("u", "w"):
        modes = np.fft.fft2(fields[name].values)
        modes[..., 8, :] = 0.0
        modes[..., :, 8] = 0.0
        fields[name] = fields[name].copy(data=np.fft.ifft2(modes).real)
    sampler = make_sampler(fields, instrument.volumes, "spectral")
    beams = sampler.velocities(sampler.read(0), x, y, Streak())
    sine, cosine = np.sin(np.radians(20.0)), np.cos(np.radians(20.0))
    np.testing.assert_allclose(beams.mean(axis=0), [0.1 * sine, -0.1 * sine, 0.0, 0.0], atol=1e-6)
    kept_u, kept_w = fields["u"].values[0, 0] - 0.1, fields["w"].values[0, 0]
    uu, uw, ww = (kept_u**2).mean(), (kept_u * kept_w).mean(), (kept_w**2).mean()
    variances = beams.var(axis=0)
    assert variances[0] == pytest.approx(sine**2 * uu + cosine**2 * ww + 2 * sine * cosine * uw, rel=1e-5)
    assert (variances[0] - variances[1]) / (4 * sine * cosine) == pytest.approx(uw, rel=1e-5)


@pytest.mark.parametrize("interpolation", EVERY)
def test_turning_the_water_and_the_instrument_together_turns_the_velocity(interpolation: str) -> None:
    """A quarter turn counter-clockwise about the centre of the domain: (x, y) -> (L - y, x), (u, v) -> (-v, u)."""
    fields = rough(size=(12, 12, 8)).assign_attrs(Lx=24.0, Ly=24.0).assign_coords(x=2.0 * np.arange(12) + 1.0, y=2.0 * np.arange(12) + 1.0)
    turned = fields.copy()
    quarter = {name: np.rot90(fields[name].values, -1, axes=(2, 3)) for name in ("u", "v", "w")}  # rows count y upwards
    turned["u"], turned["v"] = fields["u"].copy(data=-quarter["v"]), fields["v"].copy(data=quarter["u"])
    turned["w"] = fields["w"].copy(data=quarter["w"])
    asked = profiler(depth=7.0, blank=0.5, cell_length=0.5, interpolation=interpolation, side_lobes=False)
    one, two = DopplerProfiler.place(asked, fields), DopplerProfiler.place(asked.model_copy(update={"heading": 90.0}), turned)
    first = make_sampler(fields, one.volumes, interpolation)  # type: ignore[arg-type]
    second = make_sampler(turned, two.volumes, interpolation)  # type: ignore[arg-type]
    x, y = np.array([3.0, 17.3]), np.array([5.5, 0.2])
    here = one.series(first.velocities(first.read(0), x, y, Streak())[:, None], np.zeros(1))
    there = two.series(second.velocities(second.read(0), 24.0 - y, x, Streak())[:, None], np.zeros(1))
    np.testing.assert_allclose(there["u"], -here["v"], atol=1e-11)
    np.testing.assert_allclose(there["v"], here["u"], atol=1e-11)
    np.testing.assert_allclose(there["w"], here["w"], atol=1e-11)
    np.testing.assert_allclose(there["error_velocity"], here["error_velocity"], atol=1e-11)
