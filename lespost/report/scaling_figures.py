"""Figures of velocity laws: each law's data, line, band and by-chance cloud, and its residual against the other predictors."""

from __future__ import annotations

from pathlib import Path

import matplotlib.pyplot as plt
import numpy as np
from matplotlib.figure import Figure
from scipy.stats import t as student

from lespost.report import style
from lespost.scaling.analyse import Analysis, Tested
from lespost.scaling.fit import Axes, LawFit
from lespost.scaling.laws import Law, Powers, dimensions, unit_text
from lespost.scaling.self_correlation import Guard, permuted_blocks

_SYMBOLS = {"velocity": "V", "ustar": "u_*", "us0": "u_{s0}", "us_sl": "u_{sSL}", "h": "h", "b0": "B_0", "buoyancy_frequency": "N",
            "coriolis_parameter": "f", "wind_speed": "U_{10}"}
_DATA, _LINE, _CHANCE = "#0072B2", "#D55E00", "0.72"
_CLOUDS = 40


def write_figures(analysis: Analysis, folder: Path) -> list[Path]:
    """laws.svg and .png (data and lines), laws_scaled (the usual scaled plot, with chance), laws_residual; the paths written."""
    folder.mkdir(parents=True, exist_ok=True)
    out: list[Path] = []
    with style.house_style():
        out += style.save(laws_figure(analysis, scaled=False), folder, "laws")
        if any(item.scaled is not None or item.law.free for item in analysis.tested):
            out += style.save(laws_figure(analysis, scaled=True), folder, "laws_scaled")
        out += style.save(residual_figure(analysis), folder, "laws_residual")
    return out


def laws_figure(analysis: Analysis, scaled: bool) -> Figure:
    """A panel per law: data with errors, York's line with its band, and grey the cloud that permuted velocities make.

    scaled: the axes divided by a common column, where both share it; else V against the law's own velocity.
    """
    panels = [(item, axes, fit, found) for item in analysis.tested for axes, fit, found in [_panel(item, scaled)]
              if axes is not None and fit is not None and found is not None]
    figure, grid = _grid(len(panels))
    rng = np.random.default_rng(analysis.settings.seed)
    for axis, (item, axes, fit, found) in zip(grid, panels, strict=False):
        _draw(axis, analysis, axes, fit, found, rng)
        axis.set_title(_title(item.law), fontsize=7.5)
    handles = [
        plt.Line2D([], [], marker="o", linestyle="none", color=_DATA, markersize=3, label="data"),
        plt.Line2D([], [], color=_LINE, label=f"York's line and {100 * analysis.settings.confidence:.0f} % band"),
        plt.Line2D([], [], color="k", linestyle=(0, (2, 1.5)), linewidth=0.8, label="slope by chance"),
        plt.Line2D([], [], marker="o", linestyle="none", color=_CHANCE, markersize=3, label="velocities permuted"),
    ]
    figure.legend(handles=handles, loc="outside lower center", ncols=4)
    return figure


def residual_figure(analysis: Analysis) -> Figure:
    """A row per law and a column per predictor: what the law, with its fitted exponent, leaves unexplained."""
    names = [name for name in ("ustar", "us0", "h", "b0", "us_sl", "wind_speed") if name in analysis.table.columns
             and np.all(analysis.table.columns[name] > 0) and np.ptp(np.log(analysis.table.columns[name])) > 1e-9]
    tested = analysis.tested
    figure, grid = plt.subplots(len(tested), len(names), figsize=(min(style.TWO_COLUMNS, 1.0 + 2.0 * len(names)), 0.6 + 1.15 * len(tested)),
                                sharex="col", sharey=True, squeeze=False)
    for row, item in enumerate(tested):
        for column, name in enumerate(names):
            axis, values = grid[row, column], analysis.table.columns[name]
            axis.axhline(0.0, color="0.6", linewidth=0.6)
            axis.plot(values, item.free.residual, "o", color=_DATA, markersize=2.2, alpha=_alpha(values.size), markeredgewidth=0)
            r = float(np.corrcoef(np.log(values), item.free.residual)[0, 1])
            axis.text(0.02, 0.97, f"r = {_signed(r)}", transform=axis.transAxes, fontsize=6.5, color="0.25", va="top")
            axis.set_xscale("log")
            _few_ticks(axis, x=True)
            if row == len(tested) - 1:
                axis.set_xlabel(f"${_SYMBOLS[name]}$ [{unit_text(*dimensions({name: 1.0}))}]")
            if column == 0:
                axis.set_title(f"ln(V/fit): {_title(item.law)}", fontsize=7)
    return figure


