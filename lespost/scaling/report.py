"""The result of `analyse` as rows (scaling.csv), as one JSON object, and in plain words."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from lespost.errors import DataError
from lespost.scaling.analyse import Analysis, Tested
from lespost.scaling.dimensions import MissingScale, to_plain
from lespost.scaling.discrimination import Discrimination
from lespost.scaling.fit import Axes, LawFit, widened
from lespost.scaling.laws import dimensions, product_text, unit_text
from lespost.scaling.line import orthogonal_distance, reduced_major_axis
from lespost.scaling.planner import Plan
from lespost.scaling.self_correlation import Guard

#: Columns of scaling.csv: a row per law and pair of axes.
COLUMNS = (
    "law", "source", "axes", "exponent", "rows", "neff", "slope", "slope_se", "slope_low", "slope_high", "slope_orthogonal",
    "slope_least_squares", "slope_least_squares_by_chance", "slope_by_chance_low", "slope_by_chance_high", "slope_reduced_major_axis",
    "slope_reduced_major_axis_by_chance", "correlation", "correlation_by_chance", "correlation_by_chance_low",
    "correlation_by_chance_high", "correlation_by_chance_independent", "p_value",
    "verdict", "shared", "coefficient", "coefficient_low", "coefficient_high",
    "coefficient_units", "scatter", "missing_scale", "missing_scale_low", "missing_scale_high", "missing_scale_units", "delta_aic",
    "delta_bic", "akaike_weight", "chosen", "note",
)


def rows(analysis: Analysis) -> pd.DataFrame:
    """scaling.csv: each correlation and slope with its by-chance twin beside it; what does not apply is NaN, never zero."""
    out = []
    for item in analysis.tested:
        held, fitted = _standing(analysis.fixed, item), _standing(analysis.free, item)
        out.append(_row(item, item.free, item.axes, item.guard, "fitted", fitted, item.missing))
        if item.fixed is not None:
            out.append(_row(item, item.fixed, item.axes, item.guard, "as stated", held, None))
        if item.scaled is not None and item.scaled_axes is not None and item.scaled_guard is not None:
            out.append(_row(item, item.scaled, item.scaled_axes, item.scaled_guard, "fitted", {}, None))
    return pd.DataFrame(out, columns=list(COLUMNS))


def _standing(result: Discrimination, item: Tested) -> dict[str, float]:
    for standing in result.standings:
        if standing.name == item.law.name:
            return {"delta_aic": standing.aic, "delta_bic": standing.bic, "akaike_weight": standing.weight, "chosen": standing.chosen}
    return {}


def _row(item: Tested, fit: LawFit, axes: Axes, found: Guard, exponent: str, standing: dict[str, float], missing: MissingScale | None
         ) -> dict[str, Any]:
    major = reduced_major_axis(axes.x, axes.y)
    left = dimensions(axes.y_powers)
    predictor = dimensions(axes.x_powers)
    row: dict[str, Any] = dict.fromkeys(COLUMNS, np.nan)
    row.update(
        law=item.law.name, source=item.law.source, axes=axes_text(axes), exponent=exponent, rows=len(fit.residual), neff=fit.neff,
        slope=fit.slope.value, slope_se=fit.slope.se, slope_low=fit.slope.low, slope_high=fit.slope.high,
        slope_orthogonal=_orthogonal(axes, fit), slope_least_squares=found.slope, slope_least_squares_by_chance=found.chance.slope,
        slope_by_chance_low=found.slope_low, slope_by_chance_high=found.slope_high, slope_reduced_major_axis=float(major.slope),
        slope_reduced_major_axis_by_chance=found.chance.reduced_major_axis, correlation=found.correlation,
        correlation_by_chance=found.chance.correlation, correlation_by_chance_low=found.correlation_low,
        correlation_by_chance_high=found.correlation_high, correlation_by_chance_independent=found.independent.correlation,
        p_value=found.p_value, verdict=verdict(found), shared=" ".join(found.shared),
        coefficient=fit.coefficient.value, coefficient_low=fit.coefficient.low, coefficient_high=fit.coefficient.high,
        coefficient_units=unit_text(left[0] - fit.slope.value * predictor[0], left[1] - fit.slope.value * predictor[1]),
        scatter=fit.scatter, note="", **standing)
    if missing is not None:
        row.update(missing_scale=missing.value.value, missing_scale_low=missing.value.low, missing_scale_high=missing.value.high,
                   missing_scale_units=missing.units,
                   note="the interval of the exponent includes the balanced one: no scale need be missing" if missing.ambiguous else "")
    return row


def _orthogonal(axes: Axes, fit: LawFit) -> float:
    """The slope by odrpack with the same errors; NaN without errors of the predictor, or where it does not converge."""
    if fit.fixed or not np.all(axes.x_se > 0):
        return float("nan")
    try:
        return float(orthogonal_distance(axes.x, axes.y, axes.x_se, widened(axes, fit.scatter)[0]).slope)
    except DataError:
        return float("nan")


def axes_text(axes: Axes) -> str:
    """The two axes in words, "velocity ustar^-1 against us0 ustar^-1"."""
    y = product_text(axes.y_powers)
    return f"{y} against {y.replace('velocity', axes.predicted, 1) if axes.predicted else product_text(axes.x_powers)}"


def verdict(found: Guard) -> str:
    """Whether a correlation is more than its axes make by themselves."""
    return "beats chance" if found.beats_chance else "no more than chance"


def to_json(analysis: Analysis) -> dict[str, Any]:
    """Everything as plain numbers and texts; NaN stays NaN (the command line writes null)."""
    by_condition = analysis.free.collinearity
    return {
        "velocity": analysis.table.velocity_name, "rows": len(analysis.table), "statement": statement(analysis),
        "laws": rows(analysis).to_dict("records"),
        "missing_scales": [{"law": item.law.name, **to_plain(scale)} for item in analysis.tested
                           for scale in (item.missing, item.missing_round) if scale is not None],
        "collinearity": {"columns": list(by_condition.names), "correlation": by_condition.correlation.tolist(),
                         "condition_number": by_condition.condition, "variance_inflation": list(by_condition.inflation)},
        "stated_exponents": _plain(analysis.fixed), "fitted_exponents": _plain(analysis.free),
        "plans": [{"exponents": kind, **plain_plan(item)} for kind, plans in (("stated", analysis.plans_fixed),
                                                                              ("fitted", analysis.plans_free)) for item in plans],
        "remarks": list(analysis.remarks),
    }


def _plain(result: Discrimination) -> dict[str, Any]:
    return {"neff": result.neff, "cannot_be_separated": list(result.inseparable),
            "vuong": [{"first": pair.first, "second": pair.second, "z": pair.z, "p_value": pair.p_value, "separated": pair.separated}
                      for pair in result.pairs]}


def plain_plan(item: Plan) -> dict[str, Any]:
    """A plan for JSON."""
    return {"first": item.first, "second": item.second, "power": item.power, "scatter": item.scatter, "distinct": item.distinct,
            "rows": item.rows, "hours": item.hours, "rows_now": item.rows_now, "ratio": item.ratio_name,
            "ratio_low": item.ratio_low, "ratio_high": item.ratio_high}


def statement(analysis: Analysis) -> list[str]:
    """Plain sentences: what was found, what is chance, what cannot be told apart, and what would tell."""
    out = []
    for item in analysis.tested:
        for axes, found in ((item.axes, item.guard), (item.scaled_axes, item.scaled_guard)):
            if axes is not None and found is not None and not found.beats_chance:
                out.append(f"{axes_text(axes)}: correlation {found.correlation:.2f} is no more than the {found.chance.correlation:.2f} "
                           f"that these axes make by chance ({found.correlation_low:.2f} to {found.correlation_high:.2f}).")
    out += _compared("With the exponents that the laws state", analysis.fixed, analysis.plans_fixed)
    out += _compared("With fitted exponents", analysis.free, analysis.plans_free)
    rivals = [item for item in analysis.tested if item.law.name in analysis.free.inseparable and item.law.curve is None]
    if len(rivals) > 1:
        out.append("Fitted exponents of the laws that cannot be separated: " + "; ".join(
            f"{item.law.name}: {item.free.slope.value:.2f} ({item.free.slope.low:.2f} to {item.free.slope.high:.2f})"
            for item in rivals) + ".")
    condition = analysis.free.collinearity
    if len(condition.names) > 1:
        strongest = np.abs(condition.correlation - np.eye(len(condition.names))).max()
        out.append(f"The predictors {', '.join(condition.names)} are correlated up to {strongest:.3f} (condition number "
                   f"{condition.condition:.0f}), so their exponents cannot be fitted together."
                   if strongest > 0.9 else
                   f"The predictors {', '.join(condition.names)} are correlated up to {strongest:.2f} (condition number "
                   f"{condition.condition:.1f}).")
    out += [_hidden(item.law.name, item.missing_round or item.missing) for item in analysis.tested
            if item.missing is not None and not item.missing.ambiguous and item.law.name in analysis.free.inseparable]
    return out


def _compared(begin: str, result: Discrimination, plans: tuple[Plan, ...]) -> list[str]:
    best = result.standings[0]
    if len(result.standings) == 1:
        return [f"{begin}: {best.name} is the only law tested."]
    if len(result.inseparable) == 1:
        return [f"{begin}: {best.name} fits best and the others are separated from it ({result.neff:.0f} independent rows); it wins "
                f"{100 * best.chosen:.0f} % of the resampled records."]
    count = {2: "these two", 3: "these three", 4: "these four"}.get(len(result.inseparable), f"these {len(result.inseparable)}")
    out = [f"{begin}: {count} cannot be separated by this record ({result.neff:.0f} independent rows): "
           f"{'; '.join(result.inseparable)}. {best.name} wins {100 * best.chosen:.0f} % of the resampled records."]
    return out + [plan_in_words(item) for item in plans]


def plan_in_words(item: Plan) -> str:
    """One sentence: the rows, hours or range of forcing that would separate two laws."""
    start = f"To separate {item.first} from {item.second} at {100 * item.power:.0f} % power: "
    if not np.isfinite(item.rows) or item.rows > 1e6:
        return start + "no length of record with forcing like this would do, because the second can imitate the first."
    more = item.rows - item.rows_now
    have = f"; this table has {item.rows_now:.0f}"
    hours = f" ({item.hours:.0f} h of record in all)" if np.isfinite(item.hours) else ""
    text = (f"{item.rows:.0f} independent rows{hours}, {more:.0f} more than here" if more > 0.5 else
            f"{max(item.rows, 3):.0f} independent rows{hours}{have}")
    if np.isfinite(item.ratio_low) and more > 0.5:
        text += f"; or a range of {item.ratio_name} from {item.ratio_low:.3g} to {item.ratio_high:.3g} in as many rows"
    return start + text + "."


def _hidden(law: str, scale: MissingScale | None) -> str:
    assert scale is not None
    text = (f"{law} with exponent {scale.exponent:.2f} does not balance: it hides a constant of {scale.value.value:.3g} {scale.units} "
            f"({scale.value.low:.3g} to {scale.value.high:.3g})")
    if scale.candidates:
        near = "; ".join(f"{item.name} is {item.ratio:.2g} times that" for item in scale.candidates[:3])
        text += f"; {near}"
    return text + "."


def to_text(analysis: Analysis) -> str:
    """A table of fits with their twins, then the statement and the remarks."""
    head = ("axes", "exponent", "slope", "interval", "by chance", "r", "by chance", "verdict")
    lines = [head]
    for row in rows(analysis).to_dict("records"):
        interval = f"{row['slope_low']:.2f} to {row['slope_high']:.2f}" if row["exponent"] == "fitted" else "held"
        lines.append((str(row["axes"]), str(row["exponent"]), f"{row['slope']:.3f}", interval,
                      f"{row['slope_least_squares_by_chance']:.2f}", f"{row['correlation']:.2f}",
                      f"{row['correlation_by_chance']:.2f}", str(row["verdict"])))
    widths = [max(len(line[i]) for line in lines) for i in range(len(head))]
    shown = ["  ".join(cell.ljust(width) for cell, width in zip(line, widths, strict=True)).rstrip() for line in lines]
    return "\n".join([*shown, "", *statement(analysis), *(f"note: {remark}." for remark in analysis.remarks)])


def plain(value: Any) -> Any:
    """For JSON: NaN and infinity become None, numpy numbers become Python's."""
    if isinstance(value, dict):
        return {str(name): plain(item) for name, item in value.items()}
    if isinstance(value, list | tuple):
        return [plain(item) for item in value]
    if isinstance(value, bool | np.bool_):
        return bool(value)
    if isinstance(value, int | np.integer):
        return int(value)
    if isinstance(value, float | np.floating):
        return float(value) if np.isfinite(value) else None
    return value


def write(analysis: Analysis, folder: Path) -> None:
    """scaling.csv and scaling.json in `folder`, each complete or not at all."""
    for name, text in (("scaling.csv", rows(analysis).to_csv(index=False)),
                       ("scaling.json", json.dumps(plain(to_json(analysis)), indent=1, allow_nan=False))):
        temporary = folder / f".{name}.part"
        temporary.write_text(text, encoding="utf-8")
        temporary.replace(folder / name)
