"""Confidence bounds of a one-sided index by the non-central t distribution, for many characteristics at once.

3 sqrt(n) (index estimate) is non-central t with non-centrality 3 sqrt(n) (true index). Its level is an average over
two independent variables: z (normal, from the mean) and r = sqrt(chi-square / df) (from sigma). One of them is
integrated in closed form, the other by the trapezoid rule, whose error falls exponentially for smooth integrands:
the one that leaves the smoother integrand is chosen, so a dozen digits come from a few dozen points from df 5 to
1e6 and from index -5 to 50 (measured against mpmath and scipy in the tests).
"""

from __future__ import annotations

import numpy as np
from scipy.special import gammaincc, gammaln, ndtr, ndtri

from portfolio.statistics.ragged import Floats

NORMAL = np.arange(-7.2, 7.21, 0.6)
"Points of z."
LOG_CHI = np.arange(-16.0, 8.01, 0.4)
"Points of log r in its asymptotic standard deviations, 1 / sqrt(2 df); its left tail is the longer one."
STEPS = 60
ENOUGH = 1e-6
"Relative step at which the search ends: a Newton step this small leaves an error of about its square."


def index_bound(estimate: Floats, n: Floats, df: Floats, level: float) -> Floats:
    """The c with P(index >= c) = level: the lower bound for level 0.95, the upper bound for level 0.05.

    Parameters
    ----------
    estimate : (K,) one-sided index, (limit - mean) / (3 s), finite
    n, df : (K,) effective number of values behind the mean (above 0), degrees of freedom of s (at least 1)

    Source
    ------
    Owen (1968). Newton steps on the normal score of the level, kept inside a shrinking bracket.
    """
    flipped = estimate < 0  # P(index >= c) of one process is P(index <= -c) of its mirror image
    size = np.abs(estimate)
    sought = np.where(flipped, 1 - level, level)
    score = ndtri(sought)
    k = 3 * np.sqrt(n)
    spread = np.sqrt(1 / k**2 + size**2 / (2 * df))
    low, high = -10 / k, size * (1 + 12 / np.sqrt(df) + 60 / df) + 10 / k
    c = np.clip(size - score * spread, low, high)
    active = np.arange(len(c))
    for _ in range(STEPS):
        if not len(active):
            break
        here, s = c[active], size[active]
        p, density = _level(here, s, k[active], df[active])
        above = p > sought[active]  # the bound lies higher
        low[active], high[active] = np.where(above, here, low[active]), np.where(above, high[active], here)
        with np.errstate(divide="ignore", invalid="ignore"):
            at = ndtri(p)
            step = (at - score[active]) * np.exp(-0.5 * at**2) / np.sqrt(2 * np.pi) / density
            trial = here + step
        inside = (trial > low[active]) & (trial < high[active])
        c[active] = np.where(inside, trial, (low[active] + high[active]) / 2)
        active = active[np.abs(c[active] - here) > ENOUGH * (spread[active] + s)]
    return np.where(flipped, -c, c)


def _level(c: Floats, size: Floats, k: Floats, df: Floats) -> tuple[Floats, Floats]:
    """P(size r - z / k >= c) and its density in c, for r = sqrt(chi-square / df), z standard normal."""
    p, density = np.empty(len(c)), np.empty(len(c))
    over_z = k * size >= np.sqrt(2 * df)
    for rows, rule in ((over_z, _over_normal), (~over_z, _over_chi)):
        p[rows], density[rows] = rule(c[rows], size[rows], k[rows], df[rows])
    return p, density


def _over_normal(c: Floats, size: Floats, k: Floats, df: Floats) -> tuple[Floats, Floats]:
    weight = np.exp(-0.5 * NORMAL**2)
    weight /= weight.sum()
    half = df[:, None] / 2
    r = np.maximum((c[:, None] + NORMAL / k[:, None]) / size[:, None], 0.0)
    x = half * r**2
    with np.errstate(divide="ignore", invalid="ignore"):
        log_density = np.log(df)[:, None] + np.log(r) + (half - 1) * np.log(x) - x - gammaln(half)
        density = np.where(r > 0, np.exp(log_density), 0.0)
    return gammaincc(half, x) @ weight, density @ weight / size


def _over_chi(c: Floats, size: Floats, k: Floats, df: Floats) -> tuple[Floats, Floats]:
    x = LOG_CHI / np.sqrt(2 * df)[:, None]
    weight = np.exp(df[:, None] * (x - 0.5 * np.expm1(2 * x)))
    weight /= weight.sum(axis=1, keepdims=True)
    score = k[:, None] * (size[:, None] * np.exp(x) - c[:, None])
    p = np.sum(ndtr(score) * weight, axis=1)
    return p, np.sum(np.exp(-0.5 * score**2) * weight, axis=1) * k / np.sqrt(2 * np.pi)
