"""Capability indices of normal data, their bounds, and the chance that a target is reached.

The core formula gives the posterior probability P(Cpk >= c) with the right-Haar prior; with one limit it equals the
confidence level of the non-central t bound. The verdict uses the nearest limit only; the chance after a move uses
both (capability study, sections 1 and 2). All arrays (K,); limits -inf / +inf where there is none.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import stats
from scipy.special import gammaincinv, ndtr, stdtr

from portfolio.statistics import noncentral
from portfolio.statistics.ragged import Bools, Floats

NODES = 160
"Equal-probability nodes of the chi-square distribution: error below 0.0012 (capability study, section 1)."
LEVELS = (np.arange(NODES) + 0.5) / NODES
FEWEST_SMOOTH = 5.0
DEGREE = 20


@dataclass(frozen=True)
class Indices:
    """`cp` needs both limits; `cpl`, `cpu` NaN where their limit is missing; `cpk` the smaller of those there are."""

    cp: Floats
    cpl: Floats
    cpu: Floats
    cpk: Floats


def indices(mean: Floats, sigma: Floats, lower: Floats, upper: Floats) -> Indices:
    """Cp, Cpl, Cpu, Cpk of K characteristics; NaN where sigma is not above 0 or the limits are crossed.

    Source: Kane (1986); ISO 22514-2 with the total sigma, AIAG SPC with the within-subgroup sigma.
    """
    with np.errstate(invalid="ignore", divide="ignore"):
        s = np.where((sigma > 0) & (np.asarray(lower) < upper), sigma, np.nan)
        cpl = np.where(np.isfinite(lower), (mean - lower) / (3 * s), np.nan)
        cpu = np.where(np.isfinite(upper), (upper - mean) / (3 * s), np.nan)
        cp = np.where(np.isfinite(lower) & np.isfinite(upper), (upper - lower) / (6 * s), np.nan)
    return Indices(cp, cpl, cpu, np.fmin(cpl, cpu))


def cpm(mean: Floats, sigma: Floats, lower: Floats, upper: Floats, aim: Floats) -> Floats:
    """Cpm = (U - L) / (6 sqrt(sigma^2 + (mean - aim)^2)). Source: Chan, Cheng & Spiring (1988), from memory."""
    with np.errstate(invalid="ignore"):
        return indices(mean, np.sqrt(sigma**2 + (mean - aim) ** 2), lower, upper).cp


def sigma_nodes(df: Floats) -> Floats:
    """sigma / s at NODES equal-probability nodes of its posterior, (K, NODES): sqrt(df / chi-square); NaN for df <= 0.

    The cube root of chi-square / df is a smooth function of 1 / sqrt(df) (Wilson & Hilferty 1931): a polynomial
    gives it to 14 digits in a fiftieth of the time of the inverse gamma function.
    """
    degrees = np.where(df > 0, df, np.nan)
    root = np.empty((len(degrees), NODES))
    many = degrees >= FEWEST_SMOOTH
    at = np.polynomial.chebyshev.chebvander(2 * np.sqrt(FEWEST_SMOOTH / degrees[many]) - 1, DEGREE)
    root[many] = at @ _smooth_roots()
    half = degrees[~many][:, None] / 2
    root[~many] = np.cbrt(gammaincinv(half, LEVELS) / half)
    nodes: Floats = root**-1.5
    return nodes


@cache
def _smooth_roots() -> Floats:
    """Chebyshev coefficients of the cube root of chi-square / df, (DEGREE + 1, NODES)."""
    points = np.polynomial.chebyshev.chebpts1(DEGREE + 1)
    half = FEWEST_SMOOTH / (0.5 * (points + 1)) ** 2 / 2
    values = np.cbrt(gammaincinv(half[:, None], LEVELS) / half[:, None])
    return np.asarray(np.polynomial.chebyshev.chebfit(points, values, DEGREE), dtype=np.float64)


def core_probability(
    mean: Floats, sigma: Floats, n_mean: Floats, df: Floats, lower: Floats, upper: Floats, target: ArrayLike
) -> Floats:
    """P(Cpk >= target | data) with both limits.

    Parameters
    ----------
    mean, sigma : (K,) unit of the characteristic
    n_mean, df : (K,) effective number of values behind the mean, effective degrees of freedom of sigma
    target : (K,) or one number

    Returns
    -------
    (K,) probability; NaN where sigma or df is not above 0, the limits are crossed or there is none

    Source
    ------
    Right-Haar posterior of a normal process, averaged over sigma: capability study, section 1. With one limit it is
    the confidence level of the non-central t bound (Owen 1968).
    """
    mean, sigma, df, target = np.broadcast_arrays(mean, sigma, df, np.asarray(target, dtype=np.float64))
    usable = (sigma > 0) & (np.isfinite(lower) | np.isfinite(upper)) & (np.asarray(lower) < upper)
    return probability_at(sigma_nodes(df), mean, np.where(usable, sigma, np.nan), n_mean, lower, upper, target)


def probability_at(
    nodes: Floats, mean: Floats, sigma: Floats, n_mean: Floats, lower: Floats, upper: Floats, target: Floats
) -> Floats:
    """The core probability with nodes (K, NODES) that are known already: several means, one sigma."""
    with np.errstate(invalid="ignore", divide="ignore"):
        root = np.sqrt(n_mean)
        slack = 3 * root * target
        scale = (root / sigma)[:, None] / nodes
        below = ndtr((upper - mean)[:, None] * scale - slack[:, None])
        above = ndtr((lower - mean)[:, None] * scale + slack[:, None])
        inside: Floats = np.maximum(below - above, 0.0).mean(axis=1)
    return inside


def nearest_limits(mean: Floats, lower: Floats, upper: Floats) -> tuple[Floats, Floats]:
    """The limits with the farther one taken away, (K,) each; NaN where they are crossed."""
    with np.errstate(invalid="ignore"):
        lower_is_near = mean - lower <= upper - mean
    near = np.where(lower_is_near, lower, -np.inf), np.where(lower_is_near, np.inf, upper)
    crossed = np.asarray(lower) >= upper
    return np.where(crossed, np.nan, near[0]), np.where(crossed, np.nan, near[1])


def nearest_limit_probability(
    mean: Floats, sigma: Floats, n_mean: Floats, df: Floats, lower: Floats, upper: Floats, target: ArrayLike
) -> Floats:
    """P(Cpk >= target | data) by the nearest limit only: what the verdict rests on."""
    low, high = nearest_limits(mean, lower, upper)
    return core_probability(mean, sigma, n_mean, df, low, high, target)


def capability_bounds(
    mean: Floats, sigma: Floats, n_mean: Floats, df: Floats, lower: Floats, upper: Floats, *, confidence: float = 0.95
) -> tuple[Floats, Floats]:
    """One-sided confidence bounds of Cpk for normal data, by the nearest limit.

    Parameters
    ----------
    mean, sigma : (K,) unit of the characteristic
    n_mean, df : (K,) effective number of values behind the mean, effective degrees of freedom of sigma
    confidence : probability of each one-sided bound

    Returns
    -------
    low, high : (K,) NaN where sigma is not above 0 or df below 1

    Raises
    ------
    ValueError
        If `confidence` is not between 0 and 1.

    Source
    ------
    Non-central t, Owen (1968): 3 sqrt(n) Cpk_hat is non-central t with non-centrality 3 sqrt(n) Cpk. Agreement with
    scipy's non-central t and with Bissell (1990) checked in tests.
    """
    _check(confidence)
    estimate = indices(mean, sigma, lower, upper).cpk  # already by the nearest limit
    usable = np.isfinite(estimate) & (df >= 1) & (n_mean > 0)
    low, high = np.full(len(estimate), np.nan), np.full(len(estimate), np.nan)
    c, n, nu = estimate[usable], n_mean[usable], df[usable]
    low[usable] = noncentral.index_bound(c, n, nu, confidence)
    high[usable] = noncentral.index_bound(c, n, nu, 1 - confidence)
    return low, high


def spread_bounds(cp: Floats, df: Floats, *, confidence: float = 0.95) -> tuple[Floats, Floats]:
    """One-sided bounds of Cp, (K,) each: cp sqrt(chi2 / df); NaN where df is not above 0. Source: Kane (1986)."""
    _check(confidence)
    with np.errstate(invalid="ignore", divide="ignore"):
        nu = np.where(df > 0, df, np.nan)
        return (
            cp * np.sqrt(stats.chi2.ppf(1 - confidence, nu) / nu),
            cp * np.sqrt(stats.chi2.ppf(confidence, nu) / nu),
        )


def bissell_bounds(cpk: Floats, n: Floats, df: Floats, *, confidence: float = 0.95) -> tuple[Floats, Floats]:
    """Cpk -+ z sqrt(1 / (9 n) + Cpk^2 / (2 df)): a check of the exact bounds. Source: Bissell (1990)."""
    _check(confidence)
    half = stats.norm.ppf(confidence) * np.sqrt(1 / (9 * n) + cpk**2 / (2 * df))
    return cpk - half, cpk + half


def plugin_ppm(mean: Floats, sigma: Floats, lower: Floats, upper: Floats) -> Floats:
    """Parts per million outside for a normal process with exactly these parameters."""
    with np.errstate(invalid="ignore", divide="ignore"):
        s = np.where(sigma > 0, sigma, np.nan)
        ppm: Floats = 1e6 * (ndtr((lower - mean) / s) + ndtr((mean - upper) / s))
    return ppm


def expected_ppm(mean: Floats, sigma: Floats, n_mean: Floats, df: Floats, lower: Floats, upper: Floats) -> Floats:
    """Posterior mean of the parts per million outside: Student t with scale s sqrt(1 + 1/n). Source: Guttman (1970)."""
    with np.errstate(invalid="ignore", divide="ignore"):
        s = np.where(sigma > 0, sigma, np.nan) * np.sqrt(1 + 1 / n_mean)
        ppm: Floats = 1e6 * (stdtr(df, (lower - mean) / s) + stdtr(df, (mean - upper) / s))
    return ppm


def needed_sigma(mean: Floats, lower: Floats, upper: Floats, target: ArrayLike) -> Floats:
    """The largest total sigma with which Cpk reaches the target at this mean; NaN without limits or outside them."""
    with np.errstate(invalid="ignore"):
        room = np.fmin(
            np.where(np.isfinite(lower), mean - lower, np.inf), np.where(np.isfinite(upper), upper - mean, np.inf)
        )
        return np.where(np.isfinite(room) & (room > 0), room / (3 * np.asarray(target)), np.nan)


def verdict(low: Floats, high: Floats, index: Floats, target: Floats) -> tuple[NDArray[Any], Bools]:
    """'capable' / 'not capable', and whether it is a close call (both bounds straddle the target), (K,) each.

    A close call leans by the point estimate. Where there is no index the word is 'not capable' and means nothing.
    """
    with np.errstate(invalid="ignore"):
        close = (low < target) & (high >= target)
        word = np.where(index >= target, "capable", "not capable").astype(object)
    return word, close


def _check(confidence: float) -> None:
    if not 0 < confidence < 1:
        raise ValueError(f"confidence is {confidence}; give a probability between 0 and 1, such as 0.95")
