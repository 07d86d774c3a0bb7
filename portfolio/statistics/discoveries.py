"""False discovery control over the whole portfolio."""

from __future__ import annotations

import numpy as np
from scipy import stats

from portfolio.statistics.ragged import Floats


def adjusted(p: Floats) -> Floats:
    """q-values of p-values (K,): the smallest false discovery rate at which each would be called unstable.

    NaN (not judged) stays NaN and does not count. Source: Benjamini & Hochberg (1995).
    """
    out = np.full(len(p), np.nan)
    there = ~np.isnan(p)
    if there.any():
        out[there] = stats.false_discovery_control(np.clip(p[there], 0.0, 1.0), method="bh")
    return out
