"""The comparison table: one row per record, instrument, window, quantity and depth, with intervals and a
verdict.

`pairing.py` says what is held against what, `lespost.records.processing` treats both sides alike,
`metrics.py` forms the quantities, `uncertainty.py` their errors, `verdicts.py` the judgement. This module
walks through the pairs and fills the rows.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Protocol

import numpy as np
import pandas as pd
import xarray as xr

from lespost.compare.metrics import (
    METRICS,
    Metric,
    contributions,
    is_second_moment,
    missing_variables,
    noise_estimate,
)
from lespost.compare.pairing import DepthPairs, chains_of, duration, in_window, match_windows, pair_depths
from lespost.compare.settings import ComparisonSettings
from lespost.compare.uncertainty import Side, estimate, finite_mean, not_below_ensemble, paired
from lespost.compare.verdicts import Circumstances, Outcome, judge, verdict
from lespost.errors import DataError, RequestError
from lespost.records.processing import PROCESSED, process
from lespost.records.settings import ProcessingSettings
from lespost.statistics.multiple import benjamini_hochberg

COLUMNS = (
    "instrument", "record", "quantity", "units", "depth", "window", "record_value", "record_se", "record_neff",
    "model_value", "model_se", "model_neff", "difference", "difference_low", "difference_high", "ratio", "ratio_low",
    "ratio_high", "p_value", "p_adjusted", "verdict", "note",
)  # fmt: skip


class WindowLike(Protocol):
    """What a window must have: a name, and start and end in seconds of the run."""

    @property
    def name(self) -> str: ...
    @property
    def start(self) -> float: ...
    @property
    def end(self) -> float: ...


@dataclass(frozen=True)
class _Row:
    """A row before the correction for many tests."""

    cells: dict[str, Any]
    outcome: Outcome
    around: Circumstances
    remarks: tuple[str, ...]


def compare(
    samples: Mapping[str, xr.Dataset],
    records: Mapping[str, xr.Dataset],
    settings: ComparisonSettings,
    windows: Sequence[WindowLike],
    rng: np.random.Generator,
) -> pd.DataFrame:
    """The comparison table with the columns `COLUMNS`.

    samples: raw series of the virtual instruments by name; records: raw series of the records by name; both
    as made by `lespost.series.make_series` (before the chain: the chain is applied here, to both
    sides). windows: of the run; empty: the whole sample is one window called "all". rng drives the bootstrap
    only. Values are in SI; NaN where a number cannot be known.

    Raises RequestError where a pair names something absent, DataError where windows, chains or depths cannot
    be paired.
    """
    rows: list[_Row] = []
    for record_name, record in records.items():
        for instrument in _partners(record_name, samples, records, settings):
            sample = samples[instrument]
            where = f'record "{record_name}" against "{instrument}"'
            _check_chains(record, sample, settings, where)
            for window_name, model in _windows_of(sample, windows, where):
                rows += _pair_rows(record_name, record, instrument, model, window_name, settings, rng, where)
    return _finish(rows, settings)


def _partners(
    record: str,
    samples: Mapping[str, xr.Dataset],
    records: Mapping[str, xr.Dataset],
    settings: ComparisonSettings,
) -> tuple[str, ...]:
    """Names of the instruments to hold against a record."""
    for name, partners in settings.pairs.items():
        if name not in records:
            raise RequestError(
                f'[comparison].pairs: no record is called "{name}"; there are {", ".join(records) or "none"}.'
            )
        for partner in partners:
            if partner not in samples:
                raise RequestError(
                    f'[comparison].pairs: no instrument is called "{partner}"; there are '
                    f"{', '.join(samples) or 'none'}."
                )
    return settings.pairs.get(record, () if settings.pairs else tuple(samples))


def _check_chains(record: xr.Dataset, sample: xr.Dataset, settings: ComparisonSettings, where: str) -> None:
    one, two = chains_of((record, sample))
    if one != two and not settings.allow_unequal_chains:
        raise DataError(
            f"{where}: the two series were already processed differently (record {one}, samples {two}); give "
            "both unprocessed, or "
            "write [comparison].allow_unequal_chains = true."
        )


def _windows_of(
    sample: xr.Dataset, windows: Sequence[WindowLike], where: str
) -> list[tuple[str, xr.Dataset]]:
    """The samples inside each window that holds at least two of their times."""
    if not windows:
        return [("all", sample)]
    out = []
    for window in windows:
        part = in_window(sample, window.start, window.end)
        if part.sizes["time"] >= 2:
            out.append((window.name, part))
    if not out:
        raise DataError(
            f"{where}: no window holds two sampling times of the instrument; check [windows] and its "
            "interval."
        )
    return out


def _common_chain(
    record: xr.Dataset, model: xr.Dataset, settings: ComparisonSettings
) -> tuple[ProcessingSettings, str, str]:
    """(the chain for both sides, a remark, why second moments cannot be compared or an empty text).

    Without an averaging_interval of the recipe the coarser sampling of the two is used. Where the coarser
    side holds point samples, averaging the finer one would take out variance that the other keeps: second
    moments are then not comparable.
    """
    chain = settings.processing
    steps = [float(np.median(np.diff(np.asarray(s["time"])))) for s in (record, model)]
    coarser = int(np.argmax(steps))
    if max(steps) - min(steps) <= 0.01 * max(steps):
        return chain, "", ""
    unlike = ""
    width = chain.averaging_interval or steps[coarser]
    stated = float((record, model)[coarser].attrs.get("averaging_interval", np.nan))
    if np.isfinite(stated) and stated < 0.5 * width and steps[coarser] > 0.5 * width:
        side = ("record", "model")[coarser]
        unlike = f"the {side} holds point samples every {steps[coarser]:g} s, the other side means over {width:g} s"
    if chain.averaging_interval is not None:
        return chain, "", unlike
    common = chain.model_copy(update={"averaging_interval": steps[coarser]})
    return common, f"both averaged over {steps[coarser]:g} s", unlike


def _pair_rows(
    record_name: str,
    record: xr.Dataset,
    instrument: str,
    model: xr.Dataset,
    window: str,
    settings: ComparisonSettings,
    rng: np.random.Generator,
    where: str,
) -> list[_Row]:
    """All rows of one record, instrument and window."""
    record, window_remark = match_windows(record, model, settings, f"{where}, window {window}")
    chain, chain_remark, unlike = _common_chain(record, model, settings)
    pairs = pair_depths(
        np.asarray(record["depth"], dtype=float), np.asarray(model["depth"], dtype=float), settings, where
    )
    recorded, simulated = process(record, chain), process(model, chain)
    remarks = tuple(r for r in (window_remark, chain_remark) if r)
    rows = []
    for name in settings.quantities:
        metric = METRICS[name]
        if missing_variables(metric, recorded) or missing_variables(metric, simulated):
            continue
        one = paired(
            estimate(contributions(metric, recorded), settings.bootstrap_count, rng),
            _selection(pairs, recorded),
        )
        two = paired(estimate(contributions(metric, simulated), settings.bootstrap_count, rng), pairs.model)
        noise = [
            _share(noise_estimate(metric, recorded)[pairs.record], one.value),
            _share(pairs.model @ np.nan_to_num(noise_estimate(metric, simulated), nan=0.0), two.value),
        ]
        subgrid = _subgrid_share(metric, model, pairs)
        margins = _margins(metric, simulated, pairs, settings)
        for i, depth in enumerate(pairs.depth):
            model_side = Side.of(two, i)
            record_side = not_below_ensemble(
                Side.of(one, i),
                two.by_deployment[:, i],
                metric.kind == "positive",
                record.sizes["deployment"],
            )
            outcome = judge(metric.kind, record_side, model_side, margins[i], settings.confidence)
            around = Circumstances(
                record_samples=record_side.effective_samples,
                model_samples=model_side.effective_samples,
                record_noise_share=float(noise[0][i]),
                model_noise_share=float(noise[1][i]),
                subgrid_share=float(subgrid[i]),
                unlike_sampling=unlike if is_second_moment(metric) else "",
                record_length=duration(record) * record.sizes["deployment"],
            )
            cells = {
                "instrument": instrument,
                "record": record_name,
                "quantity": name,
                "units": metric.units,
                "depth": float(depth),
                "window": window,
                "record_value": record_side.value,
                "record_se": record_side.standard_error,
                "record_neff": record_side.effective_samples,
                "model_value": model_side.value,
                "model_se": model_side.standard_error,
                "model_neff": model_side.effective_samples,
                "difference": outcome.difference,
                "difference_low": outcome.low,
                "difference_high": outcome.high,
                "ratio": outcome.ratio,
                "ratio_low": outcome.ratio_low,
                "ratio_high": outcome.ratio_high,
                "p_value": outcome.p_value,
            }
            own = (_rank(record_side.value, two.by_deployment[:, i]), *remarks)
            rows.append(_Row(cells, outcome, around, tuple(r for r in own if r)))
    if not rows:
        held = [", ".join(sorted(n for n in PROCESSED if n in s)) or "nothing" for s in (recorded, simulated)]
        raise DataError(
            f"{where}: none of the quantities {', '.join(settings.quantities)} can be formed on both sides; "
            "the record holds "
            f"{held[0]}, the instrument {held[1]}. Choose others in [comparison].quantities."
        )
    return rows


def _selection(pairs: DepthPairs, series: xr.Dataset) -> np.ndarray:
    weights = np.zeros((pairs.record.size, series.sizes["depth"]))
    weights[np.arange(pairs.record.size), pairs.record] = 1.0
    return weights


def _share(part: np.ndarray, of: np.ndarray) -> np.ndarray:
    """part / of, NaN where it is not a share of a positive quantity."""
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.asarray(np.where(of > 0, part / of, np.nan))


def _subgrid_share(metric: Metric, model: xr.Dataset, pairs: DepthPairs) -> np.ndarray:
    """Share of the model's variance below its grid, as the instrument states it (variable subgrid_share over
    depth)."""
    nothing = np.full(pairs.depth.size, np.nan)
    if not is_second_moment(metric) or "subgrid_share" not in model:
        return nothing
    share = model["subgrid_share"]
    extra = [d for d in share.dims if d != "depth"]
    values = np.asarray(share.mean(extra) if extra else share, dtype=np.float64)
    return (
        np.asarray(pairs.model @ np.nan_to_num(values, nan=0.0))
        if values.shape == (pairs.model.shape[1],)
        else nothing
    )


def _margins(
    metric: Metric, model: xr.Dataset, pairs: DepthPairs, settings: ComparisonSettings
) -> np.ndarray:
    """Equivalence margin at each pair, in the terms of `verdicts.judge`."""
    count = pairs.depth.size
    if metric.kind == "positive":
        return np.full(count, settings.equivalence_margin)
    if metric.kind == "mean":
        temperature = metric.name == "temperature_mean"
        return np.full(count, settings.temperature_margin if temperature else settings.velocity_margin)
    deviation = [
        np.sqrt(finite_mean(model[f"{n}_fluctuation"].values ** 2, (0, 1))) if n in model else np.nan
        for n in metric.needs
    ]
    return np.asarray(settings.covariance_margin * (pairs.model @ np.nan_to_num(deviation[0] * deviation[1])))


def _rank(value: float, deployments: np.ndarray) -> str:
    """Where the record stands among single deployments of the model."""
    known = deployments[np.isfinite(deployments)]
    if known.size < 5 or not np.isfinite(value):
        return ""
    return f"record above {int((known < value).sum())} of {known.size} deployments"


def _finish(rows: Sequence[_Row], settings: ComparisonSettings) -> pd.DataFrame:
    """Adjusted p-values over all rows, verdicts, notes."""
    adjusted = benjamini_hochberg(np.array([r.outcome.p_value for r in rows], dtype=np.float64))
    finished = []
    for row, p in zip(rows, adjusted, strict=True):
        decision, reason = verdict(row.outcome, float(p), row.around, settings)
        note = "; ".join(t for t in (reason, *row.remarks) if t)
        finished.append({**row.cells, "p_adjusted": float(p), "verdict": decision, "note": note})
    return pd.DataFrame(finished, columns=list(COLUMNS))
