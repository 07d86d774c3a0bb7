"""Intervals of a share: Clopper-Pearson where a promise is made, Wilson where shares are compared."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike
from scipy import stats

from portfolio.statistics.ragged import Floats


def clopper_pearson(count: ArrayLike, n: ArrayLike, *, confidence: float = 0.95) -> tuple[Floats, Floats]:
    """Two-sided interval of a share, `count` of `n`; NaN where n is 0. Source: Clopper & Pearson (1934)."""
    count, n = np.asarray(count, dtype=np.float64), np.asarray(n, dtype=np.float64)
    tail = (1 - confidence) / 2
    low = np.where(count > 0, stats.beta.ppf(tail, np.maximum(count, 1), n - count + 1), 0.0)
    return np.where(n > 0, low, np.nan), _upper(count, n, tail)


def clopper_pearson_upper(count: ArrayLike, n: ArrayLike, *, confidence: float = 0.95) -> Floats:
    """One-sided upper bound of a share: with 0 of n it is 1 - (1 - confidence)^(1/n)."""
    return _upper(np.asarray(count, dtype=np.float64), np.asarray(n, dtype=np.float64), 1 - confidence)


def wilson(count: ArrayLike, n: ArrayLike, *, confidence: float = 0.95) -> tuple[Floats, Floats]:
    """Two-sided score interval of a share; NaN where n is 0. Source: Wilson (1927), Newcombe (1998) method 3."""
    count, n = np.asarray(count, dtype=np.float64), np.asarray(n, dtype=np.float64)
    z2 = stats.norm.isf((1 - confidence) / 2) ** 2
    with np.errstate(invalid="ignore", divide="ignore"):
        middle = (count + z2 / 2) / (n + z2)
        half = np.sqrt(z2) / (n + z2) * np.sqrt(count * (n - count) / n + z2 / 4)
    low, high = np.clip(middle - half, 0, 1), np.clip(middle + half, 0, 1)
    return np.where(n > 0, np.where(count == 0, 0.0, low), np.nan), np.where(
        n > 0, np.where(count == n, 1.0, high), np.nan
    )


def _upper(count: Floats, n: Floats, tail: float) -> Floats:
    inside = stats.beta.isf(tail, count + 1, np.maximum(n - count, 1))
    return np.where(n > 0, np.where(count < n, inside, 1.0), np.nan)
