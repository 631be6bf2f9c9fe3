"""What the one pass must keep for every field: no choice of computing, no change of axes or units, changes the physics."""

from __future__ import annotations

import functools
import itertools

import numpy as np
import xarray as xr
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from lespost.engine.journal import Journal
from lespost.engine.run import run_tasks
from lespost.engine.settings import ComputeSettings
from lespost.engine.tasks import Task
from lespost.profiles.blocks import snapshot_block
from lespost.profiles.one_pass import assemble, block_statistics, profile_statistics
from lespost.profiles.settings import ProfilesSettings
from tests.unit.profiles.synthetic import dataset, random_arrays

SETTINGS = ProfilesSettings(prandtl_number=0.5)
few = settings(max_examples=15, deadline=None, suppress_health_check=[HealthCheck.too_slow])

grids = st.tuples(st.integers(2, 9), st.sampled_from([4, 6, 8, 12, 15]), st.sampled_from([4, 6, 8, 12, 20]))
seeds = st.integers(0, 2**32 - 1)
arrangements = st.sampled_from([(False, False), (False, True), (True, True)])
Grid = tuple[int, int, int]
Arrangement = tuple[bool, bool]
NAMES = ("u", "v", "w", "theta", "nu_sgs", "tke_sgs")


def fields_of(seed: int, grid: Grid, arrangement: Arrangement, times: int = 1, **options: object) -> xr.Dataset:
    staggered, vertical = arrangement
    arrays = random_arrays(np.random.default_rng(seed), grid, times, vertical=vertical, names=NAMES)
    return dataset(arrays, staggered=staggered, vertical=vertical, **options)  # type: ignore[arg-type]


def changed(fields: xr.Dataset, **arrays: np.ndarray) -> xr.Dataset:
    """`fields` with some variables' values replaced."""
    return fields.assign({name: fields[name].copy(data=values) for name, values in arrays.items()})


def assert_same(
    a: xr.Dataset, b: xr.Dataset, name: str, other: str = "", factor: float = 1.0, tolerance: float = 1e-12
) -> None:
    """a[name] = factor * b[other], to `tolerance` of the largest value."""
    left, right = a[name].values, factor * b[other or name].values
    scale = max(np.nanmax(np.abs(left)), np.nanmax(np.abs(right)))
    np.testing.assert_allclose(left, right, rtol=0, atol=tolerance * scale, err_msg=name)


@few
@given(seeds, grids, arrangements, st.data())
def test_cutting_into_slabs_changes_no_bit(seed: int, grid: Grid, arrangement: Arrangement, data: st.DataObject) -> None:
    fields = fields_of(seed, grid, arrangement, times=2)
    nz = grid[0]
    inner = data.draw(st.sets(st.integers(1, nz - 1), max_size=4)) if nz > 1 else set()
    edges = [0, *sorted(inner), nz]
    results = [
        block_statistics(snapshot_block(fields, t, z0, z1, SETTINGS))
        for t in (1, 0) for z0, z1 in itertools.pairwise(edges)
    ]  # fmt: skip
    assert assemble(fields, results, SETTINGS).identical(profile_statistics(fields, SETTINGS))


@few
@given(seeds, st.integers(1, 5), st.integers(1, 4), st.integers(1, 3))
def test_threads_and_readers_change_no_bit(tmp_path_factory: object, seed: int, times: int, threads: int, readers: int) -> None:
    fields = fields_of(seed, (6, 8, 8), (True, True), times=times)
    path = tmp_path_factory.mktemp("run") / "journal"  # type: ignore[attr-defined]
    tasks = [
        Task(
            f"{t}-{z0}", f"{t}", functools.partial(snapshot_block, fields, t, z0, z0 + 2, SETTINGS), block_statistics,
            memory=1, bytes=1, group=str(t),
        )
        for t in range(times) for z0 in (0, 2, 4)
    ]  # fmt: skip
    with Journal(path, {}) as journal:
        run_tasks(tasks, journal, ComputeSettings(threads=threads, readers=readers, progress="none"))
        profiles = assemble(fields, (journal.get(task.key) for task in tasks), SETTINGS)
    assert profiles.identical(profile_statistics(fields, SETTINGS))


@few
@given(seeds, grids, arrangements, st.sampled_from([-64.0, 32.0, 256.0]))
def test_adding_a_constant_changes_means_only(seed: int, grid: Grid, arrangement: Arrangement, constant: float) -> None:
    """float64 numbers on a coarse binary grid, so that adding the constant is exact: only the arithmetic is tested."""
    fields = fields_of(seed, grid, arrangement)
    coarse = {name: np.round(fields[name].values.astype(np.float64) * 2**20) / 2**20 for name in ("u", "theta")}
    before = profile_statistics(changed(fields, **coarse), SETTINGS)
    after = profile_statistics(changed(fields, **{name: values + constant for name, values in coarse.items()}), SETTINGS)
    for name in before:
        if str(name).endswith(("_min", "_max")) or name in ("u", "theta"):
            continue
        assert_same(after, before, str(name))
    np.testing.assert_allclose(after["theta"], before["theta"] + constant, rtol=1e-14)


