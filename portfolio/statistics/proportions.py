"""Intervals of a share: Clopper-Pearson where a promise is made, Wilson where shares are compared.

Arrays of any equal shape; NaN where nothing was counted or the count does not fit into it.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike
from scipy import stats

from portfolio.statistics.ragged import Floats


def clopper_pearson(count: ArrayLike, n: ArrayLike, *, confidence: float = 0.95) -> tuple[Floats, Floats]:
    """Two-sided interval of a share, `count` of `n`, never too short. Source: Clopper & Pearson (1934)."""
    k, n = _checked(count, n, confidence)
    tail = (1 - confidence) / 2
    low = np.where(k == 0, 0.0 * k, stats.beta.ppf(tail, np.maximum(k, 1), n - k + 1))
    return low, _upper(k, n, tail)


def clopper_pearson_upper(count: ArrayLike, n: ArrayLike, *, confidence: float = 0.95) -> Floats:
    """One-sided upper bound of a share: with 0 of n it is 1 - (1 - confidence)^(1/n)."""
    k, n = _checked(count, n, confidence)
    return _upper(k, n, 1 - confidence)


def wilson(count: ArrayLike, n: ArrayLike, *, confidence: float = 0.95) -> tuple[Floats, Floats]:
    """Two-sided score interval of a share. Source: Wilson (1927), Newcombe (1998) method 3."""
    k, n = _checked(count, n, confidence)
    z2 = stats.norm.isf((1 - confidence) / 2) ** 2
    middle = (k + z2 / 2) / (n + z2)
    half = np.sqrt(z2) / (n + z2) * np.sqrt(k * (n - k) / n + z2 / 4)
    # Exactly 0 and 1 at the ends, where rounding would leave a trace.
    return np.where(k == 0, 0.0 * k, middle - half), np.where(k == n, 1.0 + 0.0 * k, middle + half)


def _checked(count: ArrayLike, n: ArrayLike, confidence: float) -> tuple[Floats, Floats]:
    if not 0 < confidence < 1:
        raise ValueError(f"confidence is {confidence}; give a probability between 0 and 1, such as 0.95")
    k, m = np.broadcast_arrays(np.asarray(count, dtype=np.float64), np.asarray(n, dtype=np.float64))
    usable = (m > 0) & (k >= 0) & (k <= m)
    return np.where(usable, k, np.nan), np.where(usable, m, np.nan)


def _upper(k: Floats, n: Floats, tail: float) -> Floats:
    inside = np.asarray(stats.beta.isf(tail, k + 1, np.maximum(n - k, 1)), dtype=np.float64)
    return np.where(k == n, 1.0, inside)
