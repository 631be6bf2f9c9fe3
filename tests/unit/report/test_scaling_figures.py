"""Figures of velocity laws: every panel has its chance, its numbers and legible axes."""

from __future__ import annotations

from itertools import pairwise

import matplotlib.pyplot as plt
import numpy as np
import pytest

from lespost.report import style
from lespost.report.scaling_figures import laws_figure, residual_figure
from lespost.scaling.analyse import Analysis, analyse
from lespost.scaling.settings import ScalingSettings
from tests.unit.scaling.storms import storm


@pytest.fixture(scope="module")
def analysis() -> Analysis:
    return analyse(storm(np.random.default_rng(5)), ScalingSettings(bootstrap_samples=100, permutations=100))


@pytest.mark.parametrize("scaled", [False, True])
def test_each_panel_names_its_law_and_its_chance(analysis: Analysis, scaled: bool) -> None:
    with style.house_style():
        figure = laws_figure(analysis, scaled)
    panels = [axis for axis in figure.axes if axis.get_visible()]
    assert len(panels) == 5  # u* has no scaled panel, u* La_t^n no other
    for axis in panels:
        assert "by chance" in axis.texts[0].get_text()
        assert "-" not in axis.texts[0].get_text()
        assert axis.get_xlabel().endswith("[1]" if scaled else "[m s-1]")
    titles = [axis.get_title(loc="left") or axis.get_title() for axis in panels]
    assert "Van Roekel et al. 2012" in titles
    assert len(set(titles)) == 5
    plt.close(figure)


def test_numbers_on_the_axes_do_not_touch(analysis: Analysis) -> None:
    with style.house_style():
        for figure in (laws_figure(analysis, True), laws_figure(analysis, False), residual_figure(analysis)):
            figure.canvas.draw()
            for axis in (axis for axis in figure.axes if axis.get_visible()):
                low, high = axis.get_xlim()
                ticks = [tick for tick in axis.xaxis.get_major_ticks() if low <= tick.get_loc() <= high]
                assert 2 <= len(ticks) <= 6
                boxes = sorted(tick.label1.get_window_extent().extents[[0, 2]].tolist() for tick in ticks if tick.label1.get_visible())
                for one, two in pairwise(boxes):
                    assert two[0] > one[1]
                for tick in ticks:
                    assert float(tick.label1.get_text()) == pytest.approx(tick.get_loc(), rel=1e-5)
            plt.close(figure)
