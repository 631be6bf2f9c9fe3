"""Standard error and effective sample size of time means: integral scale, block bootstrap, spread over
deployments.

A record is one deployment; its uncertainty comes from its own integral scale. A virtual instrument has many
deployments in the same water: their mean series carries the dependence between them, so the error of the
model's mean comes from that series, and never less than what the spread over deployments says.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from lespost.statistics.bootstrap import bootstrap_standard_error
from lespost.statistics.samples import effective_samples, finite_mean

#: Below this many times the time axis says nothing about the error of its mean.
FEWEST_TIMES = 8

#: So many virtual deployments give the spread of a single one to about 15 % (1/sqrt(2 n)).
FEWEST_DEPLOYMENTS = 20

#: Independent samples per degree of freedom of their standard error. The integral scale is itself estimated,
#: so the error is far less certain than that of as many truly independent values; measured here on AR(1)
#: series (means 6 to 10, variances 10 to 13). With 8 the intervals of two single series cover the truth in 95
#: to 96 % of trials.
SAMPLES_PER_FREEDOM = 8.0


@dataclass(frozen=True)
class Estimate:
    """A quantity at each of its depths.

    value, standard_error, effective_samples: (depth,). by_deployment: (deployment, depth) values of single
    deployments. effective_samples is the number of independent samples whose mean would have the standard
    error.
    """

    value: np.ndarray
    standard_error: np.ndarray
    effective_samples: np.ndarray
    by_deployment: np.ndarray


def estimate(values: np.ndarray, bootstrap_count: int, rng: np.random.Generator) -> Estimate:
    """The mean over deployments and time of contributions (deployment, time, depth), with its error.

    The error of the time mean is the larger of the integral-scale and the block-bootstrap estimates (the
    bootstrap of a short series is too small, the integral scale can miss slow motions); with several
    deployments it is not below their standard deviation over the square root of their number.
    """
    deployments, times, _ = values.shape
    by_deployment = finite_mean(values, 1)
    value = finite_mean(values, (0, 1))
    variance = finite_mean((values - value) ** 2, (0, 1))
    error = np.full(value.shape, np.nan)
    if times >= FEWEST_TIMES:
        series = finite_mean(values, 0)
        number = effective_samples(series)
        scatter = finite_mean((series - finite_mean(series, 0)) ** 2, 0)
        with np.errstate(invalid="ignore", divide="ignore"):
            # n_eff - 1 as the sample variance of n_eff independent values is formed about their own mean
            by_scale = np.sqrt(scatter / np.maximum(number - 1.0, 1e-9))
        error = np.fmax(by_scale, bootstrap_standard_error(series, bootstrap_count, rng))
    if deployments > 1:
        known = np.isfinite(by_deployment)
        some = np.maximum(known.sum(axis=0), 1)
        centred = np.where(known, by_deployment - finite_mean(by_deployment, 0), 0.0)
        with np.errstate(invalid="ignore", divide="ignore"):
            across = np.sqrt((centred**2).sum(axis=0) / (some - 1.0) / some)
        error = np.fmax(error, across)
    with np.errstate(invalid="ignore", divide="ignore"):
        effective = np.where(error > 0, variance / error**2, np.isfinite(values).sum(axis=(0, 1)))
    samples = np.isfinite(values).sum(axis=(0, 1)).astype(np.float64)
    effective = np.where(np.isfinite(error), np.clip(effective, 0.0, samples), 0.0)
    return Estimate(value, error, effective, by_deployment)


@dataclass(frozen=True)
class Side:
    """One side of a comparison at one depth. freedom: degrees of freedom of the standard error itself."""

    value: float
    standard_error: float
    effective_samples: float
    freedom: float

    @classmethod
    def of(cls, e: Estimate, i: int) -> Side:
        """The estimate at depth index i."""
        samples = float(e.effective_samples[i])
        return cls(
            float(e.value[i]), float(e.standard_error[i]), samples, max(samples / SAMPLES_PER_FREEDOM, 1.0)
        )


def not_below_ensemble(record: Side, deployments: np.ndarray, relative: bool, pieces: int) -> Side:
    """The record with its error raised to the spread of single virtual deployments, where that is larger.

    deployments: values of the model's single deployments. A record is one deployment (or `pieces` of them),
    so their standard deviation is its sampling error under the model; it is steadier than what one short
    record says of itself. relative: the spread is carried over in proportion (variances, speeds). Needs
    `FEWEST_DEPLOYMENTS`; deployments in shared water vary less than free ones, so the record's own error is
    never lowered.
    """
    known = deployments[np.isfinite(deployments)]
    if known.size < FEWEST_DEPLOYMENTS or not (
        np.isfinite(record.standard_error) and record.standard_error > 0
    ):
        return record
    spread = float(known.std(ddof=1)) / np.sqrt(pieces)
    if relative:
        centre = float(known.mean())
        spread = spread / centre * record.value if centre > 0 and record.value > 0 else 0.0
    freedom = max(record.freedom, known.size - 1.0)
    error = max(record.standard_error, spread)
    samples = record.effective_samples * (record.standard_error / error) ** 2
    return Side(record.value, error, samples, freedom)


def paired(estimate_: Estimate, weights: np.ndarray) -> Estimate:
    """The estimate at depths that are weighted means of its own: weights (pair, depth). Errors of
    neighbouring depths are taken as fully dependent, which never makes them too small."""

    def mix(values: np.ndarray) -> np.ndarray:
        used = weights > 0
        out = np.where(used, weights * np.where(np.isfinite(values), values, 0.0)[..., None, :], 0.0).sum(
            axis=-1
        )
        lost = (used & ~np.isfinite(values)[..., None, :]).any(axis=-1)
        return np.asarray(np.where(lost, np.nan, out))

    return Estimate(
        mix(estimate_.value),
        mix(estimate_.standard_error),
        mix(estimate_.effective_samples),
        mix(estimate_.by_deployment),
    )
