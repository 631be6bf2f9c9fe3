"""Rebuilds figures and page of a results folder: what `lespost page OUT` and the end of every run call."""

from __future__ import annotations

from pathlib import Path

from lespost.report.figures import draw_figures
from lespost.report.page import write_page
from lespost.report.results import read_results


def build_report(folder: Path) -> Path:
    """Draws the figures, writes `report.html`, returns its path. Raises DataError if the folder is not complete."""
    results = read_results(folder)
    return write_page(results, draw_figures(results))
