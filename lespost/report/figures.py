"""The figures of a results folder: which are drawn, with the title, caption and text alternative of each."""

from __future__ import annotations

import re
from dataclasses import dataclass
from pathlib import Path
from typing import Literal

import numpy as np
import pandas as pd
import xarray as xr
from matplotlib.figure import Figure

from lespost.report import style
from lespost.report.comparison_figure import comparison_figure
from lespost.report.plan_view_figure import plan_view_figure
from lespost.report.profiles_figure import profiles_figure
from lespost.report.regime_plane_figure import regime_plane_figure
from lespost.report.results import Results
from lespost.report.triangle_figure import triangle_figure


@dataclass(frozen=True)
class FigureFile:
    """A figure as written: paths (svg first, then png), and the words that go with it on the page."""

    name: str
    title: str
    caption: str
    alt: str
    section: Literal["evidence", "comparison"]
    width_inch: float
    paths: tuple[Path, Path]


def draw_figures(results: Results) -> list[FigureFile]:
    """Draws every figure the results allow into `figures/` of the results folder."""
    folder = results.folder / "figures"
    folder.mkdir(exist_ok=True)
    drawn: list[FigureFile] = []
    with style.house_style():
        if results.views is not None:
            drawn.append(_plan_view(results, results.views, folder))
        for window in results.windows["window"].values:
            drawn += _window_figures(results, str(window), folder)
        drawn.append(_regime_plane(results, folder))
        if results.comparison is not None and len(results.comparison):
            for (instrument, record), table in results.comparison.groupby(["instrument", "record"], sort=False):
                drawn.append(_comparison(table, str(instrument), str(record), folder))
    return drawn


def _safe(name: str) -> str:
    return re.sub(r"[^A-Za-z0-9_-]+", "_", name)


def _file(figure: Figure, folder: Path, name: str, title: str, caption: str, alt: str,
          section: Literal["evidence", "comparison"] = "evidence") -> FigureFile:
    width = float(figure.get_size_inches()[0])
    svg, png = style.save(figure, folder, name)
    return FigureFile(name, title, caption, alt, section, width, (svg, png))


def _layer_depth(rows: pd.DataFrame) -> float | None:
    depth = rows["h"].dropna()
    return float(depth.iloc[0]) if len(depth) else None


def _window_figures(results: Results, window: str, folder: Path) -> list[FigureFile]:
    data = results.windows.sel(window=window)
    rows = results.regime[results.regime["window"] == window]
    depth = _layer_depth(rows)
    snapshots = int(results.windows["snapshots"].sel(window=window)) if "snapshots" in results.windows else 0
    profiles = _file(
        profiles_figure(data, window, depth), folder, f"profiles_{_safe(window)}", f"Profiles, {window}",
        f"Means, variances and upward fluxes over {snapshots} snapshots; bands are 95 % intervals of the window mean, from "
        "spread between snapshots and between parts of the domain. Dashed line h: boundary-layer depth.",
        f"Four panels over depth: velocity variances, momentum flux, temperature flux, means, for window {window}",
    )
    shares = share_profile(data, rows)
    reference = depth if depth is not None else float(-data["z"].values.min())
    triangle = _file(
        triangle_figure(shares, rows, window, reference), folder, f"triangle_{_safe(window)}",
        f"Component variances, {window}",
        "Each dot is one level; corners mean all variance in that component. Thin lines: equal shares. Markers: classified "
        "depth bands.",
        f"Triangle of the shares of along, cross and vertical velocity variance by depth for window {window}",
    )
    return [profiles, triangle]


def share_profile(window: xr.Dataset, rows: pd.DataFrame) -> pd.DataFrame:
    """Shares of velocity variance by level, in the axes of the first classified band (axis_deg in regime.csv)."""
    angle = rows["axis_deg"].dropna()
    turn = np.radians(float(angle.iloc[0])) if len(angle) else 0.0
    uu, vv, ww, uv = (window[name].values for name in ("uu", "vv", "ww", "uv"))
    along = uu * np.cos(turn) ** 2 + vv * np.sin(turn) ** 2 + 2 * uv * np.sin(turn) * np.cos(turn)
    cross = uu + vv - along
    total = along + cross + ww
    with np.errstate(invalid="ignore", divide="ignore"):
        return pd.DataFrame({"depth": -window["z"].values, "fraction_along": along / total,
                             "fraction_cross": cross / total, "fraction_vertical": ww / total})


def _regime_plane(results: Results, folder: Path) -> FigureFile:
    return _file(
        regime_plane_figure(results.regime), folder, "regime_plane", "Regime plane",
        "Each marker is one window by its forcing; marker and colour show the regime found from the velocity variances. Lines: "
        "one production of turbulence makes 90 % of the dissipation estimate of Belcher et al. (2012).",
        "Turbulent Langmuir number against h over L_L with dividing lines of forcing regimes",
    )


def _plan_view(results: Results, views: xr.Dataset, folder: Path) -> FigureFile:
    directions = results.run.get("directions", {})
    return _file(
        plan_view_figure(views, directions), folder, "plan_views", "Near-surface vertical velocity",
        "One snapshot per window. Streaks alone do not prove Langmuir turbulence: simulations with and without Stokes drift both "
        "make them (Sundermeyer et al. 2014).",
        "Plan view of vertical velocity near the surface, one panel per window",
    )


def _comparison(table: pd.DataFrame, instrument: str, record: str, folder: Path) -> FigureFile:
    return _file(
        comparison_figure(table, instrument, record), folder, f"comparison_{_safe(instrument)}_{_safe(record)}",
        f"Virtual {instrument} beside record {record}",
        "Symbols with bars: value and 95 % interval of each side after the same processing. Marks at the right edge: verdict.",
        f"Profiles of each compared quantity from the record {record} and from the virtual instrument {instrument}",
        "comparison",
    )
