"""The regime plane: forcing numbers of each window, the published dividing lines, and the regime found from the variances."""

from __future__ import annotations

from typing import Any

import matplotlib.pyplot as plt
import numpy as np
import pandas as pd
from matplotlib.figure import Figure

from lespost.forcing.regimes import DOMINANT_SHARE, dissipation_terms
from lespost.regime.classify import dividing_lines
from lespost.report import style

_LA_LIMITS, _RATIO_LIMITS = (0.1, 10.0), (1e-3, 1e3)


def regime_plane_figure(regime: pd.DataFrame) -> Figure:
    """La_t against h / L_L with lines where one production makes nine tenths of the estimate (Belcher et al. 2012).

    regime: regime.csv; the first band of each window is drawn. A window without waves has no place in the plane and is named
    below it; one without destabilising heat flux is drawn at the lower edge with an arrow.
    """
    figure, axis = plt.subplots(figsize=(style.ONE_COLUMN, 3.2))
    _background(axis)
    first = regime.groupby("window", sort=False).head(1)
    outside = []
    for _, row in first.iterrows():
        la, ratio = float(row["la_t"]), float(row["h_over_l_langmuir"])
        label = str(row["regime"])
        look: dict[str, Any] = {
            "marker": style.REGIME_MARKER.get(label, "o"), "color": style.REGIME_COLOUR.get(label, "k"), "markersize": 7,
            "markeredgecolor": "white", "markeredgewidth": 0.8, "linestyle": "none", "zorder": 5,
        }
        if not np.isfinite(la) or not np.isfinite(ratio):
            outside.append(f"{row['window']} ({label})")
            continue
        axis.plot(la, max(ratio, _RATIO_LIMITS[0] * 1.5), label=f"{row['window']}: {label}", **look)
        if ratio < _RATIO_LIMITS[0]:
            axis.annotate("", xy=(la, _RATIO_LIMITS[0]), xytext=(la, _RATIO_LIMITS[0] * 4), zorder=6,
                          arrowprops={"arrowstyle": "->", "linewidth": 0.8, "color": "0.3"})
    if axis.get_legend_handles_labels()[0]:
        axis.legend(loc="upper left", frameon=True, framealpha=0.9, edgecolor="none")
    axis.set(xscale="log", yscale="log", xlim=_LA_LIMITS, ylim=_RATIO_LIMITS)
    axis.set_xlabel("turbulent Langmuir number La$_t$")
    axis.set_ylabel("h / L$_L$ = B$_0$h / (u$_*^2$ u$_{s0}$)")
    if outside:
        axis.set_title("not in the plane (no waves, wind or h): " + ", ".join(outside), fontsize=6.5, color="0.35")
    return figure


def _background(axis: plt.Axes) -> None:
    la = np.geomspace(_LA_LIMITS[0], _LA_LIMITS[1], 121)
    ratio = np.geomspace(_RATIO_LIMITS[0], _RATIO_LIMITS[1], 121)
    grid_la, grid_ratio = np.meshgrid(la, ratio)
    shares = dissipation_terms(grid_la, grid_ratio).share()
    tints = (("shear", "shear"), ("langmuir", "Langmuir"), ("convective", "convective"))
    places = {"shear": (3.6, 6e-3), "langmuir": (0.16, 6e-3), "convective": (0.45, 1.5e2)}
    for (kind, word), share in zip(tints, shares, strict=True):
        colour = style.REGIME_COLOUR[kind]
        axis.contourf(grid_la, grid_ratio, share, levels=[DOMINANT_SHARE, 1.01], colors=[colour], alpha=0.16)
        axis.text(*places[kind], word, fontsize=7, style="italic", color="0.25", ha="center")
    for kind, line in dividing_lines(ratio).items():
        known = np.isfinite(line)
        axis.plot(line[known], ratio[known], color=style.REGIME_COLOUR[kind], linewidth=1.0)
    axis.contour(grid_la, grid_ratio, shares[1] - shares[2], levels=[0.0], colors="0.5", linewidths=0.6, linestyles="dashed")
    axis.contour(grid_la, grid_ratio, shares[1] - shares[0], levels=[0.0], colors="0.5", linewidths=0.6, linestyles="dotted")
