"""Factors of control charts from their integrals, not from a typed table.

`d2`, `d3`: mean and standard deviation of the range of n standard normal values (Tippett 1925); `d4`: its median;
`c4`: mean of the standard deviation (Helmert). Checked in tests against the printed tables of ASTM MNL 7 / ISO 7870-2.
"""

from __future__ import annotations

from functools import cache

import numpy as np
from numpy.typing import ArrayLike
from scipy.special import gammaln, ndtr

from portfolio.statistics.ragged import Floats

LARGEST_RANGE = 100
"Ranges of larger subgroups are not charted: the standard deviation says more."
REACH = 10.0
NODES = 400


def c4(n: ArrayLike) -> Floats:
    """E(s) / sigma for subgroups of n normal values; NaN below 2."""
    n = np.asarray(n, dtype=np.float64)
    with np.errstate(invalid="ignore", divide="ignore"):
        out = np.sqrt(2 / (n - 1)) * np.exp(gammaln(n / 2) - gammaln((n - 1) / 2))
    return np.where(n > 1, out, np.nan)


def d2(n: ArrayLike) -> Floats:
    """E(range) / sigma; NaN below 2 and above 100."""
    return _looked_up(n, 0)


def d3(n: ArrayLike) -> Floats:
    """Standard deviation of the range / sigma; NaN below 2 and above 100."""
    return _looked_up(n, 1)


def d4(n: ArrayLike) -> Floats:
    """Median of the range / sigma; NaN below 2 and above 100."""
    return _looked_up(n, 2)


def _looked_up(n: ArrayLike, which: int) -> Floats:
    sizes = np.asarray(n)
    out = np.full(sizes.shape, np.nan)
    for size in np.unique(sizes[(sizes >= 2) & (sizes <= LARGEST_RANGE)]).astype(int).tolist():
        out[sizes == size] = _range_factors(size)[which]
    return out


@cache
def _range_factors(n: int) -> tuple[float, float, float]:
    """Mean, standard deviation and median of the range of n standard normal values."""
    node, weight = np.polynomial.legendre.leggauss(NODES)
    x, wx = node * REACH, weight * REACH

    def exceeds(w: Floats) -> Floats:
        """P(range > w): 1 - n times the integral of phi(x) (Phi(x + w) - Phi(x))^(n - 1)."""
        density = np.exp(-0.5 * x**2) / np.sqrt(2 * np.pi)
        inner = (ndtr(x[:, None] + w) - ndtr(x)[:, None]) ** (n - 1)
        return np.asarray(1 - n * (wx * density) @ inner)

    w, ww = (node + 1) * REACH, weight * REACH  # ranges up to 20 sigma
    tail = exceeds(w)
    mean = float(ww @ tail)
    second = float(ww @ (2 * w * tail))
    low, high = 0.0, 2 * REACH
    for _ in range(60):
        middle = (low + high) / 2
        low, high = (middle, high) if exceeds(np.array([middle]))[0] > 0.5 else (low, middle)
    return mean, float(np.sqrt(second - mean**2)), (low + high) / 2
