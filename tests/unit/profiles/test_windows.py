"""Window means and their errors: by hand, and by simulation of what a few correlated snapshots can tell."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr

from lespost.errors import DataError
from lespost.profiles.settings import WindowsSettings
from lespost.profiles.windows import Window, average_windows, resolve_windows
from lespost.statistics.bootstrap import design_effect, resample_snapshots_and_tiles
from lespost.statistics.multiple import benjamini_hochberg


def profiles_of(tiles: np.ndarray) -> xr.Dataset:
    """A dataset with uu and uu_tile from tiles (time, z, ty, tx)."""
    z = -np.arange(tiles.shape[1])[::-1] - 0.5
    return xr.Dataset(
        {"uu_tile": (("time", "z", "tile_y", "tile_x"), tiles), "uu": (("time", "z"), tiles.mean((-2, -1)), {"units": "m2 s-2"}),
         "ww_face": (("time", "z_face"), np.ones((tiles.shape[0], tiles.shape[1] + 1)))},
        coords={"time": 600.0 * np.arange(tiles.shape[0]), "z": z, "z_face": np.append(z - 0.5, 0.0)},
    )


def test_means_and_errors_by_hand() -> None:
    """Three snapshots without tiles scatter: mean 2, standard deviation 1; correlation of three values counts as none."""
    tiles = np.array([1.0, 3.0, 2.0])[:, None, None, None] * np.ones((1, 4, 4, 4))
    result = average_windows(profiles_of(tiles), [Window("all", 0.0, 1200.0)])
    np.testing.assert_allclose(result["uu"].values, 2.0)
    assert (result["uu_se"].values >= 1.0 / np.sqrt(3.0) - 1e-12).all()
    assert result["uu_se"].attrs["units"] == "m2 s-2"
    assert int(result["snapshots"][0]) == 3


def test_a_single_snapshot_knows_its_spatial_scatter_only() -> None:
    tiles = np.random.default_rng(0).normal(1.0, 0.4, (1, 6, 4, 4))
    result = average_windows(profiles_of(tiles), [Window("one", 0.0, 0.0)])
    expected = tiles[0].reshape(6, 16).std(axis=1, ddof=1) / 4.0
    assert (result["uu_se"].values[0] >= expected - 1e-12).all()
    assert (result["uu_se"].values[0] <= 2.0 * expected + 1e-12).all()
    assert np.isnan(result["ww_face_se"].values).all()  # nothing tells the error of a face value of one snapshot
    assert "one realisation" in result.attrs["standard_error"]


def test_more_snapshots_never_mean_more_samples_than_there_are() -> None:
    tiles = np.random.default_rng(1).normal(1.0, 0.4, (8, 6, 4, 4))
    result = average_windows(profiles_of(tiles), [Window("all", 0.0, 1e9)])
    assert (result["uu_neff"].values <= 8 * 16).all()
    assert (result["uu_neff"].values >= 1).all()


@pytest.mark.parametrize("memory", [0.0, 0.7])
def test_intervals_cover_the_truth(memory: float) -> None:
    """Six snapshots x 16 tiles, AR(1) in time: 95 % intervals cover the truth in 88 to 99.5 % of 300 runs.

    Six snapshots cannot do better: the error itself is known to about a third.
    """
    rng = np.random.default_rng(2)
    trials, snapshots = 300, 6
    tiles = np.empty((snapshots, trials, 4, 4))
    tiles[0] = rng.standard_normal((trials, 4, 4))
    for step in range(1, snapshots):
        tiles[step] = memory * tiles[step - 1] + np.sqrt(1 - memory**2) * rng.standard_normal((trials, 4, 4))
    result = average_windows(profiles_of(5.0 + tiles), [Window("all", 0.0, 1e9)])
    covered = np.abs(result["uu"].values[0] - 5.0) <= 1.96 * result["uu_se"].values[0]
    assert 0.88 <= covered.mean() <= 0.995


def test_streaks_across_tiles_count_once() -> None:
    """Rows of equal tiles: sixteen tiles are four samples, and the design effect says four."""
    rows = np.repeat(np.random.default_rng(3).standard_normal((4, 1)), 4, axis=1)
    assert design_effect(rows) == pytest.approx(4.0, rel=0.01)
    many = [design_effect(np.random.default_rng(seed).standard_normal((4, 4))) for seed in range(200)]
    assert np.median(many) < 2.0


def test_replicates_have_the_scatter_of_the_mean() -> None:
    """Independent tiles and snapshots: replicates scatter as the mean does (within the factor that few samples allow)."""
    rng = np.random.default_rng(4)
    values = rng.normal(1.0, 0.5, (6, 4, 4, 1))
    draws = resample_snapshots_and_tiles(values, 4000, rng)
    assert draws.mean() == pytest.approx(values.mean(), abs=0.02)
    true_error = 0.5 / np.sqrt(6 * 16)
    assert 0.7 * true_error < draws.std() < 3.0 * true_error


def test_windows_of_the_settings() -> None:
    time = np.arange(0.0, 7200.0, 600.0)
    windows = resolve_windows(WindowsSettings(spin_up=1200.0, length=3000.0), time)
    assert [window.members(time).size for window in windows] == [5, 5]
    assert windows[0].start == 1200.0


def test_a_window_without_snapshots_is_refused() -> None:
    time = np.arange(0.0, 3600.0, 600.0)
    with pytest.raises(DataError, match="spin-up"):
        resolve_windows(WindowsSettings(spin_up=1e6), time)
    settings = WindowsSettings.model_validate({"intervals": [{"name": "night", "start": 1e5, "end": 2e5}]})
    with pytest.raises(DataError, match="night"):
        resolve_windows(settings, time)


def test_adjusted_p_values_by_hand() -> None:
    """Benjamini & Hochberg (1995): p(i) m / i, made monotone from the largest; empty ones do not count."""
    adjusted = benjamini_hochberg(np.array([0.01, 0.04, 0.03, np.nan]))
    np.testing.assert_allclose(adjusted[:3], [0.03, 0.04, 0.04])
    assert np.isnan(adjusted[3])
