"""Which laws the rows can tell apart: collinear predictors, information criteria, Vuong's test, and how often each law wins.

Every statistic counts effective rows, not rows: hours of one storm repeat each other. How long a record would have to be is in
`planner`.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy.stats import norm

from lespost.scaling.fit import LawFit, draw_rows
from lespost.scaling.table import ScaleTable

#: Condition number of the standardised log predictors above which a regression on all of them is ill posed (Belsley, Kuh &
#: Welsch 1980, from memory).
ILL_CONDITIONED = 30.0


@dataclass(frozen=True)
class Collinearity:
    """Correlations (column, column) of the logarithms of the forcing, their condition number, and variance inflation factors."""

    names: tuple[str, ...]
    correlation: np.ndarray
    condition: float
    inflation: tuple[float, ...]


@dataclass(frozen=True)
class Standing:
    """One law among its rivals. aic, bic: with the effective number of rows, relative to the best. weight: Akaike weight.

    chosen: share of bootstrap samples of the rows in which the law, fitted anew, has the lowest AIC.
    """

    name: str
    parameters: int
    residual: float
    log_likelihood: float
    aic: float
    bic: float
    weight: float
    chosen: float


@dataclass(frozen=True)
class Pair:
    """Vuong's (1989) z of the first law against the second, positive for the first; p for two sides; separated: p < 1 - level.

    same: the residuals of the two are the same to a thousandth, so that no record could tell them apart in these rows.
    """

    first: str
    second: str
    z: float
    p_value: float
    neff: float
    separated: bool
    same: bool


@dataclass(frozen=True)
class Discrimination:
    """Standings in order of AIC, all pairs, and the laws that are not separated from the best."""

    collinearity: Collinearity
    standings: tuple[Standing, ...]
    pairs: tuple[Pair, ...]
    neff: float
    inseparable: tuple[str, ...]


def collinearity(table: ScaleTable, names: Sequence[str]) -> Collinearity:
    """Of the logarithms of columns `names` (at least one) over the rows."""
    logs = np.stack([np.log(table.columns[name]) for name in names])
    varying = np.ptp(logs, axis=1) > 1e-9
    kept = tuple(name for name, keep in zip(names, varying, strict=True) if keep)
    if len(kept) < 2:
        return Collinearity(kept, np.ones((len(kept), len(kept))), 1.0, (1.0,) * len(kept))
    correlation = np.corrcoef(logs[varying])
    singular = np.linalg.svd(correlation, compute_uv=False)
    condition = float(np.sqrt(singular[0] / max(singular[-1], 1e-15)))
    inflation = tuple(float(v) for v in np.diag(np.linalg.pinv(correlation, rcond=1e-14)))
    return Collinearity(kept, correlation, condition, inflation)


def discriminate(fits: Sequence[LawFit], table: ScaleTable, count: int, level: float, rng: np.random.Generator) -> Discrimination:
    """How `fits` (to the same rows) compare; one law stands alone.

    The misfit of a law holds the errors of its predictor: of two equally true laws, the one whose predictor is measured better fits
    better. Only the scatter of the rows tells laws apart here, not what is known of those errors.
    """
    residuals = np.stack([fit.residual for fit in fits])
    free = np.array([1 if fit.fixed else 2 for fit in fits]) + 1
    # the scatter about the best line is the natural one; about a wrong line the misfit itself drifts with the forcing
    neff = min(fits, key=lambda fit: float((fit.residual**2).mean())).neff
    likelihood = -0.5 * neff * (np.log(2 * np.pi * (residuals**2).mean(1)) + 1)
    aic, bic = 2 * free - 2 * likelihood, np.log(neff) * free - 2 * likelihood
    weight = np.exp(-0.5 * (aic - aic.min()))
    chosen = _selection(fits, residuals, free, neff, table, count, rng)
    standings = [
        Standing(fit.law.name, int(free[i]), float(np.std(fit.residual)), float(likelihood[i]), float(aic[i] - aic.min()),
                 float(bic[i] - bic.min()), float(weight[i] / weight.sum()), float(chosen[i])) for i, fit in enumerate(fits)
    ]
    pairs = tuple(_vuong(fits[i], fits[j], level) for i in range(len(fits)) for j in range(i + 1, len(fits)))
    best = fits[int(np.argmin(aic))].law.name
    rivals = {pair.second if pair.first == best else pair.first for pair in pairs
              if best in (pair.first, pair.second) and not pair.separated}
    order = sorted(standings, key=lambda item: item.aic)
    names = tuple(dict.fromkeys(name for fit in fits for name in fit.law.needs))
    return Discrimination(collinearity(table, names), tuple(order), pairs, neff,
                          tuple(item.name for item in order if item.name == best or item.name in rivals))


def _selection(fits: Sequence[LawFit], residuals: np.ndarray, free: np.ndarray, neff: float, table: ScaleTable, count: int,
               rng: np.random.Generator) -> np.ndarray:
    """Share of resampled row sets in which each law has the lowest AIC, its constant and fitted exponent found anew in each.

    The line through a sample is the whole record's line corrected by least squares of its residuals.
    """
    rows = draw_rows(residuals.shape[1], max(fit.block for fit in fits), count, rng)
    squares = np.empty((len(fits), count))
    for i, fit in enumerate(fits):
        part = residuals[i][rows]
        part = part - part.mean(-1, keepdims=True)
        squares[i] = (part**2).mean(-1)
        if not fit.fixed:
            predictor = fit.law.log_predictor(table)[rows]
            predictor = predictor - predictor.mean(-1, keepdims=True)
            spread = np.maximum((predictor**2).mean(-1), 1e-300)
            squares[i] -= (part * predictor).mean(-1) ** 2 / spread
    criterion = neff * np.log(np.maximum(squares, 1e-300)) + 2 * free[:, None]
    return np.bincount(np.argmin(criterion, axis=0), minlength=len(residuals)) / count


def _vuong(first: LawFit, second: LawFit, level: float) -> Pair:
    """Difference of pointwise log likelihoods (normal, own variance), corrected for parameters as AIC does.

    The forcing is observed, so only the scatter about the better line is random: its effective number of rows counts.
    """
    parts = [-0.5 * (np.log(s := float((fit.residual**2).mean())) + fit.residual**2 / s) for fit in (first, second)]
    difference = parts[0] - parts[1]
    spread = float(difference.std())
    neff = min(first, second, key=lambda fit: float((fit.residual**2).mean())).neff
    scale = np.sqrt((first.residual**2).mean()) + 1e-300
    same = bool(np.sqrt(((first.residual - second.residual) ** 2).mean()) < 1e-3 * scale)
    if same or not spread > 0:
        return Pair(first.law.name, second.law.name, 0.0, 1.0, neff, False, True)
    penalty = (2 if first.fixed else 3) - (2 if second.fixed else 3)
    z = float((np.sqrt(neff) * difference.mean() - penalty / np.sqrt(neff)) / spread)
    p_value = float(2 * norm.sf(abs(z)))
    return Pair(first.law.name, second.law.name, z, p_value, neff, p_value < 1 - level, False)
