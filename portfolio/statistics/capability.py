"""Capability indices of normal data, their bounds, and the chance that a target is reached.

The core formula gives the posterior probability P(Cpk >= c) with the right-Haar prior; with one limit it equals the
confidence level of the non-central t bound. The verdict uses the nearest limit only; the chance after a move uses
both (capability study, sections 1 and 2). All arrays (K,); limits -inf / +inf where there is none.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import stats
from scipy.special import gammaincinv, ndtr, stdtr

from portfolio.statistics.ragged import Bools, Floats

NODES = 160
"Equal-probability nodes of the chi-square distribution: error below 0.0012 (capability study, section 1)."
HALVINGS = 60


@dataclass(frozen=True)
class Indices:
    """`cp` needs both limits; `cpl`, `cpu` NaN where their limit is missing; `cpk` the smaller of those there are."""

    cp: Floats
    cpl: Floats
    cpu: Floats
    cpk: Floats


def indices(mean: Floats, sigma: Floats, lower: Floats, upper: Floats) -> Indices:
    """Cp, Cpl, Cpu, Cpk; NaN where sigma is not above 0. Source: Kane (1986); ISO 22514-2 with the total sigma."""
    with np.errstate(invalid="ignore", divide="ignore"):
        s = np.where(sigma > 0, sigma, np.nan)
        cpl = np.where(np.isfinite(lower), (mean - lower) / (3 * s), np.nan)
        cpu = np.where(np.isfinite(upper), (upper - mean) / (3 * s), np.nan)
        cp = np.where(np.isfinite(lower) & np.isfinite(upper), (upper - lower) / (6 * s), np.nan)
    return Indices(cp, cpl, cpu, np.fmin(cpl, cpu))


def cpm(mean: Floats, sigma: Floats, lower: Floats, upper: Floats, aim: Floats) -> Floats:
    """Cpm = (U - L) / (6 sqrt(sigma^2 + (mean - aim)^2)). Source: Chan, Cheng & Spiring (1988), from memory."""
    with np.errstate(invalid="ignore"):
        return indices(mean, np.sqrt(sigma**2 + (mean - aim) ** 2), lower, upper).cp


def sigma_nodes(df: Floats) -> Floats:
    """sigma / s at NODES equal-probability nodes of its posterior, (K, NODES): sqrt(df / chi-square)."""
    level = (np.arange(NODES) + 0.5) / NODES
    safe = np.where(df > 0, df, np.nan)[:, None]
    return np.sqrt(safe / 2 / gammaincinv(safe / 2, level[None, :]))


def core_probability(
    mean: Floats,
    sigma: Floats,
    n_mean: Floats,
    df: Floats,
    lower: Floats,
    upper: Floats,
    target: ArrayLike,
    *,
    nodes: Floats | None = None,
) -> Floats:
    """P(Cpk >= target | data) with both limits; NaN where sigma or df do not allow it.

    `n_mean` effective number of values behind the mean, `df` degrees of freedom of sigma; `nodes` are
    `sigma_nodes(df)` where the caller asks several times.
    """
    mean, sigma, n_mean, lower, upper, target = np.broadcast_arrays(mean, sigma, n_mean, lower, upper, target)
    if nodes is None:
        nodes = sigma_nodes(np.broadcast_to(df, mean.shape))
    s = np.where(sigma > 0, sigma, np.nan)[:, None] * nodes
    root = np.sqrt(n_mean)[:, None]
    margin = 3 * target[:, None] * s
    with np.errstate(invalid="ignore"):
        below = ndtr(root * (upper[:, None] - margin - mean[:, None]) / s)
        above = ndtr(root * (lower[:, None] + margin - mean[:, None]) / s)
        return np.maximum(below - above, 0.0).mean(axis=1)


def nearest_limits(mean: Floats, lower: Floats, upper: Floats) -> tuple[Floats, Floats]:
    """The limits with the farther one taken away."""
    with np.errstate(invalid="ignore"):
        lower_is_near = mean - lower <= upper - mean
    return np.where(lower_is_near, lower, -np.inf), np.where(lower_is_near, np.inf, upper)


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

    Source
    ------
    Non-central t, Owen (1968): 3 sqrt(n) Cpk_hat is non-central t with non-centrality 3 sqrt(n) Cpk. Solved by
    bisection on the equivalent normal / chi-square mixture; agreement with Bissell (1990) eq. 5 checked in tests.
    """
    near_low, near_high = nearest_limits(mean, lower, upper)
    estimate = indices(mean, sigma, near_low, near_high).cpk
    usable = np.isfinite(estimate) & (df >= 1) & (n_mean > 0)
    low, high = np.full(len(estimate), np.nan), np.full(len(estimate), np.nan)
    if usable.any():
        c, n, nu = estimate[usable], n_mean[usable], df[usable]
        ratio = 1 / sigma_nodes(nu)
        low[usable] = _bound(c, n, ratio, confidence)
        high[usable] = _bound(c, n, ratio, 1 - confidence)
    return low, high


