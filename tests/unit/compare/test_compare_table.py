"""The comparison table: its columns, its pairing of depths and windows, what it refuses, what it says where it cannot tell."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import xarray as xr

from lespost.compare.latex import escape, to_latex, unit_text, with_error, write_latex
from lespost.compare.pairing import cut_record, duration, match_windows, pair_depths
from lespost.compare.settings import ComparisonSettings
from lespost.compare.table import COLUMNS, compare
from lespost.compare.uncertainty import Side
from lespost.compare.verdicts import judge
from lespost.errors import DataError, RequestError
from lespost.records.processing import process
from lespost.records.settings import ProcessingSettings
from lespost.series import make_series
from tests.unit.compare.toy_series import autoregressive, toy

PLAIN = ProcessingSettings(despike="none", detrend="mean")


@dataclass(frozen=True)
class Window:
    name: str
    start: float
    end: float


def settings(**more: object) -> ComparisonSettings:
    return ComparisonSettings(**{"processing": PLAIN, "bootstrap_count": 100, **more})  # type: ignore[arg-type]


def run(
    model: xr.Dataset, record: xr.Dataset, windows: list[Window] | None = None, **more: object
) -> pd.DataFrame:
    return compare({"profiler": model}, {"mooring": record}, settings(**more), windows or [], np.random.default_rng(0))


def full(rng: np.random.Generator, name: str, deployments: int, times: int = 1200, depths: int = 2) -> xr.Dataset:
    values = {n: 0.1 * autoregressive(rng, 0.8, deployments, times, depths) for n in ("u", "v", "w", "error_velocity")}
    values["u"] = values["u"] + 0.3
    return make_series(values, np.arange(times) * 1.0, 5.0 + np.arange(depths), instrument=name)


def test_columns_and_rows_are_those_of_the_contract() -> None:
    rng = np.random.default_rng(1)
    table = run(full(rng, "p", 25), full(rng, "m", 1))
    # the contract of the results folder, comparison.csv
    assert list(table.columns) == (
        "instrument, record, quantity, units, depth, window, record_value, record_se, record_neff, model_value, model_se, "
        "model_neff, difference, difference_low, difference_high, ratio, ratio_low, ratio_high, p_value, p_adjusted, verdict, "
        "note"
    ).split(", ")
    assert list(table.columns) == list(COLUMNS)
    assert len(table) == len(ComparisonSettings().quantities) * 2
    assert set(table["verdict"]) <= {"agrees", "differs", "cannot tell"}
    assert table["note"].str.contains(r"record above \d+ of 25 deployments").all()
    assert (table["p_adjusted"] >= table["p_value"]).all()


def test_values_are_those_of_the_definitions() -> None:
    rng = np.random.default_rng(2)
    record = full(rng, "m", 1)
    names = ("u_mean", "speed", "uu", "uw", "tke", "error_velocity_variance")
    table = run(full(rng, "p", 25), record, quantities=names)
    u, v, w, e = (record[n].values[0] for n in ("u", "v", "w", "error_velocity"))
    expected = {
        "u_mean": u.mean(axis=0),
        "speed": np.hypot(u, v).mean(axis=0),
        "uu": u.var(axis=0),
        "uw": ((u - u.mean(axis=0)) * (w - w.mean(axis=0))).mean(axis=0),
        "tke": 0.5 * (u.var(axis=0) + v.var(axis=0) + w.var(axis=0)),
        "error_velocity_variance": e.var(axis=0),
    }
    for name, values in expected.items():
        rows = table[table["quantity"] == name]
        np.testing.assert_allclose(rows["record_value"], values, rtol=1e-10, err_msg=name)
        np.testing.assert_allclose(rows["difference"], rows["record_value"] - rows["model_value"])
        if name in ("u_mean", "uw"):
            assert rows["ratio"].isna().all()
        else:
            np.testing.assert_allclose(rows["ratio"], rows["record_value"] / rows["model_value"])


def test_ratios_do_not_depend_on_the_unit_of_velocity() -> None:
    rng = np.random.default_rng(3)
    model, record = full(rng, "p", 25), full(rng, "m", 1)
    one = run(model, record, quantities=("uu", "speed"))
    scaled = [s.copy() for s in (model, record)]
    for s in scaled:
        for n in ("u", "v", "w", "error_velocity"):
            s[n] = 100.0 * s[n]
    other = run(*scaled, quantities=("uu", "speed"))
    for column in ("ratio", "ratio_low", "ratio_high", "p_value", "record_neff"):
        np.testing.assert_allclose(one[column], other[column], rtol=1e-6)
    assert list(one["verdict"]) == list(other["verdict"])


def test_same_seed_same_table() -> None:
    rng = np.random.default_rng(4)
    model, record = full(rng, "p", 5), full(rng, "m", 1)
    pd.testing.assert_frame_equal(run(model, record), run(model, record))


def test_a_window_of_the_run_is_cut_from_the_samples() -> None:
    rng = np.random.default_rng(5)
    model, record = toy(rng, "p", 0.5, 4, 3000, 1), toy(rng, "m", 0.5, 1, 1000, 1)
    windows = [Window("early", 0.0, 1000.0), Window("late", 2000.0, 3000.0), Window("beyond", 9000.0, 9999.0)]
    table = run(model, record, windows, quantities=("uu",))
    assert list(table["window"]) == ["early", "late"]
    for name, part in (("early", slice(0, 1000)), ("late", slice(2000, 3000))):
        u = model["u"].values[:, part, 0]
        expected = (u - u.mean(axis=1, keepdims=True)).var(axis=1).mean()
        assert table.set_index("window").loc[name, "model_value"] == pytest.approx(expected, rel=1e-10)
    with pytest.raises(DataError, match="no window holds"):
        run(model, record, [Window("beyond", 9000.0, 9999.0)])


def test_windows_of_unequal_length_are_refused_with_both_lengths() -> None:
    rng = np.random.default_rng(6)
    model, record = toy(rng, "p", 0.5, 4, 500, 1), toy(rng, "m", 0.5, 1, 1700, 1)
    with pytest.raises(DataError, match=r"lasts 1700 s.*window 500 s.*allow_windows"):
        run(model, record)
    allowed = run(model, record, allow_windows=True, quantities=("uu",))
    assert "windows differ: record 1700 s, model 500 s" in allowed["note"].iloc[0]
    cut = run(model, record, cut_record=True, quantities=("uu",))
    assert "record cut into pieces of 500 s" in cut["note"].iloc[0]
    pieces = record["u"].values[0, :1500, 0].reshape(3, 500)
    assert cut["record_value"].iloc[0] == pytest.approx(pieces.var(axis=1).mean(), rel=1e-10)


def test_cutting_keeps_every_sample_in_order() -> None:
    record = toy(np.random.default_rng(0), "m", 0.5, 1, 1050, 2)
    pieces = cut_record(record, 500.0)
    assert dict(pieces.sizes) == {"deployment": 2, "time": 500, "depth": 2}
    np.testing.assert_array_equal(pieces["u"].values.reshape(1000, 2), record["u"].values[0, :1000])
    assert duration(pieces) == 500.0
    with pytest.raises(DataError, match="single time"):
        match_windows(record.isel(time=[0]), record, settings(), "here")


def test_chains_must_be_equal_unless_allowed() -> None:
    rng = np.random.default_rng(7)
    model, record = toy(rng, "p", 0.5, 3, 600, 1), toy(rng, "m", 0.5, 1, 600, 1)
    done = process(record, PLAIN)[["u"]]
    with pytest.raises(DataError, match="processed differently"):
        run(model, done)
    assert len(run(model, done, allow_unequal_chains=True, quantities=("uu",))) == 1


def test_the_coarser_sampling_is_taken_and_said() -> None:
    rng = np.random.default_rng(8)
    u = autoregressive(rng, 0.98, 6, 6000, 1)
    model = make_series({"u": u[1:]}, np.arange(6000) * 1.0, [5.0], instrument="p")
    coarse = u[:1].reshape(1, 600, 10, 1).mean(axis=2)
    record = make_series({"u": coarse}, np.arange(600) * 10.0, [5.0], instrument="m", averaging_interval=10.0)
    table = run(model, record, quantities=("uu",))
    assert "both averaged over 10 s" in table["note"].iloc[0]
    averaged = u[1:].reshape(5, 600, 10, 1).mean(axis=2)
    assert table["model_value"].iloc[0] == pytest.approx(averaged.var(axis=1).mean(), rel=1e-9)


def test_point_samples_against_means_give_no_verdict_on_variances() -> None:
    rng = np.random.default_rng(9)
    u = autoregressive(rng, 0.999, 6, 60000, 1)
    snapshots = make_series({"u": u[1:, ::60]}, np.arange(1000) * 60.0, [5.0], instrument="p", averaging_interval=0.0)
    record = make_series({"u": u[:1]}, np.arange(60000) * 1.0, [5.0], instrument="m", averaging_interval=1.0)
    table = run(snapshots, record, quantities=("uu", "u_mean")).set_index("quantity")
    assert table.loc["uu", "verdict"] == "cannot tell"
    assert "point samples every 60 s" in table.loc["uu", "note"]
    assert "point samples" not in table.loc["u_mean", "note"]


def test_noise_in_the_record_is_no_difference_of_turbulence() -> None:
    rng = np.random.default_rng(10)
    smooth = autoregressive(rng, 0.97, 31, 3000, 1)
    noisy = smooth[:1] + rng.standard_normal((1, 3000, 1))
    model = make_series({"u": smooth[1:]}, np.arange(3000) * 1.0, [5.0], instrument="p")
    record = make_series({"u": noisy}, np.arange(3000) * 1.0, [5.0], instrument="m", noise_standard_deviation=1.0)
    row = run(model, record, quantities=("uu",)).iloc[0]
    assert row["verdict"] == "cannot tell"
    assert "noise floor" in row["note"]
    # with the noise variance taken off both sides the truth, equality, is not denied
    model.attrs["noise_standard_deviation"] = 0.0
    chain = PLAIN.model_copy(update={"noise_variance": "stated"})
    row = run(model, record, quantities=("uu",), processing=chain).iloc[0]
    assert row["record_value"] == pytest.approx(1.0, abs=3.0 * row["record_se"] + 0.05)
    assert row["verdict"] != "differs"


def test_a_large_subgrid_share_forbids_a_difference() -> None:
    rng = np.random.default_rng(11)
    model, record = toy(rng, "p", 0.5, 25, 2000, 2), toy(rng, "m", 0.5, 1, 2000, 2, 2.0)
    model["subgrid_share"] = ("depth", [0.1, 0.6])
    table = run(model, record, quantities=("uu",))
    assert list(table["verdict"]) == ["differs", "cannot tell"]
    assert "subgrid share: 60 %" in table["note"].iloc[1]


def test_too_few_independent_samples_give_no_verdict() -> None:
    rng = np.random.default_rng(12)
    table = run(toy(rng, "p", 0.99, 3, 400, 1), toy(rng, "m", 0.99, 1, 400, 1, 5.0), quantities=("u_mean",))
    assert table["verdict"].iloc[0] == "cannot tell"
    assert "independent samples" in table["note"].iloc[0]


def test_gaps_do_not_shift_a_value() -> None:
    rng = np.random.default_rng(13)
    model, record = toy(rng, "p", 0.5, 3, 3000, 1), toy(rng, "m", 0.5, 1, 3000, 1)
    holed = record.copy(deep=True)
    holed["u"][0, 500:800] = np.nan
    table = run(model, holed, quantities=("u_mean",))
    assert table["record_value"].iloc[0] == pytest.approx(np.nanmean(holed["u"].values), rel=1e-12)
    assert table["record_neff"].iloc[0] < 3000


def test_a_cell_without_data_is_a_row_that_cannot_tell() -> None:
    rng = np.random.default_rng(17)
    model, record = full(rng, "p", 5), full(rng, "m", 1)
    record["u"][0, :, 1] = np.nan
    table = run(model, record, quantities=("u_mean", "uu", "uw", "ww"))
    blind = table[(table["depth"] == 6.0) & table["quantity"].isin(["u_mean", "uu", "uw"])]
    assert (blind["verdict"] == "cannot tell").all()
    assert blind[["record_value", "p_value", "p_adjusted", "ratio"]].isna().all(axis=None)
    assert (blind["record_neff"] == 0).all()
    assert np.isfinite(table.set_index(["quantity", "depth"]).loc[("ww", 6.0), "record_value"])
    model["u"][:, :, 0] = np.nan
    seen = run(model, record, quantities=("u_mean", "uu", "uw"))
    assert (seen["verdict"] == "cannot tell").all()


def test_no_records_make_an_empty_table() -> None:
    table = compare({}, {}, settings(), [], np.random.default_rng(0))
    assert list(table.columns) == list(COLUMNS)
    assert table.empty


def test_nothing_in_common_is_an_error_naming_both_sides() -> None:
    model = make_series({"w": np.zeros((1, 50, 1))}, np.arange(50.0), [5.0], instrument="p")
    record = make_series({"u": np.ones((1, 50, 1))}, np.arange(50.0), [5.0], instrument="m")
    with pytest.raises(DataError, match="the record holds u, the instrument w"):
        run(model, record)


def test_pairs_by_name() -> None:
    rng = np.random.default_rng(14)
    samples = {n: toy(rng, n, 0.5, 3, 200, 1) for n in ("a", "b")}
    records = {n: toy(rng, n, 0.5, 1, 200, 1) for n in ("r", "s")}
    table = compare(samples, records, settings(quantities=("uu",), pairs={"r": ("b",)}), [], rng)
    assert table[["record", "instrument"]].to_numpy().tolist() == [["r", "b"]]
    assert len(compare(samples, records, settings(quantities=("uu",)), [], rng)) == 4
    with pytest.raises(RequestError, match='no instrument is called "c"'):
        compare(samples, records, settings(pairs={"r": ("c",)}), [], rng)
    with pytest.raises(RequestError, match='no record is called "x"'):
        compare(samples, records, settings(pairs={"x": ("a",)}), [], rng)


def test_depth_pairing() -> None:
    record, model = np.array([4.9, 8.0, 30.0]), np.array([3.0, 5.0, 7.0, 9.0])
    near = pair_depths(record, model, settings(depth_tolerance=1.2), "here")
    assert near.depth.tolist() == [4.9, 8.0]
    assert near.model.argmax(axis=1).tolist() == [1, 2]
    assert near.distance == pytest.approx([0.1, 1.0])
    mixed = pair_depths(record, model, settings(depth_pairing="interpolate", depth_tolerance=1.2), "here")
    np.testing.assert_allclose(mixed.model @ model, [4.9, 8.0])  # linear weights reproduce depth itself
    np.testing.assert_allclose(mixed.model.sum(axis=1), 1.0)
    chosen = pair_depths(record, model, settings(depths=(8.2,), depth_tolerance=1.2), "here")
    assert chosen.depth.tolist() == [8.0]
    with pytest.raises(RequestError, match="has no cell of the record"):
        pair_depths(record, model, settings(depths=(15.0,), depth_tolerance=1.0), "here")
    with pytest.raises(DataError, match="no cell of the record"):
        pair_depths(np.array([50.0]), model, settings(), "here")


def test_interpolated_statistics_keep_their_variance() -> None:
    """Interpolating series halfway between independent cells would halve the variance; interpolating statistics must not."""
    rng = np.random.default_rng(15)
    model = toy(rng, "p", 0.5, 25, 2000, 2)
    record = make_series({"u": autoregressive(rng, 0.5, 1, 2000, 1)}, np.arange(2000.0), [1.5], instrument="m")
    row = run(model, record, quantities=("uu",), depth_pairing="interpolate").iloc[0]
    assert row["model_value"] == pytest.approx(1.0, abs=0.03)


@pytest.mark.parametrize("ratio", [0.5, 0.9, 1.0, 1.1, 2.0])
def test_judgement_in_the_limit_of_exact_values(ratio: float) -> None:
    exact = judge("positive", Side(ratio, 1e-6, 1e6, 1e6), Side(1.0, 1e-6, 1e6, 1e6), 0.2, 0.95)
    assert exact.equivalent == (0.8 < ratio < 1.2)
    assert exact.ratio == pytest.approx(ratio)
    assert exact.p_value == pytest.approx(1.0 if ratio == 1.0 else 0.0, abs=1e-6)


def test_judgement_against_the_textbook_interval() -> None:
    # normal limit: difference 1, errors 0.3 and 0.4, so error 0.5, 95 % interval 1 -+ 1.96 x 0.5, p = 2 (1 - Phi(2)) = 0.0455
    out = judge("mean", Side(3.0, 0.3, 1e9, 1e9), Side(2.0, 0.4, 1e9, 1e9), 0.2, 0.95)
    assert (out.low, out.high) == pytest.approx((1.0 - 0.98, 1.0 + 0.98), abs=1e-4)
    assert out.p_value == pytest.approx(0.0455, abs=1e-4)
    assert np.isnan(out.ratio)
    # five degrees of freedom on both sides of equal error: ten in all, Student's t 2.228 (tables)
    wide = judge("mean", Side(1.0, 0.5, 40, 5.0), Side(0.0, 0.5, 40, 5.0), 0.2, 0.95)
    assert wide.high - wide.difference == pytest.approx(2.228 * np.hypot(0.5, 0.5), rel=1e-3)


def test_unknown_sides_have_no_p_value() -> None:
    out = judge("positive", Side(np.nan, 0.1, 10, 2), Side(1.0, 0.1, 10, 2), 0.2, 0.95)
    assert np.isnan(out.p_value)
    assert not out.equivalent


def test_latex(tmp_path: Path) -> None:
    assert escape("a_b & 5 %") == r"a\_b \& 5 \%"
    assert unit_text("m2 s-2") == r"$\mathrm{m}^{2}\,\mathrm{s}^{-2}$"
    assert with_error(0.31234, 0.0123) == r"$0.312 \pm 0.012$"
    assert with_error(1.2345e-4, 5.6e-6) == r"$(1.234 \pm 0.056) \times 10^{-4}$"
    assert with_error(float("nan"), 1.0) == ""
    rng = np.random.default_rng(16)
    table = run(full(rng, "p", 5), full(rng, "m", 1), quantities=("uu", "u_mean"))
    text = write_latex(table, tmp_path / "comparison.tex").read_text()
    assert text == to_latex(table)
    assert text.count(r"\\") == len(table) + 1
    assert "nan" not in text
    body = [line for line in text.splitlines() if line.endswith(r"\\")]
    assert {line.count("&") for line in body} == {8}