def _panel(item: Tested, scaled: bool) -> tuple[Axes | None, LawFit | None, Guard | None]:
    if scaled:
        return (item.axes, item.free, item.guard) if item.law.free else (item.scaled_axes, item.scaled, item.scaled_guard)
    return (None, None, None) if item.law.free else (item.axes, item.free, item.guard)


def _grid(count: int) -> tuple[Figure, list[plt.Axes]]:
    columns = min(max(count, 1), 3)
    rows = max(-(-count // columns), 1)
    figure, grid = plt.subplots(rows, columns, figsize=(style.TWO_COLUMNS * columns / 3, 0.4 + 2.3 * rows), squeeze=False)
    flat = list(grid.ravel())
    for axis in flat[count:]:
        axis.set_visible(False)
    return figure, flat


def _draw(axis: plt.Axes, analysis: Analysis, axes: Axes, fit: LawFit, found: Guard, rng: np.random.Generator) -> None:
    velocity = np.log(analysis.table.columns["velocity"])
    mixed = velocity[permuted_blocks(velocity.size, found.run, _CLOUDS, rng)] - velocity
    cloud_x = axes.x + axes.x_powers.get("velocity", 0.0) * mixed
    cloud_y = axes.y + axes.y_powers.get("velocity", 0.0) * mixed
    keep = rng.permutation(cloud_x.size)[:1500]
    axis.plot(np.exp(cloud_x.ravel()[keep]), np.exp(cloud_y.ravel()[keep]), "o", color=_CHANCE, markersize=1.3, alpha=0.5,
              markeredgewidth=0, rasterized=True, zorder=1)
    if velocity.size <= 200 and (np.any(axes.x_se > 0) or np.any(axes.y_se > 0)):
        x, y = np.exp(axes.x), np.exp(axes.y)
        axis.errorbar(x, y, xerr=x * axes.x_se, yerr=y * axes.y_se, fmt="none", ecolor=_DATA, elinewidth=0.5, alpha=0.5, zorder=2)
    axis.plot(np.exp(axes.x), np.exp(axes.y), "o", color=_DATA, markersize=2.6, alpha=_alpha(velocity.size), markeredgewidth=0, zorder=3)
    line = np.linspace(axes.x.min(), axes.x.max(), 60)
    middle = fit.intercept.value + fit.slope.value * line
    quantile = float(student.ppf(0.5 + analysis.settings.confidence / 2, max(fit.neff - 2, 1)))
    # the spread of the replicate lines at each x holds slope and intercept together
    half = quantile * np.std(fit.intercepts[:, None] + fit.slopes[:, None] * line, axis=0)
    axis.fill_between(np.exp(line), np.exp(middle - half), np.exp(middle + half), color=_LINE, alpha=0.25, linewidth=0, zorder=4)
    axis.plot(np.exp(line), np.exp(middle), color=_LINE, zorder=5)
    chance = axes.y.mean() + found.chance.slope * (line - axes.x.mean())
    axis.plot(np.exp(line), np.exp(chance), color="k", linestyle=(0, (2, 1.5)), linewidth=0.8, zorder=4)
    axis.set(xscale="log", yscale="log")
    _few_ticks(axis, x=True)
    _few_ticks(axis, x=False)
    axis.set_xlabel(_label(axes.y_powers, "predicted ") if axes.predicted else _label(axes.x_powers))
    axis.set_ylabel(_label(axes.y_powers))
    lower_right = fit.slope.value >= 0
    numbers = (f"slope {_signed(fit.slope.value)} ({_signed(fit.slope.low)}, {_signed(fit.slope.high)})\n"
               f"r {_signed(found.correlation)}; by chance {_signed(found.chance.correlation)}")
    axis.text(0.97 if lower_right else 0.03, 0.03, numbers, transform=axis.transAxes, fontsize=6.3, color="0.15",
              ha="right" if lower_right else "left", va="bottom", zorder=6,
              bbox={"facecolor": "white", "alpha": 0.75, "edgecolor": "none", "pad": 1.0})


def _few_ticks(axis: plt.Axes, x: bool) -> None:
    """At most five plain numbers: axes of less than a decade would crowd."""
    from matplotlib.ticker import FixedLocator, FuncFormatter, LogLocator, MaxNLocator, NullFormatter, NullLocator

    low, high = axis.get_xlim() if x else axis.get_ylim()
    decades = np.log10(high / low)
    which = axis.xaxis if x else axis.yaxis
    if decades < 0.5:  # so narrow an axis is nearly linear: evenly stepped numbers stay apart
        which.set_major_locator(FixedLocator(list(MaxNLocator(4, steps=[1, 2, 2.5, 5, 10]).tick_values(low, high))))
    else:
        choices = ((3.0, (1.0,)), (1.3, (1.0, 3.0)), (0.5, (1.0, 2.0, 5.0)))
        which.set_major_locator(LogLocator(subs=next(numbers for least, numbers in choices if decades >= least), numticks=40))
    which.set_major_formatter(FuncFormatter(lambda value, _: f"{value:.6g}"))
    which.set_minor_locator(NullLocator())
    which.set_minor_formatter(NullFormatter())


def _alpha(count: int) -> float:
    return float(np.clip(40.0 / count, 0.15, 0.9))


def _title(law: Law) -> str:
    """The law as an equation; a published curve by its name and source."""
    if law.curve is not None:
        return law.source.split(",")[0]
    if law.free:
        return rf"$V \propto {_product(law.base) if law.base else ''}\,[{_product(law.powers)}]^n$"
    return rf"$V \propto {_product(law.powers)}$"


def _signed(value: float) -> str:
    """Two decimals with a true minus, and no minus before zero."""
    return f"{round(value, 2) + 0.0:.2f}".replace("-", "\u2212")


def _label(powers: Powers, before: str = "") -> str:
    return f"{before}${_product(powers)}$ [{unit_text(*dimensions(powers))}]"


def _product(powers: Powers) -> str:
    if len(powers) == 2 and abs(sum(powers.values())) < 1e-9:
        (top, power), (bottom, _) = sorted(powers.items(), key=lambda item: -item[1])
        ratio = f"{_SYMBOLS[top]}/{_SYMBOLS[bottom]}"
        return ratio if abs(power - 1) < 1e-9 else f"({ratio})^{{{_fraction(power)}}}"
    above, below = ([_factor(name, abs(power)) for name, power in powers.items() if sign * power > 0] for sign in (1, -1))
    text = r"\,".join(above) or "1"
    if below:
        text += " / " + (below[0] if len(below) == 1 else f"({' '.join(below)})")
    return text


def _factor(name: str, power: float) -> str:
    symbol = _SYMBOLS[name]
    if abs(power - 1) < 1e-9:
        return symbol
    return f"{{{symbol}}}^{{{_fraction(power)}}}" if "_" not in symbol else f"({symbol})^{{{_fraction(power)}}}"


def _fraction(power: float) -> str:
    from fractions import Fraction

    near = Fraction(power).limit_denominator(6)
    return (f"{near.numerator}/{near.denominator}" if near.denominator > 1 else str(near.numerator)) if abs(float(near) - power) < 1e-6 \
        else f"{power:.2f}"
