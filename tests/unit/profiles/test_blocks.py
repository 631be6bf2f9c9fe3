"""Blocks: what they read, how often, and what they may weigh."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr
from xarray.backends.common import BackendArray
from xarray.core import indexing

from lespost.errors import RequestError
from lespost.profiles import blocks
from lespost.profiles.blocks import SlabReader, plan_blocks, snapshot_block
from lespost.profiles.layout import layout_of, tile_counts
from lespost.profiles.one_pass import assemble, block_statistics, profile_statistics
from lespost.profiles.settings import ProfilesSettings
from tests.unit.profiles.synthetic import dataset, random_arrays


class Counting(BackendArray):
    """A lazily read array that keeps count of how often each level of each snapshot was handed out."""

    def __init__(self, values: np.ndarray) -> None:
        self.values, self.shape, self.dtype = values, values.shape, values.dtype
        self.reads = np.zeros(values.shape[:2], int)
        self.requests: list[tuple[int, int]] = []

    def __getitem__(self, key: indexing.ExplicitIndexer) -> np.ndarray:
        return indexing.explicit_indexing_adapter(key, self.shape, indexing.IndexingSupport.BASIC, self._read)

    def _read(self, key: tuple) -> np.ndarray:
        self.reads[key[0], key[1]] += 1
        if isinstance(key[1], slice):
            self.requests.append((key[1].start, key[1].stop))
        return self.values[key].copy()


def lazy(fields: xr.Dataset) -> tuple[xr.Dataset, dict[str, Counting]]:
    """The dataset with its fields behind counting arrays."""
    counters = {str(name): Counting(fields[name].values) for name in fields}
    variables = {
        name: xr.Variable(fields[name].dims, indexing.LazilyIndexedArray(counter), fields[name].attrs, fields[name].encoding)
        for name, counter in counters.items()
    }
    return fields.drop_vars(list(counters)).assign(variables), counters


@pytest.fixture
def small_blocks(monkeypatch: pytest.MonkeyPatch) -> None:
    """Blocks of one chunk each, as for large fields."""
    monkeypatch.setattr(blocks, "GOOD_BLOCK_BYTES", 1)


@pytest.mark.parametrize("vertical", [True, False])
@pytest.mark.parametrize("chunk", [1, 4, 5, 16])
def test_each_level_is_read_once_in_whole_chunks(vertical: bool, chunk: int, small_blocks: None) -> None:
    names = ("u", "v", "w", "theta", "nu_sgs", "tke_sgs")
    arrays = random_arrays(np.random.default_rng(0), (16, 8, 8), 2, vertical=vertical, names=names)
    whole = dataset(arrays, staggered=False, vertical=vertical, chunk=chunk)
    fields, counters = lazy(whole)
    profiles = profile_statistics(fields, ProfilesSettings())
    for name, counter in counters.items():
        assert (counter.reads == 1).all(), name
        assert all(start % chunk == 0 and (stop % chunk == 0 or stop == counter.shape[1]) for start, stop in counter.requests
                   if stop > start), (name, counter.requests)  # fmt: skip
    if chunk < 16:
        assert len(plan_blocks(fields, ProfilesSettings(), 10**9)) > 2
    assert profiles.identical(profile_statistics(whole, ProfilesSettings()))


def test_slabs_may_be_read_in_any_order() -> None:
    """As after a resume: the reader that was not asked for the slab below reads the halo by itself."""
    fields = dataset(random_arrays(np.random.default_rng(1), (12, 8, 8)), staggered=False, vertical=True, chunk=4)
    layout, settings = layout_of(fields), ProfilesSettings()
    reader = SlabReader(fields, layout, 0)
    spans = [(7, 12), (0, 3), (3, 7)]
    results = [block_statistics(snapshot_block(fields, 0, a, b, settings, layout, reader)) for a, b in spans]
    assert assemble(fields, results, settings).identical(profile_statistics(fields, settings))


def test_levels_of_a_block_across_its_pieces() -> None:
    fields = dataset(random_arrays(np.random.default_rng(2), (8, 4, 4)), staggered=False, vertical=True, chunk=4)
    layout, settings = layout_of(fields), ProfilesSettings()
    reader = SlabReader(fields, layout, 0)
    snapshot_block(fields, 0, 0, 3, settings, layout, reader)
    block = snapshot_block(fields, 0, 3, 8, settings, layout, reader)
    assert len(block.arrays["u"][0]) > 0  # levels kept from the slab below
    np.testing.assert_array_equal(block.levels("u", 3, 8), fields["u"].values[0, 3:8])
    np.testing.assert_array_equal(block.levels("w", 4, 9), fields["w"].values[0, 4:9])
    with pytest.raises(IndexError):
        block.levels("u", 0, 2)


def test_whole_snapshots_where_they_are_small() -> None:
    fields = dataset(random_arrays(np.random.default_rng(2), (8, 4, 4), 3), staggered=False, vertical=True)
    plans = plan_blocks(fields, ProfilesSettings(), 10**6)
    assert [(plan.time_index, plan.z0, plan.z1) for plan in plans] == [(0, 0, 8), (1, 0, 8), (2, 0, 8)]
    assert plans[0].bytes == 4 * 4 * 4 * (3 * 8 + 9)  # u, v, theta and w on faces, float32
    assert len({plan.key for plan in plans}) == 3


def test_plans_obey_the_budget_and_cover_every_level_once() -> None:
    fields = dataset(random_arrays(np.random.default_rng(3), (40, 16, 16), 2), staggered=True, vertical=True, chunk=4)
    budget = 150_000
    plans = plan_blocks(fields, ProfilesSettings(), budget)
    assert all(plan.memory <= budget / 2 for plan in plans)  # one is read while another is computed
    for t in (0, 1):
        covered = [k for plan in plans if plan.time_index == t for k in range(plan.z0, plan.z1)]
        assert covered == list(range(40))
    assert sum(plan.bytes for plan in plans) == sum(int(fields[name].nbytes) for name in ("u", "v", "w", "theta"))


def test_a_budget_below_one_chunk_says_what_is_needed() -> None:
    fields = dataset(random_arrays(np.random.default_rng(3), (40, 16, 16)), staggered=True, vertical=True, chunk=20)
    with pytest.raises(RequestError, match=r"one block of 20 levels needs 0\.2\d+ MB and may take 0.05 MB"):
        plan_blocks(fields, ProfilesSettings(), 50_000)


@pytest.mark.parametrize(
    ("points", "wanted", "tiles"),
    [(80, 4, 4), (96, 5, 6), (90, 4, 5), (97, 4, 1), (6, 4, 3), (18, 4, 3), (256, 1, 1), (64, 3, 4)],
)
def test_tiles_divide_the_grid(points: int, wanted: int, tiles: int) -> None:
    fields = dataset(random_arrays(np.random.default_rng(3), (2, points, 4)), staggered=False, vertical=True)
    assert tile_counts(layout_of(fields), wanted)[0] == tiles


def test_missing_and_repeated_blocks_are_refused() -> None:
    from lespost.errors import DataError

    fields = dataset(random_arrays(np.random.default_rng(4), (4, 4, 4)), staggered=False, vertical=True)
    settings = ProfilesSettings()
    low, high = (block_statistics(snapshot_block(fields, 0, a, b, settings)) for a, b in ((0, 2), (2, 4)))
    with pytest.raises(DataError, match=r"level 3 was computed 0 times"):
        assemble(fields, [low], settings)
    with pytest.raises(DataError, match=r"level 3 was computed 2 times"):
        assemble(fields, [low, high, high], settings)
