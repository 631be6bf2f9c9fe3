"""Corrections for asking many questions at once."""

from __future__ import annotations

import numpy as np


def benjamini_hochberg(p_values: np.ndarray) -> np.ndarray:
    """p values adjusted for the false discovery rate (Benjamini & Hochberg 1995); NaN stay NaN and do not count."""
    from statsmodels.stats.multitest import multipletests

    values = np.asarray(p_values, dtype=np.float64)
    adjusted = np.full(values.shape, np.nan)
    known = np.isfinite(values)
    if known.any():
        adjusted[known] = multipletests(values[known], method="fdr_bh")[1]
    return adjusted
