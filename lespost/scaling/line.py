"""A straight line through points with errors in both coordinates; many data sets at once along leading axes.

York et al. (2004) is the method of the package; orthogonal distance by `odrpack` is the same problem solved by another library;
the reduced major axis is the habit, given for comparison with what people publish. Laws and bootstrap are in `fit`.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy.optimize import brentq

from lespost.errors import DataError

_ITERATIONS = 200


@dataclass(frozen=True)
class Line:
    """y = intercept + slope x. Arrays have the shape of the data sets (...); `chi_squared` is the weighted sum of squares."""

    slope: Any
    slope_se: Any
    intercept: Any
    intercept_se: Any
    chi_squared: Any


def york(x: np.ndarray, y: np.ndarray, x_se: Any, y_se: Any, correlation: Any = 0.0, slope: float | None = None) -> Line:
    """Best line of York et al. (2004) through (..., n) points; standard errors are those of the stated errors alone.

    x_se, y_se: standard errors (either may be zero, not both at one point). correlation: of the errors of one point. slope: held
    fixed where given (then slope_se is 0). Raises DataError where the x do not vary or the iteration does not settle.
    """
    x, y = np.asarray(x, float), np.asarray(y, float)
    var_x, var_y = np.broadcast_to(np.asarray(x_se, float) ** 2, x.shape), np.broadcast_to(np.asarray(y_se, float) ** 2, y.shape)
    covariance = np.broadcast_to(np.asarray(correlation, float) * np.asarray(x_se, float) * np.asarray(y_se, float), x.shape)
    if slope is not None:
        weight = 1.0 / (var_y + slope**2 * var_x - 2 * slope * covariance)
        total = weight.sum(-1)
        intercept = (weight * (y - slope * x)).sum(-1) / total
        chi = (weight * (y - slope * x - intercept[..., None]) ** 2).sum(-1)
        return Line(np.full(intercept.shape, float(slope))[()], np.zeros(intercept.shape)[()], intercept, total**-0.5, chi)
    centred = x - x.mean(-1, keepdims=True)
    spread = (centred**2).sum(-1)
    if not np.all(spread > 1e-24 * np.maximum(1.0, (x**2).sum(-1))):
        raise DataError("the predictor does not vary over the rows: no slope can be fitted.")
    b = (centred * y).sum(-1) / spread
    for _ in range(_ITERATIONS):
        weight, u, v, beta = _york_parts(x, y, b, var_x, var_y, covariance)
        new = (weight * beta * v).sum(-1) / (weight * beta * u).sum(-1)
        settled = np.all(np.abs(new - b) <= 1e-13 * np.maximum(np.abs(new), 1e-6))
        b = new
        if settled:
            break
    else:
        if not np.all(np.isfinite(b)) or np.ndim(b) == 0:
            raise DataError("the fit with errors in both variables does not settle: the errors are too large for the spread of the rows.")
    weight, u, v, beta = _york_parts(x, y, b, var_x, var_y, covariance)
    total = weight.sum(-1)
    x_mean, y_mean = (weight * x).sum(-1) / total, (weight * y).sum(-1) / total
    intercept = y_mean - b * x_mean
    adjusted = x_mean[..., None] + beta
    adjusted_mean = (weight * adjusted).sum(-1) / total
    slope_variance = 1.0 / (weight * (adjusted - adjusted_mean[..., None]) ** 2).sum(-1)
    chi = (weight * (y - b[..., None] * x - intercept[..., None]) ** 2).sum(-1)
    return Line(b, slope_variance**0.5, intercept, (1 / total + adjusted_mean**2 * slope_variance) ** 0.5, chi)


def _york_parts(x: np.ndarray, y: np.ndarray, b: np.ndarray, var_x: np.ndarray, var_y: np.ndarray, covariance: np.ndarray
                ) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
    slope = np.asarray(b)[..., None]
    weight = 1.0 / (var_y + slope**2 * var_x - 2 * slope * covariance)
    total = weight.sum(-1, keepdims=True)
    u = x - (weight * x).sum(-1, keepdims=True) / total
    v = y - (weight * y).sum(-1, keepdims=True) / total
    return weight, u, v, weight * (u * var_y + slope * v * var_x - (slope * u + v) * covariance)


def natural_scatter(x: np.ndarray, y: np.ndarray, x_se: Any, y_se: Any, correlation: Any = 0.0, slope: float | None = None) -> float:
    """Standard deviation that must be added to the errors of y so that the line fits (chi squared per degree of freedom is 1).

    Errors of measurement explain only part of the scatter about a law; without the rest, York's weights would trust single rows
    too much. 0 if the stated errors suffice; all of the scatter if no errors are stated.
    """
    x_se, y_se = np.asarray(x_se, float), np.asarray(y_se, float)
    freedom = x.size - (1 if slope is not None else 2)
    # a floor far below any real scatter keeps points without stated errors defined
    floor = 1e-9

    def excess(scatter: float) -> float:
        wide = np.sqrt(y_se**2 + scatter**2 + floor**2)
        share = np.divide(correlation * y_se, wide)  # the covariance of errors stays what it was
        return float(np.log(max(float(york(x, y, x_se, wide, share, slope).chi_squared), 1e-300) / freedom))

    top = float(np.std(y - (slope or 0.0) * x)) * 3 + 1e-6
    try:
        if excess(0.0) <= 0:
            return 0.0
    except DataError:
        pass  # no line with the stated errors alone: scatter is needed
    if excess(top) > 0:
        return top
    return float(brentq(excess, 1e-7, top, xtol=1e-8)) if excess(1e-7) > 0 else 0.0


def orthogonal_distance(x: np.ndarray, y: np.ndarray, x_se: np.ndarray, y_se: np.ndarray, slope: float | None = None) -> Line:
    """The same line by orthogonal distance regression (odrpack), for uncorrelated errors; standard errors as York's (not rescaled).

    x_se must be positive. Raises DataError if it does not converge.
    """
    from odrpack import odr_fit

    start = york(x, y, x_se, y_se, 0.0, slope)
    guess = np.array([float(start.intercept), float(start.slope)])
    result = odr_fit(
        lambda values, beta: beta[0] + beta[1] * values, np.ascontiguousarray(x, float), np.ascontiguousarray(y, float), guess,
        weight_x=1 / np.asarray(x_se, float) ** 2, weight_y=1 / np.asarray(y_se, float) ** 2,
        fix_beta=None if slope is None else np.array([False, True]),
        jac_beta=lambda values, beta: np.stack([np.ones_like(values), values]), jac_x=lambda values, beta: np.full_like(values, beta[1]),
        maxit=500, sstol=1e-15, partol=1e-14,
    )
    if not result.success:
        raise DataError(f"orthogonal distance regression did not converge: {result.stopreason}.")
    freedom = x.size - (2 if slope is None else 1)
    errors = result.sd_beta / np.sqrt(result.sum_square / freedom) if result.sum_square > 0 else result.sd_beta * 0
    return Line(float(result.beta[1]), float(errors[1]) if slope is None else 0.0, float(result.beta[0]), float(errors[0]),
                float(result.sum_square))


def reduced_major_axis(x: np.ndarray, y: np.ndarray) -> Line:
    """The line of slope sign(r) sd(y)/sd(x): the habit, for comparison only, since it gives a slope to unrelated variables too.

    Standard error |slope| ((1 - r²)/(n - 2))^(1/2) (Kermack & Haldane 1950, from memory).
    """
    x, y = np.asarray(x, float), np.asarray(y, float)
    u, v = x - x.mean(-1, keepdims=True), y - y.mean(-1, keepdims=True)
    sx, sy = (u**2).sum(-1) ** 0.5, (v**2).sum(-1) ** 0.5
    r = (u * v).sum(-1) / (sx * sy)
    slope = np.where(r < 0, -1.0, 1.0) * sy / sx
    error = np.abs(slope) * np.sqrt((1 - r**2) / max(x.shape[-1] - 2, 1))
    intercept = y.mean(-1) - slope * x.mean(-1)
    residual = y - slope[..., None] * x - intercept[..., None] if np.ndim(slope) else y - slope * x - intercept
    return Line(slope[()], error, intercept, error * np.abs(x.mean(-1)), (residual**2).sum(-1))
