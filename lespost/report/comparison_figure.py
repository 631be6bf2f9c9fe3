"""Model beside record: one panel per quantity over depth, and the ratios with their intervals and verdicts."""

from __future__ import annotations

import matplotlib.pyplot as plt
import numpy as np
import pandas as pd
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.lines import Line2D

from lespost.report import style
from lespost.report.profiles_figure import NORMAL_95

#: How a quantity of the table is written on an axis.
QUANTITY_LABEL = {
    "u_mean": "mean u", "v_mean": "mean v", "w_mean": "mean w", "uu": "$\\overline{u'^2}$", "vv": "$\\overline{v'^2}$",
    "ww": "$\\overline{w'^2}$", "uw": "$\\overline{u'w'}$", "vw": "$\\overline{v'w'}$",
    "error_velocity_variance": "error-velocity variance", "speed": "speed",
}


def unit_text(units: str) -> str:
    """A unit such as m2 s-2 with its powers raised."""
    import re

    return re.sub(r"([A-Za-z])(-?\d+)", r"\1$^{\2}$", units)


def comparison_figure(table: pd.DataFrame, instrument: str, record: str) -> Figure:
    """Rows of comparison.csv for one instrument and one record; bars are 95 % intervals of each side."""
    quantities = list(dict.fromkeys(table["quantity"]))[:6]
    columns = min(3, len(quantities))
    rows = -(-len(quantities) // columns)
    figure, grid = plt.subplots(rows, columns, squeeze=False, sharey=True, figsize=(style.TWO_COLUMNS, 0.5 + 2.4 * rows))
    for axis, quantity in zip(grid.flat, quantities, strict=False):
        _panel(axis, table[table["quantity"] == quantity], quantity)
    for axis in list(grid.flat)[len(quantities):]:
        axis.axis("off")
    for row in grid:
        row[0].set_ylabel("depth (m)")
    grid[0, 0].invert_yaxis()
    handles = [Line2D([], [], color="k", marker="o", markersize=4, label=f"record: {record}"),
               Line2D([], [], color="#0072B2", marker="s", markersize=4, markerfacecolor="white",
                      linestyle="--", label=f"virtual instrument: {instrument}")]
    handles += [Line2D([], [], color=colour, marker=style.VERDICT_MARKER[verdict], linestyle="none", markersize=5,
                       label=verdict) for verdict, colour in style.VERDICT_COLOUR.items()]
    figure.legend(handles=handles, loc="outside upper left", ncol=5)
    return figure


def _panel(axis: Axes, rows: pd.DataFrame, quantity: str) -> None:
    power = _power(rows)
    several = rows["window"].nunique() > 1
    for number, (_, part) in enumerate(rows.groupby("window", sort=False)):
        part = part.sort_values("depth")
        depth = part["depth"].to_numpy(float)
        shift = (number - (rows["window"].nunique() - 1) / 2) * 0.25 if several else 0.0
        for side, colour, marker, offset, dash in (("record", "k", "o", -0.12, "-"), ("model", "#0072B2", "s", 0.12, "--")):
            value, error = (part[f"{side}_{kind}"].to_numpy(float) / 10.0**power for kind in ("value", "se"))
            axis.errorbar(value, depth + shift + offset, xerr=NORMAL_95 * error, color=colour, marker=marker, markersize=3.5,
                          linewidth=0.9, linestyle=dash, elinewidth=0.7, capsize=0,
                          markerfacecolor="white" if side == "model" else colour)
    lowest, highest = axis.get_xlim()
    axis.set_xlim(lowest, highest + 0.16 * (highest - lowest))
    edge = highest + 0.09 * (highest - lowest)
    for verdict, colour in style.VERDICT_COLOUR.items():
        chosen = rows[rows["verdict"] == verdict]
        axis.plot(np.full(len(chosen), edge), chosen["depth"], linestyle="none", marker=style.VERDICT_MARKER[verdict],
                  color=colour, markersize=4.5)
    units = str(rows["units"].iloc[0])
    scale = f"10$^{{{power}}}$ " if power else ""
    axis.set_xlabel(f"{QUANTITY_LABEL.get(quantity, quantity)} ({scale}{unit_text(units)})")


def _power(rows: pd.DataFrame) -> int:
    """The power of ten, a multiple of one, that brings the values of a panel near one (0 where they are already)."""
    largest = np.nanmax(np.abs(rows[["record_value", "model_value"]].to_numpy(float)), initial=0.0)
    if not np.isfinite(largest) or largest == 0.0 or 0.1 <= largest < 1000:
        return 0
    return int(np.floor(np.log10(largest)))