def _bound(estimate: Floats, n: Floats, ratio: Floats, level: float) -> Floats:
    """c with P(Cpk >= c | data) = level: the mixture over s / sigma of Phi(sqrt(n) (3 c_hat s / sigma - 3 c))."""
    root = 3 * np.sqrt(n)[:, None]
    centre = estimate[:, None] * ratio
    reach = 10 / (3 * np.sqrt(n)) + np.abs(estimate) * (ratio.max(axis=1) - ratio.min(axis=1)) + 1e-9
    low, high = centre.min(axis=1) - reach, centre.max(axis=1) + reach
    for _ in range(HALVINGS):
        middle = (low + high) / 2
        enough = ndtr(root * (centre - middle[:, None])).mean(axis=1) > level
        low, high = np.where(enough, middle, low), np.where(enough, high, middle)
        if np.max(high - low) < 1e-9:
            break
    return (low + high) / 2


def spread_bounds(cp: Floats, df: Floats, *, confidence: float = 0.95) -> tuple[Floats, Floats]:
    """One-sided bounds of Cp: cp sqrt(chi2 / df). Source: Kane (1986)."""
    with np.errstate(invalid="ignore"):
        return (
            cp * np.sqrt(stats.chi2.ppf(1 - confidence, df) / df),
            cp * np.sqrt(stats.chi2.ppf(confidence, df) / df),
        )


def bissell_bounds(cpk: Floats, n: Floats, df: Floats, *, confidence: float = 0.95) -> tuple[Floats, Floats]:
    """Cpk -+ z sqrt(1 / (9 n) + Cpk^2 / (2 df)): a check of the exact bounds. Source: Bissell (1990)."""
    half = stats.norm.ppf(confidence) * np.sqrt(1 / (9 * n) + cpk**2 / (2 * df))
    return cpk - half, cpk + half


def plugin_ppm(mean: Floats, sigma: Floats, lower: Floats, upper: Floats) -> Floats:
    """Parts per million outside for a normal process with exactly these parameters."""
    with np.errstate(invalid="ignore", divide="ignore"):
        s = np.where(sigma > 0, sigma, np.nan)
        return 1e6 * (ndtr((lower - mean) / s) + ndtr((mean - upper) / s))


def expected_ppm(mean: Floats, sigma: Floats, n_mean: Floats, df: Floats, lower: Floats, upper: Floats) -> Floats:
    """Posterior mean of the parts per million outside: Student t with scale s sqrt(1 + 1/n). Source: Guttman (1970)."""
    with np.errstate(invalid="ignore", divide="ignore"):
        s = np.where(sigma > 0, sigma, np.nan) * np.sqrt(1 + 1 / n_mean)
        return 1e6 * (stdtr(df, (lower - mean) / s) + stdtr(df, (mean - upper) / s))


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
