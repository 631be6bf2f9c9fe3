"""From two estimates to a verdict: agrees, differs, or cannot tell and why.

"Agrees" is a finding, not the lack of one: two one-sided tests show that the difference lies inside a stated
margin (Schuirmann 1987). "Differs" needs a difference beyond chance after the correction for many rows
(Benjamini & Hochberg 1995) whose interval is not inside the margin. All else is "cannot tell", with the
reason.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from lespost.compare.settings import ComparisonSettings
from lespost.compare.uncertainty import Side

Verdict = Literal["agrees", "differs", "cannot tell"]


@dataclass(frozen=True)
class Outcome:
    """Record against model for one quantity at one depth. NaN where a number cannot be known.

    low, high: interval of the difference; ratio with its interval. p_value: two-sided, of no difference.
    equivalent: the difference is shown to lie within the margin. resolvable: smallest relative standard error
    of the record, squared, that would have a good chance to decide, over the present one (below 1: a longer
    record is needed).
    """

    difference: float
    low: float
    high: float
    ratio: float
    ratio_low: float
    ratio_high: float
    p_value: float
    equivalent: bool
    lengthening: float


def _degrees_of_freedom(first: float, first_freedom: float, second: float, second_freedom: float) -> float:
    """Welch-Satterthwaite degrees of freedom of the sum of two squared errors."""
    total = (first**2 + second**2) ** 2
    parts = first**4 / first_freedom + second**4 / second_freedom
    return max(total / parts, 1.0) if parts > 0 else 1e9


def judge(
    kind: Literal["mean", "positive", "covariance"],
    record: Side,
    model: Side,
    margin: float,
    confidence: float,
) -> Outcome:
    """Tests one pair.

    margin: for "positive" the share of the ratio, else in the unit of the quantity. The comparison of
    positive quantities is made on the logarithm of their ratio, whose error is nearly normal where that of a
    variance is skewed.
    """
    from scipy.stats import t as student

    a, sa, b, sb = record.value, record.standard_error, model.value, model.standard_error
    nothing = float("nan")
    if not all(np.isfinite([a, sa, b, sb])):
        return Outcome(a - b, nothing, nothing, nothing, nothing, nothing, nothing, False, nothing)
    alpha = 1.0 - confidence
    error = float(np.hypot(sa, sb))
    freedom = _degrees_of_freedom(sa, record.freedom, sb, model.freedom)
    width = float(student.ppf(1.0 - alpha / 2.0, freedom)) * error
    difference = a - b
    ratio = ratio_low = ratio_high = nothing
    if kind == "positive" and a > 0 and b > 0:
        ra, rb = sa / a, sb / b
        statistic, scale = float(np.log(a / b)), float(np.hypot(ra, rb))
        freedom = _degrees_of_freedom(ra, record.freedom, rb, model.freedom)
        low_limit, high_limit, own, other = float(np.log1p(-margin)), float(np.log1p(margin)), ra, rb
        half = float(student.ppf(1.0 - alpha / 2.0, freedom)) * scale
        ratio, ratio_low, ratio_high = (
            float(np.exp(x)) for x in (statistic, statistic - half, statistic + half)
        )
    elif kind == "positive":
        # a variance that is not positive after its noise was removed: only the difference can be judged
        limit = margin * max(abs(a), abs(b))
        statistic, scale, low_limit, high_limit, own, other = difference, error, -limit, limit, sa, sb
    else:
        statistic, scale, low_limit, high_limit, own, other = difference, error, -margin, margin, sa, sb
    if scale == 0.0:
        same = low_limit <= statistic <= high_limit
        return Outcome(
            difference,
            difference,
            difference,
            ratio,
            ratio_low,
            ratio_high,
            float(statistic == 0.0),
            same,
            1.0,
        )
    p_value = float(2.0 * student.sf(abs(statistic) / scale, freedom))
    one_sided = float(student.ppf(confidence, freedom))
    equivalent = statistic - low_limit > one_sided * scale and high_limit - statistic > one_sided * scale
    # error with which two equal quantities would be shown equal four times out of five: margin = (t_conf +
    # t_0.9) error
    reach = min(-low_limit, high_limit) / (one_sided + float(student.ppf(0.9, freedom)))
    left = reach**2 - other**2
    lengthening = own**2 / left if left > 0 else float("inf")
    return Outcome(
        difference,
        difference - width,
        difference + width,
        ratio,
        ratio_low,
        ratio_high,
        p_value,
        bool(equivalent),
        lengthening,
    )


@dataclass(frozen=True)
class Circumstances:
    """What may forbid a verdict. Shares are of the variance, NaN where unknown or not a variance."""

    record_samples: float
    model_samples: float
    record_noise_share: float
    model_noise_share: float
    subgrid_share: float
    unlike_sampling: str
    record_length: float


def verdict(
    result: Outcome, p_adjusted: float, around: Circumstances, settings: ComparisonSettings
) -> tuple[Verdict, str]:
    """(verdict, reason); the reason is empty for a plain agreement or difference."""
    if not np.isfinite(result.p_value):
        return "cannot tell", "no value or no uncertainty on one side"
    fewest = settings.smallest_effective_samples
    short = [
        f"{side} {samples:.1f}"
        for side, samples in (("record", around.record_samples), ("model", around.model_samples))
        if samples < fewest
    ]
    if short:
        return (
            "cannot tell",
            f"too short: {', '.join(short)} independent samples, {fewest:g} needed{_longer(result, around)}",
        )
    if around.unlike_sampling:
        return "cannot tell", f"unresolved scales: {around.unlike_sampling}"
    limit = settings.largest_noise_share
    noisy = [
        f"{100 * share:.0f} % of the {side}"
        for side, share in (("record", around.record_noise_share), ("model", around.model_noise_share))
        if np.isfinite(share) and share > limit
    ]
    if noisy:
        return "cannot tell", (
            f"noise floor or unresolved scales: {' and '.join(noisy)} variance is uncorrelated between "
            "samples "
            f"(limit {100 * limit:.0f} %)"
        )
    if np.isfinite(around.subgrid_share) and around.subgrid_share > settings.largest_subgrid_share:
        return "cannot tell", (
            f"subgrid share: {100 * around.subgrid_share:.0f} % of the model's variance lies below its grid "
            f"(limit {100 * settings.largest_subgrid_share:.0f} %)"
        )
    significant = np.isfinite(p_adjusted) and p_adjusted < settings.false_discovery_rate
    if result.equivalent:
        return "agrees", "difference beyond chance, but inside the margin" if significant else ""
    if significant:
        return "differs", ""
    return (
        "cannot tell",
        f"too short: the interval holds both no difference and more than the margin{_longer(result, around)}",
    )


def _longer(result: Outcome, around: Circumstances) -> str:
    """How much record would decide, where that is known."""
    if not np.isfinite(around.record_length) or np.isnan(result.lengthening):
        return ""
    if np.isinf(result.lengthening):
        return "; the model's own error is too large: more deployments or a longer run are needed"
    if result.lengthening <= 1.0:
        return ""
    hours = around.record_length * result.lengthening / 3600.0
    return f"; about {hours:.2g} h of record would decide"
