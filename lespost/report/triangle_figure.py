"""The component-variance triangle: how a level's velocity variance is shared between along, cross and vertical.

Each depth is one point in an equilateral triangle whose corners are all-along, all-cross and all-vertical. The lines
through the centre are where two shares are equal; they cut the triangle into the orderings that tell the regimes apart
(shear: along > cross > vertical; Langmuir: cross and vertical > along; convection: vertical largest; Li, Garrett &
Skyllingstad 2005).
"""

from __future__ import annotations

import matplotlib.pyplot as plt
import numpy as np
import pandas as pd
from matplotlib.figure import Figure

from lespost.report import style

_CORNERS = np.array([[0.0, 0.0], [1.0, 0.0], [0.5, np.sqrt(3) / 2]])  # along, cross, vertical


def ternary(along: np.ndarray, cross: np.ndarray, vertical: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Plane coordinates of shares that sum to one; arrays of any equal shape."""
    shares = np.stack([along, cross, vertical], axis=-1)
    points = shares @ _CORNERS
    return points[..., 0], points[..., 1]


def triangle_figure(profile: pd.DataFrame, regime: pd.DataFrame, name: str, reference_depth: float) -> Figure:
    """One window's shares by depth, coloured by depth, with the classified bands on top.

    profile: columns depth [m], fraction_along, fraction_cross, fraction_vertical (frame of the classifier).
    regime: rows of regime.csv for this window.
    reference_depth: the layer depth h that scales the colours [m].
    """
    figure, axis = plt.subplots(figsize=(style.ONE_COLUMN, 3.1))
    _frame(axis)
    x, y = ternary(*(profile[f"fraction_{part}"].to_numpy(float) for part in ("along", "cross", "vertical")))
    relative = profile["depth"].to_numpy(float) / reference_depth
    inside = np.isfinite(x) & (relative <= 1.0)
    axis.plot(x[inside], y[inside], color="0.6", linewidth=0.6, zorder=2)
    dots = axis.scatter(x[inside], y[inside], c=relative[inside], cmap=style.colour_map("deep"), vmin=0, vmax=1, s=14,
                        edgecolor="0.25", linewidth=0.25, zorder=3)
    for _, row in regime.iterrows():
        px, py = ternary(np.array(row["fraction_along"]), np.array(row["fraction_cross"]),
                         np.array(row["fraction_vertical"]))
        if np.isfinite(px):
            label = str(row["regime"])
            axis.plot(px, py, marker=style.REGIME_MARKER.get(label, "o"), color=style.REGIME_COLOUR.get(label, "k"),
                      markersize=8, markeredgecolor="white", markeredgewidth=0.8, zorder=5, linestyle="none",
                      label=f"{-row['z_top']:.0f}–{-row['z_bottom']:.0f} m: {label}")
    axis.legend(loc="upper center", bbox_to_anchor=(0.5, 0.0), ncol=1, handletextpad=0.3)
    bar = figure.colorbar(dots, ax=axis, shrink=0.62, aspect=18, pad=0.03)
    bar.set_label("depth / h")
    bar.ax.invert_yaxis()
    axis.set_title(f"{name}: share of velocity variance")
    return figure


def _frame(axis: plt.Axes) -> None:
    closed = np.vstack([_CORNERS, _CORNERS[:1]])
    axis.plot(closed[:, 0], closed[:, 1], color="0.2", linewidth=0.8)
    centre = _CORNERS.mean(axis=0)
    for corner in range(3):
        middle = (_CORNERS[(corner + 1) % 3] + _CORNERS[(corner + 2) % 3]) / 2
        axis.plot([_CORNERS[corner, 0], middle[0]], [_CORNERS[corner, 1], middle[1]], color="0.8", linewidth=0.6,
                  zorder=1)
    axis.plot(*centre, marker="+", color="0.5", markersize=6)
    for share in (0.2, 0.4, 0.6, 0.8):
        for first in range(3):
            # the line of constant share of one component
            one = share * _CORNERS[first] + (1 - share) * _CORNERS[(first + 1) % 3]
            two = share * _CORNERS[first] + (1 - share) * _CORNERS[(first + 2) % 3]
            axis.plot([one[0], two[0]], [one[1], two[1]], color="0.92", linewidth=0.4, zorder=0)
    for corner, text, ha, va in ((0, "along", "right", "top"), (1, "cross", "left", "top"), (2, "vertical", "center", "bottom")):
        axis.text(float(_CORNERS[corner, 0]), float(_CORNERS[corner, 1]), text, ha=ha, va=va, fontsize=8)
    for area, (px, py) in {"shear": (0.22, 0.10), "Langmuir": (0.66, 0.36), "convective": (0.5, 0.70)}.items():
        axis.text(px, py, area, fontsize=6.5, color="0.45", ha="center", style="italic")
    axis.set_aspect("equal")
    axis.set_xlim(-0.12, 1.12)
    axis.set_ylim(-0.07, 0.98)
    axis.axis("off")
