"""Plan views of near-surface vertical velocity, with wind, waves and the measured cell axis drawn over them."""

from __future__ import annotations

import matplotlib.pyplot as plt
import numpy as np
import xarray as xr
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from lespost.report import style


def plan_view_figure(views: xr.Dataset, directions: dict[str, dict[str, float | None]]) -> Figure:
    """One panel per window of w [m s-1] on its level (views: w (window, y, x); coords depth, time per window).

    directions: per window name, any of "wind", "waves" (towards, degrees counter-clockwise from +x) and "axis" (a
    director); drawn as arrows and a double-headed line in the corner.
    """
    names = [str(name) for name in views["window"].values]
    columns = min(len(names), 3)
    rows = -(-len(names) // columns)
    width = style.ONE_COLUMN if columns == 1 else style.TWO_COLUMNS
    figure, grid = plt.subplots(rows, columns, squeeze=False, figsize=(width, rows * (width / columns * 0.82 + 0.35)))
    limit = float(np.nanquantile(np.abs(views["w"].values), 0.995)) * 100 or 1.0
    image = None
    for axis, name in zip(grid.flat, names, strict=False):
        view = views.sel(window=name)
        x, y = views["x"].values, views["y"].values
        dx, dy = x[1] - x[0], y[1] - y[0]
        image = axis.imshow(view["w"].values * 100, origin="lower", cmap=style.colour_map("balance"), vmin=-limit, vmax=limit,
                            extent=(x[0] - dx / 2, x[-1] + dx / 2, y[0] - dy / 2, y[-1] + dy / 2),
                            interpolation="nearest", rasterized=True)
        axis.set_title(f"{name}: {float(view['depth']):.1f} m, t = {float(view['view_time']) / 3600:.2f} h")
        axis.set_xlabel("x (m)")
        axis.set_ylabel("y (m)")
        for spine in axis.spines.values():
            spine.set_visible(True)
        _compass(axis, directions.get(name, {}))
    for axis in list(grid.flat)[len(names):]:
        axis.axis("off")
    if image is not None:
        bar = figure.colorbar(image, ax=list(grid.flat), shrink=0.8, aspect=30, pad=0.02)
        bar.set_label("w (cm s$^{-1}$), upward positive")
    return figure


def _compass(axis: Axes, directions: dict[str, float | None]) -> None:
    """Arrows in an inset at the lower left: wind (solid), waves (dashed), cell axis (double-headed, thin)."""
    shown = {kind: angle for kind, angle in directions.items() if angle is not None and np.isfinite(angle)}
    if not shown:
        return
    inset = axis.inset_axes((0.02, 0.02, 0.38, 0.26))
    inset.set(xlim=(-1.3, 3.2), ylim=(-1.35, 1.35), xticks=[], yticks=[], aspect="equal", anchor="SW")
    inset.patch.set(facecolor="white", alpha=0.88)
    for spine in inset.spines.values():
        spine.set_visible(True)
        spine.set_linewidth(0.4)
    looks = {"waves": ("->", (0, (3, 1.5)), "#0072B2", 0.4, "waves"), "wind": ("->", "-", "#000000", 0.0, "wind"),
             "axis": ("<->", "-", "#009E73", -0.4, "cells")}
    for row, kind in enumerate(kind for kind in looks if kind in shown):
        arrow, dash, colour, shift, label = looks[kind]
        dx, dy = np.cos(np.radians(shown[kind])), np.sin(np.radians(shown[kind]))
        sx, sy = -dy * shift, dx * shift
        inset.annotate("", xy=(dx + sx, dy + sy), xytext=(-dx + sx, -dy + sy),
                       arrowprops={"arrowstyle": arrow, "color": colour, "linestyle": dash, "linewidth": 1.0,
                                   "shrinkA": 0, "shrinkB": 0})
        inset.text(1.5, 0.75 - 0.75 * row, label, color=colour, fontsize=6, va="center")