@few
@given(seeds, grids, arrangements, st.integers(-6, 6))
def test_scaling_velocity_scales_moments_by_its_power(
    seed: int, grid: Grid, arrangement: Arrangement, exponent: int
) -> None:
    factor = 2.0**exponent
    fields = fields_of(seed, grid, arrangement)
    scaled = changed(fields, **{name: (fields[name].values * factor).astype("float32") for name in ("u", "v", "w")})
    before, after = profile_statistics(fields, SETTINGS), profile_statistics(scaled, SETTINGS)
    for name, power in (("uu", 2), ("uw", 2), ("www", 3), ("uuuu", 4), ("wtheta", 1), ("wwtheta", 2), ("thetathetaw", 1),
                        ("uw_tile", 2), ("divergence_rms", 1), ("dwdx_dwdy", 2), ("w_grid_scale_share", 0)):  # fmt: skip
        np.testing.assert_array_equal(after[name], before[name] * factor**power, err_msg=name)


def _mirrored(values: np.ndarray, axis: int, on_face: bool) -> np.ndarray:
    """Reversed along a periodic axis; low-side faces are moved by one so that they stay low-side faces."""
    out = np.flip(values, axis)
    return np.roll(out, 1, axis) if on_face else out


@few
@given(seeds, grids, arrangements)
def test_mirror_symmetry(seed: int, grid: Grid, arrangement: Arrangement) -> None:
    """y -> -y, v -> -v: moments odd in v change sign, all others stay."""
    fields = fields_of(seed, grid, arrangement)
    mirror = {
        name: _mirrored(fields[name].values, 2, "y_face" in fields[name].dims) * (-1 if name == "v" else 1) for name in NAMES
    }
    before, after = profile_statistics(fields, SETTINGS), profile_statistics(changed(fields, **mirror), SETTINGS)
    odd = {"v", "uv", "vw", "vtheta", "vvv", "vw_sgs", "vw_total", "dwdx_dwdy", "vw_face", "vw_sgs_face", "vw_total_face"}
    for name in before:
        if str(name).endswith(("_tile", "_min", "_max")):
            continue
        assert_same(after, before, str(name), factor=-1.0 if name in odd else 1.0, tolerance=1e-11)


@few
@given(seeds, grids, arrangements)
def test_turning_the_axes_by_ninety_degrees(seed: int, grid: Grid, arrangement: Arrangement) -> None:
    """New x along old y, new y along old -x: u' = v, v' = -u; the tensor turns with them."""
    fields = fields_of(seed, grid, arrangement)
    turned = {}
    for name in NAMES:
        source = {"u": "v", "v": "u"}.get(name, name)
        values = fields[source].values.swapaxes(2, 3)  # old x becomes the y axis, still pointing the old way
        values = _mirrored(values, 2, "x_face" in fields[source].dims)
        turned[name] = -values if name == "v" else values
    after = profile_statistics(
        dataset(turned, staggered=arrangement[0], vertical=arrangement[1], lengths=(80.0, 100.0, 50.0)), SETTINGS
    )
    before = profile_statistics(fields, SETTINGS)
    pairs = {"uu": ("vv", 1), "vv": ("uu", 1), "ww": ("ww", 1), "uv": ("uv", -1), "uw": ("vw", 1), "vw": ("uw", -1),
             "utheta": ("vtheta", 1), "vtheta": ("utheta", -1), "uuu": ("vvv", 1), "vvv": ("uuu", -1), "uuw": ("vvw", 1),
             "dwdx_dwdx": ("dwdy_dwdy", 1), "dwdx_dwdy": ("dwdx_dwdy", -1), "uw_sgs": ("vw_sgs", 1), "vw_sgs": ("uw_sgs", -1),
             "divergence_rms": ("divergence_rms", 1), "w_grid_scale_share": ("w_grid_scale_share", 1)}  # fmt: skip
    if arrangement[0]:
        pairs |= {"uu_native": ("vv_native", 1)}
    for name, (other, sign) in pairs.items():
        assert_same(after, before, name, other, sign, tolerance=1e-11)


@few
@given(seeds, grids, arrangements, st.integers(1, 8))
def test_tile_means_average_to_the_level_moment(seed: int, grid: Grid, arrangement: Arrangement, tiles: int) -> None:
    profiles = profile_statistics(fields_of(seed, grid, arrangement), ProfilesSettings(tiles=tiles))
    if tiles == 1:
        assert not [name for name in profiles if str(name).endswith("_tile")]
        return
    assert grid[1] % profiles.sizes["tile_y"] == 0
    assert grid[2] % profiles.sizes["tile_x"] == 0
    for name in ("uu", "vv", "ww", "uv", "uw", "vw", "thetatheta", "wtheta"):
        mean = profiles[f"{name}_tile"].mean(("tile_y", "tile_x"))
        scale = np.abs(profiles[f"{name}_tile"].values).max()
        np.testing.assert_allclose(mean, profiles[name], rtol=0, atol=1e-13 * scale)


@few
@given(seeds, grids, arrangements)
def test_second_moments_are_realisable(seed: int, grid: Grid, arrangement: Arrangement) -> None:
    """Variances are not negative, and no covariance exceeds the product of its root mean squares."""
    profiles = profile_statistics(fields_of(seed, grid, arrangement), SETTINGS)
    for a, b in ("uv", "uw", "vw"):
        bound = np.sqrt(profiles[a + a].values * profiles[b + b].values)
        assert (np.abs(profiles[a + b].values) <= bound * (1 + 1e-12)).all()
    for name in ("u", "v", "w"):
        assert (profiles[name * 4].values >= profiles[name * 2].values ** 2 * (1 - 1e-12)).all()  # kurtosis is at least 1
