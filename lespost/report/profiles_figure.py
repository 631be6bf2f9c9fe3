"""Profiles of the component variances, the vertical momentum flux, the scalar flux and the means, with uncertainty.

The subgrid part of a flux is always drawn beside the resolved part and their sum: a resolved flux alone says nothing
about closure near the surface.
"""

from __future__ import annotations

from typing import Any

import matplotlib.pyplot as plt
import numpy as np
import xarray as xr
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from lespost.report import style

#: Half-width of a 95 % interval in standard errors (normal).
NORMAL_95 = 1.96


def profiles_figure(window: xr.Dataset, name: str, layer_depth: float | None) -> Figure:
    """Four panels over depth for one window (dims z; variables X with X_se); bands are 95 % intervals.

    layer_depth: boundary-layer depth [m] drawn as a line, or None.
    """
    figure, axes = plt.subplots(1, 4, figsize=(style.TWO_COLUMNS, 3.9), sharey=True)
    depth = -window["z"].values
    _variances(axes[0], window, depth)
    _momentum_flux(axes[1], window, depth)
    _scalar_flux(axes[2], window, depth)
    _means(axes[3], window, depth)
    for axis in axes:
        if layer_depth is not None and np.isfinite(layer_depth):
            axis.axhline(layer_depth, color="0.45", linewidth=0.7, linestyle=(0, (6, 3)))
        axis.axvline(0.0, color="0.8", linewidth=0.5, zorder=0)
    bottom = float(depth.max())
    if layer_depth is not None and np.isfinite(layer_depth):
        bottom = min(bottom, 1.6 * layer_depth)
    axes[0].set_ylim(bottom, 0.0)
    axes[0].set_ylabel("depth (m)")
    if layer_depth is not None and np.isfinite(layer_depth):
        axes[0].annotate("h", xy=(0.98, layer_depth), xycoords=("axes fraction", "data"), fontsize=7, color="0.35",
                         ha="right", va="bottom")
    figure.suptitle(f"{name}: simulation axes, bands 95 % interval", fontsize=8.5, x=0.01, ha="left")
    return figure


def _band(axis: Axes, window: xr.Dataset, variable: str, depth: np.ndarray, scale: float, **line: Any) -> None:
    if variable not in window:
        return
    values = window[variable].values * scale
    axis.plot(values, depth, **line)
    error = window[f"{variable}_se"].values * scale if f"{variable}_se" in window else None
    if error is not None and np.isfinite(error).any():
        axis.fill_betweenx(depth, values - NORMAL_95 * error, values + NORMAL_95 * error, color=line.get("color"),
                           alpha=0.22, linewidth=0)


def _variances(axis: Axes, window: xr.Dataset, depth: np.ndarray) -> None:
    for component, variable, label in (("along", "uu", "$\\overline{u'^2}$"), ("cross", "vv", "$\\overline{v'^2}$"),
                                       ("vertical", "ww", "$\\overline{w'^2}$")):
        _band(axis, window, variable, depth, 1e4, color=style.COMPONENT_COLOUR[component],
              linestyle=style.COMPONENT_DASH[component], label=label)
    axis.set_xlabel("velocity variance\n(10$^{-4}$ m$^2$ s$^{-2}$)")
    axis.set_xlim(left=0)
    _legend_below(axis)


def _flux(axis: Axes, window: xr.Dataset, depth: np.ndarray, variable: str, scale: float, colour: str, label: str) -> None:
    total = f"{variable}_total"
    if _has(window, total) and _has(window, f"{variable}_sgs"):
        _band(axis, window, total, depth, scale, color=colour, linestyle="-", label=f"{label} total")
        _band(axis, window, variable, depth, scale, color=colour, linestyle=(0, (4, 1.5)), linewidth=0.9,
              label=f"{label} resolved")
        _band(axis, window, f"{variable}_sgs", depth, scale, color=colour, linestyle=(0, (1, 1.2)), linewidth=0.9,
              label=f"{label} subgrid")
    else:
        _band(axis, window, variable, depth, scale, color=colour, linestyle="-", label=f"{label} resolved")


def _momentum_flux(axis: Axes, window: xr.Dataset, depth: np.ndarray) -> None:
    _flux(axis, window, depth, "uw", 1e5, style.SEQUENCE[1], "$\\overline{u'w'}$")
    _flux(axis, window, depth, "vw", 1e5, style.SEQUENCE[2], "$\\overline{v'w'}$")
    axis.set_xlabel("upward momentum flux\n(10$^{-5}$ m$^2$ s$^{-2}$)")
    _legend_below(axis)


def _scalar_flux(axis: Axes, window: xr.Dataset, depth: np.ndarray) -> None:
    if not _has(window, "wtheta"):
        axis.text(0.5, 0.5, "no temperature\nin the files", transform=axis.transAxes, ha="center", va="center",
                  fontsize=7, color="0.4")
        axis.set_xlabel("upward temperature flux\n(K m s$^{-1}$)")
        return
    _flux(axis, window, depth, "wtheta", 1e6, style.SEQUENCE[0], "$\\overline{w'\\theta'}$")
    axis.set_xlabel("upward temperature flux\n(10$^{-6}$ K m s$^{-1}$)")
    _legend_below(axis)


def _means(axis: Axes, window: xr.Dataset, depth: np.ndarray) -> None:
    _band(axis, window, "u", depth, 100.0, color=style.COMPONENT_COLOUR["along"], label="$\\overline{u}$")
    _band(axis, window, "v", depth, 100.0, color=style.COMPONENT_COLOUR["cross"], linestyle=style.COMPONENT_DASH["cross"],
          label="$\\overline{v}$")
    axis.set_xlabel("mean velocity\n(cm s$^{-1}$)")
    handles, labels = axis.get_legend_handles_labels()
    if _has(window, "theta"):
        twin = axis.twiny()
        theta = window["theta"].values
        twin.plot(theta, depth, color="0.35", linewidth=0.9, linestyle=(0, (3, 1, 1, 1)))
        units = str(window["theta"].attrs.get("units", "degC")).replace("degC", "°C")
        twin.set_xlabel(f"temperature ({units})", color="0.35", fontsize=7)
        twin.tick_params(axis="x", colors="0.35", labelsize=6.5)
        twin.spines["top"].set_visible(True)
        twin.spines["top"].set_color("0.35")
        handles.append(twin.lines[0])
        labels.append("$\\overline{\\theta}$")
    _legend_below(axis, handles, labels)


def _legend_below(axis: Axes, handles: list[Any] | None = None, labels: list[str] | None = None) -> None:
    """A legend under the axis label, where no profile can run through it."""
    if handles is None or labels is None:
        handles, labels = axis.get_legend_handles_labels()
    axis.legend(handles, labels, loc="upper center", bbox_to_anchor=(0.5, -0.27), ncol=1, handlelength=2.2,
                borderaxespad=0.0, labelspacing=0.25)


def _has(window: xr.Dataset, variable: str) -> bool:
    return variable in window and bool(np.isfinite(window[variable].values).any())
